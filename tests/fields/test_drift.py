from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from hologyre.fields.bands import Band
from hologyre.fields.drift import measure_drift, without_drift
from hologyre.fields.interpolate import on_pixels
from hologyre.grid import Field

SHAPE = (90, 100)


def random_field(seed: int) -> Field:
    band = Band(SHAPE, (180, 192), (0.21, 0.13), 0.05)
    rng = np.random.default_rng(seed)
    weights: Any = band.weights()
    spectrum = rng.normal(size=weights.shape) + 1j * rng.normal(size=weights.shape)
    return band.field(spectrum * weights, "band")


def moved(field: Field, piston: float, tilt_y: float, tilt_x: float) -> Field:
    y = field.grid.y_px(field.shape[0])[:, None] - (SHAPE[0] - 1) / 2
    x = field.grid.x_px(field.shape[1]) - (SHAPE[1] - 1) / 2
    turn = np.exp(1j * (piston + tilt_y * y + tilt_x * x))
    tilt = tuple(
        t + s / (2 * np.pi) for t, s in zip(field.tilt_per_px, (tilt_y, tilt_x), strict=True)
    )
    return Field(field.values * turn, field.grid, (tilt[0], tilt[1]), field.radius_per_px)


def test_piston_and_tilt_of_a_moved_field_are_found_among_singularities() -> None:
    field = random_field(0)
    drift = measure_drift(moved(field, 2.0, 0.011, -0.02), field)
    assert drift.piston_rad == pytest.approx(2.0, abs=1e-6)
    assert drift.tilt_y_rad_per_px == pytest.approx(0.011, abs=1e-8)
    assert drift.tilt_x_rad_per_px == pytest.approx(-0.02, abs=1e-8)
    assert drift.coherence == pytest.approx(1)


def test_taking_the_drift_out_returns_the_field() -> None:
    field = random_field(1)
    other = moved(field, -1.0, 0.02, 0.01)
    back = without_drift(other, measure_drift(other, field))
    scale = np.abs(field.values).max()
    assert np.abs(on_pixels(back) - on_pixels(field)).max() < 1e-6 * scale


def test_a_field_that_has_changed_a_little_still_tells_its_drift() -> None:
    field, change = random_field(2), random_field(3)
    now = moved(field.with_values(field.values + 0.3 * change.values), 1.0, 0.01, 0.0)
    drift = measure_drift(now, field)
    assert drift.piston_rad == pytest.approx(1.0, abs=0.1)
    assert drift.tilt_y_rad_per_px == pytest.approx(0.01, abs=2e-3)
    assert 0.85 < drift.coherence < 0.99


def test_unrelated_fields_share_no_phase() -> None:
    assert measure_drift(random_field(4), random_field(5)).coherence < 0.35


def test_stacks_and_other_frames_are_refused() -> None:
    field = random_field(0)
    with pytest.raises(ValueError, match=r"expected single frames \(y, x\)"):
        measure_drift(field.with_values(field.values[None]), field)
    band = Band((80, 80), (160, 160), (0.2, 0.1), 0.05)
    other = band.field(np.ones(band.weights().shape, dtype=complex), "band")
    with pytest.raises(ValueError, match=r"before: frame \(80, 80\)"):
        measure_drift(field, other)
