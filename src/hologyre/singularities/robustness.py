"""How large a change of the field it takes to remove a singularity."""

from __future__ import annotations

from itertools import combinations
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hologyre.singularities.kernel import HALO, values_at
from hologyre.singularities.lattice import Lattice
from hologyre.singularities.merge import basins, edge_levels, merge, passes
from hologyre.singularities.saddles import lowest_on_lines, polish


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
    planes = lattice.planes
    cell = zeros[:, 8].astype(np.int64)
    along_y, along_x = edge_levels(planes)
    basin, bottom = basins(turns, along_y, along_x)
    charge = turns.ravel()[bottom].astype(np.int32)
    charge[0] = 0
    # A pair in a cell without net charge has no basin; it is dealt with last.
    placed = np.flatnonzero(turns.ravel()[cell] != 0)
    home = basin[cell[placed]]
    alike = np.zeros(bottom.size)
    alike[home] = blur[placed]
    level, ends, edge = passes(basin, along_y, along_x)
    end, group = merge(np.argsort(level), level, ends, charge, alike)
    last = end[home]
    at_border = np.zeros(cell.size, dtype=np.bool_)
    at_border[placed] = last >= level.size
    which, back = np.unique(last, return_inverse=True)
    # Where the lowest way over an edge starts in a zero, the middle of the zeros shows the saddle.
    shares = np.bincount(back)
    middle = np.stack([np.bincount(back, zeros[placed, k]) / shares for k in (0, 1)], axis=1)
    found = np.zeros(cell.size)
    which %= level.size
    found[placed] = _heights(lattice, edge[which], level[which], middle, turns.shape)[back]
    number = np.empty(bottom.size, dtype=np.int64)
    number[home] = placed
    together = np.arange(cell.size)
    together[placed] = number[group[home]]
    for a, b, saddle in _pairs_within(lattice, zeros):
        found[[a, b]], at_border[[a, b]] = saddle, False
        together[[a, b]] = a, b
    return Robustness(found, at_border, together)


def _heights(
    lattice: Lattice,
    edge: NDArray[np.int64],
    level: NDArray[np.float32],
    middle: NDArray[np.float64],
    shape: tuple[int, int],
) -> NDArray[np.float64]:
    """Return |E| where parts of {|E| <= r} meet.

    Parameters
    ----------
    lattice : Lattice
        The field.
    edge, level : (n,) arrays
        Edges they meet across, and the least |E| on each by its chords.
    middle : (n, 2) array
        Middle of the zeros that meet, node coordinates.
    shape : (int, int)
        Rows and columns of cells.
    """
    start, along_x = _edges_at(edge, shape)
    places, reach = _places_on(lattice, start, along_x)
    across = np.where(along_x, start[:, 0], start[:, 1])
    on_border = (across == 0) | (across == np.where(along_x, *shape))
    chord = level.astype(np.float64)
    height, sought = chord.copy(), np.flatnonzero(~on_border)
    for tried in (places, middle):
        saddle = polish(lattice.planes, lattice.table, tried[sought])[:, 2]
        # No edge is crossed far below the saddle it leads over.
        low, high = 0.5 * chord[sought], 2 * chord[sought] + 0.2 * reach[sought]
        near = (saddle >= low) & (saddle <= high)
        height[sought[near]] = saddle[near]
        sought = sought[~near]
    # The border is a line, lowest where two of its edges meet as likely as within one; an edge
    # inside ends at its nodes.
    place = places[np.arange(edge.size), along_x.astype(int)]
    first = start[np.arange(edge.size), along_x.astype(int)].astype(np.float64)
    low = np.where(on_border, place - 0.5, np.maximum(place - 0.25, first))
    high = np.where(on_border, place + 0.5, np.minimum(place + 0.25, first + 1.0))
    rest = np.concatenate([sought, np.flatnonzero(on_border)])
    height[rest] = lowest_on_lines(
        lattice.planes, lattice.table, across[rest], along_x[rest], low[rest], high[rest]
    )
    return height


def _edges_at(
    edge: NDArray[np.int64], shape: tuple[int, int]
) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    """Return the nodes (y, x) edges start from, and which of them go along x."""
    rows, columns = shape
    along_x = edge < (rows + 1) * columns
    other = edge - (rows + 1) * columns
    y = np.where(along_x, edge // columns, other // (columns + 1))
    x = np.where(along_x, edge % columns, other % (columns + 1))
    return np.stack([y, x], axis=1), along_x


def _places_on(
    lattice: Lattice, start: NDArray[np.int64], along_x: NDArray[np.bool_]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return where on each edge |E| is least, in nodes, and how far E goes along the edge."""
    planes = lattice.planes
    y, x = start[:, 0] + HALO, start[:, 1] + HALO
    first = planes[0, y, x] + 1j * planes[1, y, x]
    y, x = y + ~along_x, x + along_x
    step = planes[0, y, x] + 1j * planes[1, y, x] - first
    length = np.abs(step)
    t = np.clip(-(first.conj() * step).real / np.maximum(length, 1e-300) ** 2, 0.0, 1.0)
    return start + np.stack([t * ~along_x, t * along_x], axis=1), length


def _pairs_within(lattice: Lattice, zeros: NDArray[np.float64]) -> list[tuple[int, int, float]]:
    """Pair opposite zeros of one cell, nearest first; return each pair's saddle."""
    order = np.argsort(zeros[:, 8], kind="stable")
    ends = np.flatnonzero(np.diff(zeros[order, 8], append=np.inf)) + 1
    starts = np.concatenate([[0], ends[:-1]])
    pairs: list[tuple[int, int]] = []
    for run in np.flatnonzero(ends - starts > 1):
        free = order[starts[run] : ends[run]].tolist()
        while opposite := [
            (float(np.hypot(*(zeros[a, :2] - zeros[b, :2]))), a, b)
            for a, b in combinations(free, 2)
            if zeros[a, 6] * zeros[b, 6] < 0
        ]:
            _, a, b = min(opposite)
            free = [zero for zero in free if zero not in (a, b)]
            pairs.append((a, b))
    if not pairs:
        return []
    one, other = np.array(pairs).T
    middle = (zeros[one, :2] + zeros[other, :2]) / 2
    saddle = polish(lattice.planes, lattice.table, middle)[:, 2]
    plain = np.abs(values_at(lattice.planes, lattice.table, middle))
    height = np.where(np.isfinite(saddle), saddle, plain)
    return [(a, b, float(h)) for (a, b), h in zip(pairs, height, strict=True)]
