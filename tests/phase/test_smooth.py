"""Smooth and singular parts."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from hologyre.phase.residues import residues
from hologyre.phase.smooth import split_vortices


def lens(shape):
    y, x = np.indices(shape, dtype=float)
    return 0.004 * ((x - 20.3) ** 2 + (y - 31.0) ** 2) + 0.2 * x


def vortices_on(shape, vortices):
    y, x = np.indices(shape, dtype=float)
    return sum(q * np.arctan2(y - vy, x - vx) for vy, vx, q in vortices)


def flat(difference):
    """Return a difference less its value at the first pixel that has one."""
    return difference - difference[np.isfinite(difference)][0]


def test_parts_are_congruent_to_the_phase(speckle):
    phase = np.angle(speckle((90, 80), 12.0, seed=1))
    parts = split_vortices(phase)
    turns = (parts.smooth + parts.singular - phase) / (2 * np.pi)
    # The angles of 60 vortices are summed by Fourier transforms, to 1e-10 rad.
    np.testing.assert_allclose(turns, np.rint(turns), atol=1e-9)
    assert len(parts.cuts) == 0
    assert parts.vortices["charge"].sum() == residues(phase).sum(dtype=int)


def test_the_smooth_part_is_the_regular_phase_that_was_put_in(wrapped):
    shape = (60, 70)
    vortices = [(20.5, 15.5, 1), (30.5, 44.5, -1), (11.5, 50.5, 1)]
    parts = split_vortices(wrapped(lens(shape) + vortices_on(shape, vortices)))
    np.testing.assert_allclose(flat(parts.smooth - lens(shape)), 0, atol=1e-10)


def test_vortices_between_pixels_give_the_regular_phase_exactly(wrapped):
    shape = (60, 70)
    vortices = [(20.31, 15.84, 1), (30.77, 44.12, -1), (40.0, 30.0, 1)]
    table = pd.DataFrame(vortices, columns=["y_px", "x_px", "charge"])
    phase = wrapped(lens(shape) + vortices_on(shape, vortices[:2]))
    parts = split_vortices(phase, vortices=table[:2])
    np.testing.assert_allclose(flat(parts.smooth - lens(shape)), 0, atol=1e-11)
    centred = split_vortices(phase)
    assert np.ptp(centred.smooth - lens(shape)) > 0.3


def test_a_vortex_on_a_pixel_or_outside_the_frame_is_taken_out(wrapped):
    shape = (40, 50)
    vortices = [(20.0, 17.0, 1), (12.3, 60.2, -1), (-3.0, 20.4, 1), (15.2, -4.1, 1)]
    table = pd.DataFrame(vortices, columns=["y_px", "x_px", "charge"])
    phase = wrapped(lens(shape) + vortices_on(shape, vortices))
    parts = split_vortices(phase, vortices=table)
    difference = parts.smooth + parts.singular - lens(shape) - vortices_on(shape, vortices)
    turns = flat(difference) / (2 * np.pi)
    np.testing.assert_allclose(turns, np.rint(turns), atol=1e-9)
    smooth = flat(parts.smooth - lens(shape))
    smooth[19:22, 16:19] = 0  # what the four pixels at the core see depends on rounding
    np.testing.assert_allclose(smooth, 0, atol=1e-11)


def test_residues_without_a_vortex_are_cut(wrapped):
    shape = (60, 70)
    vortices = [(20.5, 15.5, 1), (30.5, 44.5, -1), (30.5, 48.5, 1)]
    table = pd.DataFrame(vortices[:1], columns=["y_px", "x_px", "charge"])
    phase = wrapped(lens(shape) + vortices_on(shape, vortices))
    parts = split_vortices(phase, vortices=table)
    assert list(parts.cuts.cost) == [4.0]


def test_a_region_left_out_that_the_phase_winds_around_holds_a_vortex(wrapped):
    shape = (50, 50)
    phase = wrapped(lens(shape) + vortices_on(shape, [(24.5, 24.5, 2)]))
    y, x = np.indices(shape) - 24.5
    valid = np.hypot(y, x) > 5
    parts = split_vortices(phase, valid=valid)
    assert list(parts.vortices["charge"]) == [2]
    assert len(parts.cuts) == 0
    assert np.isnan(parts.smooth[~valid]).all()
    assert np.abs(np.diff(parts.smooth, axis=0))[:, 0].max() < np.pi


@pytest.mark.parametrize(
    ("table", "message"),
    [
        (pd.DataFrame({"y_px": [1.0], "x_px": [2.0]}), r"expected columns .* \['charge'\] missing"),
        (pd.DataFrame({"y_px": [np.nan], "x_px": [2.0], "charge": [1]}), "expected finite"),
    ],
)
def test_unusable_vortices_are_refused(table, message):
    with pytest.raises(ValueError, match=message):
        split_vortices(np.zeros((8, 8)), vortices=table)
