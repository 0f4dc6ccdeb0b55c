"""All pairs of points of two sets that lie near each other."""

from __future__ import annotations

import math

import numba
import numpy as np
from numpy.typing import NDArray


def near(
    a: NDArray[np.float64], b: NDArray[np.float64], reach: float
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.float64]]:
    """Return the pairs (i, j) of points no farther apart than `reach`, and their distances.

    Parameters
    ----------
    a, b : (n, 2), (m, 2) arrays
        Points.
    reach : float
        Longest distance, positive.

    Returns
    -------
    i, j : (pair,) int arrays
        Sorted by i.
    distance : (pair,) array
    """
    i, j, d = near_pairs(np.ascontiguousarray(a), np.ascontiguousarray(b), float(reach))
    return i, j, d


@numba.njit(cache=True, nogil=True)
def near_pairs(a, b, reach):  # type: ignore[no-untyped-def]
    """Do the work of `near`, for callers in compiled code.

    Points of b are sorted into square cells; each point of a is looked up in the nine around it.
    """
    if len(a) == 0 or len(b) == 0:
        nothing = np.empty(0, np.int64)
        return nothing, nothing, np.empty(0)
    low_y, low_x = b[:, 0].min(), b[:, 1].min()
    # cells no smaller than the reach, and not many more of them than points
    span = max(b[:, 0].max() - low_y, b[:, 1].max() - low_x)
    size = max(reach, span / (1.0 + np.sqrt(len(b))))
    ny = int((b[:, 0].max() - low_y) / size) + 1
    nx = int((b[:, 1].max() - low_x) / size) + 1
    cell = np.empty(len(b), np.int64)
    start = np.zeros(ny * nx + 1, np.int64)
    for k in range(len(b)):
        cell[k] = int((b[k, 0] - low_y) / size) * nx + int((b[k, 1] - low_x) / size)
        start[cell[k] + 1] += 1
    for c in range(ny * nx):
        start[c + 1] += start[c]
    fill = start[:-1].copy()
    member = np.empty(len(b), np.int64)
    by, bx = np.empty(len(b)), np.empty(len(b))
    for k in range(len(b)):
        m = fill[cell[k]]
        member[m], by[m], bx[m] = k, b[k, 0], b[k, 1]
        fill[cell[k]] += 1
    room = 4 * len(a) + 16
    i, j, d = np.empty(room, np.int64), np.empty(room, np.int64), np.empty(room)
    n, most = 0, reach * reach
    for k in range(len(a)):
        y, x = a[k, 0], a[k, 1]
        row = math.floor((y - low_y) / size)
        column = math.floor((x - low_x) / size)
        for r in range(max(row - 1, 0), min(row + 2, ny)):
            first, last = max(column - 1, 0), min(column + 1, nx - 1)
            if last < first:
                continue
            # cells of a row lie together
            for m in range(start[r * nx + first], start[r * nx + last + 1]):
                dy, dx = y - by[m], x - bx[m]
                square = dy * dy + dx * dx
                if square > most:
                    continue
                if n == room:
                    more = np.empty(room, np.int64)
                    i = np.concatenate((i, more))
                    j = np.concatenate((j, more))
                    d = np.concatenate((d, np.empty(room)))
                    room *= 2
                i[n], j[n], d[n] = k, member[m], math.sqrt(square)
                n += 1
    return i[:n], j[:n], d[:n]
