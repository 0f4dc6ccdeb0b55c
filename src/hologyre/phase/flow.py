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
_UNSEEN = np.iinfo(np.int32).max
_TILE = 64


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
    excess = np.zeros((ny + 1, nx + 1), np.int32)
    excess[1:ny, 1:nx] = charge
    is_earth = np.ones((ny + 1, nx + 1), np.bool_)
    is_earth[1:ny, 1:nx] = False if earth is None else earth
    arcs = _arcs(cost_y, cost_x)
    largest = int(max(cost_y.max(initial=0), cost_x.max(initial=0), 1))
    flow, state, stuck = _solve(excess, is_earth, arcs, largest)
    j, i = divmod(stuck, nx + 1) if stuck >= 0 else (0, 0)
    flow = flow.reshape(ny + 1, nx + 1, 2)
    return Flow(
        jump_y=-flow[1:ny, :nx, 0],
        jump_x=np.ascontiguousarray(flow[:ny, 1:nx, 1]),
        potential=np.ascontiguousarray(state.reshape(ny + 1, nx + 1, 2)[1:ny, 1:nx, 0]),
        stuck=(j - 1, i - 1),
    )


# An arc's code is 4 * cost, + 1 when flow leaves the node by it, + 2 when flow comes in by
# it, + 3 when it is forbidden. Directions: 0 right, 1 left, 2 down, 3 up.
@njit(cache=True, nogil=True)
def _arcs(cost_y: NDArray[np.int16], cost_x: NDArray[np.int16]) -> NDArray[np.int16]:
    ny, nx = cost_x.shape[0], cost_y.shape[1]
    width = nx + 1
    arcs = np.full(((ny + 1) * width, 4), np.int16(3))
    for j in range(ny - 1):
        for i in range(nx):
            left = (j + 1) * width + i
            code = np.int16(4 * cost_y[j, i]) if cost_y[j, i] >= 0 else np.int16(3)
            arcs[left, 0] = code
            arcs[left + 1, 1] = code
    for j in range(ny):
        for i in range(nx - 1):
            upper = j * width + i + 1
            code = np.int16(4 * cost_x[j, i]) if cost_x[j, i] >= 0 else np.int16(3)
            arcs[upper, 2] = code
            arcs[upper + width, 3] = code
    return arcs


@njit(cache=True, nogil=True)
def _sources(excess: NDArray[np.int32], is_earth: NDArray[np.bool_]) -> NDArray[np.int64]:
    """List the charged nodes, tile by tile so that neighbours stay close in memory."""
    height, width = excess.shape
    count = 0
    for j in range(height):
        for i in range(width):
            if excess[j, i] != 0 and not is_earth[j, i]:
                count += 1
    nodes = np.empty(count, np.int64)
    count = 0
    for top in range(0, height, _TILE):
        for left in range(0, width, _TILE):
            for j in range(top, min(top + _TILE, height)):
                for i in range(left, min(left + _TILE, width)):
                    if excess[j, i] != 0 and not is_earth[j, i]:
                        nodes[count] = j * width + i
                        count += 1
    return nodes


@njit(cache=True, nogil=True)
def _solve(
    excess_map: NDArray[np.int32],
    earth_map: NDArray[np.bool_],
    arcs: NDArray[np.int16],
    largest: int,
) -> tuple[NDArray[np.int32], NDArray[np.int32], int]:
    width = excess_map.shape[1]
    nodes = _sources(excess_map, earth_map)
    excess, earth = excess_map.ravel(), earth_map.ravel()
    flow = np.zeros((excess.size, 2), np.int32)
    state = np.empty((excess.size, 2), np.int32)  # potential, distance
    state[:, 0] = 0
    state[:, 1] = _UNSEEN
    parent = np.empty(excess.size, np.int8)
    buckets = 4
    while buckets < 2 * largest + 2:
        buckets *= 2
    head = np.full(buckets, np.int32(-1))
    pool = np.empty((1 << 12, 2), np.int32)  # node, next
    step = np.array((1, -1, width, -width), np.int64)
    reach = 4 * largest
    left = nodes.size
    while left > 0:
        for sign in (1, -1):
            for node in nodes[:left]:
                while sign * excess[node] > 0:
                    goal, pool = _search(
                        node, sign, reach, excess, earth, arcs, state, parent, head, pool, step
                    )
                    if goal == -2:
                        return flow, state, node
                    if goal == -1:
                        break
                    _push(node, goal, sign, excess, earth, arcs, flow, parent, step)
        kept = 0
        for node in nodes[:left]:
            if excess[node] != 0:
                nodes[kept] = node
                kept += 1
        left = kept
        reach = min(2 * reach, _UNSEEN // 4)
    return flow, state, -1


@njit(cache=True, nogil=True)
def _search(
    source: int,
    sign: int,
    reach: int,
    excess: NDArray[np.int32],
    earth: NDArray[np.bool_],
    arcs: NDArray[np.int16],
    state: NDArray[np.int32],
    parent: NDArray[np.int8],
    head: NDArray[np.int32],
    pool: NDArray[np.int32],
    step: NDArray[np.int64],
) -> tuple[int, NDArray[np.int32]]:
    """Find the nearest goal within reach; return it, or -1, or -2 when all is explored.

    Goals are the earth and charges of the other sign. Distances are in reduced costs, in
    a ring of buckets. Potentials of the nodes settled move so that reduced costs stay >= 0.
    """
    mask = head.size - 1
    state[source, 1] = 0
    pool[0, 0] = source
    pool[0, 1] = -1
    head[0] = 0
    top, pending = 1, 1
    distance = 0
    goal = -1
    while goal == -1 and distance < reach:
        entry = head[distance & mask]
        if entry < 0:
            distance += 1
            continue
        node = pool[entry, 0]
        head[distance & mask] = pool[entry, 1]
        pending -= 1
        if state[node, 1] != distance:
            if pending == 0:
                goal = -2
            continue
        if earth[node] or sign * excess[node] < 0:
            goal = node
            break
        if top + 4 > pool.shape[0]:
            larger = np.empty((2 * pool.shape[0], 2), np.int32)
            larger[:top] = pool[:top]
            pool = larger
        here = state[node, 0]
        for k in range(4):
            code = arcs[node, k]
            flag = code & 3
            if flag == 3:
                continue
            cost = code >> 2
            if (sign > 0 and flag == 2) or (sign < 0 and flag == 1):
                cost = -cost
            there = node + step[k]
            reached = distance + cost + sign * (state[there, 0] - here)
            if reached < state[there, 1]:
                state[there, 1] = reached
                parent[there] = k
                slot = reached & mask
                pool[top, 0] = there
                pool[top, 1] = head[slot]
                head[slot] = top
                top += 1
                pending += 1
        if pending == 0:
            goal = -2
    for entry in range(top):
        node = pool[entry, 0]
        if goal != -2 and state[node, 1] < distance:
            state[node, 0] += sign * (distance - state[node, 1])
        state[node, 1] = _UNSEEN
    head[:] = -1
    return goal, pool


@njit(cache=True, nogil=True)
def _push(
    source: int,
    goal: int,
    sign: int,
    excess: NDArray[np.int32],
    earth: NDArray[np.bool_],
    arcs: NDArray[np.int16],
    flow: NDArray[np.int32],
    parent: NDArray[np.int8],
    step: NDArray[np.int64],
) -> None:
    """Send one unit along the path found."""
    excess[source] -= sign
    if not earth[goal]:
        excess[goal] += sign
    there = goal
    while there != source:
        k = parent[there]
        here = there - step[k]
        low = min(here, there)
        axis = k >> 1
        flow[low, axis] += sign * (1 - 2 * (k & 1))
        amount = flow[low, axis]
        code = (arcs[low, 2 * axis] >> 2) << 2
        out = np.int16(1) if amount > 0 else (np.int16(2) if amount < 0 else np.int16(0))
        back = np.int16(2) if amount > 0 else (np.int16(1) if amount < 0 else np.int16(0))
        arcs[low, 2 * axis] = code + out
        arcs[low + step[2 * axis], 2 * axis + 1] = code + back
        there = here
