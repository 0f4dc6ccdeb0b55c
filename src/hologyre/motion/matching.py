"""The cheapest matching of two sparse sets in which nobody must be matched."""

from __future__ import annotations

import heapq

import numba
import numpy as np
from numpy.typing import NDArray


def cheapest_matching(
    left: NDArray[np.integer],
    right: NDArray[np.integer],
    cost: NDArray[np.floating],
    *,
    left_alone: NDArray[np.floating],
    right_alone: NDArray[np.floating],
) -> NDArray[np.int64]:
    """Match two sets at the least total cost, leaving alone whoever is dearer to match.

    Parameters
    ----------
    left, right : (edge,) int arrays
        The pairs that may be matched.
    cost : (edge,) array
        What each of these pairs costs; may be negative.
    left_alone, right_alone : (left,), (right,) arrays
        What leaving each one alone costs.

    Returns
    -------
    (left,) int array
        The partner on the right, or -1 for those left alone.

    Notes
    -----
    The sum of all costs is the global minimum. Each member of the left is entered in turn
    and the shortest augmenting path is searched from it in reduced costs; the search stops
    at the first free end, so that the work stays local when the pairs are (R. Jonker and
    A. Volgenant, Computing 38, 325, 1987).

    Examples
    --------
    >>> import numpy as np
    >>> left, right = np.array([0, 0, 1]), np.array([0, 1, 0])
    >>> alone = np.full(2, 10.0)
    >>> cheapest_matching(
    ...     left, right, np.array([1.0, 2.0, 3.0]), left_alone=alone, right_alone=alone
    ... ).tolist()
    [1, 0]
    """
    return np.asarray(
        match_edges(
            np.asarray(left, dtype=np.int64),
            np.asarray(right, dtype=np.int64),
            np.asarray(cost, dtype=np.float64),
            np.asarray(left_alone, dtype=np.float64),
            np.asarray(right_alone, dtype=np.float64),
        )
    )


@numba.njit(cache=True, nogil=True)
def match_edges(left, right, cost, left_alone, right_alone):  # type: ignore[no-untyped-def]
    """Do the work of `cheapest_matching`, for callers in compiled code."""
    start = np.zeros(len(left_alone) + 1, np.int64)
    for k in range(len(left)):
        # an edge dearer than leaving both ends alone is in no cheapest matching
        if cost[k] < left_alone[left[k]] + right_alone[right[k]]:
            start[left[k] + 1] += 1
    for i in range(len(left_alone)):
        start[i + 1] += start[i]
    fill = start[:-1].copy()
    column = np.empty(start[-1], np.int64)
    price = np.empty(start[-1])
    for k in range(len(left)):
        i, j = left[k], right[k]
        if cost[k] < left_alone[i] + right_alone[j]:
            column[fill[i]] = j
            price[fill[i]] = cost[k] - right_alone[j]
            fill[i] += 1
    return _augment(start, column, price, left_alone, len(right_alone))


@numba.njit(cache=True, nogil=True)
def _augment(start, column, price, alone, n_right):  # type: ignore[no-untyped-def]
    """Enter the rows one by one; every row has a bin of its own at the price `alone`."""
    n_left = len(alone)
    partner = np.full(n_left, -1, np.int64)
    owner = np.full(n_right, -1, np.int64)
    u = np.zeros(n_left)
    v = np.zeros(n_right)
    distance = np.full(n_right, np.inf)
    via = np.full(n_right, -1, np.int64)
    settled = np.zeros(n_right, np.bool_)
    touched = np.empty(n_right, np.int64)
    for root in range(n_left):
        n_touched = 0
        frontier = [(0.0, np.int64(-1))]
        frontier.pop()
        row = np.int64(root)
        reached = 0.0
        best_bin = np.inf
        bin_row = np.int64(-1)
        free = np.int64(-1)
        while True:
            to_bin = reached + alone[row] - u[row]
            if to_bin < best_bin:
                best_bin = to_bin
                bin_row = row
            for edge in range(start[row], start[row + 1]):
                j = column[edge]
                if settled[j]:
                    continue
                d = reached + price[edge] - u[row] - v[j]
                if d < distance[j]:
                    if distance[j] == np.inf:
                        touched[n_touched] = j
                        n_touched += 1
                    distance[j] = d
                    via[j] = row
                    heapq.heappush(frontier, (d, j))
            column_now = np.int64(-1)
            while len(frontier) > 0:
                d, j = heapq.heappop(frontier)
                if not settled[j] and d <= distance[j]:
                    column_now = j
                    break
            if column_now < 0 or distance[column_now] >= best_bin:
                reached = best_bin
                break
            settled[column_now] = True
            reached = distance[column_now]
            if owner[column_now] < 0:
                free = column_now
                break
            row = owner[column_now]
        # potentials change only where the search has settled
        u[root] += reached
        for k in range(n_touched):
            j = touched[k]
            if settled[j] and j != free:
                slack = reached - distance[j]
                u[owner[j]] += slack
                v[j] -= slack
        # walk the path back, handing each row the column it was reached from
        j = free
        if free < 0 and bin_row != root:
            j = partner[bin_row]
            partner[bin_row] = -1
        while j >= 0:
            row = via[j]
            given_up = partner[row]
            partner[row] = j
            owner[j] = row
            j = given_up
        for k in range(n_touched):
            j = touched[k]
            distance[j] = np.inf
            settled[j] = False
            via[j] = -1
    return partner
