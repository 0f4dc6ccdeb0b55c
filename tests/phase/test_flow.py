"""The optimum of the cuts, against solvers of other makes."""

from __future__ import annotations

import numpy as np
import pytest
from ortools.graph.python import min_cost_flow
from scipy.optimize import linear_sum_assignment

from hologyre.phase.residues import residues
from hologyre.phase.unwrap import unwrap


def general_solver(charge, cost_y, cost_x):
    """Least cost of the flow by the cost-scaling solver of OR-tools."""
    ny, nx = charge.shape
    node = np.zeros((ny + 2, nx + 2), int)
    node[1:-1, 1:-1] = 1 + np.arange(charge.size).reshape(charge.shape)
    a = np.concatenate([node[1:-1, :-1].ravel(), node[:-1, 1:-1].ravel()])
    b = np.concatenate([node[1:-1, 1:].ravel(), node[1:, 1:-1].ravel()])
    cost = np.concatenate([cost_y.ravel(), cost_x.ravel()])
    tails, heads = np.concatenate([a, b]), np.concatenate([b, a])
    solver = min_cost_flow.SimpleMinCostFlow()
    solver.add_arcs_with_capacity_and_unit_cost(
        tails, heads, np.full(len(tails), 10_000), np.tile(cost, 2)
    )
    supply = np.concatenate([[-charge.sum(dtype=int)], charge.ravel()])
    solver.set_nodes_supplies(np.arange(len(supply)), supply)
    assert solver.solve() == solver.OPTIMAL
    return solver.optimal_cost()


def costs_between(weight):
    return np.minimum(weight[1:], weight[:-1]), np.minimum(weight[:, 1:], weight[:, :-1])


@pytest.mark.parametrize("seed", range(60))
def test_cost_equals_linear_programming_on_random_phases(seed, linear_programme):
    rng = np.random.default_rng(seed)
    shape = rng.integers(2, 17, 2)
    phase = rng.uniform(-np.pi, np.pi, shape)
    weight = rng.integers(0, 20, shape)
    cost_y, cost_x = costs_between(weight)
    uniform = unwrap(phase).cost
    weighted = unwrap(phase, weight=weight / 19, levels=19).cost * 19
    assert uniform == pytest.approx(
        linear_programme(phase, np.ones_like(cost_y), np.ones_like(cost_x)), abs=1e-6
    )
    assert weighted == pytest.approx(linear_programme(phase, cost_y, cost_x), abs=1e-6)


@pytest.mark.parametrize("seed", range(200))
def test_cost_equals_a_general_flow_solver_on_random_phases(seed):
    rng = np.random.default_rng(1000 + seed)
    shape = rng.integers(2, 40, 2)
    noise = rng.uniform(0.5, np.pi)
    phase = np.add.outer(*(rng.normal(0, 1) * np.arange(n) for n in shape))
    phase += rng.uniform(-noise, noise, shape)
    weight = rng.integers(0, 256, shape)
    cost_y, cost_x = costs_between(weight)
    charge = residues(phase)
    assert unwrap(phase, weight=weight / 255).cost * 255 == pytest.approx(
        general_solver(charge, cost_y, cost_x), abs=1e-6
    )
    assert unwrap(phase).cost == general_solver(charge, np.ones_like(cost_y), np.ones_like(cost_x))


@pytest.mark.parametrize("shortest_px", [8.0, 24.0])
def test_cost_equals_a_general_flow_solver_on_speckle(speckle, shortest_px):
    field = speckle((150, 170), shortest_px, seed=3)
    result = unwrap(np.angle(field), weight=np.abs(field))
    level = np.maximum(np.rint(np.abs(field) * 255), 1).astype(int)
    assert result.cost * 255 == pytest.approx(
        general_solver(residues(np.angle(field)), *costs_between(level)), abs=1e-6
    )


@pytest.mark.parametrize("seed", range(10))
def test_uniform_cost_equals_the_best_pairing_of_residues(seed):
    rng = np.random.default_rng(seed)
    phase = rng.uniform(-np.pi, np.pi, (14, 17))
    charge = residues(phase)
    plus, minus = np.argwhere(charge > 0), np.argwhere(charge < 0)
    border = [np.minimum(p + 1, np.array(charge.shape) - p).min(axis=1) for p in (plus, minus)]
    # Each residue may also pair with a place of its own on the border.
    far = 10_000
    size = len(plus) + len(minus)
    cost = np.full((size, size), far)
    cost[: len(plus), : len(minus)] = np.abs(plus[:, None] - minus[None]).sum(axis=2)
    np.fill_diagonal(cost[: len(plus), len(minus) :], border[0])
    np.fill_diagonal(cost[len(plus) :, : len(minus)], border[1])
    cost[len(plus) :, len(minus) :] = 0
    assert unwrap(phase).cost == cost[linear_sum_assignment(cost)].sum()


# Rule: the lesser of the Manhattan distance and the two ways to the border.
@pytest.mark.parametrize(
    ("positive", "negative", "cost"),
    [
        ((20, 14), (20, 24), 10),
        ((18, 16), (22, 23), 11),
        ((20, 3), (20, 36), 7),
        ((2, 20), (20, 37), 5),
    ],
)
def test_cut_of_a_dipole_has_the_length_of_the_shorter_way(dipole, positive, negative, cost):
    result = unwrap(dipole((40, 40), positive, negative))
    assert result.cost == result.cut_length_px == cost


def test_multiplying_all_costs_does_not_change_the_cuts(rng):
    phase, weight = rng.uniform(-np.pi, np.pi, (30, 30)), rng.integers(1, 64, (30, 30))
    once = unwrap(phase, weight=weight / 255)
    four = unwrap(phase, weight=weight * 4 / 255)
    assert four.cost == pytest.approx(4 * once.cost, rel=1e-12)


def test_the_same_input_gives_the_same_bits(rng):
    phase, weight = rng.uniform(-np.pi, np.pi, (60, 60)), rng.uniform(0, 1, (60, 60))
    one, two = (unwrap(phase, weight=weight) for _ in range(2))
    np.testing.assert_array_equal(one.phase, two.phase)
