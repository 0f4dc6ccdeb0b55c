"""How large a change of the field it takes to remove a singularity."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hologyre.singularities.kernel import HALO, scratch, value_at
from hologyre.singularities.lattice import Lattice
from hologyre.singularities.merge import basins, edge_levels, merge, passes
from hologyre.singularities.saddles import lowest_on_edges, polish

_FIRST_LOOK = 1.2
"""Levels up to this part of the root mean square amplitude are enough for most zeros."""


class Robustness(NamedTuple):
    """What the merge tree tells of each zero.

    Attributes
    ----------
    level : (n,) array
        The lowest r at which the zero's part of {|E| <= r} has no charge left, or touches the
        border; field units. A change of the field that stays below it cannot remove the zero
        (Edelsbrunner, Morozov and Patel, Found. Comput. Math. 11, 345, 2011, for robustness;
        Franek and Krcal, J. ACM 62, 26, 2015, for zeros of maps).
    at_border : (n,) bool array
        True where the part touched the border: beyond it the field is unknown.
    alike : (n,) int array
        Zeros of one charge that cannot be told apart have one number, that of one of them.
    """

    level: NDArray[np.float64]
    at_border: NDArray[np.bool_]
    alike: NDArray[np.int64]


def robustness(
    lattice: Lattice,
    turns: NDArray[np.int8],
    zeros: NDArray[np.float64],
    blur: NDArray[np.float64],
) -> Robustness:
    """Follow the parts of {|E| <= r} as r grows, until each zero's has no charge.

    Parameters
    ----------
    lattice : Lattice
        The field.
    turns : (ny-1, nx-1) int8 array
        Winding of its cells.
    zeros : (n, 9) array
        The zeros, as `find_zeros` gives them.
    blur : (n,) array
        |E| up to which like charges that meet count as one, at each zero.
    """
    planes, table = lattice.planes, lattice.table
    cell = zeros[:, 8].astype(np.int64)
    along_y, along_x = edge_levels(planes)
    basin, bottom = basins(turns, along_y, along_x)
    charge = turns.ravel()[bottom].astype(np.int32)
    charge[0] = 0
    # Of a crowded cell the zero listed last speaks for all; a pair in a cell without net charge
    # has no basin of its own.
    home = np.where(turns.ravel()[cell] != 0, basin[cell], -1)
    alike = np.zeros(bottom.size)
    alike[home[home >= 0]] = blur[home >= 0] ** 2
    look = _FIRST_LOOK**2 * 2 * float(np.mean(planes**2))
    for most in (look, np.inf):
        level, ends, edge = passes(basin, along_y, along_x, most)
        end, group, left = merge(np.argsort(level), level, ends, charge.copy(), alike)
        if left == 0:
            break
    last = np.where(home < 0, -1, end[home])
    at_border = last >= level.size
    which, back = np.unique(last % max(level.size, 1), return_inverse=True)
    places, reach = _places_on(lattice, edge[which], turns.shape)
    # Where the lowest way over an edge starts in a zero, the middle of the zeros shows the saddle.
    shares = np.bincount(back)
    middle = np.stack([np.bincount(back, zeros[:, k]) / shares for k in (0, 1)], axis=1)
    chord = np.sqrt(level[which])
    height, sought = chord.copy(), np.arange(which.size)
    for tried in (places, middle):
        saddle = polish(planes, table, tried[sought])[:, 2]
        # No edge is crossed far below the saddle it leads over.
        low, high = 0.5 * chord[sought], 2 * chord[sought] + 0.2 * reach[sought]
        near = (saddle >= low) & (saddle <= high)
        height[sought[near]] = saddle[near]
        sought = sought[~near]
    along = edge[which[sought]] < (turns.shape[0] + 1) * turns.shape[1]
    height[sought] = lowest_on_edges(planes, table, places[sought], along)
    found = np.where(last < 0, 0.0, height[back])
    number = np.full(bottom.size, -1)
    number[home[::-1]] = np.arange(cell.size)[::-1]
    together = np.where(home < 0, np.arange(cell.size), number[group[home]])
    ordered = np.sort(cell)
    for here in np.unique(ordered[1:][np.diff(ordered) == 0]):
        for a, b, saddle in _pairs_within(lattice, zeros, np.flatnonzero(cell == here)):
            found[[a, b]], at_border[[a, b]] = saddle, False
            together[[a, b]] = a, b
    return Robustness(found, at_border, together)


def _places_on(
    lattice: Lattice, edge: NDArray[np.int64], shape: tuple[int, int]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return where on each edge |E| is least, in nodes, and how far E goes along the edge."""
    rows, columns = shape
    along_x = edge < (rows + 1) * columns
    other = edge - (rows + 1) * columns
    y = np.where(along_x, edge // columns, other // (columns + 1))
    x = np.where(along_x, edge % columns, other % (columns + 1))
    planes = lattice.planes
    first = planes[0, y + HALO, x + HALO] + 1j * planes[1, y + HALO, x + HALO]
    v, u = y + HALO + ~along_x, x + HALO + along_x
    step = planes[0, v, u] + 1j * planes[1, v, u] - first
    length = np.abs(step)
    t = np.clip(-(first.conj() * step).real / np.maximum(length, 1e-300) ** 2, 0.0, 1.0)
    return np.stack([y + t * ~along_x, x + t * along_x], axis=1), length


def _pairs_within(
    lattice: Lattice, zeros: NDArray[np.float64], members: NDArray[np.intp]
) -> list[tuple[int, int, float]]:
    """Pair opposite zeros of one cell, nearest first; return each pair's saddle."""
    pairs: list[tuple[int, int, float]] = []
    free = [int(m) for m in members]
    while True:
        apart = [
            (float(np.hypot(*(zeros[a, :2] - zeros[b, :2]))), a, b)
            for n, a in enumerate(free)
            for b in free[n + 1 :]
            if zeros[a, 6] * zeros[b, 6] < 0
        ]
        if not apart:
            return pairs
        _, a, b = min(apart)
        free = [m for m in free if m not in (a, b)]
        middle = (zeros[a, :2] + zeros[b, :2]) / 2
        saddle = float(polish(lattice.planes, lattice.table, middle[np.newaxis])[0, 2])
        if not np.isfinite(saddle):
            saddle = abs(value_at(lattice.planes, lattice.table, *middle, scratch()))
        pairs.append((a, b, saddle))
