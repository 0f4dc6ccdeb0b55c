"""Pixels left out, and regions apart from each other."""

from __future__ import annotations

import numpy as np
import pytest
from skimage import data

from hologyre.phase.unwrap import unwrap


def surface(shape):
    y, x = np.indices(shape, dtype=float)
    return 0.02 * (x - 20) ** 2 + 0.3 * y


def test_left_out_pixels_are_nan_and_may_hold_anything(wrapped):
    phase = wrapped(surface((30, 50)))
    valid = np.ones(phase.shape, bool)
    valid[8:14, 20:30] = False
    whole = unwrap(phase).phase
    phase[~valid] = np.nan
    result = unwrap(phase, valid=valid)
    assert np.isnan(result.phase[~valid]).all()
    np.testing.assert_allclose(result.phase[valid], whole[valid], atol=1e-12)


def test_cuts_inside_a_region_left_out_cost_nothing(dipole):
    phase = dipole((40, 40), (20, 10), (20, 30))
    valid = np.ones(phase.shape, bool)
    valid[20, 13:29] = False
    # 20 edges in all, 16 of them at a pixel left out.
    assert unwrap(phase, valid=valid).cost == 4


def test_a_hole_with_a_charge_is_cut_to_the_border(wrapped):
    y, x = np.indices((41, 41)) - np.array([20.0, 12.0])[:, None, None]
    valid = np.hypot(y, x) > 4.2
    result = unwrap(wrapped(np.arctan2(y, x)), valid=valid)
    # 12 pixels to the left side, 4 of them left out.
    assert result.cost == 8
    table = result.cuts.table()
    assert list(table.start) == ["mask"]
    assert list(table.end) == ["border"]


@pytest.mark.parametrize("seed", range(20))
def test_masked_cost_is_the_optimum_of_linear_programming(seed, linear_programme):
    rng = np.random.default_rng(seed)
    shape = tuple(rng.integers(5, 18, 2))
    phase = rng.uniform(-np.pi, np.pi, shape)
    valid = rng.random(shape) > rng.uniform(0.05, 0.5)
    weight = rng.integers(1, 20, shape) * valid
    cost = (
        np.minimum(weight[1:], weight[:-1]),
        np.minimum(weight[:, 1:], weight[:, :-1]),
    )
    result = unwrap(phase, weight=weight / 19, levels=19, valid=valid)
    assert result.cost * 19 == pytest.approx(linear_programme(phase, *cost), abs=1e-6)


def test_regions_apart_are_tied_across_the_gap(wrapped):
    truth = surface((30, 60))
    valid = np.ones(truth.shape, bool)
    valid[:, 28:31] = False
    valid[12:15] = False
    result = unwrap(wrapped(truth), valid=valid)
    difference = (result.phase - truth)[valid]
    assert len(result.components) == 4
    np.testing.assert_allclose(difference, difference[0], atol=1e-12)


def test_components_tell_what_their_offset_rests_on(wrapped):
    valid = np.ones((20, 40), bool)
    valid[:, 25:29] = False
    valid[5:7, 30:35] = False
    result = unwrap(wrapped(surface((20, 40))), valid=valid)
    large, small = result.components
    assert (large.label, large.pixels, large.tied_to, large.turns) == (1, 20 * 25, 0, 0)
    assert (small.label, small.pixels, small.tied_to) == (2, 20 * 11 - 10, 1)
    assert small.gap_px == 5.0
    assert small.agreement == 1.0
    np.testing.assert_array_equal(np.unique(result.labels[valid]), [1, 2])
    assert not result.labels[~valid].any()


def test_disagreement_across_a_gap_is_reported(wrapped):
    # A shear along the gap: no single offset fits all of it.
    truth = surface((40, 40))
    truth[:, 22:] += np.linspace(0, 4 * np.pi, 40)[:, None]
    valid = np.ones(truth.shape, bool)
    valid[:, 19:22] = False
    result = unwrap(wrapped(truth), valid=valid)
    assert result.components[1].agreement < 0.8


def test_the_first_pixel_of_the_largest_component_keeps_its_value(wrapped):
    phase = wrapped(surface((20, 50)))
    valid = np.ones(phase.shape, bool)
    valid[:, 12:15] = False
    result = unwrap(phase, valid=valid)
    assert result.phase[0, 15] == phase[0, 15]


def test_weights_rule_the_vote_across_a_gap(wrapped):
    truth = surface((40, 40))
    # Offsets grow along the gap from 0 to 1.3 turns; the first 15 rows are nearer to 0.
    truth[:, 22:] += np.linspace(0, 2.6 * np.pi, 40)[:, None]
    valid = np.ones(truth.shape, bool)
    valid[:, 19:22] = False
    weight = np.ones(truth.shape)
    equal = unwrap(wrapped(truth), valid=valid, weight=weight)
    weight[15:] = 0.01
    upper = unwrap(wrapped(truth), valid=valid, weight=weight)
    assert equal.components[1].turns - upper.components[1].turns == -1


def test_a_whole_mask_changes_nothing(speckle):
    phase = np.angle(speckle((40, 40), 10.0, seed=8))
    np.testing.assert_array_equal(
        unwrap(phase, valid=np.ones(phase.shape, bool)).phase, unwrap(phase).phase
    )


def test_regions_shut_off_by_cuts_are_told_from_components():
    phase = np.zeros((20, 20))
    ring = np.array([(4.5, 4.5), (4.5, 12.5), (12.5, 12.5), (12.5, 4.5), (4.5, 4.5)])
    shut = unwrap(phase, barriers=[ring])
    assert len(shut.components) == 1
    regions = shut.regions()
    assert set(np.unique(regions)) == {1, 2}
    assert (regions == 2).sum() == 8 * 8
    assert (unwrap(phase).regions() == 1).all()


# Disparities of a real scene, in a general package: edges of objects and holes behind them.
def test_a_scene_with_occlusions_and_holes_is_cut_at_less_than_the_truth(wrapped):
    truth = data.stereo_motorcycle()[2].astype(float)
    valid = np.isfinite(truth)
    filled = np.where(valid, truth, 0.0)
    phase = wrapped(filled)
    result = unwrap(phase, valid=valid)
    assert result.certificate.proves(result.cuts.jump_y, result.cuts.jump_x)
    turns = (result.phase - phase)[valid] / (2 * np.pi)
    np.testing.assert_allclose(turns, np.rint(turns), atol=1e-12)
    true_jumps = 0.0
    for axis, both in ((0, valid[1:] & valid[:-1]), (1, valid[:, 1:] & valid[:, :-1])):
        step = np.diff(filled, axis=axis)
        true_jumps += np.abs(np.rint((step - wrapped(step)) / (2 * np.pi)))[both].sum()
    assert 0 < result.cost < true_jumps
