"""Cuts: where an unwrapped phase jumps, as lines that join residues."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numba import njit
from numpy.typing import NDArray

ENDS = ("residue", "border", "mask", "loop")
"""What a cut can end at; a loop closes on itself."""


@dataclass(frozen=True, eq=False)
class Cuts:
    """The cuts of an unwrapped phase.

    Each cut carries one jump of 2 pi, from a residue +1 (or the border, or a region left
    out) to a residue -1 (or the border, or such a region). It runs between pixels, from
    plaquette centre to plaquette centre; on the border half a pixel outside the frame.

    Parameters
    ----------
    jump_y, jump_x : (y - 1, x) and (y, x - 1) int32 arrays
        Turns added to the wrapped difference across each edge between neighbouring pixels,
        along y and x. Zero where there is no cut.
    vertices : (n, 2) float64 array
        Ends and corners (y_px, x_px) of all cuts, one cut after another.
    first : (cuts + 1,) int64 array
        Cut ``c`` has the vertices ``first[c]`` to ``first[c + 1] - 1``.
    start, end : (cuts,) int8 arrays
        What each cut starts and ends at, as positions in `ENDS`.
    cost : (cuts,) float64 array
        Sum of the weights of the edges each cut crosses.
    """

    jump_y: NDArray[np.int32]
    jump_x: NDArray[np.int32]
    vertices: NDArray[np.float64]
    first: NDArray[np.int64]
    start: NDArray[np.int8]
    end: NDArray[np.int8]
    cost: NDArray[np.float64]

    def __len__(self) -> int:
        return len(self.cost)

    @property
    def polylines(self) -> list[NDArray[np.float64]]:
        """One (n, 2) array of vertices (y_px, x_px) for each cut."""
        return np.split(self.vertices, self.first[1:-1]) if len(self) else []

    @property
    def length_px(self) -> NDArray[np.float64]:
        """Number of edges each cut crosses."""
        step = np.abs(np.diff(self.vertices, axis=0)).sum(axis=1)
        along = np.concatenate(([0.0], np.cumsum(step)))
        lengths: NDArray[np.float64] = along[self.first[1:] - 1] - along[self.first[:-1]]
        return lengths

    def table(self) -> pd.DataFrame:
        """Return one row per cut: its ends, what they are, its length and its cost."""
        starts, ends = self.vertices[self.first[:-1]], self.vertices[self.first[1:] - 1]
        kinds = np.array(ENDS)
        return pd.DataFrame(
            {
                "start": kinds[self.start],
                "start_y_px": starts[:, 0],
                "start_x_px": starts[:, 1],
                "end": kinds[self.end],
                "end_y_px": ends[:, 0],
                "end_x_px": ends[:, 1],
                "length_px": self.length_px,
                "cost": self.cost,
            }
        )

    def jump_map(self) -> NDArray[np.int32]:
        """Return for each pixel the most turns it jumps by towards a neighbour."""
        ny, nx = self.jump_x.shape[0], self.jump_y.shape[1]
        jumps = np.zeros((ny, nx), np.int32)
        along_y, along_x = np.abs(self.jump_y), np.abs(self.jump_x)
        for pixels, edges in (
            (jumps[:-1], along_y),
            (jumps[1:], along_y),
            (jumps[:, :-1], along_x),
            (jumps[:, 1:], along_x),
        ):
            np.maximum(pixels, edges, out=pixels)
        return jumps


def trace_cuts(
    jump_y: NDArray[np.int32],
    jump_x: NDArray[np.int32],
    cost_y: NDArray[np.int16],
    cost_x: NDArray[np.int16],
    levels: int,
    valid: NDArray[np.bool_] | None,
) -> Cuts:
    """Join the edges that are jumped across to cuts."""
    ny, nx = jump_x.shape[0], jump_y.shape[1]
    tail, head, price = _units(jump_y, jump_x, cost_y, cost_x)
    nodes, local = np.unique(np.concatenate((tail, head)), return_inverse=True)
    tail, head = local[: len(tail)], local[len(tail) :]
    order = np.argsort(tail, kind="stable")
    leaving = np.bincount(tail, minlength=len(nodes))
    excess = leaving - np.bincount(head, minlength=len(nodes))
    out = np.concatenate(([0], np.cumsum(leaving)))
    visited, first, cost, loops = _walk(out, head[order], price[order], excess)
    y, x = np.divmod(nodes, nx + 1)
    place = np.where((y % ny == 0) | (x % nx == 0), ENDS.index("border"), ENDS.index("residue"))
    if valid is not None:
        touched = np.zeros((ny + 1, nx + 1), np.bool_)
        touched[1:ny, 1:nx] = ~(valid[:-1, :-1] & valid[:-1, 1:] & valid[1:, :-1] & valid[1:, 1:])
        place[touched[y, x]] = ENDS.index("mask")
    start, end = (place[visited[at]].astype(np.int8) for at in (first[:-1], first[1:] - 1))
    start[len(start) - loops :] = end[len(end) - loops :] = ENDS.index("loop")
    vertices, first = _corners(np.column_stack((y, x))[visited] - 0.5, first)
    return Cuts(jump_y, jump_x, vertices, first, start, end, cost / levels)


def _units(
    jump_y: NDArray[np.int32],
    jump_x: NDArray[np.int32],
    cost_y: NDArray[np.int16],
    cost_x: NDArray[np.int16],
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.float64]]:
    """List the nodes each unit of flow leaves and enters, and what it pays.

    Node (J, I) is plaquette (J - 1, I - 1), in rows of one more than there are pixels. Flow to
    the right of it is -jump_y[J - 1, I], flow down from it jump_x[J, I - 1].
    """
    width = jump_y.shape[1] + 1
    # Positions of true values are found several times faster than those of numbers not 0.
    jy, iy = np.divmod(np.flatnonzero(jump_y != 0), jump_y.shape[1])
    jx, ix = np.divmod(np.flatnonzero(jump_x != 0), jump_x.shape[1])
    low = np.concatenate(((jy + 1) * width + iy, jx * width + ix + 1))
    high = low + np.repeat((1, width), (len(jy), len(jx)))
    flow = np.concatenate((-jump_y[jy, iy], jump_x[jx, ix]))
    price = np.concatenate((cost_y[jy, iy], cost_x[jx, ix])).astype(np.float64)
    tail, head = np.where(flow > 0, (low, high), (high, low))
    units = np.abs(flow)
    return np.repeat(tail, units), np.repeat(head, units), np.repeat(price, units)


@njit(cache=True, nogil=True)
def _walk(
    out: NDArray[np.int64],
    head: NDArray[np.int64],
    price: NDArray[np.float64],
    excess: NDArray[np.int64],
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.float64], int]:
    """Take the flow apart: paths from sources to sinks, then what is left, in loops.

    Arcs ``out[n]`` to ``out[n + 1] - 1`` leave node n. Returns the nodes of all paths, where
    each path starts, what it costs, and how many of the last ones are loops.
    """
    following = out[:-1].copy()
    visited = np.empty(2 * head.size, np.int64)
    first = np.zeros(head.size + 1, np.int64)
    cost = np.zeros(head.size, np.float64)
    paths, top, open_paths = 0, 0, 0
    for closed in (False, True):
        for source in range(excess.size):
            while excess[source] > 0 or (closed and following[source] < out[source + 1]):
                if not closed:
                    excess[source] -= 1
                node = source
                visited[top] = node
                top += 1
                while following[node] < out[node + 1]:
                    arc = following[node]
                    following[node] += 1
                    cost[paths] += price[arc]
                    node = head[arc]
                    visited[top] = node
                    top += 1
                    if excess[node] < 0:
                        excess[node] += 1
                        break
                paths += 1
                first[paths] = top
        if not closed:
            open_paths = paths
    return visited[:top], first[: paths + 1], cost[:paths], paths - open_paths


def _corners(
    points: NDArray[np.float64], first: NDArray[np.int64]
) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Keep the ends and corners of paths."""
    keep = np.ones(len(points), np.bool_)
    if len(points) > 2:
        step = np.diff(points, axis=0)
        keep[1:-1] = (step[1:] != step[:-1]).any(axis=1)
        keep[first[:-1]] = keep[first[1:] - 1] = True
    before = np.concatenate(([0], np.cumsum(keep)))
    return points[keep], before[first]
