from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import xarray as xr

from hologyre.analyse import iter_frames
from hologyre.fields.interpolate import on_pixels
from hologyre.recipe import Recipe
from hologyre.stacks import as_stack
from hologyre.viewer import maps as maps_module
from hologyre.viewer.maps import FrameMaps, Skipped


@pytest.fixture
def reads(monkeypatch: pytest.MonkeyPatch) -> list[int]:
    """Frames whose field was read, one entry a reading."""
    seen: list[int] = []
    read = maps_module.field_of

    def counting(plan: Any, frame: int) -> Any:
        seen.append(frame)
        return read(plan, frame)

    monkeypatch.setattr(maps_module, "field_of", counting)
    return seen


def test_a_frame_is_demodulated_once_for_all_its_pictures(
    stack: xr.DataArray, recipe: Recipe, reads: list[int]
) -> None:
    maps = FrameMaps(stack)
    maps.amplitude(recipe, 2)
    maps.phase(recipe, 2)
    maps.unwrapped(recipe, 2)
    maps.wavevector(recipe, 2)
    assert reads == [2]


def test_settings_that_do_not_touch_the_field_do_not_read_it_again(
    stack: xr.DataArray, recipe: Recipe, reads: list[int]
) -> None:
    maps = FrameMaps(stack)
    maps.phase(recipe, 0)
    later = recipe.with_settings(
        {"stack.notes": "wet", "motion.max_gap": 4, "phase.weight": "amplitude"}
    )
    maps.phase(later, 0)
    assert reads == [0]
    maps.phase(recipe.with_settings({"carrier.radius": 0.03}), 0)
    assert reads == [0, 0]


def test_a_field_that_was_analysed_is_not_read_again(
    stack: xr.DataArray, recipe: Recipe, reads: list[int]
) -> None:
    maps = FrameMaps(stack)
    for result in iter_frames(stack, recipe, frames=[1]):
        maps.keep(recipe, result)
    maps.phase(recipe, 1)
    assert reads == []


def test_pictures_are_those_of_the_field_on_the_pixels(stack: xr.DataArray, recipe: Recipe) -> None:
    maps = FrameMaps(stack)
    (result,) = iter_frames(stack, recipe, frames=[3])
    assert result.field is not None
    values = on_pixels(result.field)
    np.testing.assert_allclose(maps.amplitude(recipe, 3), np.abs(values), rtol=1e-5)
    np.testing.assert_allclose(
        np.exp(1j * maps.unwrapped(recipe, 3)), values / np.abs(values), atol=1e-4
    )


def test_pixels_outside_the_region_are_not_shown(stack: xr.DataArray, recipe: Recipe) -> None:
    part = recipe.with_settings({"stack.region": (16, 112, 0, 96)})
    maps = FrameMaps(stack)
    for picture in (maps.phase(part, 0), maps.unwrapped(part, 0), maps.wavevector(part, 0)[1]):
        shown = np.isfinite(picture)
        assert not shown[:16].any()
        assert not shown[112:].any()
        assert not shown[:, 96:].any()
        assert shown[20:108, 4:92].all()


def test_a_frame_that_cannot_be_used_is_blank_and_says_why(
    stack: xr.DataArray, recipe: Recipe
) -> None:
    frames = np.array(stack)
    frames[1] = 40
    maps = FrameMaps(as_stack(frames))
    assert np.isnan(maps.amplitude(recipe, 1)).all()
    assert np.isnan(maps.unwrapped(recipe, 1)).all()
    found = maps.wavevector(recipe, 1)
    assert isinstance(found, Skipped)
    assert "same value" in found.reason
    assert np.isfinite(maps.amplitude(recipe, 0)).all()


def test_what_is_ready_can_be_asked_for_without_computing(
    stack: xr.DataArray, recipe: Recipe, reads: list[int]
) -> None:
    maps = FrameMaps(stack)
    assert maps.ready("cuts", recipe, 0) is None
    assert reads == []
    maps.prepare("cuts", recipe, 0)
    assert maps.ready("cuts", recipe, 0).cuts is maps.unwrapping(recipe, 0).cuts


def test_the_carrier_of_a_frame_without_fringes_is_skipped_with_the_reason() -> None:
    maps = FrameMaps(as_stack(np.full((1, 64, 64), 7, np.uint8)))
    found = maps.carrier(Recipe(), 0)
    assert isinstance(found, Skipped)
    assert found.reason
