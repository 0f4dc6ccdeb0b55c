"""Cuts as lines."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from hologyre.phase.edges import edges_crossed
from hologyre.phase.residues import residues
from hologyre.phase.unwrap import unwrap


@pytest.fixture
def noisy(rng):
    phase = rng.uniform(-np.pi, np.pi, (40, 50))
    return phase, unwrap(phase, weight=rng.uniform(0.05, 1, phase.shape))


def test_the_cut_of_a_dipole_joins_its_residues(dipole):
    table = unwrap(dipole((30, 30), (12, 8), (14, 15))).cuts.table()
    assert len(table) == 1
    row = table.iloc[0]
    assert (row.start, row.start_y_px, row.start_x_px) == ("residue", 12.5, 8.5)
    assert (row.end, row.end_y_px, row.end_x_px) == ("residue", 14.5, 15.5)
    assert row.length_px == row.cost == 2 + 7


def test_every_residue_is_the_end_of_one_cut(noisy):
    phase, result = noisy
    table = result.cuts.table()
    charge = residues(phase)
    for sign, side in ((1, "start"), (-1, "end")):
        rows = table[table[side] == "residue"]
        found = rows[[f"{side}_y_px", f"{side}_x_px"]].to_numpy()
        expected = np.argwhere(charge == sign) + 0.5
        np.testing.assert_array_equal(found[np.lexsort(found.T[::-1])], expected)


def test_lines_cross_exactly_the_edges_that_jump(noisy):
    phase, result = noisy
    count_y, count_x = (np.zeros_like(j) for j in (result.cuts.jump_y, result.cuts.jump_x))
    for line in result.cuts.polylines:
        for piece in pairwise(line):
            crossed = edges_crossed(piece, phase.shape)
            count_y += crossed.y
            count_x += crossed.x
    np.testing.assert_array_equal(count_y, np.abs(result.cuts.jump_y))
    np.testing.assert_array_equal(count_x, np.abs(result.cuts.jump_x))


def test_costs_and_lengths_of_the_cuts_add_up(noisy):
    _, result = noisy
    jumps = np.abs(result.cuts.jump_y).sum() + np.abs(result.cuts.jump_x).sum()
    assert result.cut_length_px == jumps
    assert result.cuts.cost.sum() == pytest.approx(result.cost)


def test_ends_on_the_border_lie_half_a_pixel_outside(noisy):
    phase, result = noisy
    table = result.cuts.table()
    ends = table.loc[table.end == "border", ["end_y_px", "end_x_px"]].to_numpy()
    ny, nx = phase.shape
    assert len(ends) > 0
    outside = (np.isin(ends[:, 0], (-0.5, ny - 0.5))) | (np.isin(ends[:, 1], (-0.5, nx - 0.5)))
    assert outside.all()


def test_a_phase_without_residues_has_no_cuts():
    cuts = unwrap(np.zeros((6, 6))).cuts
    assert len(cuts) == len(cuts.polylines) == len(cuts.table()) == 0
    assert cuts.length_px.sum() == 0


def test_the_jump_map_marks_the_pixels_beside_a_cut(dipole):
    jumps = unwrap(dipole((20, 20), (10, 6), (10, 9))).cuts.jump_map()
    expected = np.zeros((20, 20))
    expected[10:12, 7:10] = 1
    np.testing.assert_array_equal(jumps, expected)


def test_a_cut_through_a_region_left_out_ends_and_starts_there(wrapped):
    y, x = np.indices((30, 30)) - np.array([14.5, 9.5])[:, None, None]
    valid = np.ones((30, 30), bool)
    valid[10:20, 1:6] = False
    table = unwrap(wrapped(np.arctan2(y, x)), valid=valid).cuts.table()
    assert set(zip(table.start, table.end, table.length_px, strict=True)) == {
        ("residue", "mask", 4.0),
        ("mask", "border", 1.0),
    }
