"""Proof of the optimum, checked here by formulas of our own."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from hologyre.phase.unwrap import unwrap


def proved(phase, result, weight, valid, wrapped):
    """Prove optimality from the phase, the result and the potentials alone."""
    ny, nx = phase.shape
    level = np.ones((ny, nx), int) if weight is None else np.maximum(np.rint(weight * 255), 1)
    level = np.where(valid, level, 0).astype(int)
    potential = np.zeros((ny + 1, nx + 1), int)
    potential[1:-1, 1:-1] = result.certificate.potential
    cost_y, cost_x = (
        np.minimum(level[1:], level[:-1]),
        np.minimum(level[:, 1:], level[:, :-1]),
    )
    # Dual feasible: reduced costs of both directions of every arc are not negative.
    drop_y = potential[1:-1, :-1] - potential[1:-1, 1:]
    drop_x = potential[:-1, 1:-1] - potential[1:, 1:-1]
    reduced = np.concatenate(
        [np.ravel(r) for r in (cost_y - drop_y, cost_y + drop_y, cost_x - drop_x, cost_x + drop_x)]
    )
    # Primal: turns read off the phases alone.
    filled = np.where(valid, result.phase, 0)
    start = np.where(valid, phase, 0)
    jump_y, jump_x = (
        np.rint((np.diff(filled, axis=a) - wrapped(np.diff(start, axis=a))) / (2 * np.pi))
        for a in (0, 1)
    )
    # Complementary slackness: potential drops by the cost along the flow. A flow to the
    # right crosses a y edge with a negative jump, a flow down an x edge with a positive one.
    slack = np.concatenate(
        [
            (np.abs(jump_y) * (cost_y + np.sign(jump_y) * drop_y)).ravel(),
            (np.abs(jump_x) * (cost_x - np.sign(jump_x) * drop_x)).ravel(),
        ]
    )
    cost = (np.abs(jump_y) * cost_y).sum() + (np.abs(jump_x) * cost_x).sum()
    levels = 1 if weight is None else 255
    return (
        reduced.min() >= 0
        and not slack.any()
        and cost == result.certificate.bound == round(result.cost * levels)
    )


@pytest.mark.parametrize("weighted", ["uniform", "weighted"])
@pytest.mark.parametrize("masked", ["whole", "masked"])
@pytest.mark.parametrize("seed", range(8))
def test_potentials_prove_the_optimum(weighted, masked, seed, wrapped):
    rng = np.random.default_rng(seed)
    phase = rng.uniform(-np.pi, np.pi, (50, 40))
    weight = rng.uniform(0, 1, phase.shape) if weighted == "weighted" else None
    valid = rng.random(phase.shape) > (0.2 if masked == "masked" else -1.0)
    result = unwrap(phase, weight=weight, valid=valid)
    assert proved(phase, result, weight, valid, wrapped)
    assert result.certificate.proves(result.cuts.jump_y, result.cuts.jump_x)


def test_speckle_optimum_is_proved(speckle, wrapped):
    field = speckle((300, 300), 12.0, seed=5)
    phase, weight = np.angle(field), np.abs(field)
    result = unwrap(phase, weight=weight)
    assert proved(phase, result, weight, np.ones(phase.shape, bool), wrapped)


def test_a_detour_is_not_certified(dipole):
    result = unwrap(dipole((20, 20), (10, 6), (10, 12)))
    jump_y = result.cuts.jump_y.copy()
    jump_y[2, 3] += 1
    assert not result.certificate.proves(jump_y, result.cuts.jump_x)


def test_wrong_potentials_are_not_feasible(dipole):
    certificate = unwrap(dipole((20, 20), (10, 6), (10, 12))).certificate
    assert certificate.is_feasible()
    assert not replace(certificate, potential=certificate.potential * 2 + 5).is_feasible()
