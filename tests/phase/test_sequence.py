"""Unwrapping in time."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from hologyre.phase.sequence import continue_unwrap, unwrap_sequence
from hologyre.phase.unwrap import unwrap


def drifting(count, shape=(40, 50)):
    """A bump whose piston drifts by 1.1 rad a frame."""
    y, x = np.indices(shape)
    bump = 9.0 * np.exp(-((y - 20) ** 2 + (x - 25) ** 2) / 120)
    return bump + 1.1 * np.arange(count)[:, None, None]


def evolving(speckle, count, step=0.06):
    """Speckle that changes slowly from frame to frame."""
    one, two = speckle((80, 80), 14.0, seed=1), speckle((80, 80), 14.0, seed=2)
    angle = step * np.arange(count)[:, None, None]
    return one * np.cos(angle) + two * np.sin(angle)


def test_a_drift_of_many_turns_is_followed(wrapped):
    truth = drifting(20)
    found = np.stack([u.phase for u in unwrap_sequence(wrapped(truth))])
    np.testing.assert_allclose(found - truth, found[0, 0, 0] - truth[0, 0, 0], atol=1e-11)


def test_each_frame_alone_has_the_same_cuts(speckle):
    fields = evolving(speckle, 4)
    phases, weights = np.angle(fields), np.minimum(np.abs(fields), 1)
    for k, result in enumerate(unwrap_sequence(phases, weights=weights)):
        alone = unwrap(phases[k], weight=weights[k])
        assert result.cost == alone.cost
        np.testing.assert_array_equal(result.cuts.jump_y, alone.cuts.jump_y)
        difference = (result.phase - alone.phase) / (2 * np.pi)
        np.testing.assert_allclose(difference, np.rint(difference[0, 0]), atol=1e-12)


def test_most_pixels_keep_their_turn(speckle):
    phases = np.angle(evolving(speckle, 8))
    results = list(unwrap_sequence(phases))
    assert np.isnan(results[0].kept)
    for one, two in pairwise(results):
        steady = np.abs(two.phase - one.phase) < np.pi
        assert two.kept == pytest.approx(steady.mean(), abs=1e-3)
        assert two.kept > 0.5


def test_a_corner_that_a_cut_swept_over_does_not_shift_the_rest(wrapped):
    # A vortex near the first pixel: its cut goes to the left side, then to the upper one.
    y, x = np.indices((40, 40), dtype=float)
    frames = [wrapped(np.arctan2(y - vy, x - vx)) for vy, vx in ((6.5, 4.5), (4.5, 6.5))]
    one, two = unwrap_sequence(frames)
    moved = np.abs(two.phase - one.phase) > np.pi
    assert moved[0, 0]
    assert moved.mean() < 0.05


def test_cuts_stay_where_they_were_when_that_costs_no_more_than_the_discount(dipole):
    start = dipole((40, 40), (10, 10), (20, 20))
    first = unwrap(start, barriers=[np.array([(10.5, 10.5), (10.5, 20.5), (20.5, 20.5)])])
    for stay in (0.1, 0.5):
        next_one = continue_unwrap(start, first, stay=stay)
        np.testing.assert_array_equal(next_one.cuts.jump_y, first.cuts.jump_y)
        np.testing.assert_array_equal(next_one.cuts.jump_x, first.cuts.jump_x)
        # The way is one of the shortest: staying is free, and the plain cost is told.
        assert next_one.cost == unwrap(start).cost == 20


def test_a_discount_never_costs_more_than_it_saves(speckle):
    phases = np.angle(evolving(speckle, 6, step=0.03))
    plain = sum(r.cost for r in unwrap_sequence(phases))
    held = list(unwrap_sequence(phases, stay=0.3))
    assert plain <= sum(r.cost for r in held) <= plain / 0.7
    assert held[3].certificate.proves(held[3].cuts.jump_y, held[3].cuts.jump_x)


def test_cuts_that_stay_move_less(speckle):
    phases = np.angle(evolving(speckle, 8, step=0.01))

    def changed(results):
        maps = [r.cuts.jump_y != 0 for r in results]
        return sum(np.count_nonzero(a != b) for a, b in pairwise(maps))

    assert changed(unwrap_sequence(phases, stay=0.3)) < 0.7 * changed(unwrap_sequence(phases))


def test_each_region_keeps_its_own_offset(wrapped):
    truth = drifting(5)
    truth[:, :, 30:] += 0.9 * np.arange(5)[:, None, None]  # one side drifts faster
    valid = np.ones(truth.shape[1:], bool)
    valid[:, 28:32] = False
    found = np.stack([u.phase for u in unwrap_sequence(wrapped(truth), valid=valid)])
    difference = found - truth
    for side in (np.s_[:, :, :28], np.s_[:, :, 32:]):
        part = difference[side]
        np.testing.assert_allclose(part, part[0, 0, 0], atol=1e-11)


def test_a_region_new_in_this_frame_follows_the_one_it_is_tied_to(wrapped):
    truth = drifting(3)
    left = np.ones(truth.shape[1:], bool)
    left[:, 28:] = False
    both = np.ones(truth.shape[1:], bool)
    both[:, 28:31] = False
    first = continue_unwrap(wrapped(truth[0]), None, valid=left)
    far = wrapped(truth[2])
    second = continue_unwrap(far, continue_unwrap(wrapped(truth[1]), first, valid=left), valid=both)
    difference = (second.phase - truth[2])[both]
    np.testing.assert_allclose(difference, difference[0], atol=1e-11)


@pytest.mark.parametrize("stay", [-0.1, 1.0, np.nan])
def test_a_discount_out_of_range_is_refused(stay):
    with pytest.raises(ValueError, match="stay: expected 0 <= stay < 1"):
        continue_unwrap(np.zeros((4, 4)), None, stay=stay)


def test_a_frame_of_another_shape_is_refused():
    with pytest.raises(ValueError, match=r"before: expected the shape of phase, \(4, 5\)"):
        continue_unwrap(np.zeros((4, 5)), unwrap(np.zeros((4, 4))))


def test_too_few_weights_are_refused():
    with pytest.raises(ValueError, match="zip"):
        list(unwrap_sequence(np.zeros((3, 4, 4)), weights=np.ones((2, 4, 4))))
