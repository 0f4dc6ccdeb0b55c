"""Edges a drawn line meets, barriers and bridges."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from hologyre.phase.edges import PixelEdges, edges_along, edges_crossed
from hologyre.phase.unwrap import ShutInError, unwrap


def sampled_cells(line, offset):
    """Unit cells met by points packed densely along a line."""
    points = np.concatenate(
        [a + (b - a) * np.linspace(0, 1, 4001)[:, None] for a, b in pairwise(line)]
    )
    cells = np.floor(points + offset).astype(int)
    return set(map(tuple, cells))


def test_a_line_between_columns_crosses_the_edges_between_them():
    edges = edges_crossed([(0.5, 3.5), (4.5, 3.5)], (8, 8))
    assert not edges.y.any()
    assert set(map(tuple, np.argwhere(edges.x))) == {(j, 3) for j in range(1, 5)}


def test_a_line_between_rows_crosses_the_edges_between_them():
    edges = edges_crossed([(2.5, 5.5), (2.5, 1.5)], (8, 8))
    assert not edges.x.any()
    assert set(map(tuple, np.argwhere(edges.y))) == {(2, i) for i in range(2, 6)}


def test_a_line_along_a_row_runs_along_its_edges():
    edges = edges_along([(2.0, 1.0), (2.0, 4.0)], (8, 8))
    assert not edges.y.any()
    assert set(map(tuple, np.argwhere(edges.x))) == {(2, 1), (2, 2), (2, 3)}


@pytest.mark.parametrize("seed", range(5))
def test_crossed_edges_lie_between_plaquettes_the_line_meets(seed):
    rng = np.random.default_rng(seed)
    line = rng.uniform(1, 18, (4, 2))
    met = sampled_cells(line, 0.0)
    edges = edges_crossed(line, (20, 20))
    for j, i in np.argwhere(edges.x):  # between plaquettes (j - 1, i) and (j, i)
        assert {(j - 1, i), (j, i)} <= met
    for j, i in np.argwhere(edges.y):
        assert {(j, i - 1), (j, i)} <= met


@pytest.mark.parametrize("seed", range(5))
def test_edges_along_a_line_join_its_ends_without_a_gap(seed):
    rng = np.random.default_rng(seed)
    line = rng.uniform(0, 19, (4, 2))
    edges = edges_along(line, (20, 20))
    joined = {tuple(np.rint(line[0]).astype(int))}
    steps = [((j, i), (j + 1, i)) for j, i in np.argwhere(edges.y)]
    steps += [((j, i), (j, i + 1)) for j, i in np.argwhere(edges.x)]
    for _ in steps:
        for a, b in steps:
            if a in joined or b in joined:
                joined |= {a, b}
    assert tuple(np.rint(line[-1]).astype(int)) in joined


def test_a_line_may_leave_the_frame():
    edges = edges_crossed([(-5.0, 3.5), (20.0, 3.5)], (8, 8))
    assert edges.x[:, 3].all()
    assert not edges.y.any()


@pytest.mark.parametrize(
    ("line", "message"),
    [
        ([(1.0, 2.0)], r"line: expected at least 2 vertices .* got \(1, 2\)"),
        ([(1.0, 2.0, 3.0)] * 2, "line: expected at least 2 vertices"),
        ([(1.0, np.nan), (2.0, 2.0)], "line: expected finite vertices"),
    ],
)
def test_what_is_no_line_is_refused(line, message):
    with pytest.raises(ValueError, match=message):
        edges_crossed(line, (8, 8))


def test_edges_of_another_frame_are_refused():
    with pytest.raises(ValueError, match=r"barriers: expected edges of a frame of \(6, 6\)"):
        unwrap(np.zeros((6, 6)), barriers=PixelEdges.none((6, 7)))


def test_sets_of_the_wrong_kind_or_shape_are_refused():
    with pytest.raises(TypeError, match="y: expected a 2-D bool array"):
        PixelEdges(np.zeros((3, 4)), np.zeros((4, 3), bool))
    with pytest.raises(ValueError, match=r"y: expected shape \(3, 4\)"):
        PixelEdges(np.zeros((4, 4), bool), np.zeros((4, 3), bool))


def test_a_cut_follows_a_barrier_at_no_cost(dipole):
    phase = dipole((40, 40), (20, 10), (20, 30))
    arch = np.array([(20.5, 10.5), (5.5, 10.5), (5.5, 30.5), (20.5, 30.5)])
    result = unwrap(phase, barriers=[arch])
    assert result.cost == 0
    assert result.cut_length_px == 15 + 20 + 15
    assert unwrap(phase).cost == 20


def test_a_cut_goes_around_a_bridge(dipole):
    phase = dipole((40, 60), (20, 25), (20, 35))
    fence = np.array([(13.0, 30.0), (27.0, 30.0)])
    result = unwrap(phase, bridges=[fence])
    # Down past the nearer end of the fence and back: 10 along, 2 x 7 across.
    assert result.cost == 10 + 2 * 7
    assert not (result.cuts.jump_y[13:27, 30]).any()


@pytest.mark.parametrize("seed", range(30))
def test_barriers_and_bridges_give_the_optimum_of_linear_programming(seed, linear_programme):
    rng = np.random.default_rng(seed)
    shape = tuple(rng.integers(6, 16, 2))
    phase = rng.uniform(-np.pi, np.pi, shape)
    # A straight bridge cannot shut in a residue.
    barrier, bridge = (rng.uniform(0, min(shape), (n, 2)) for n in (3, 2))
    cost_y, cost_x = np.ones((shape[0] - 1, shape[1])), np.ones((shape[0], shape[1] - 1))
    free, kept = edges_crossed(barrier, shape), edges_along(bridge, shape)
    cost_y[free.y] = cost_x[free.x] = 0
    cost_y[kept.y] = np.inf
    cost_x[kept.x] = np.inf
    result = unwrap(phase, barriers=[barrier], bridges=[bridge])
    assert result.cost == pytest.approx(linear_programme(phase, cost_y, cost_x), abs=1e-6)
    assert result.certificate.proves(result.cuts.jump_y, result.cuts.jump_x)


def test_a_residue_shut_in_by_bridges_is_named(dipole):
    phase = dipole((30, 40), (15, 10), (15, 30))
    ring = np.array([(10, 5), (10, 15), (20, 15), (20, 5), (10, 5)], float)
    with pytest.raises(ShutInError, match=r"residue \+1 at \(y=15.5, x=10.5\) px is shut in") as e:
        unwrap(phase, bridges=[ring])
    assert (e.value.y_px, e.value.x_px, e.value.charge) == (15.5, 10.5, 1)


def test_a_pair_shut_in_together_is_cut_inside(dipole):
    phase = dipole((30, 40), (15, 18), (15, 22))
    ring = np.array([(10, 12), (10, 28), (20, 28), (20, 12), (10, 12)], float)
    assert unwrap(phase, bridges=[ring]).cost == 4


def test_a_bridge_wins_over_a_barrier(dipole):
    phase = dipole((30, 40), (15, 18), (15, 22))
    here = np.array([(15.5, 18.5), (15.5, 22.5)])
    both = edges_crossed(here, phase.shape)
    result = unwrap(phase, barriers=both, bridges=both)
    assert result.cost > 4
