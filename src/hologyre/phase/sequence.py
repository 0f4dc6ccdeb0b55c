"""Unwrapping one frame after another without jumps in time."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from hologyre.phase.components import Component
from hologyre.phase.cuts import Cuts, trace_cuts
from hologyre.phase.edges import EdgesOrLines
from hologyre.phase.residues import TWO_PI, edge_turns
from hologyre.phase.unwrap import Problem, Unwrapped, pose, solve

_LEVELS = 255


def unwrap_sequence(
    frames: Iterable[NDArray[np.floating]],
    *,
    weights: Iterable[NDArray[np.floating]] | None = None,
    valid: NDArray[np.bool_] | None = None,
    barriers: EdgesOrLines | None = None,
    bridges: EdgesOrLines | None = None,
    stay: float = 0.0,
) -> Iterator[Unwrapped]:
    """Unwrap frames one after another, each continuing the one before.

    Parameters
    ----------
    frames : iterable of (y, x) float arrays
        Phases in radians, taken modulo 2 pi; a (t, y, x) array will do.
    weights : iterable of (y, x) float arrays, optional
        Trust in each pixel of each frame, 0 to 1.
    valid, barriers, bridges
        As for `hologyre.unwrap`, the same for all frames.
    stay : float
        Discount, 0 to 1, on cutting where the frame before was cut. At 0 every frame's cuts
        are the cheapest for that frame alone.

    Yields
    ------
    Unwrapped
        One for each frame; memory is held for two at a time.

    Raises
    ------
    TypeError, ValueError
        As `continue_unwrap`, or if there are not as many weights as frames.
    """
    before: Unwrapped | None = None
    pairs: Iterable[tuple[NDArray[np.floating], NDArray[np.floating] | None]]
    pairs = ((f, None) for f in frames) if weights is None else zip(frames, weights, strict=True)
    for phase, weight in pairs:
        before = continue_unwrap(
            phase,
            before,
            weight=weight,
            valid=valid,
            barriers=barriers,
            bridges=bridges,
            stay=stay,
        )
        yield before


def continue_unwrap(
    phase: NDArray[np.floating],
    before: Unwrapped | None,
    *,
    weight: NDArray[np.floating] | None = None,
    valid: NDArray[np.bool_] | None = None,
    barriers: EdgesOrLines | None = None,
    bridges: EdgesOrLines | None = None,
    stay: float = 0.0,
) -> Unwrapped:
    """Unwrap a phase so that it continues the frame before.

    Parameters
    ----------
    phase : (y, x) float array
        Phase in radians, taken modulo 2 pi.
    before : Unwrapped or None
        The frame before, None for the first one.
    weight, valid, barriers, bridges
        As for `hologyre.unwrap`.
    stay : float
        Discount, 0 to 1, on cutting where the frame before was cut.

    Returns
    -------
    Unwrapped
        Each component of valid pixels has the offset, in whole turns, that brings most of
        its weight within half a turn of the frame before; one that meets no valid pixel
        there follows the component it is tied to. `kept` tells which part that is. The cost
        is the plain one; with a discount the certificate proves the discounted optimum.

    Raises
    ------
    TypeError, ValueError, ShutInError
        As `hologyre.unwrap`, or if `stay` is outside [0, 1) or shapes differ.
    """
    if not 0.0 <= stay < 1.0:
        raise ValueError(f"stay: expected 0 <= stay < 1, got {stay}")
    problem = pose(phase, weight, valid, barriers, bridges, _LEVELS)
    if before is not None and before.phase.shape != problem.wrapped.shape:
        raise ValueError(
            f"before: expected the shape of phase, {problem.wrapped.shape}, "
            f"got {before.phase.shape}"
        )
    turn_y, turn_x = edge_turns(problem.wrapped)
    if before is None:
        return solve(problem.wrapped, turn_y, turn_x, problem)
    if stay == 0.0:
        result = solve(problem.wrapped, turn_y, turn_x, problem)
    else:
        if problem.levels == 1:
            problem = _finer(problem)
        result = solve(problem.wrapped, turn_y, turn_x, _discounted(problem, before.cuts, stay))
        cuts = trace_cuts(
            result.cuts.jump_y,
            result.cuts.jump_x,
            problem.cost_y,
            problem.cost_x,
            problem.levels,
            problem.mask,
        )
        result = replace(result, cuts=cuts, cost=float(cuts.cost.sum()))
    return _continued(result, before, problem.weight)


def _finer(problem: Problem) -> Problem:
    """Count the costs of 1 in finer levels, so that they can be discounted."""
    return problem._replace(
        cost_y=np.where(problem.cost_y > 0, np.int16(_LEVELS), problem.cost_y),
        cost_x=np.where(problem.cost_x > 0, np.int16(_LEVELS), problem.cost_x),
        levels=_LEVELS,
    )


def _discounted(problem: Problem, cuts: Cuts, stay: float) -> Problem:
    def cheaper(cost: NDArray[np.int16], jump: NDArray[np.int32]) -> NDArray[np.int16]:
        reduced = np.maximum(np.rint(cost * (1.0 - stay)), 1.0).astype(np.int16)
        return np.where((jump != 0) & (cost > 0), reduced, cost)

    return problem._replace(
        cost_y=cheaper(problem.cost_y, cuts.jump_y), cost_x=cheaper(problem.cost_x, cuts.jump_x)
    )


def _continued(
    result: Unwrapped, before: Unwrapped, weight: NDArray[np.floating] | None
) -> Unwrapped:
    """Give each component the offset that most of it had in the frame before."""
    both = (result.labels > 0) & (before.labels > 0)
    label = result.labels[both]
    trust = np.ones(len(label)) if weight is None else weight[both].astype(np.float64)
    away = np.rint((before.phase[both] - result.phase[both]) / TWO_PI).astype(np.int64)
    shifts: dict[int, int] = {0: 0}
    kept = 0.0
    for component in result.components:
        mine = label == component.label if len(result.components) > 1 else slice(None)
        votes, backing = away[mine], trust[mine]
        if backing.sum() == 0.0:
            continue
        lowest = votes.min()
        behind = np.bincount(votes - lowest, weights=backing)
        shifts[component.label] = int(behind.argmax() + lowest)
        kept += float(behind.max())
    by_label = {c.label: c for c in result.components}
    for component in result.components:
        trail = [component.label]
        while trail[-1] not in shifts:
            trail.append(by_label[trail[-1]].tied_to)
        for missing in trail[:-1]:
            shifts[missing] = shifts[trail[-1]]
    shift = np.array([shifts[k] for k in range(len(result.components) + 1)], np.int32)
    turns = shift[result.labels]
    components: tuple[Component, ...] = tuple(
        c._replace(turns=c.turns + shifts[c.label]) for c in result.components
    )
    return replace(
        result,
        phase=(result.phase + TWO_PI * turns).astype(result.phase.dtype),
        turns=result.turns + turns,
        components=components,
        kept=kept / float(trust.sum()) if trust.sum() > 0 else 0.0,
    )
