"""Saddles of |E|: where two parts of {|E| <= r} meet."""

from __future__ import annotations

import numba
import numpy as np

from hologyre.singularities.cells import BASIS, FIRST, STENCIL
from hologyre.singularities.kernel import HALO, scratch, value_and_slopes, value_at

_REACH = 2.0
"""Steps a saddle may lie from where it is looked for."""

_GOLDEN = (5**0.5 - 1) / 2


@numba.njit(cache=True, nogil=True)
def _fall(e, ey, ex):  # type: ignore[no-untyped-def]
    """Return half the gradient of |E|^2, along y and along x."""
    return e.real * ey.real + e.imag * ey.imag, e.real * ex.real + e.imag * ex.imag


@numba.njit(cache=True, nogil=True)
def _basis_at(u, weights):  # type: ignore[no-untyped-def]
    """Fill the samples' weights for the value, the slope and the curvature at one place."""
    weights[:] = 0.0
    for d in range(STENCIL):
        for k in range(STENCIL):
            weights[2, k] = weights[2, k] * u + 2.0 * weights[1, k]
            weights[1, k] = weights[1, k] * u + weights[0, k]
            weights[0, k] = weights[0, k] * u + BASIS[d, k]


@numba.njit(cache=True, nogil=True)
def _curved(planes, y, x, across, down):  # type: ignore[no-untyped-def]
    """Return half the gradient and half the Hessian of |E|^2, by short stencils."""
    j = min(max(int(np.floor(y)), 0), planes.shape[1] - 2 * HALO - 2)
    i = min(max(int(np.floor(x)), 0), planes.shape[2] - 2 * HALO - 2)
    _basis_at(y - j, down)
    _basis_at(x - i, across)
    gy = gx = hyy = hxx = hyx = 0.0
    c = i + HALO - FIRST
    for part in range(2):
        e = ey = ex = eyy = eyx = exx = 0.0
        for r in range(STENCIL):
            row = planes[part, j + HALO - FIRST + r]
            value = slope = curve = 0.0
            for k in range(STENCIL):
                value += across[0, k] * row[c + k]
                slope += across[1, k] * row[c + k]
                curve += across[2, k] * row[c + k]
            e += down[0, r] * value
            ex += down[0, r] * slope
            exx += down[0, r] * curve
            ey += down[1, r] * value
            eyx += down[1, r] * slope
            eyy += down[2, r] * value
        gy += e * ey
        gx += e * ex
        hyy += ey * ey + e * eyy
        hxx += ex * ex + e * exx
        hyx += ey * ex + e * eyx
    return gy, gx, hyy, hxx, hyx


@numba.njit(cache=True, nogil=True)
def polish(planes, table, places):  # type: ignore[no-untyped-def]
    """Go from each place (y, x) to the saddle of |E| nearby.

    Returns
    -------
    (n, 3) array
        The saddles' y, x and |E|; NaN where none was reached.
    """
    out = np.full((places.shape[0], 3), np.nan)
    across, down = np.empty((3, STENCIL)), np.empty((3, STENCIL))
    work = scratch()
    for n in range(places.shape[0]):
        y, x = places[n]
        for _ in range(30):
            gy, gx, hyy, hxx, hyx = _curved(planes, y, x, across, down)
            dy, dx = _towards_saddle(gy, gx, hyy, hxx, hyx)
            far = max(abs(dy), abs(dx))
            if far > 0.5:
                dy, dx = dy * 0.5 / far, dx * 0.5 / far
            y, x = y + dy, x + dx
            if max(abs(y - places[n, 0]), abs(x - places[n, 1])) > _REACH:
                break
            if far < 3e-3:
                if hyy * hxx < hyx * hyx:
                    # The last step on the exact interpolant; its Hessian need not be exact.
                    e, ey, ex = value_and_slopes(planes, table, y, x, work)
                    gy, gx = _fall(e, ey, ex)
                    dy, dx = _towards_saddle(gy, gx, hyy, hxx, hyx)
                    half = 0.5 * abs(e) ** 2 + 0.5 * (gy * dy + gx * dx)
                    out[n, 0], out[n, 1] = y + dy, x + dx
                    out[n, 2] = np.sqrt(max(2.0 * half, 0.0))
                break
    return out


@numba.njit(cache=True, nogil=True)
def _towards_saddle(gy, gx, hyy, hxx, hyx):  # type: ignore[no-untyped-def]
    """Return Newton's step, turned uphill along the less curved axis where both go one way."""
    mean, split = 0.5 * (hyy + hxx), np.hypot(0.5 * (hyy - hxx), hyx)
    high, low = abs(mean + split) + 1e-300, -abs(mean - split) - 1e-300
    angle = 0.5 * np.arctan2(2.0 * hyx, hyy - hxx)
    cos, sin = np.cos(angle), np.sin(angle)
    along, aside = -(gy * cos + gx * sin) / high, -(gx * cos - gy * sin) / low
    return along * cos - aside * sin, along * sin + aside * cos


@numba.njit(cache=True, nogil=True)
def lowest_on_lines(planes, table, line, along_x, low, high):  # type: ignore[no-untyped-def]
    """Return the least |E| on stretches of lattice lines.

    Parameters
    ----------
    planes, table
        The lattice's.
    line : (n,) int array
        Row of each line that goes along x, column of each that goes along y.
    along_x : (n,) bool array
        Direction of each line.
    low, high : (n,) arrays
        Where on it each stretch begins and ends, in nodes.
    """
    out = np.empty(line.size)
    work = scratch()
    for n in range(line.size):
        a, b = low[n], high[n]
        # Golden section, as far as the square root of rounding.
        for _ in range(40):
            inner, outer = b - _GOLDEN * (b - a), a + _GOLDEN * (b - a)
            left = _on_line(planes, table, line[n], along_x[n], inner, work)
            right = _on_line(planes, table, line[n], along_x[n], outer, work)
            out[n] = min(left, right)
            if left < right:
                b = outer
            else:
                a = inner
    return out


@numba.njit(cache=True, nogil=True)
def _on_line(planes, table, line, along_x, at, work):  # type: ignore[no-untyped-def]
    """Return |E| on a lattice line."""
    if along_x:
        return abs(value_at(planes, table, float(line), at, work))
    return abs(value_at(planes, table, at, float(line), work))
