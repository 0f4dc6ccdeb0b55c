"""The cheapest flow that joins residues of opposite sign, or residues and the border.

Nodes are plaquettes, and the border is one more node, the earth. An arc crosses the edge
between two pixels. Flow has no capacity, so that the optimum is a transport under the
shortest-path distance; it is found by successive shortest paths, each search local.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from numpy.typing import NDArray

FORBIDDEN = -1
"""Cost of an arc that no flow may use."""

LARGEST_COST = 4095
_UNSEEN = np.int32(2**31 - 1)
_FARTHEST = 2**28
_NONE = np.uint32(2**32 - 1)
_PLAIN, _POSITIVE, _NEGATIVE, _EARTH = 0, 1, 2, 3
_TOO_FAR, _STUCK, _FULL = -1, -2, -3


class Flow(NamedTuple):
    """A flow of least cost and the potentials that prove it.

    ``jump_y[j, i]`` (int32) belongs to the edge between pixels (j, i) and (j + 1, i),
    ``jump_x[j, i]`` to that between (j, i) and (j, i + 1): the turns to add to the wrapped
    difference. ``potential`` (int32) has one value per plaquette, 0 on the earth.
    ``stuck`` is the plaquette (j, i) that reaches nothing, or (-1, -1).
    """

    jump_y: NDArray[np.int32]
    jump_x: NDArray[np.int32]
    potential: NDArray[np.int32]
    stuck: tuple[int, int]


def cheapest_flow(
    charge: NDArray[np.integer],
    cost_y: NDArray[np.int16],
    cost_x: NDArray[np.int16],
    earth: NDArray[np.bool_] | None = None,
) -> Flow:
    """Return the flow of least cost that takes every charge away.

    Parameters
    ----------
    charge : (y - 1, x - 1) int array
        Residue of each plaquette.
    cost_y, cost_x : (y - 1, x) and (y, x - 1) int16 arrays
        Cost of a unit of flow across each edge between pixels, 0 to `LARGEST_COST`, or
        `FORBIDDEN`.
    earth : (y - 1, x - 1) bool array, optional
        Plaquettes that are one with the border.

    Returns
    -------
    Flow

    Notes
    -----
    Potentials obey ``abs(p - p') <= cost`` across every edge, and drop by the cost where
    there is flow. By linear programming duality the sum of charge times potential then
    equals the cost, and no flow can cost less.

    References
    ----------
    M. Costantini, IEEE Trans. Geosci. Remote Sens. 36, 813 (1998).
    """
    ny, nx = charge.shape[0] + 1, charge.shape[1] + 1
    if earth is None:
        earth = np.broadcast_to(np.bool_(False), charge.shape)
    nodes = np.empty((ny + 1, nx + 1, 3), np.int32)
    _lay_out(nodes, nodes.view(np.int16), charge, cost_y, cost_x, earth)
    charged = _charged(charge, earth)
    excess = np.zeros(nodes.shape[:2], np.int32)
    excess.ravel()[charged] = charge[charged // (nx + 1) - 1, charged % (nx + 1) - 1]
    jump_y = np.zeros((ny - 1, nx), np.int32)
    jump_x = np.zeros((ny, nx - 1), np.int32)
    largest = int(max(cost_y.max(initial=0), cost_x.max(initial=0), 1))
    # A first reach of about a half of the way between two neighbours.
    typical = max(float(cost_x[:: max(1, ny // 64)].mean()), 0.0)
    reach = 1 + int(0.4 * typical * np.sqrt(charge.size / max(len(charged), 1)))
    stuck = _solve(
        nodes.reshape(-1, 3),
        nodes.reshape(-1, 3).view(np.int16),
        excess.ravel(),
        charged,
        nx + 1,
        largest,
        reach,
        jump_y,
        jump_x,
    )
    j, i = divmod(stuck, nx + 1) if stuck >= 0 else (0, 0)
    return Flow(jump_y, jump_x, nodes[1:ny, 1:nx, 0] >> 2, (j - 1, i - 1))


def _charged(charge: NDArray[np.integer], earth: NDArray[np.bool_]) -> NDArray[np.int64]:
    """List the nodes that hold a charge, row by row."""
    j, i = np.divmod(np.flatnonzero((charge != 0) & ~earth), charge.shape[1])
    return (j + 1) * (charge.shape[1] + 2) + i + 1


# One record of 12 bytes a node, so that a search touches few lines of memory:
#   nodes[n, 0]   4 * potential + kind; the earth has the bits of both signs, so that one test
#                 finds the goals of a search
#   nodes[n, 1]   4 * distance + direction it was reached by, or _UNSEEN
#   arcs[n, 4]    (the same memory as int16) the arc to the right: 4 * cost, + 1 when flow runs
#                 to the right, + 2 when it runs to the left; -1 when forbidden
#   arcs[n, 5]    the arc down, likewise
# Directions: 0 right, 1 left, 2 down, 3 up. Node (J, I) is plaquette (J - 1, I - 1); the rim
# around them is earth. Indices are unsigned in the inner loop: numba checks signed ones for
# being negative.
@njit(cache=True, nogil=True)
def _lay_out(
    nodes: NDArray[np.int32],
    arcs: NDArray[np.int16],
    charge: NDArray[np.integer],
    cost_y: NDArray[np.int16],
    cost_x: NDArray[np.int16],
    earth: NDArray[np.bool_],
) -> None:
    height, width = nodes.shape[:2]
    nodes[0, :, 0] = nodes[-1, :, 0] = _EARTH
    nodes[:, 0, 0] = nodes[:, -1, 0] = _EARTH
    nodes[:, :, 1] = _UNSEEN
    arcs[:, :, 4:] = -1
    for j in range(1, height - 1):
        for i in range(1, width - 1):
            kind = _PLAIN
            if earth[j - 1, i - 1]:
                kind = _EARTH
            elif charge[j - 1, i - 1] != 0:
                kind = _POSITIVE if charge[j - 1, i - 1] > 0 else _NEGATIVE
            nodes[j, i, 0] = kind
    for j in range(1, height - 1):
        for i in range(width - 1):
            arcs[j, i, 4] = max(4 * cost_y[j - 1, i], -1)
    for j in range(height - 1):
        for i in range(1, width - 1):
            arcs[j, i, 5] = max(4 * cost_x[j, i - 1], -1)


@njit(cache=True, nogil=True)
def _solve(
    nodes: NDArray[np.int32],
    arcs: NDArray[np.int16],
    excess: NDArray[np.int32],
    charged: NDArray[np.int64],
    width: int,
    largest: int,
    reach: int,
    jump_y: NDArray[np.int32],
    jump_x: NDArray[np.int32],
) -> int:
    """Take all charges away; return -1, or the node of one that reaches nothing.

    Searches go in rounds of growing reach, from both signs in turn, so that near residues
    find each other first and the potentials of both grow alike: later searches then have
    much less ground to cover than when each residue in turn is matched for good.
    """
    buckets = 4
    while buckets < 2 * largest + 2:
        buckets *= 2
    head = np.full(buckets, _NONE)
    pool = np.empty((1 << 14, 2), np.uint32)  # node, next in the bucket
    step = np.array((1, -1, width, -width), np.int64).view(np.uint64)
    left = charged.size
    while left > 0:
        for sign in (1, -1):
            for source in charged[:left]:
                while sign * excess[source] > 0:
                    goal, distance, top = _search(
                        np.uint64(source), sign, reach, nodes, arcs, head, pool, step
                    )
                    if goal == _FULL:
                        _settle(0, sign, top, nodes, pool)
                        pool = np.empty((4 * pool.shape[0], 2), np.uint32)
                        continue
                    if goal == _STUCK:
                        return source
                    if goal >= 0:
                        _push(source, goal, sign, width, excess, nodes, arcs, jump_y, jump_x)
                    _settle(distance, sign, top, nodes, pool)
                    if goal == _TOO_FAR:
                        break
        kept = 0
        for node in charged[:left]:
            if excess[node] != 0:
                charged[kept] = node
                kept += 1
        left = kept
        reach = min(reach + reach // 3 + 1, _FARTHEST)
    return -1


@njit(cache=True, nogil=True)
def _search(
    source: int,
    sign: int,
    reach: int,
    nodes: NDArray[np.int32],
    arcs: NDArray[np.int16],
    head: NDArray[np.uint32],
    pool: NDArray[np.uint32],
    step: NDArray[np.uint64],
) -> tuple[int, int, int]:
    """Find the nearest goal: the earth or a charge of the other sign.

    Distances are in reduced costs, in a ring of buckets. Returns the goal (or why there is
    none), its distance (or the reach) and how many entries of the pool were used.
    """
    mask = np.uint64(head.size - 1)
    against = np.int32(1 if sign > 0 else 0)
    wanted = np.int32(_NEGATIVE if sign > 0 else _POSITIVE)
    sense = np.int32(sign)
    room = np.uint64(pool.shape[0] - 4)
    nodes[source, 1] = 0
    pool[0, 0] = source
    pool[0, 1] = _NONE
    head[0] = 0
    top = np.uint64(1)
    pending = 1
    distance = np.int32(0)
    limit = np.int32(reach)
    goal = np.int64(_STUCK)
    while pending > 0 and distance < limit:
        slot = np.uint64(distance) & mask
        if head[slot] == _NONE:
            distance += np.int32(1)
            continue
        entry = np.uint64(head[slot])
        node = np.uint64(pool[entry, 0])
        head[slot] = pool[entry, 1]
        pending -= 1
        if nodes[node, 1] >> 2 != distance:
            continue
        if top > room:
            goal = np.int64(_FULL)
            break
        here = np.int32(distance - sense * (nodes[node, 0] >> 2))
        for k in range(4):
            there = node + step[np.uint64(k)]
            low = there if k & 1 else node
            code = np.int32(arcs[low, np.uint64(4 + (k >> 1))])
            if code < 0:
                continue
            cost = np.int32(code >> 2)
            if (code >> (against ^ (k & 1))) & 1:
                cost = np.int32(-cost)
            word = nodes[there, 0]
            reached = np.int32(here + cost + sense * (word >> 2))
            if reached < min(limit, nodes[there, 1] >> 2):
                nodes[there, 1] = (reached << 2) + k
                pool[top, 0] = there
                if word & wanted:
                    goal = np.int64(there)
                    limit = reached
                    top += np.uint64(1)
                    continue
                slot = np.uint64(reached) & mask
                pool[top, 1] = head[slot]
                head[slot] = top
                top += np.uint64(1)
                pending += 1
            elif goal == _STUCK and reached >= limit:
                goal = np.int64(_TOO_FAR)
    head[:] = _NONE
    return int(goal), int(limit), int(top)


@njit(cache=True, nogil=True)
def _settle(
    distance: int, sign: int, top: int, nodes: NDArray[np.int32], pool: NDArray[np.uint32]
) -> None:
    """Move potentials so that reduced costs stay >= 0, and forget the distances."""
    sense = np.int32(sign)
    for entry in range(np.uint64(top)):
        node = np.uint64(pool[entry, 0])
        ahead = np.int32(distance - (nodes[node, 1] >> 2))
        nodes[node, 1] = _UNSEEN
        if ahead > 0:
            nodes[node, 0] += sense * (ahead << 2)


@njit(cache=True, nogil=True)
def _push(
    source: int,
    goal: int,
    sign: int,
    width: int,
    excess: NDArray[np.int32],
    nodes: NDArray[np.int32],
    arcs: NDArray[np.int16],
    jump_y: NDArray[np.int32],
    jump_x: NDArray[np.int32],
) -> None:
    """Send one unit along the path found."""
    excess[source] -= sign
    if excess[source] == 0:
        nodes[source, 0] &= ~3
    if nodes[goal, 0] & 3 != _EARTH:
        excess[goal] += sign
        if excess[goal] == 0:
            nodes[goal, 0] &= ~3
    node = goal
    while node != source:
        k = nodes[node, 1] & 3
        stride = 1 if k < 2 else width
        before = node + stride if k & 1 else node - stride
        low = min(before, node)
        unit = -sign if k & 1 else sign
        j, i = low // width, low % width
        # Flow to the right or down, that is from `low`.
        if k < 2:
            jump_y[j - 1, i] -= unit
            amount = -jump_y[j - 1, i]
        else:
            jump_x[j, i - 1] += unit
            amount = jump_x[j, i - 1]
        arc = 4 if k < 2 else 5
        arcs[low, arc] = (arcs[low, arc] & ~3) + (amount > 0) + 2 * (amount < 0)
        node = before
