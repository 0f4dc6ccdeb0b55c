"""Follow a line of zeros between two slices of a stack of fields."""

from __future__ import annotations

import math

import numba
import numpy as np

WIDTH = 8
"""Samples under the interpolation kernel along each axis."""

BETA = 2.30 * WIDTH
"""Shape of the kernel exp(BETA (sqrt(1 - v^2) - 1)), v in [-1, 1]."""

LOST, FAR, NEAR, OUT = 0, 1, 2, 3
"""How a trace ends: nowhere, on the far slice, back on the near one, through the border."""

_MOST_STEPS = 5000
_SHORTEST = 1e-7
_FINE = 0.03
# the interpolation is exact to 1e-7 of the field: closer than this, zeros are one
_EXACT = 1e-6
_CLOSE = 1e-5


@numba.njit(cache=True, nogil=True)
def _kernel(place, first, weight, slope):  # type: ignore[no-untyped-def]
    for i in range(WIDTH):
        v = (place - (first + i)) / (0.5 * WIDTH)
        # the slope has a pole at the kernel's rim, where the weight is 1e-8: keep off it
        root = math.sqrt(max(1.0 - v * v, 1e-4))
        weight[i] = math.exp(BETA * (root - 1.0))
        slope[i] = -weight[i] * BETA * v / (root * 0.5 * WIDTH)


@numba.njit(cache=True, nogil=True)
def jet(samples, series, y, x, u):  # type: ignore[no-untyped-def]
    """Return E and its derivatives along y, x and u at a place between two slices.

    Parameters
    ----------
    samples : (y, x, slice) complex128 array
        Oversampled slices, the kernel's transform divided out.
    series : (degree + 1, slice) array
        Chebyshev coefficients of each slice's weight in 2 u - 1.
    y, x : float
        Place in samples.
    u : float
        Place between the slices, 0 to 1.
    """
    ny, nx, depth = samples.shape
    wy, sy = np.empty(WIDTH), np.empty(WIDTH)
    wx, sx = np.empty(WIDTH), np.empty(WIDTH)
    first_y = min(max(math.ceil(y - 0.5 * WIDTH), 0), ny - WIDTH)
    first_x = min(max(math.ceil(x - 0.5 * WIDTH), 0), nx - WIDTH)
    _kernel(y, first_y, wy, sy)
    _kernel(x, first_x, wx, sx)
    value = np.zeros(depth, np.complex128)
    along_y = np.zeros(depth, np.complex128)
    along_x = np.zeros(depth, np.complex128)
    for j in range(WIDTH):
        for i in range(WIDTH):
            w, v, h = wy[j] * wx[i], sy[j] * wx[i], wy[j] * sx[i]
            for m in range(depth):
                sample = samples[first_y + j, first_x + i, m]
                value[m] += w * sample
                along_y[m] += v * sample
                along_x[m] += h * sample
    e = ey = ex = eu = 0j
    s = 2.0 * u - 1.0
    for m in range(depth):
        # Clenshaw's recurrence for a Chebyshev series and its derivative
        b1 = b2 = d1 = d2 = 0.0
        for n in range(series.shape[0] - 1, 0, -1):
            d1, d2 = 2.0 * b1 + 2.0 * s * d1 - d2, d1
            b1, b2 = 2.0 * s * b1 - b2 + series[n, m], b1
        weight = s * b1 - b2 + series[0, m]
        e += weight * value[m]
        ey += weight * along_y[m]
        ex += weight * along_x[m]
        eu += 2.0 * (b1 + s * d1 - d2) * value[m]
    return e, ey, ex, eu


@numba.njit(cache=True, nogil=True)
def polish(samples, series, y, x, u, reach):  # type: ignore[no-untyped-def]
    """Go to the zero next to (y, x) at fixed u; the flag tells that it lies within `reach`."""
    y0, x0 = y, x
    for _ in range(30):
        e, ey, ex, _ = jet(samples, series, y, x, u)
        det = ex.real * ey.imag - ey.real * ex.imag
        if det == 0.0:
            return False, y, x, 0.0
        dx = -(e.real * ey.imag - e.imag * ey.real) / det
        dy = -(e.imag * ex.real - e.real * ex.imag) / det
        length = math.hypot(dy, dx)
        shorten = min(1.0, reach / max(length, 1e-300))
        y += dy * shorten
        x += dx * shorten
        if math.hypot(y - y0, x - x0) > 2.0 * reach:
            return False, y, x, 0.0
        if length < _EXACT:
            return math.hypot(y - y0, x - x0) <= reach, y, x, det
    return False, y, x, 0.0


@numba.njit(cache=True, nogil=True)
def _tangent(ey, ex, eu, flip):  # type: ignore[no-untyped-def]
    """Return the unit vector along grad Re E x grad Im E, in (y, x, u), times `flip`."""
    ty = ex.imag * eu.real - ex.real * eu.imag
    tx = eu.imag * ey.real - eu.real * ey.imag
    tu = ex.real * ey.imag - ey.real * ex.imag
    norm = flip / max(math.sqrt(ty * ty + tx * tx + tu * tu), 1e-300)
    return ty * norm, tx * norm, tu * norm


@numba.njit(cache=True, nogil=True)
def _inside_share(y0, x0, y1, x1, window):  # type: ignore[no-untyped-def]
    """Return the share of the way from a place inside at which the border is met, or 1."""
    share = 1.0
    if y1 < window[0]:
        share = min(share, (y0 - window[0]) / (y0 - y1))
    if y1 > window[1]:
        share = min(share, (window[1] - y0) / (y1 - y0))
    if x1 < window[2]:
        share = min(share, (x0 - window[2]) / (x0 - x1))
    if x1 > window[3]:
        share = min(share, (window[3] - x0) / (x1 - x0))
    return max(share, 0.0)


@numba.njit(cache=True, nogil=True)
def follow(samples, series, y, x, far, unit, window, longest, path):  # type: ignore[no-untyped-def]
    """Follow the line of zeros through (y, x) from one of two slices into the gap between.

    Predictor and corrector along the oriented tangent grad Re E x grad Im E: a step is taken
    again at half its length when the tangent turns by more than about 15 degrees or the
    corrector moves far, so that the trace does not jump to a line nearby. On the other leg of
    a hairpin the tangent points the other way, which rules that jump out.

    Parameters
    ----------
    samples, series
        As for `jet`.
    y, x : float
        A zero on the slice the trace starts from, in samples.
    far : bool
        Whether it starts from the slice at u = 1.
    unit : (2,) array
        Lengths that make the line's curvature isotropic: samples, and shares of u.
    window : (4,) array
        y_min, y_max, x_min, x_max in samples.
    longest : float
        Longest step in these units.
    path : (n, 3) array
        Filled with the points (y, x, u) of the line, as many as fit.

    Returns
    -------
    code : int
        LOST, FAR (the other slice), NEAR (back on its own) or OUT.
    y, x, u : float
        Where it ended.
    ty, tx, tu : float
        The turning point deepest in the gap, NaN if it never turned.
    count : int
        Points in `path`.
    """
    length, duration = unit[0], unit[1]
    u = 1.0 if far else 0.0
    inward = -1.0 if far else 1.0
    turn_y = turn_x = turn_u = math.nan
    _, ey, ex, eu = jet(samples, series, y, x, u)
    ay, ax, au = _tangent(ey * length, ex * length, eu * duration, 1.0)
    flip = 1.0 if au * inward >= 0.0 else -1.0
    ay, ax, au = ay * flip, ax * flip, au * flip
    count = 0
    if len(path) > 0:
        path[0, 0], path[0, 1], path[0, 2] = y, x, u
        count = 1
    h = min(0.02, longest)
    for _ in range(_MOST_STEPS):
        if h < _SHORTEST:
            return LOST, y, x, u, turn_y, turn_x, turn_u, count
        py, px, pu = y + h * ay * length, x + h * ax * length, u + h * au * duration
        if (pu >= 1.0 and au > 0.0) or (pu <= 0.0 and au < 0.0):
            wall = 1.0 if au > 0.0 else 0.0
            share = (wall - u) / (pu - u)
            reach = (0.5 * h * share + 1e-6) * length
            ok, zy, zx, det = polish(
                samples, series, y + share * (py - y), x + share * (px - x), wall, reach
            )
            # it must cross the slice in the direction it travels
            if not ok or det * flip * (wall - 0.5) <= 0.0:
                h *= 0.5
                continue
            share = _inside_share(y, x, zy, zx, window)
            outside = share < 1.0
            if outside and h > _FINE:
                h *= 0.5
                continue
            if outside:
                zy, zx, wall = y + share * (zy - y), x + share * (zx - x), u + share * (wall - u)
            if len(path) > count:
                path[count, 0], path[count, 1], path[count, 2] = zy, zx, wall
                count += 1
            if outside:
                return OUT, zy, zx, wall, turn_y, turn_x, turn_u, count
            code = FAR if (wall == 0.0) == far else NEAR
            return code, zy, zx, wall, turn_y, turn_x, turn_u, count
        sy, sx, su = py, px, pu
        good = False
        for _ in range(5):
            e, ey, ex, eu = jet(samples, series, sy, sx, su)
            gy, gx, gu = ey * length, ex * length, eu * duration
            a = gy.real * gy.real + gx.real * gx.real + gu.real * gu.real
            b = gy.imag * gy.imag + gx.imag * gx.imag + gu.imag * gu.imag
            c = gy.real * gy.imag + gx.real * gx.imag + gu.real * gu.imag
            det = a * b - c * c
            if det <= 0.0:
                break
            p = (b * e.real - c * e.imag) / det
            q = (a * e.imag - c * e.real) / det
            dy = (gy.real * p + gy.imag * q) * length
            dx = (gx.real * p + gx.imag * q) * length
            du = (gu.real * p + gu.imag * q) * duration
            sy, sx, su = sy - dy, sx - dx, su - du
            moved = math.sqrt((dy / length) ** 2 + (dx / length) ** 2 + (du / duration) ** 2)
            if moved < max(_CLOSE, 1e-3 * h * h):
                good = True
                break
        off = math.sqrt(
            ((sy - py) / length) ** 2 + ((sx - px) / length) ** 2 + ((su - pu) / duration) ** 2
        )
        if not good or off > 0.3 * h or su < 0.0 or su > 1.0:
            h *= 0.5
            continue
        by, bx, bu = _tangent(gy, gx, gu, flip)
        straight = ay * by + ax * bx + au * bu
        share = _inside_share(y, x, sy, sx, window)
        # where the line turns or leaves, the moment is wanted
        if straight < 0.965 or ((au * bu < 0.0 or share < 1.0) and h > _FINE):
            h *= 0.5
            continue
        if au * bu < 0.0:
            # the parabola through both ends of the step
            top = au / (au - bu)
            tu = min(max(u + 0.5 * h * top * au * duration, 0.0), 1.0)
            if math.isnan(turn_u) or (tu - turn_u) * inward > 0.0:
                turn_u = tu
                turn_y = y + h * top * (ay + 0.5 * top * (by - ay)) * length
                turn_x = x + h * top * (ax + 0.5 * top * (bx - ax)) * length
        y, x, u = y + share * (sy - y), x + share * (sx - x), u + share * (su - u)
        ay, ax, au = by, bx, bu
        if len(path) > count:
            path[count, 0], path[count, 1], path[count, 2] = y, x, u
            count += 1
        if share < 1.0:
            return OUT, y, x, u, turn_y, turn_x, turn_u, count
        if straight > 0.99:
            h = min(1.5 * h, longest)
    return LOST, y, x, u, turn_y, turn_x, turn_u, count


@numba.njit(cache=True, nogil=True)
def follow_all(samples, series, y, x, far, unit, window, longest):  # type: ignore[no-untyped-def]
    """Follow from many zeros; see `follow`.

    Returns
    -------
    code : (n,) int8 array
    end, turn : (n, 3) arrays
        Where each trace ended and turned, (y, x, u).
    """
    n = len(y)
    code = np.empty(n, np.int8)
    end = np.empty((n, 3))
    turn = np.empty((n, 3))
    nothing = np.empty((0, 3))
    for k in range(n):
        found = follow(samples, series, y[k], x[k], far, unit, window, longest, nothing)
        code[k] = found[0]
        end[k, 0], end[k, 1], end[k, 2] = found[1], found[2], found[3]
        turn[k, 0], turn[k, 1], turn[k, 2] = found[4], found[5], found[6]
    return code, end, turn


@numba.njit(cache=True, nogil=True)
def polish_all(samples, series, y, x, u, reach):  # type: ignore[no-untyped-def]
    """Go to the zeros next to many places on one slice.

    Returns
    -------
    found : (n,) bool array
    place : (n, 2) array
    charge : (n,) int64 array
    """
    n = len(y)
    found = np.empty(n, np.bool_)
    place = np.empty((n, 2))
    charge = np.empty(n, np.int64)
    for k in range(n):
        ok, zy, zx, det = polish(samples, series, y[k], x[k], u, reach)
        found[k] = ok
        place[k, 0], place[k, 1] = zy, zx
        charge[k] = 1 if det > 0.0 else -1
    return found, place, charge
