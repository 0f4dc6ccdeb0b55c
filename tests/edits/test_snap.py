from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from hologyre.edits.remeasure import remeasure
from hologyre.edits.snap import NoZero, snap
from hologyre.grid import Field, Grid, Window
from hologyre.simulate.waves import RandomWaves
from hologyre.simulate.zeros import find_zeros
from hologyre.tables import SINGULARITIES, conform

BOX, SHORTEST = 96.0, 12.0


def speckle(samples_per_wavelength: float, tilt: tuple[float, float] = (0.0, 0.0)) -> Field:
    """A simulation: isotropic speckle on the sampling of its band, times a tilt."""
    wave = RandomWaves("disc", SHORTEST, box_px=BOX, seed=3)
    count = int(np.ceil(samples_per_wavelength * BOX / SHORTEST))
    at = np.arange(count) * BOX / count
    values = wave.on_grid(at, at, 0.0)
    values = values * np.exp(2j * np.pi * (tilt[0] * at[:, None] + tilt[1] * at))
    frame = int(BOX)
    grid = Grid(
        (frame, frame), (BOX / count, BOX / count), (0.0, 0.0), Window(0, frame - 1, 0, frame - 1)
    )
    return Field(values, grid, tilt, 1 / SHORTEST)


@pytest.fixture(scope="module")
def truth() -> pd.DataFrame:
    wave = RandomWaves("disc", SHORTEST, box_px=BOX, seed=3)
    return find_zeros(wave, Window(0.0, BOX - 1, 0.0, BOX - 1), 0.0)


@pytest.mark.parametrize("samples_per_wavelength", [2.2, 2.6, 8.0])
@pytest.mark.parametrize("tilt", [(0.0, 0.0), (0.002, -0.001)])
def test_every_zero_is_found_beside_it_with_its_charge(
    truth: pd.DataFrame, samples_per_wavelength: float, tilt: tuple[float, float]
) -> None:
    field = speckle(samples_per_wavelength, tilt)
    assert len(truth) > 50
    for y, x, charge in truth[["y_px", "x_px", "charge"]].itertuples(index=False):
        found = snap(field, y, x, within_px=1.0)
        assert found
        # exact on the series; samples that are fine enough are interpolated locally
        assert found.distance_px < (1e-4 if samples_per_wavelength > 5 else 1e-6)
        assert found.charge == charge


def test_the_nearest_zero_is_taken(truth: pd.DataFrame) -> None:
    field = speckle(2.2)
    rng = np.random.default_rng(5)
    for y, x in rng.uniform(10.0, BOX - 11.0, (40, 2)):
        distance = np.hypot(truth["y_px"] - y, truth["x_px"] - x)
        found = snap(field, y, x, within_px=9.0)
        if distance.min() > 9.0:
            assert not found
        else:
            assert found
            assert found.distance_px == pytest.approx(distance.min(), abs=1e-6)


def test_pixels_alone_give_the_same_zero(truth: pd.DataFrame) -> None:
    wave = RandomWaves("disc", SHORTEST, box_px=BOX, seed=3)
    pixels = wave.on_frame((int(BOX), int(BOX)), 0.0)
    inner = truth[truth[["y_px", "x_px"]].apply(lambda v: v.between(16, BOX - 17)).all(axis=1)]
    for y, x, charge in inner[["y_px", "x_px", "charge"]].itertuples(index=False):
        found = snap(pixels, y + 0.4, x - 0.3, within_px=1.5)
        assert found
        assert found.charge == charge
        # local interpolation at 12 samples per wavelength
        assert np.hypot(found.y_px - y, found.x_px - x) < 1e-3


def test_conjugation_turns_the_charge_round(truth: pd.DataFrame) -> None:
    field = speckle(2.2)
    y, x = truth[["y_px", "x_px"]].iloc[20]
    straight, turned = (
        snap(f, y, x, within_px=1.0) for f in (field, replace(field, values=field.values.conj()))
    )
    assert straight
    assert turned
    assert straight.charge == -turned.charge


def test_no_zero_is_false_and_says_where(truth: pd.DataFrame) -> None:
    axis = np.arange(5.0, BOX - 5.0)
    y, x = np.meshgrid(axis, axis, indexing="ij")
    gap = np.min([np.hypot(y - a, x - b) for a, b in truth[["y_px", "x_px"]].to_numpy()], axis=0)
    y0, x0 = (float(v[np.unravel_index(gap.argmax(), gap.shape)]) for v in (y, x))
    found = snap(speckle(2.2), y0, x0, within_px=0.9 * float(gap.max()))
    assert isinstance(found, NoZero)
    assert f"no zero within {0.9 * gap.max():.1f} px of (y={y0:.1f}, x={x0:.1f})" in found.reason


def test_a_click_outside_the_frame_is_told() -> None:
    found = snap(speckle(2.2), -3.0, 10.0)
    assert isinstance(found, NoZero)
    assert found.reason == "(y=-3.0, x=10.0) px lies outside the frame."


def test_a_zero_beyond_the_valid_part_is_not_taken(truth: pd.DataFrame) -> None:
    field = speckle(2.2)
    y, x = truth[["y_px", "x_px"]].iloc[len(truth) // 2]
    part = replace(field, grid=replace(field.grid, valid=Window(0.0, y - 0.2, 0.0, BOX - 1)))
    assert snap(field, y - 0.3, x, within_px=0.5)
    assert not snap(part, y - 0.3, x, within_px=0.5)


@pytest.mark.parametrize(
    ("y_px", "within_px", "told"),
    [(np.nan, 1.0, "expected finite numbers"), (5.0, 0.0, "within_px: expected a positive")],
)
def test_options_out_of_range_are_refused(y_px: float, within_px: float, told: str) -> None:
    with pytest.raises(ValueError, match=told):
        snap(speckle(2.2), y_px, 5.0, within_px=within_px)


def test_a_stack_of_frames_is_refused() -> None:
    field = speckle(2.2)
    several = field.with_values(np.stack([field.values] * 2))
    with pytest.raises(ValueError, match="expected one complex frame"):
        snap(several, 5.0, 5.0)


def test_what_was_put_in_by_hand_is_measured_again(truth: pd.DataFrame) -> None:
    y, x, charge = truth[["y_px", "x_px", "charge"]].iloc[20]
    rows = pd.DataFrame(
        {
            "frame": [4, 4, 4, 4],
            "singularity": range(4),
            "y_px": [y + 0.01, y, y, y],
            "x_px": [x, x, x, x],
            "charge": [int(charge), -int(charge), int(charge), int(charge)],
            "origin": ["placed", "moved", "found", "placed"],
        }
    )
    rows.loc[3, ["y_px", "x_px"]] = [-5.0, -5.0]
    asked: list[int] = []

    def field_of(frame: int) -> Field:
        asked.append(frame)
        return speckle(2.2)

    told = remeasure(conform(rows, SINGULARITIES), field_of)
    assert asked == [4]
    assert told["singularity"].tolist() == [0, 1, 3]
    assert told["winding"].tolist() == [charge, charge, 0]
    assert told["distance_px"].iloc[0] == pytest.approx(0.01, abs=1e-6)
    assert np.isnan(told["distance_px"].iloc[2])
