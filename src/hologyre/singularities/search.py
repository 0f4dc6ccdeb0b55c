"""Every zero of a lattice's cells, by cells cut until each holds one zero or none."""

from __future__ import annotations

import numba
import numpy as np

from hologyre.singularities.kernel import HALO, value_and_slopes, value_at
from hologyre.singularities.winding import edge_turns

_LEVELS = 24
_CUTS_PER_CELL = 600


@numba.njit(cache=True, nogil=True)
def _apart(a, b, c, d, bow):  # type: ignore[no-untyped-def]
    """Tell whether a patch within `bow` of the corners' hull stays on one side of zero."""
    m = a + b + c + d
    size = np.sqrt(m.real * m.real + m.imag * m.imag)
    reach = bow * size
    return (
        m.real * a.real + m.imag * a.imag > reach
        and m.real * b.real + m.imag * b.imag > reach
        and m.real * c.real + m.imag * c.imag > reach
        and m.real * d.real + m.imag * d.imag > reach
    )


@numba.njit(cache=True, nogil=True)
def _cross(a, b):  # type: ignore[no-untyped-def]
    return a.real * b.imag - a.imag * b.real


@numba.njit(cache=True, nogil=True)
def _one_sign(a, b, c, d, bend_y, bend_x):  # type: ignore[no-untyped-def]
    """Tell whether det J keeps its sign: then there are as many zeros as turns.

    The corners are a (y, x), b (y, x+1), c (y+1, x+1), d (y+1, x); det J of their bilinear
    patch is largest and smallest at the corners.
    """
    low, top, left, right = b - a, c - d, d - a, c - b
    d1, d2 = _cross(low, left), _cross(low, right)
    d3, d4 = _cross(top, left), _cross(top, right)
    least, most = min(d1, d2, d3, d4), max(d1, d2, d3, d4)
    ex, ey = max(abs(low), abs(top)), max(abs(left), abs(right))
    off_x, off_y = 0.6 * bend_x, 0.6 * bend_y
    slack = ex * off_y + ey * off_x + off_x * off_y
    return least > slack or most < -slack


@numba.njit(cache=True, nogil=True)
def _newton(samples, table, y, x, size, work):  # type: ignore[no-untyped-def]
    """Go to the zero of the cell at (y, x); the flag tells that it was reached inside."""
    v, u = y + 0.5 * size, x + 0.5 * size
    slack = 0.02 * size + 1e-8
    e, ey, ex = value_and_slopes(samples, table, v, u, work)
    for _ in range(30):
        det = ex.real * ey.imag - ey.real * ex.imag
        if det == 0.0:
            return False, v, u, ey, ex
        du = -(e.real * ey.imag - e.imag * ey.real) / det
        dv = -(ex.real * e.imag - ex.imag * e.real) / det
        reach = max(abs(du), abs(dv))
        if reach > size:
            du, dv = du * size / reach, dv * size / reach
        u, v = u + du, v + dv
        # Outside, there is nothing to look for: come back to the border.
        u = min(max(u, x - slack), x + size + slack)
        v = min(max(v, y - slack), y + size + slack)
        e, ey, ex = value_and_slopes(samples, table, v, u, work)
        if reach < 1e-7:
            det = ex.real * ey.imag - ey.real * ex.imag
            if det == 0.0:
                return False, v, u, ey, ex
            du = -(e.real * ey.imag - e.imag * ey.real) / det
            dv = -(ex.real * e.imag - ex.imag * e.real) / det
            inside = max(abs(du), abs(dv)) < 1e-6
            return inside, v + dv, u + du, ey, ex
    return False, v, u, ey, ex


@numba.njit(cache=True, nogil=True)
def find_zeros(samples, table, bend, along_x, along_y, floor):  # type: ignore[no-untyped-def]
    """Find the zeros of all cells.

    Returns
    -------
    places : (n, 2) array
        Node coordinates (y, x).
    slopes : (n, 2) complex array
        dE/dy and dE/dx per step.
    charges : (n,) int64 array
    widths : (n,) array
        0 where Newton reached the zero, else the side of the smallest cell around it.
    turns : (ny-1, nx-1) int8 array
        Winding of each lattice cell.
    """
    ny, nx = samples.shape[0] - 2 * HALO, samples.shape[1] - 2 * HALO
    turns = np.empty((ny - 1, nx - 1), dtype=np.int8)
    room = 1024
    places = np.empty((room, 2))
    slopes = np.empty((room, 2), dtype=np.complex128)
    charges = np.empty(room, dtype=np.int64)
    widths = np.empty(room)
    found = 0
    work = np.empty((4, table.shape[1]))
    depth = 3 * _LEVELS + 4
    stack = np.empty((depth, 3))
    corner = np.empty((depth, 4), dtype=np.complex128)
    wind = np.empty(depth, dtype=np.int64)
    point = np.empty((3, 3), dtype=np.complex128)
    flat = np.empty((3, 2), dtype=np.int64)
    tall = np.empty((2, 3), dtype=np.int64)
    for j in range(ny - 1):
        for i in range(nx - 1):
            w = along_x[j, i] + along_y[j, i + 1] - along_x[j + 1, i] - along_y[j, i]
            turns[j, i] = w
            a = samples[j + HALO, i + HALO]
            b = samples[j + HALO, i + HALO + 1]
            c = samples[j + HALO + 1, i + HALO + 1]
            d = samples[j + HALO + 1, i + HALO]
            bend_y = bend_x = 0.0
            for q in range(2):
                for p in range(2):
                    bend_y = max(bend_y, bend[j + 1 + q, i + 1 + p, 0])
                    bend_x = max(bend_x, bend[j + 1 + q, i + 1 + p, 1])
            bend_y, bend_x = 1.25 * bend_y, 1.25 * bend_x
            if w == 0 and _apart(a, b, c, d, (bend_x + bend_y) / 8.0):
                continue
            if max(abs(a), abs(b), abs(c), abs(d)) <= floor:
                turns[j, i] = 0
                continue
            stack[0, 0], stack[0, 1], stack[0, 2] = float(j), float(i), 1.0
            corner[0, 0], corner[0, 1], corner[0, 2], corner[0, 3] = a, b, c, d
            wind[0] = w
            top, cuts = 1, 0
            while top > 0:
                top -= 1
                y, x, s = stack[top, 0], stack[top, 1], stack[top, 2]
                a, b, c, d = corner[top, 0], corner[top, 1], corner[top, 2], corner[top, 3]
                w = wind[top]
                by, bx = bend_y * s * s, bend_x * s * s
                if w == 0 and _apart(a, b, c, d, (bx + by) / 8.0):
                    continue
                single = _one_sign(a, b, c, d, by, bx)
                if single and w == 0:
                    continue
                reached = False
                width = 0.0
                v = u = 0.0
                ey = ex = 0j
                if single and abs(w) == 1:
                    reached, v, u, ey, ex = _newton(samples, table, y, x, s, work)
                last = cuts >= _CUTS_PER_CELL or s < 2.0 ** (1 - _LEVELS)
                if not reached and last:
                    if w == 0:
                        continue
                    v, u, width = y + s / 2.0, x + s / 2.0, s
                    _, ey, ex = value_and_slopes(samples, table, v, u, work)
                    reached = True
                if reached:
                    if found == room:
                        grown = np.empty((2 * room, 2))
                        grown[:room] = places
                        places = grown
                        more = np.empty((2 * room, 2), dtype=np.complex128)
                        more[:room] = slopes
                        slopes = more
                        longer = np.empty(2 * room, dtype=np.int64)
                        longer[:room] = charges
                        charges = longer
                        wider = np.empty(2 * room)
                        wider[:room] = widths
                        widths = wider
                        room *= 2
                    places[found, 0], places[found, 1] = v, u
                    slopes[found, 0], slopes[found, 1] = ey, ex
                    charges[found] = w
                    widths[found] = width
                    found += 1
                    continue
                cuts += 1
                h = s / 2.0
                for q in range(3):
                    for p in range(3):
                        if q != 1 and p != 1:
                            continue
                        point[q, p] = value_at(samples, table, y + q * h, x + p * h, work)
                point[0, 0], point[0, 2], point[2, 2], point[2, 0] = a, b, c, d
                for q in range(3):
                    for p in range(2):
                        flat[q, p] = edge_turns(
                            samples,
                            table,
                            y + q * h,
                            x + p * h,
                            0.0,
                            h,
                            point[q, p],
                            point[q, p + 1],
                            bx / 4.0,
                            work,
                        )
                        tall[p, q] = edge_turns(
                            samples,
                            table,
                            y + p * h,
                            x + q * h,
                            h,
                            0.0,
                            point[p, q],
                            point[p + 1, q],
                            by / 4.0,
                            work,
                        )
                for q in range(2):
                    for p in range(2):
                        stack[top, 0], stack[top, 1], stack[top, 2] = y + q * h, x + p * h, h
                        corner[top, 0], corner[top, 1] = point[q, p], point[q, p + 1]
                        corner[top, 2], corner[top, 3] = point[q + 1, p + 1], point[q + 1, p]
                        wind[top] = flat[q, p] + tall[q, p + 1] - flat[q + 1, p] - tall[q, p]
                        top += 1
    return places[:found], slopes[:found], charges[:found], widths[:found], turns
