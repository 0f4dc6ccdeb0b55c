"""Unwrapping by cuts of least cost between residues."""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from hologyre.phase.certificate import Certificate
from hologyre.phase.components import (
    Component,
    gather_holes,
    integrate,
    integrate_valid,
    tie_components,
)
from hologyre.phase.costs import checked_weight, edge_costs
from hologyre.phase.cuts import Cuts, trace_cuts
from hologyre.phase.edges import EdgesOrLines, edges_along, edges_crossed, gathered
from hologyre.phase.flow import LARGEST_COST, cheapest_flow
from hologyre.phase.residues import (
    TWO_PI,
    checked_phase,
    edge_turns,
    near_pi_part,
    plaquette_charges,
)


class ShutInError(ValueError):
    """Bridges leave a residue no way to another or to the border.

    Attributes
    ----------
    y_px, x_px : float
        Where the residue is.
    charge : int
        Its charge.
    """

    def __init__(self, y_px: float, x_px: float, charge: int) -> None:
        self.y_px, self.x_px, self.charge = y_px, x_px, charge
        super().__init__(
            f"bridges: the residue {charge:+d} at (y={y_px:g}, x={x_px:g}) px is shut in; "
            "leave a gap through which a cut can reach it"
        )


@dataclass(frozen=True, eq=False)
class Unwrapped:
    """An unwrapped phase, its cuts and what is known about how far to trust it.

    Parameters
    ----------
    phase : (y, x) float array
        Congruent to the input modulo 2 pi, of its type; NaN where left out. The first
        valid pixel, in reading order, of the largest component keeps its wrapped value.
    turns : (y, x) int32 array
        Turns added to the wrapped phase; 0 where left out.
    cuts : Cuts
        Where the phase jumps by more than the wrapped difference.
    cost : float
        Sum over all edges of weight times turns jumped: the least possible.
    levels : int
        Weights were rounded to multiples of 1 / levels; the cost is exact for these.
    labels : (y, x) int32 array
        Number of the component each pixel belongs to, from 1; 0 where left out.
    components : tuple of Component
        Regions of valid pixels apart from each other, and how their offsets were tied.
    near_pi : float
        Fraction of the edges between valid pixels with a wrapped difference beyond 0.9 pi.
        Where it is not small the phase is sampled too coarsely, even without residues.
    certificate : Certificate
        Potentials that prove the cost to be the least.
    kept : float
        In a sequence, the weighted fraction of pixels less than half a turn from their
        value in the frame before; NaN otherwise.
    """

    phase: NDArray[np.floating]
    turns: NDArray[np.int32]
    cuts: Cuts
    cost: float
    levels: int
    labels: NDArray[np.int32]
    components: tuple[Component, ...]
    near_pi: float
    certificate: Certificate
    kept: float = float("nan")

    @property
    def cut_length_px(self) -> float:
        """Number of edges crossed by cuts, each counted once per turn."""
        return float(self.cuts.length_px.sum())

    def regions(self) -> NDArray[np.int32]:
        """Number the regions that no path free of cuts joins, from 1; 0 where left out.

        More regions than components means that cuts and barriers shut some off: the phase
        of one says nothing about that of another.
        """
        number = np.arange(self.labels.size).reshape(self.labels.shape)
        valid = self.labels > 0
        joined_y = (self.cuts.jump_y == 0) & (self.certificate.cost_y != 0)
        joined_x = (self.cuts.jump_x == 0) & (self.certificate.cost_x != 0)
        one = np.concatenate([number[:-1][joined_y], number[:, :-1][joined_x]])
        two = np.concatenate([number[1:][joined_y], number[:, 1:][joined_x]])
        graph = coo_array((np.ones(len(one), np.bool_), (one, two)), shape=(number.size,) * 2)
        _, region = connected_components(graph, directed=False)
        numbers = np.zeros(self.labels.shape, np.int32)
        numbers[valid] = 1 + np.unique(region.reshape(valid.shape)[valid], return_inverse=True)[1]
        return numbers


def unwrap(
    phase: NDArray[np.floating],
    *,
    weight: NDArray[np.floating] | None = None,
    valid: NDArray[np.bool_] | None = None,
    barriers: EdgesOrLines | None = None,
    bridges: EdgesOrLines | None = None,
    levels: int = 255,
) -> Unwrapped:
    """Unwrap a phase with the cheapest cuts that its residues allow.

    Parameters
    ----------
    phase : (y, x) float array
        Phase in radians, taken modulo 2 pi.
    weight : (y, x) float array, optional
        Trust in each pixel, 0 to 1, for instance its amplitude over the largest one. Cutting
        an edge costs the lesser weight of its two pixels. Left out: every edge costs 1.
    valid : (y, x) bool array, optional
        True for the pixels to use. Cuts run through the others at no cost.
    barriers : PixelEdges or sequence of (n, 2) float arrays, optional
        Edges that cost nothing, or lines (y_px, x_px) whose crossed edges cost nothing: a
        cut runs along them where that helps.
    bridges : PixelEdges or sequence of (n, 2) float arrays, optional
        Edges between valid pixels that are not cut, or lines that no cut may cross. They
        win over barriers.
    levels : int
        Weights are rounded to multiples of 1 / levels, those above 0 to one level at least.

    Returns
    -------
    Unwrapped

    Raises
    ------
    TypeError
        If an array is of the wrong kind.
    ValueError
        If shapes do not fit, a valid pixel is not finite, or a weight is outside [0, 1].
    ShutInError
        If bridges leave a residue no way out. It is a ValueError.

    Notes
    -----
    Minimises the sum over edges of weight times ``abs(k)``, k the turns added to the
    wrapped difference, subject to the corrected differences having no curl; solved exactly
    as a flow on the plaquettes, with the border as earth.

    References
    ----------
    M. Costantini, IEEE Trans. Geosci. Remote Sens. 36, 813 (1998).

    Examples
    --------
    >>> import numpy as np
    >>> ramp = np.add.outer(2.0 * np.arange(5), 3.0 * np.arange(5))
    >>> result = unwrap(np.angle(np.exp(1j * ramp)))
    >>> bool(np.allclose(result.phase, ramp)), result.cost
    (True, 0.0)
    """
    problem = pose(phase, weight, valid, barriers, bridges, levels)
    turn_y, turn_x = edge_turns(problem.wrapped)
    return solve(problem.wrapped, turn_y, turn_x, problem)


class Problem(NamedTuple):
    """A checked phase and the cost of cutting it; arrays as in `unwrap`."""

    wrapped: NDArray[np.floating]
    mask: NDArray[np.bool_] | None
    weight: NDArray[np.floating] | None
    cost_y: NDArray[np.int16]
    cost_x: NDArray[np.int16]
    levels: int


def pose(
    phase: NDArray[np.floating],
    weight: NDArray[np.floating] | None,
    valid: NDArray[np.bool_] | None,
    barriers: EdgesOrLines | None,
    bridges: EdgesOrLines | None,
    levels: int,
) -> Problem:
    """Check what `unwrap` is given and turn it into costs; raises as `unwrap` does."""
    wrapped, mask = checked_phase(phase, valid)
    shape = (wrapped.shape[0], wrapped.shape[1])
    weight = checked_weight(weight, shape, mask)
    if not 1 <= levels <= LARGEST_COST:
        raise ValueError(f"levels: expected 1 to {LARGEST_COST}, got {levels}")
    levels = levels if weight is not None else 1
    cost_y, cost_x = edge_costs(
        shape,
        weight,
        mask,
        gathered("barriers", barriers, shape, edges_crossed),
        gathered("bridges", bridges, shape, edges_along),
        levels,
    )
    return Problem(wrapped, mask, weight, cost_y, cost_x, levels)


def solve(
    start: NDArray[np.floating],
    turn_y: NDArray[np.integer],
    turn_x: NDArray[np.integer],
    problem: Problem,
) -> Unwrapped:
    """Add turns to `start` so that its differences come near the wanted ones.

    The wanted difference across an edge is that of `start` less 2 pi times its turns.
    """
    mask, cost_y, cost_x = problem.mask, problem.cost_y, problem.cost_x
    charge = plaquette_charges(turn_y, turn_x)
    if mask is None:
        flow = cheapest_flow(charge, cost_y, cost_x)
    else:
        gathered_charge, earth = gather_holes(charge, mask)
        flow = cheapest_flow(gathered_charge, cost_y, cost_x, earth)
    if flow.stuck != (-1, -1):
        j, i = flow.stuck
        raise ShutInError(j + 0.5, i + 0.5, int(charge[j, i]))
    jump_y, jump_x = flow.jump_y, flow.jump_x
    if mask is None:
        turns = integrate(turn_y, turn_x, jump_y, jump_x)
        labels = np.broadcast_to(np.int32(1), start.shape)
        components: tuple[Component, ...] = (Component(1, start.size, 0, 0, 0.0, 1.0),)
    else:
        jump_y[~(mask[1:] & mask[:-1])] = 0
        jump_x[~(mask[:, 1:] & mask[:, :-1])] = 0
        turns, labels, sizes = integrate_valid(turn_y, turn_x, jump_y, jump_x, mask)
        turns, components = tie_components(start, turns, labels, sizes, problem.weight)
    unwrapped = (start + TWO_PI * turns).astype(start.dtype)
    if mask is not None:
        unwrapped[~mask] = np.nan
    cuts = trace_cuts(jump_y, jump_x, cost_y, cost_x, problem.levels, mask)
    return Unwrapped(
        phase=unwrapped,
        turns=turns,
        cuts=cuts,
        cost=float(cuts.cost.sum()),
        levels=problem.levels,
        labels=labels,
        components=components,
        near_pi=near_pi_part(problem.wrapped, mask),
        certificate=Certificate(charge, cost_y, cost_x, flow.potential),
    )
