"""Residues and the winding along a border."""

from __future__ import annotations

import numpy as np
import pytest

from hologyre.phase.residues import border_winding, residues, wrap

# Goldstein, Zebker, Werner, Radio Science 23, 713 (1988), in cycles; values from memory.
GOLDSTEIN_CYCLES = np.array(
    [
        [0.0, 0.1, 0.2, 0.3],
        [0.0, 0.0, 0.3, 0.4],
        [0.9, 0.8, 0.6, 0.5],
        [0.8, 0.8, 0.7, 0.6],
    ]
)


def plain_residues(phase, wrapped):
    """Sum wrapped differences around each plaquette: right, down, left, up."""
    along_y, along_x = wrapped(np.diff(phase, axis=0)), wrapped(np.diff(phase, axis=1))
    turning = along_x[:-1] + along_y[:, 1:] - along_x[1:] - along_y[:, :-1]
    return np.rint(turning / (2 * np.pi)).astype(int)


def test_published_4x4_example_has_one_positive_residue_in_its_centre():
    charge = residues(2 * np.pi * GOLDSTEIN_CYCLES)
    expected = np.zeros((3, 3))
    expected[1, 1] = 1
    np.testing.assert_array_equal(charge, expected)


@pytest.mark.parametrize("charge", [1, -1])
def test_a_vortex_turning_from_x_to_y_is_positive(charge):
    y, x = np.mgrid[-3.5:4, -3.5:4]
    assert residues(charge * np.arctan2(y, x))[3, 3] == charge


@pytest.mark.parametrize("dtype", [np.float32, np.float64])
def test_kernel_equals_plain_numpy(rng, wrapped, dtype):
    phase = rng.uniform(-np.pi, np.pi, (40, 31)).astype(dtype)
    np.testing.assert_array_equal(residues(phase), plain_residues(phase, wrapped))


def test_sum_of_residues_is_the_border_winding_even_with_steps_of_exactly_pi(rng):
    phase = rng.choice([0.0, np.pi, np.pi / 2, -np.pi / 2], (30, 41))
    assert border_winding(phase) == residues(phase).sum(dtype=int)


def test_conjugation_flips_every_residue(rng):
    phase = rng.uniform(-np.pi, np.pi, (30, 30))
    np.testing.assert_array_equal(residues(-phase), -residues(phase))


def test_a_phase_outside_one_turn_has_the_residues_of_the_wrapped_one(rng):
    phase = rng.uniform(-np.pi, np.pi, (20, 20))
    beyond = phase + 2 * np.pi * rng.integers(-5, 6, phase.shape)
    np.testing.assert_array_equal(residues(beyond), residues(phase))


def test_plaquettes_with_a_pixel_left_out_have_no_residue(rng):
    phase = rng.uniform(-np.pi, np.pi, (12, 12))
    valid = np.ones((12, 12), bool)
    valid[5, 6] = False
    expected = residues(phase)
    expected[4:6, 5:7] = 0
    phase[5, 6] = np.nan
    np.testing.assert_array_equal(residues(phase, valid=valid), expected)


def test_wrap_maps_minus_pi_to_pi():
    np.testing.assert_array_equal(wrap(np.array([-np.pi, np.pi, 3 * np.pi])), [np.pi, np.pi, np.pi])


def test_input_is_left_as_it_was(rng):
    phase = rng.uniform(-20, 20, (8, 8))
    before = phase.copy()
    residues(phase)
    np.testing.assert_array_equal(phase, before)


@pytest.mark.parametrize(
    ("phase", "error", "message"),
    [
        (np.zeros(5), ValueError, r"phase: expected shape \(y, x\) with at least 2 x 2"),
        (np.zeros((1, 5)), ValueError, r"at least 2 x 2 pixels, got \(1, 5\)"),
        (np.ones((3, 3), complex), TypeError, "phase: expected a real array"),
        (np.array([[0.0, 0.0], [np.nan, 0.0]]), ValueError, r"got nan at pixel \(y=1, x=0\)"),
        (np.array([[0.0, np.inf], [0.0, 0.0]]), ValueError, r"got inf at pixel \(y=0, x=1\)"),
    ],
)
def test_unusable_phase_is_refused_with_its_reason(phase, error, message):
    with pytest.raises(error, match=message):
        residues(phase)
