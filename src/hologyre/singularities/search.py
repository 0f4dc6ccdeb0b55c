"""Every zero of a lattice's cells, by cells cut until each part holds one zero or none."""

from __future__ import annotations

import numba
import numpy as np

from hologyre.singularities.cells import PARTS, cut_cell, cut_part, judge, judge_parts, near_zero
from hologyre.singularities.kernel import HALO, scratch, value_and_slopes, value_at
from hologyre.singularities.winding import BEND_SLACK, edge_turns

_LEVELS = 24
_MOST_CUTS = 800
_MOST_PARTS = 128
_LEFT = 2e-8
"""Distance from the zero, in steps, that Newton's method may leave."""


@numba.njit(cache=True, nogil=True)
def newton(planes, table, square, v, u, work, zero):  # type: ignore[no-untyped-def]
    """Go from (v, u) to the zero of a square (y, x, side).

    Fills `zero` with its y and x and the slopes along y and x (real, imaginary), and returns
    False when the way leads out of the square or does not settle.
    """
    y, x, size = square
    slack = 0.02 * size + 1e-7
    before = 1e-9
    for _ in range(30):
        e, ey, ex = value_and_slopes(planes, table, v, u, work)
        det = ex.real * ey.imag - ey.real * ex.imag
        if det == 0.0:
            return False
        du = -(e.real * ey.imag - e.imag * ey.real) / det
        dv = -(ex.real * e.imag - ex.imag * e.real) / det
        reach = max(abs(du), abs(dv))
        if reach > size:
            du, dv = du * size / reach, dv * size / reach
        u, v = u + du, v + dv
        if max(reach, before**2) * reach**2 < _LEFT * before**2:
            # Steps shrink as their squares, by the last two of them or faster than by one.
            zero[0], zero[1] = v, u
            zero[2], zero[3], zero[4], zero[5] = ey.real, ey.imag, ex.real, ex.imag
            return max(abs(u - x - 0.5 * size), abs(v - y - 0.5 * size)) <= 0.5 * size + slack
        # There is nothing to look for outside: come back to the border.
        before = reach
        u = min(max(u, x - slack), x + size + slack)
        v = min(max(v, y - slack), y + size + slack)
    return False


@numba.njit(cache=True, nogil=True)
def find_zeros(planes, table, coarse, bend, turns_y, turns_x, doubt, floor):  # type: ignore[no-untyped-def]
    """Find the zeros of all cells.

    Returns
    -------
    zeros : (n, 9) array
        Node coordinates y, x; real and imaginary part of the slopes along y and along x, per
        step; charge; 0 or, where Newton could not settle, the side of the smallest square
        around the zero; number of the lattice cell, row by row.
    turns : (ny-1, nx-1) int8 array
        Winding of each lattice cell.
    """
    ny, nx = bend.shape[1], bend.shape[2]
    turns = np.empty((ny - 1, nx - 1), dtype=np.int8)
    zeros = np.empty((8 * _MOST_CUTS, 9))
    found = 0
    work = scratch()
    fine = np.empty((2, PARTS + 1, 8))
    square = np.empty(3)
    for j in range(ny - 1):
        for i in range(nx - 1):
            w = turns_x[j, i] + turns_y[j, i + 1] - turns_x[j + 1, i] - turns_y[j, i]
            turns[j, i] = w
            if w == 0 and not doubt[j, i]:
                continue
            bend_y = bend_x = 0.0
            dark = True
            for q in range(2):
                for p in range(2):
                    bend_y = max(bend_y, bend[0, j + q, i + p])
                    bend_x = max(bend_x, bend[1, j + q, i + p])
                    re = planes[0, j + q + HALO, i + p + HALO]
                    im = planes[1, j + q + HALO, i + p + HALO]
                    dark = dark and re * re + im * im <= floor * floor
            if dark:
                turns[j, i] = 0
                continue
            cut_cell(planes, j, i, fine)
            verdict, v, u = judge(fine, bend_y, bend_x, coarse)
            if w == 0 and verdict != 2:
                continue
            if found + 4 * _MOST_CUTS > zeros.shape[0]:
                longer = np.empty((2 * zeros.shape[0], 9))
                longer[:found] = zeros[:found]
                zeros = longer
            if w == verdict:
                square[0], square[1], square[2] = float(j), float(i), 1.0
                if newton(planes, table, square, j + v, i + u, work, zeros[found]):
                    zeros[found, 6], zeros[found, 7] = w, 0.0
                    zeros[found, 8] = j * (nx - 1) + i
                    found += 1
                    continue
            start = found
            found = _settle(
                planes, table, coarse, floor, j, i, w, bend_y, bend_x, zeros, found, work
            )
            zeros[start:found, 8] = j * (nx - 1) + i
    return zeros[:found].copy(), turns


@numba.njit(cache=True, nogil=True)
def _settle(  # type: ignore[no-untyped-def]
    planes, table, coarse, floor, j, i, w, bend_y, bend_x, zeros, found, work
):
    """Add the zeros of a cell that chords alone did not tell; return the zeros so far."""
    fine = np.empty((2, PARTS + 1, 8))
    det = np.empty((PARTS + 1, PARTS + 1))
    verdicts = np.empty((PARTS, PARTS), dtype=np.int64)
    # Squares within the cell, (v, u, side), and what is known of each: 2 to be cut.
    parts = np.empty((_MOST_PARTS, 3))
    known = np.empty(_MOST_PARTS, dtype=np.int64)
    parts[0, 0], parts[0, 1], parts[0, 2] = 0.0, 0.0, 1.0
    known[0] = 2
    count, at = 1, 0
    positive = negative = unclear = False
    while at < count and count <= _MOST_PARTS - PARTS**2:
        v, u, size = parts[at]
        if known[at] == 2 and size > PARTS**-3.0:
            cut_part(planes, j, i, v, u, size, fine, det)
            bow = BEND_SLACK / 8.0 * (size / PARTS) ** 2 + coarse
            judge_parts(fine, det, bow * (bend_y + bend_x), coarse, verdicts)
            known[at] = 0
            step = size / PARTS
            for q in range(PARTS):
                for p in range(PARTS):
                    if verdicts[q, p] != 0:
                        parts[count, 0], parts[count, 1] = v + q * step, u + p * step
                        parts[count, 2] = step
                        known[count] = verdicts[q, p]
                        count += 1
        at += 1
    for k in range(count):
        positive = positive or known[k] == 1
        negative = negative or known[k] == -1
        unclear = unclear or known[k] == 2
    if not unclear and not (positive and negative) and w == positive - negative:
        # One sign only: as many zeros as turns.
        if w == 0:
            return found
        square = np.array([float(j), float(i), 1.0])
        v, u = _middle(parts, known, count)
        if newton(planes, table, square, j + v, i + u, work, zeros[found]):
            zeros[found, 6], zeros[found, 7] = w, 0.0
            return found + 1
    scale_y, scale_x = BEND_SLACK * bend_y, BEND_SLACK * bend_x
    cuts = 0
    for k in range(count):
        if known[k] != 0:
            square = np.array([j + parts[k, 0], i + parts[k, 1], parts[k, 2]])
            turns = _turns_around(planes, table, square, scale_y, scale_x, work)
            if known[k] == 2 or turns != 0:
                found, cuts = _split(
                    planes, table, floor, square, turns, scale_y, scale_x, zeros, found, cuts, work
                )
    return found


@numba.njit(cache=True, nogil=True)
def _middle(parts, known, count):  # type: ignore[no-untyped-def]
    """Return the mean of the squares that may hold a zero."""
    v = u = total = 0.0
    for k in range(count):
        if known[k] != 0:
            v += parts[k, 0] + 0.5 * parts[k, 2]
            u += parts[k, 1] + 0.5 * parts[k, 2]
            total += 1.0
    return v / total, u / total


@numba.njit(cache=True, nogil=True)
def _turns_around(planes, table, square, bend_y, bend_x, work):  # type: ignore[no-untyped-def]
    """Return the winding of the field around a square."""
    y, x, s = square
    a, b = value_at(planes, table, y, x, work), value_at(planes, table, y, x + s, work)
    d, c = value_at(planes, table, y + s, x, work), value_at(planes, table, y + s, x + s, work)
    by, bx = bend_y * s * s, bend_x * s * s
    return (
        edge_turns(planes, table, y, x, 0.0, s, a, b, bx, work)
        + edge_turns(planes, table, y, x + s, s, 0.0, b, c, by, work)
        - edge_turns(planes, table, y + s, x, 0.0, s, d, c, bx, work)
        - edge_turns(planes, table, y, x, s, 0.0, a, d, by, work)
    )


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
def _split(  # type: ignore[no-untyped-def]
    planes, table, floor, start, w, bend_y, bend_x, zeros, found, cuts, work
):
    """Halve a square on the exact interpolant until every part holds one zero or none.

    Parts that are dark, too small, or left when the cell's cuts are used up are taken as they
    are, with their winding for charge.

    Returns
    -------
    found, cuts : int
        Zeros found so far, cuts made in this lattice cell so far.
    """
    depth = 3 * _LEVELS + 8
    square = np.empty((depth, 3))
    wind = np.empty(depth, dtype=np.int64)
    point = np.empty((3, 3), dtype=np.complex128)
    flat = np.empty((3, 2), dtype=np.int64)
    tall = np.empty((2, 3), dtype=np.int64)
    square[0], wind[0] = start, w
    top = 1
    while top > 0:
        top -= 1
        y, x, s = square[top]
        w = wind[top]
        h = s / 2.0
        for q in range(3):
            for p in range(3):
                point[q, p] = value_at(planes, table, y + q * h, x + p * h, work)
        a, b, c, d = point[0, 0], point[0, 2], point[2, 2], point[2, 0]
        by, bx = bend_y * s * s, bend_x * s * s
        if w == 0 and not near_zero(
            (a.real, a.imag),
            (b.real, b.imag),
            (c.real, c.imag),
            (d.real, d.imag),
            0.0,
            0.0,
            (bx + by) / 8.0,
        ):
            continue
        single = _one_sign(a, b, c, d, by, bx)
        if single and w == 0:
            continue
        dark = max(abs(a), abs(b), abs(c), abs(d)) <= floor
        last = dark or cuts >= _MOST_CUTS or s < 2.0 ** (1 - _LEVELS)
        if w != 0:
            here = square[top].copy()
            if (
                single
                and abs(w) == 1
                and newton(planes, table, here, y + h, x + h, work, zeros[found])
            ):
                zeros[found, 6], zeros[found, 7] = w, 0.0
                found += 1
                continue
            if last:
                _, ey, ex = value_and_slopes(planes, table, y + h, x + h, work)
                zeros[found, 0], zeros[found, 1] = y + h, x + h
                zeros[found, 2], zeros[found, 3] = ey.real, ey.imag
                zeros[found, 4], zeros[found, 5] = ex.real, ex.imag
                zeros[found, 6], zeros[found, 7] = w, s
                found += 1
        if last:
            continue
        cuts += 1
        for q in range(3):
            for p in range(2):
                flat[q, p] = edge_turns(
                    planes, table, y + q * h, x + p * h, 0.0, h,
                    point[q, p], point[q, p + 1], bx / 4.0, work,
                )  # fmt: skip
                tall[p, q] = edge_turns(
                    planes, table, y + p * h, x + q * h, h, 0.0,
                    point[p, q], point[p + 1, q], by / 4.0, work,
                )  # fmt: skip
        for q in range(2):
            for p in range(2):
                square[top, 0], square[top, 1], square[top, 2] = y + q * h, x + p * h, h
                wind[top] = flat[q, p] + tall[q, p + 1] - flat[q + 1, p] - tall[q, p]
                top += 1
    return found, cuts
