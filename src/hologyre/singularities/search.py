"""Every zero of a lattice's cells: found at sight, after a closer look, or by halving squares.

Each step hands on what it could not settle. The steps are compiled apart, which keeps the time
to compile them short.
"""

from __future__ import annotations

from typing import NamedTuple

import numba
import numpy as np
from numpy.typing import NDArray

from hologyre.singularities.cells import (
    PARTS,
    cut_cell,
    cut_part,
    doubtful,
    judge,
    judge_parts,
)
from hologyre.singularities.halving import halve
from hologyre.singularities.kernel import scratch
from hologyre.singularities.lattice import Lattice
from hologyre.singularities.newton import COLUMNS, newton
from hologyre.singularities.winding import bends, cell_turns, dark_cells, lattice_turns

_MOST_PARTS = 128


class Found(NamedTuple):
    """What a search finds.

    Attributes
    ----------
    zeros : (n, 9) array
        Node coordinates y, x; real and imaginary part of the slopes along y and along x, per
        step; charge; 0 or, where Newton could not settle, the side of the smallest square
        around the zero; number of the lattice cell, row by row.
    turns : (ny-1, nx-1) int8 array
        Winding of each cell; 0 where the field is dark.
    bend : (4, ny, nx) float32 array
        Second differences at the nodes, as `bends` gives them.
    """

    zeros: NDArray[np.float64]
    turns: NDArray[np.int8]
    bend: NDArray[np.float32]


def find_zeros(lattice: Lattice) -> Found:
    """Find the zeros of all cells of a lattice."""
    planes, table = lattice.planes, lattice.table
    bend = bends(planes)
    turns = cell_turns(*lattice_turns(planes, table, bend))
    doubt = doubtful(planes, bend)
    dark = dark_cells(planes, lattice.floor)
    turns[dark], doubt[dark] = 0, False
    seen, cells = _at_sight(planes, table, bend, turns, doubt, lattice.coarse)
    closer, squares = _closer(planes, table, bend, turns, cells, lattice.coarse)
    halved = halve(planes, table, bend, squares, lattice.floor)
    return Found(np.concatenate([seen, closer, halved]), turns, bend)


@numba.njit(cache=True, nogil=True)
def _longer(array, count):  # type: ignore[no-untyped-def]
    """Return the first rows of an array in one of twice the length."""
    longer = np.empty((2 * array.shape[0] + 64, array.shape[1]), dtype=array.dtype)
    longer[:count] = array[:count]
    return longer


@numba.njit(cache=True, nogil=True)
def _largest(bend, axis, j, i):  # type: ignore[no-untyped-def]
    """Return the largest second difference along an axis at a cell's corners."""
    return max(
        max(bend[axis, j, i], bend[axis, j, i + 1]),
        max(bend[axis, j + 1, i], bend[axis, j + 1, i + 1]),
    )


@numba.njit(cache=True, nogil=True)
def _at_sight(planes, table, bend, turns, doubt, coarse):  # type: ignore[no-untyped-def]
    """Find the zeros of cells whose samples tell that they hold one; list those that do not.

    Returns
    -------
    zeros : (n, 9) array
    cells : (m, 2) int64 array
        Row and column of the cells left.
    """
    zeros, found = np.empty((1024, COLUMNS)), 0
    cells, left = np.empty((256, 2), dtype=np.int64), 0
    work = scratch()
    fine = np.empty((2, PARTS + 1, PARTS + 1))
    square = np.empty(3)
    for j in range(turns.shape[0]):
        for i in range(turns.shape[1]):
            w = turns[j, i]
            if w == 0 and not doubt[j, i]:
                continue
            cut_cell(planes, j, i, fine)
            verdict, v, u = judge(fine, _largest(bend, 0, j, i), _largest(bend, 1, j, i), coarse)
            if w == 0 and verdict != 2:
                continue
            if found == zeros.shape[0]:
                zeros = _longer(zeros, found)
            if left == cells.shape[0]:
                cells = _longer(cells, left)
            if w == verdict:
                square[0], square[1], square[2] = float(j), float(i), 1.0
                if newton(planes, table, square, j + v, i + u, work, zeros[found]):
                    zeros[found, 6], zeros[found, 7] = w, 0.0
                    zeros[found, 8] = j * turns.shape[1] + i
                    found += 1
                    continue
            cells[left, 0], cells[left, 1] = j, i
            left += 1
    return zeros[:found].copy(), cells[:left].copy()


@numba.njit(cache=True, nogil=True)
def _closer(planes, table, bend, turns, cells, coarse):  # type: ignore[no-untyped-def]
    """Find the zeros of cells of which a closer look tells that they hold one.

    Returns
    -------
    zeros : (n, 9) array
    squares : (m, 5) array
        Squares of the cells left that may hold zeros: y, x, side, number of the lattice cell,
        and the sign of det J or 2 where that is not known.
    """
    zeros, found = np.empty((cells.shape[0], COLUMNS)), 0
    squares, left = np.empty((256, 5)), 0
    work = scratch()
    fine = np.empty((2, PARTS + 1, PARTS + 1))
    det = np.empty((PARTS + 1, PARTS + 1))
    verdicts = np.empty((PARTS, PARTS), dtype=np.int64)
    # Squares within the cell (v, u, side) and what is known of each: 2 to be cut.
    parts = np.empty((_MOST_PARTS, 3))
    known = np.empty(_MOST_PARTS, dtype=np.int64)
    square = np.empty(3)
    for n in range(cells.shape[0]):
        j, i = cells[n]
        w = turns[j, i]
        bend_both = _largest(bend, 0, j, i) + _largest(bend, 1, j, i)
        parts[0, 0], parts[0, 1], parts[0, 2] = 0.0, 0.0, 1.0
        known[0] = 2
        count, at = 1, 0
        while at < count and count <= _MOST_PARTS - PARTS**2:
            v, u, size = parts[at]
            if known[at] == 2 and size > PARTS**-3.0:
                cut_part(planes, j, i, v, u, size, fine, det)
                judge_parts(fine, det, size, bend_both, coarse, verdicts)
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
        positive, negative, unclear, v, u = _summary(parts, known, count)
        if not unclear and not (positive and negative) and w == positive - negative:
            # One sign only: as many zeros as turns.
            if w == 0:
                continue
            square[0], square[1], square[2] = float(j), float(i), 1.0
            if newton(planes, table, square, j + v, i + u, work, zeros[found]):
                zeros[found, 6], zeros[found, 7] = w, 0.0
                zeros[found, 8] = j * turns.shape[1] + i
                found += 1
                continue
        if left + count > squares.shape[0]:
            squares = _longer(squares, left)
        for k in range(count):
            if known[k] != 0:
                squares[left, 0], squares[left, 1] = j + parts[k, 0], i + parts[k, 1]
                squares[left, 2], squares[left, 3] = parts[k, 2], j * turns.shape[1] + i
                squares[left, 4] = known[k]
                left += 1
    return zeros[:found].copy(), squares[:left].copy()


@numba.njit(cache=True, nogil=True)
def _summary(parts, known, count):  # type: ignore[no-untyped-def]
    """Tell which signs squares have, whether any is unclear, and the middle of them all."""
    positive = negative = unclear = False
    v = u = total = 0.0
    for k in range(count):
        if known[k] != 0:
            v += parts[k, 0] + 0.5 * parts[k, 2]
            u += parts[k, 1] + 0.5 * parts[k, 2]
            total += 1.0
        positive = positive or known[k] == 1
        negative = negative or known[k] == -1
        unclear = unclear or known[k] == 2
    return positive, negative, unclear, v / max(total, 1.0), u / max(total, 1.0)
