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
    place = np.zeros((ny + 1, nx + 1), np.int8)
    place[[0, -1]] = place[:, [0, -1]] = ENDS.index("border")
    if valid is not None:
        touched = ~(valid[:-1, :-1] & valid[:-1, 1:] & valid[1:, :-1] & valid[1:, 1:])
        place[1:ny, 1:nx][touched] = ENDS.index("mask")
    vertices, first, start, end, cost = _trace(jump_y, jump_x, cost_y, cost_x, place)
    return Cuts(jump_y, jump_x, vertices - 0.5, first, start, end, cost / levels)


# Flow to the right of node (J, I), which is plaquette (J - 1, I - 1), is -jump_y[J - 1, I];
# flow down from it is jump_x[J, I - 1].
@njit(cache=True, nogil=True)
def _trace(
    jump_y: NDArray[np.int32],
    jump_x: NDArray[np.int32],
    cost_y: NDArray[np.int16],
    cost_x: NDArray[np.int16],
    place: NDArray[np.int8],
) -> tuple[
    NDArray[np.float64],
    NDArray[np.int64],
    NDArray[np.int8],
    NDArray[np.int8],
    NDArray[np.float64],
]:
    height, width = place.shape
    right = np.zeros((height, width), np.int32)
    down = np.zeros((height, width), np.int32)
    units = 0
    for j in range(height - 2):
        for i in range(width - 1):
            if jump_y[j, i] != 0:
                right[j + 1, i] = -jump_y[j, i]
                units += abs(jump_y[j, i])
    for j in range(height - 1):
        for i in range(width - 2):
            if jump_x[j, i] != 0:
                down[j, i + 1] = jump_x[j, i]
                units += abs(jump_x[j, i])
    excess = np.zeros((height, width), np.int32)
    for j in range(height):
        for i in range(width):
            if right[j, i] != 0:
                excess[j, i] += right[j, i]
                excess[j, i + 1] -= right[j, i]
            if down[j, i] != 0:
                excess[j, i] += down[j, i]
                excess[j + 1, i] -= down[j, i]
    vertices = np.empty((2 * units + 1, 2), np.float64)
    first = np.zeros(units + 1, np.int64)
    start = np.empty(units, np.int8)
    end = np.empty(units, np.int8)
    cost = np.zeros(units, np.float64)
    cuts, top = 0, 0
    for closed in (False, True):
        for j0 in range(height):
            for i0 in range(width):
                while excess[j0, i0] > 0 or (closed and (right[j0, i0] != 0 or down[j0, i0] != 0)):
                    j, i, k, total = j0, i0, -1, 0.0
                    if not closed:
                        excess[j0, i0] -= 1
                    while True:
                        if k >= 0 and excess[j, i] < 0:
                            excess[j, i] += 1
                            break
                        came = k
                        if i < width - 1 and right[j, i] > 0:
                            k = 0
                            right[j, i] -= 1
                        elif i > 0 and right[j, i - 1] < 0:
                            k = 1
                            right[j, i - 1] += 1
                        elif j < height - 1 and down[j, i] > 0:
                            k = 2
                            down[j, i] -= 1
                        elif j > 0 and down[j - 1, i] < 0:
                            k = 3
                            down[j - 1, i] += 1
                        else:
                            break  # a loop is closed
                        if k != came:
                            vertices[top, 0], vertices[top, 1] = j, i
                            top += 1
                        if k == 0:
                            total += cost_y[j - 1, i]
                            i += 1
                        elif k == 1:
                            i -= 1
                            total += cost_y[j - 1, i]
                        elif k == 2:
                            total += cost_x[j, i - 1]
                            j += 1
                        else:
                            j -= 1
                            total += cost_x[j, i - 1]
                    vertices[top, 0], vertices[top, 1] = j, i
                    top += 1
                    start[cuts] = 3 if closed else place[j0, i0]
                    end[cuts] = 3 if closed else place[j, i]
                    cost[cuts] = total
                    cuts += 1
                    first[cuts] = top
    return vertices[:top].copy(), first[: cuts + 1].copy(), start[:cuts], end[:cuts], cost[:cuts]
