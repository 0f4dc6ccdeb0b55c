"""Zeros of squares by halving on the exact interpolant: the last resort, and a sure one."""

from __future__ import annotations

import numba
import numpy as np

from hologyre.singularities.cells import near_zero
from hologyre.singularities.kernel import scratch, value_and_slopes, value_at
from hologyre.singularities.newton import COLUMNS, newton
from hologyre.singularities.winding import BEND_SLACK, edge_turns

_LEVELS = 24
_MOST_CUTS = 800
"""Cuts spent on one lattice cell; a line of zeros through it would take any number."""


@numba.njit(cache=True, nogil=True)
def halve(planes, table, bend, squares, floor):  # type: ignore[no-untyped-def]
    """Halve squares until every part holds one zero or none.

    Parts that are dark, too small, or left when a cell's cuts are used up are taken as they
    are, with their winding for charge.

    Parameters
    ----------
    planes, table, floor
        The lattice's.
    bend : (4, ny, nx) array
        Second differences at the nodes.
    squares : (m, 5) array
        y, x, side, number of the lattice cell, sign of det J or 2; those of one cell one after
        the other.

    Returns
    -------
    (n, 9) array
        The zeros, as `find_zeros` gives them.
    """
    columns = bend.shape[2] - 1
    depth = 3 * _LEVELS + 8
    square = np.empty((depth, 3))
    wind = np.empty(depth, dtype=np.int64)
    zeros, found = np.empty((4 * _MOST_CUTS, COLUMNS)), 0
    work = scratch()
    cuts = 0
    for n in range(squares.shape[0]):
        cell = int(squares[n, 3])
        if n > 0 and squares[n - 1, 3] != squares[n, 3]:
            cuts = 0
        if found + 4 * _MOST_CUTS > zeros.shape[0]:
            longer = np.empty((2 * zeros.shape[0] + 4 * _MOST_CUTS, COLUMNS))
            longer[:found] = zeros[:found]
            zeros = longer
        j, i = cell // columns, cell % columns
        bend_y = BEND_SLACK * bend[0, j : j + 2, i : i + 2].max()
        bend_x = BEND_SLACK * bend[1, j : j + 2, i : i + 2].max()
        start = found
        square[0] = squares[n, :3]
        wind[0] = _turns_around(planes, table, square[0], bend_y, bend_x, work)
        top = 1
        if squares[n, 4] != 2.0:
            # One sign: as many zeros as turns.
            middle = squares[n, :2] + 0.5 * squares[n, 2]
            if wind[0] == 0:
                top = 0
            elif wind[0] == squares[n, 4] and newton(
                planes, table, square[0], middle[0], middle[1], work, zeros[found]
            ):
                zeros[found, 6], zeros[found, 7] = wind[0], 0.0
                found += 1
                top = 0
        while top > 0:
            top -= 1
            cut, found = _examine(
                planes, table, floor, square, wind, top, bend_y, bend_x,
                cuts >= _MOST_CUTS, zeros, found, work,
            )  # fmt: skip
            if cut:
                cuts += 1
                top += 4
        zeros[start:found, 8] = cell
    return zeros[:found].copy()


@numba.njit(cache=True, nogil=True)
def _turns_around(planes, table, square, bend_y, bend_x, work):  # type: ignore[no-untyped-def]
    """Return the winding of the field around a square."""
    y, x, s = square
    corner = np.empty(5, dtype=np.complex128)
    turns = 0
    for k in range(5):
        v, u = y + (k % 4 in (2, 3)) * s, x + (k % 4 in (1, 2)) * s
        corner[k] = value_at(planes, table, v, u, work)
    for k in range(4):
        # Always from the lower coordinate up, so that neighbours count alike.
        across, back = k % 2 == 0, k >= 2
        a, b = (corner[k + 1], corner[k]) if back else (corner[k], corner[k + 1])
        v, u = y + (k == 2) * s, x + (k == 1) * s
        dy, dx = (0.0, s) if across else (s, 0.0)
        bend = (bend_x if across else bend_y) * s * s
        along = edge_turns(planes, table, v, u, dy, dx, a, b, bend, work)
        turns += -along if back else along
    return turns


@numba.njit(cache=True, nogil=True)
def _cross(a, b):  # type: ignore[no-untyped-def]
    return a.real * b.imag - a.imag * b.real


@numba.njit(cache=True, nogil=True)
def _one_sign(a, b, c, d, bend_y, bend_x):  # type: ignore[no-untyped-def]
    """Tell whether det J keeps its sign over the patch: then zeros are as many as turns."""
    low, high, left, right = b - a, c - d, d - a, c - b
    d1, d2, d3, d4 = _cross(low, left), _cross(low, right), _cross(high, left), _cross(high, right)
    ex, ey = max(abs(low), abs(high)), max(abs(left), abs(right))
    off_y, off_x = 0.6 * bend_y, 0.6 * bend_x
    slack = ex * off_y + ey * off_x + off_x * off_y
    return min(d1, d2, d3, d4) > slack or max(d1, d2, d3, d4) < -slack


@numba.njit(cache=True, nogil=True)
def _examine(  # type: ignore[no-untyped-def]
    planes, table, floor, square, wind, top, bend_y, bend_x, spent, zeros, found, work
):
    """Settle the square on top of the stack, or put its quarters in its place.

    Returns
    -------
    cut : bool
        True when the quarters are there.
    found : int
        Zeros found so far.
    """
    y, x, s = square[top]
    w = wind[top]
    h = s / 2.0
    by, bx = bend_y * s * s, bend_x * s * s
    point = np.empty((3, 3), dtype=np.complex128)
    for k in range(9):
        point[k // 3, k % 3] = value_at(planes, table, y + (k // 3) * h, x + (k % 3) * h, work)
    a, b, c, d = point[0, 0], point[0, 2], point[2, 2], point[2, 0]
    if w == 0 and not near_zero(
        (a.real, a.imag),
        (b.real, b.imag),
        (c.real, c.imag),
        (d.real, d.imag),
        0.0,
        0.0,
        (bx + by) / 8.0,
    ):
        return False, found
    single = _one_sign(a, b, c, d, by, bx)
    if single and w == 0:
        return False, found
    last = spent or s < 2.0 ** (1 - _LEVELS) or max(abs(a), abs(b), abs(c), abs(d)) <= floor
    if w != 0:
        here = square[top].copy()
        if single and abs(w) == 1 and newton(planes, table, here, y + h, x + h, work, zeros[found]):
            zeros[found, 6], zeros[found, 7] = w, 0.0
            return False, found + 1
        if last:
            _, ey, ex = value_and_slopes(planes, table, y + h, x + h, work)
            zeros[found, 0], zeros[found, 1] = y + h, x + h
            zeros[found, 2], zeros[found, 3] = ey.real, ey.imag
            zeros[found, 4], zeros[found, 5] = ex.real, ex.imag
            zeros[found, 6], zeros[found, 7] = w, s
            found += 1
    if last:
        return False, found
    # Edges of the quarters: along x in three rows, along y in three columns.
    flat = np.empty((3, 2), dtype=np.int64)
    tall = np.empty((2, 3), dtype=np.int64)
    for k in range(12):
        across = k < 6
        q, p = (k // 2, k % 2) if across else ((k - 6) // 3, (k - 6) % 3)
        dy, dx = (0.0, h) if across else (h, 0.0)
        turns = edge_turns(
            planes,
            table,
            y + q * h,
            x + p * h,
            dy,
            dx,
            point[q, p],
            point[q + (not across), p + across],
            (bx if across else by) / 4.0,
            work,
        )
        if across:
            flat[q, p] = turns
        else:
            tall[q, p] = turns
    for k in range(4):
        q, p = k // 2, k % 2
        square[top + k, 0], square[top + k, 1], square[top + k, 2] = y + q * h, x + p * h, h
        wind[top + k] = flat[q, p] + tall[q, p + 1] - flat[q + 1, p] - tall[q, p]
    return True, found
