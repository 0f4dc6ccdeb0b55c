"""Unwrapping: congruence, known surfaces, weights and what is refused."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.ndimage import gaussian_filter
from skimage import data

from hologyre.phase.residues import residues
from hologyre.phase.unwrap import unwrap


def terrain(name):
    """Turn a general test image into a surface of 40 rad."""
    image = gaussian_filter(getattr(data, name)().astype(float), 4)
    return 40.0 * (image - image.min()) / np.ptp(image)


def test_a_smooth_terrain_comes_back_exactly(wrapped):
    surface = terrain("moon")
    result = unwrap(wrapped(surface))
    difference = result.phase - surface
    assert not residues(wrapped(surface)).any()
    # Sums of rounded multiples of 2 pi at 40 rad.
    np.testing.assert_allclose(difference, difference[0, 0], atol=1e-13)


# Counts of this very recipe (40 rad, Gaussian of 4 px), exact.
@pytest.mark.parametrize(("name", "count"), [("camera", 14), ("coins", 44), ("brick", 880)])
def test_a_terrain_too_steep_is_cut_at_the_least_cost(name, count, wrapped):
    phase = wrapped(terrain(name))
    result = unwrap(phase)
    assert np.count_nonzero(residues(phase)) == count
    assert result.certificate.proves(result.cuts.jump_y, result.cuts.jump_x)


# Itoh, Appl. Opt. 21, 2470 (1982): exact below a step of pi, slope less 2 pi beyond.
@pytest.mark.parametrize(
    ("slope", "found"), [(3.0, 3.0), (3.14, 3.14), (3.15, 3.15 - 2 * np.pi), (3.3, 3.3 - 2 * np.pi)]
)
def test_a_ramp_is_exact_up_to_the_itoh_limit_and_not_beyond(slope, found, wrapped):
    ramp = slope * np.arange(200) + np.zeros((5, 1))
    steps = np.diff(unwrap(wrapped(ramp)).phase, axis=1)
    np.testing.assert_allclose(steps, found, atol=1e-10)


# Greatest steps 2 c * 127, below and above pi: 3.12 and 3.30 rad.
def test_no_residues_do_not_prove_a_right_answer_and_near_pi_tells(wrapped):
    y, x = np.indices((256, 256)) - 127.5
    figures = {}
    for c in (0.0123, 0.0130):
        surface = c * (y**2 + x**2)
        result = unwrap(wrapped(surface))
        error = np.ptp(result.phase - surface)
        figures[c] = (np.count_nonzero(residues(wrapped(surface))), error, result.near_pi)
    assert figures[0.0123][0] == figures[0.0130][0] == 0
    assert figures[0.0123][1] < 1e-10
    assert figures[0.0130][1] > 50.0
    assert figures[0.0130][2] > 0.05


def test_cuts_of_a_noisy_ramp_cost_no_more_than_the_truth(rng, wrapped):
    for slope in np.linspace(0.0, np.pi, 7):
        noisy = slope * np.arange(60) + rng.normal(0, 0.6, (50, 60))
        result = unwrap(wrapped(noisy))
        assert result.certificate.proves(result.cuts.jump_y, result.cuts.jump_x)
        flipped = [
            np.abs(np.rint((step - wrapped(step)) / (2 * np.pi))).sum()
            for step in (np.diff(noisy, axis=0), np.diff(noisy, axis=1))
        ]
        assert result.cost <= sum(flipped)


@pytest.mark.parametrize("charge", [1, 2, -3])
def test_a_spiral_is_cut_once_per_turn_from_its_core_to_the_border(charge, wrapped):
    # Core off the lattice's symmetry lines; a charge of m is m residues close together.
    y, x = np.indices((41, 61)) - np.array([20.4, 30.3])[:, None, None]
    result = unwrap(wrapped(charge * np.arctan2(y, x)))
    table = result.cuts.table()
    to_border = table[(table.start == "border") != (table.end == "border")]
    assert len(to_border) == abs(charge)
    assert set(to_border.start) == ({"residue"} if charge > 0 else {"border"})


def test_a_shear_is_cut_along_the_fault(wrapped):
    y, x = np.indices((60, 80), dtype=float)
    fault = np.where(y > 30, 8.0 * np.exp(-(((x - 40) / 15) ** 2)), 0.0)
    result = unwrap(wrapped(fault))
    crossed_y, crossed_x = (np.argwhere(e) for e in (result.cuts.jump_y, result.cuts.jump_x))
    assert len(crossed_y) > 0
    assert set(crossed_y[:, 0]) == {30}
    assert len(crossed_x) == 0


@pytest.mark.parametrize("dtype", [np.float32, np.float64])
def test_result_is_congruent_and_of_the_same_type(dtype, speckle):
    phase = np.angle(speckle((90, 110), 10.0, seed=1)).astype(dtype)
    result = unwrap(phase)
    turns = (result.phase.astype(float) - phase) / (2 * np.pi)
    assert result.phase.dtype == dtype
    # float32 rounds at about 100 rad to 4e-6 rad.
    np.testing.assert_allclose(turns, np.rint(turns), atol=1e-9 if dtype == np.float64 else 4e-6)
    np.testing.assert_array_equal(np.rint(turns), result.turns)


def test_the_first_pixel_keeps_its_value(speckle):
    phase = np.angle(speckle((30, 30), 10.0, seed=2))
    assert unwrap(phase).phase[0, 0] == phase[0, 0]


def test_jumps_are_where_the_phase_differs_from_its_wrapped_differences(speckle, wrapped):
    phase = np.angle(speckle((70, 60), 9.0, seed=4))
    result = unwrap(phase)
    for axis, jump in ((0, result.cuts.jump_y), (1, result.cuts.jump_x)):
        excess = np.diff(result.phase, axis=axis) - wrapped(np.diff(phase, axis=axis))
        np.testing.assert_array_equal(np.rint(excess / (2 * np.pi)), jump)


def test_a_global_offset_changes_nothing_but_the_offset(speckle, wrapped):
    phase = np.angle(speckle((60, 60), 15.0, seed=6))
    one, two = unwrap(phase), unwrap(wrapped(phase + 1.0))
    assert one.cost == two.cost
    assert residues(phase).sum() == residues(wrapped(phase + 1.0)).sum()


def test_cuts_take_the_way_through_low_weights(dipole):
    weight = np.ones((30, 30))
    weight[20] = 0.01
    phase = dipole((30, 30), (15, 8), (15, 22))
    level = unwrap(phase, weight=weight)
    assert np.abs(level.cuts.jump_y[19:21]).sum() + np.abs(level.cuts.jump_x[20]).sum() > 10
    assert level.cost < unwrap(phase).cost


def test_weights_are_rounded_to_levels_but_never_to_free(dipole):
    phase = dipole((30, 30), (15, 13), (15, 17))
    assert unwrap(phase, weight=np.full((30, 30), 0.3), levels=10).cost == pytest.approx(1.2)
    assert unwrap(phase, weight=np.full((30, 30), 1e-9), levels=10).cost == pytest.approx(0.4)
    assert unwrap(phase, weight=np.zeros((30, 30)), levels=10).cost == 0


def test_input_is_left_as_it_was(rng):
    phase, weight = rng.uniform(-9, 9, (20, 20)), rng.random((20, 20))
    valid = rng.random((20, 20)) > 0.1
    before = phase.copy(), weight.copy(), valid.copy()
    unwrap(phase, weight=weight, valid=valid)
    for given, kept in zip((phase, weight, valid), before, strict=True):
        np.testing.assert_array_equal(given, kept)


@pytest.mark.parametrize(
    ("options", "error", "message"),
    [
        ({"weight": np.ones((4, 4))}, ValueError, r"weight: expected the shape of phase, \(5, 5\)"),
        ({"weight": np.full((5, 5), 1.5)}, ValueError, r"weight: expected values from 0 to 1"),
        ({"weight": np.full((5, 5), np.nan)}, ValueError, r"weight: expected values from 0 to 1"),
        ({"weight": np.ones((5, 5), complex)}, TypeError, "weight: expected a real array"),
        ({"valid": np.ones((5, 5))}, TypeError, "valid: expected a bool array"),
        ({"valid": np.zeros((5, 5), bool)}, ValueError, "valid: expected at least one pixel"),
        ({"valid": np.ones((5, 4), bool)}, ValueError, "valid: expected the shape of phase"),
        ({"levels": 0}, ValueError, "levels: expected 1 to 4095, got 0"),
    ],
)
def test_unusable_options_are_refused_with_their_reason(options, error, message):
    with pytest.raises(error, match=message):
        unwrap(np.zeros((5, 5)), **options)


def test_not_a_number_where_valid_is_refused_with_its_place():
    phase = np.zeros((6, 7))
    phase[3, 4] = np.nan
    with pytest.raises(ValueError, match=r"got nan at pixel \(y=3, x=4\); leave such pixels out"):
        unwrap(phase)
