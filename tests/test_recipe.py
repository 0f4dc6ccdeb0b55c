from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import pytest
from pydantic import ValidationError

from hologyre.recipe import (
    Recipe,
    RecipeError,
    frame_slice,
    load_recipe,
    recipe_of,
    recipe_text,
    save_recipe,
)

FULL = {
    "optics": {"wavelength_nm": 632.8, "pixel_um": 0.25, "frame_interval_s": "unknown"},
    "stack": {
        "frames": "2:30",
        "left_out": [{"frame": 3, "reason": "shutter"}, {"frame": 5}],
        "region": [0, 64, 8, 96],
        "dark": "dark.tif",
        "notes": 'a "quoted" note\nin two lines',
    },
    "carrier": {"fy": 0.1, "fx": 1 / 3, "radius": 0.05, "conjugate": True},
}


def test_default_recipe_leaves_to_the_survey_what_only_a_stack_can_tell() -> None:
    assert set(Recipe().undecided()) == {
        "optics.pixel_um",
        "optics.frame_interval_s",
        "stack.saturation",
        "carrier.fy",
        "carrier.fx",
        "carrier.radius",
        "motion.max_step_px",
    }


@pytest.mark.parametrize("settings", [{}, FULL])
def test_saved_recipe_reads_back_equal(tmp_path: Path, settings: dict[str, Any]) -> None:
    recipe = recipe_of(settings)
    save_recipe(recipe, tmp_path / "r.toml")
    assert load_recipe(tmp_path / "r.toml") == recipe
    assert b"\r" not in (tmp_path / "r.toml").read_bytes()


def test_saved_recipe_explains_every_setting() -> None:
    text = recipe_text(recipe_of(FULL))
    tomllib.loads(text)
    for section in Recipe.model_fields.values():
        assert section.annotation is not None
        for name, info in section.annotation.model_fields.items():
            assert info.description
            assert f"# {info.description}\n" in text
            assert f"\n{name} = " in text or f"\n# {name}" in text or name == "left_out"


def test_recipe_cannot_be_changed_in_place() -> None:
    with pytest.raises(ValidationError):
        Recipe().carrier.radius = 0.1  # type: ignore[misc]


def test_changed_recipe_is_a_new_value() -> None:
    before = Recipe()
    after = before.with_settings({"carrier.radius": 0.05, "motion.max_gap": 0})
    assert before == Recipe()
    assert (after.carrier.radius, after.motion.max_gap) == (0.05, 0)
    assert hash(after) != hash(before)


@pytest.mark.parametrize(
    ("settings", "told"),
    [
        (
            {"carrier": {"radius": "x"}},
            "carrier.radius: expected \"auto\" or a number above 0 up to 0.5, got 'x'",
        ),
        ({"carrier": {"raduis": 0.1}}, "carrier.raduis: unknown setting (did you mean radius?)"),
        ({"carrrier": {}}, "carrrier: unknown setting (did you mean carrier?)"),
        ({"stack": {"frames": "3"}}, "stack.frames: expected A:B or A:B:STEP in frame numbers"),
        (
            {"stack": {"left_out": [{"frame": -1}]}},
            "stack.left_out.0.frame: expected a whole number from 0, got -1",
        ),
        ({"stack": {"left_out": [{}]}}, "stack.left_out.0.frame: is missing"),
        ({"stack": {"region": [0, 10, 0, 99]}}, "stack.region: expected y_first, y_end"),
        ({"optics": 3}, "optics: expected a table of settings, got 3"),
        (
            {"optics": {"numerical_aperture": 1.2}},
            "optics: numerical_aperture 1.2 must be below medium_index 1.0",
        ),
        ({"motion": {"max_gap": 1.5}}, "motion.max_gap: expected a whole number from 0, got 1.5"),
        (
            {"motion": {"method": "magic"}},
            'motion.method: expected "mixed" or "threads" or "assignment", got \'magic\'',
        ),
    ],
)
def test_wrong_setting_is_told_by_its_path(settings: dict[str, Any], told: str) -> None:
    with pytest.raises(RecipeError) as caught:
        recipe_of(settings)
    assert told in str(caught.value)
    assert "\n" not in str(caught.value)


def test_all_wrong_settings_are_told_at_once() -> None:
    with pytest.raises(RecipeError, match=r"carrier\.radius: .*; motion\.max_gap: "):
        recipe_of({"carrier": {"radius": 7}, "motion": {"max_gap": -1}})


@pytest.mark.parametrize("path", ["carrier", "carrier.", "carrrier.radius"])
def test_changing_an_unknown_setting_is_refused(path: str) -> None:
    with pytest.raises(RecipeError, match="unknown setting"):
        Recipe().with_settings({path: 1})


def test_unreadable_recipe_is_told(tmp_path: Path) -> None:
    with pytest.raises(RecipeError, match=r"no\.toml: the recipe cannot be read: No such file"):
        load_recipe(tmp_path / "no.toml")
    (tmp_path / "bad.toml").write_text("[carrier\n")
    with pytest.raises(RecipeError, match=r"bad\.toml: this is not a TOML file"):
        load_recipe(tmp_path / "bad.toml")
    (tmp_path / "wrong.toml").write_text("[carrier]\nradius = 2\n")
    with pytest.raises(RecipeError, match=r"wrong\.toml: carrier\.radius: expected"):
        load_recipe(tmp_path / "wrong.toml")
    (tmp_path / "latin.toml").write_bytes(b'[stack]\nnotes = "\xe9"\n')
    with pytest.raises(RecipeError, match=r"latin\.toml: .*not UTF-8"):
        load_recipe(tmp_path / "latin.toml")


@pytest.mark.parametrize(
    ("text", "expected"),
    [(":", [0, 1, 2, 3, 4]), ("1:3", [1, 2]), ("3:", [3, 4]), ("::2", [0, 2, 4])],
)
def test_frame_range_reads_as_in_python(text: str, expected: list[int]) -> None:
    assert list(range(5))[frame_slice(text)] == expected


@pytest.mark.parametrize("text", ["", "5", "-1:3", "a:b", "1:2:0", "1:2:3:4"])
def test_frame_range_of_another_form_is_refused(text: str) -> None:
    with pytest.raises(ValueError, match="expected A:B"):
        frame_slice(text)


@pytest.mark.parametrize(
    ("optics", "pixel"),
    [
        ({"pixel_um": 0.2}, 0.2),
        ({"camera_pixel_um": 5.0, "magnification": 20.0}, 0.25),
        ({"pixel_um": 0.2, "camera_pixel_um": 5.0, "magnification": 20.0}, 0.2),
        ({}, None),
    ],
)
def test_pixel_in_the_object_comes_before_camera_and_magnification(
    optics: dict[str, Any], pixel: float | None
) -> None:
    assert recipe_of({"optics": optics}).optics.values().pixel_um == pytest.approx(pixel)
