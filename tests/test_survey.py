from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import tifffile
from numpy.typing import NDArray

from hologyre.recipe import Recipe, RecipeError, recipe_of
from hologyre.stacks import open_stack
from hologyre.survey import SurveyError, chosen_frames, survey

BIN = 1 / 128


def test_survey_decides_all_that_is_auto(stack_file: Path) -> None:
    stack = open_stack(stack_file)
    recipe = survey(stack)
    assert recipe.undecided() == ()
    assert recipe.optics.pixel_um == pytest.approx(0.25)
    assert recipe.optics.frame_interval_s == 0.5
    assert recipe.stack.saturation == 255


def test_surveyed_carrier_is_the_simulated_one(holograms: NDArray[Any]) -> None:
    carrier = survey(holograms).carrier
    # the middle of a speckle's sideband, 6 bins in radius, is known to a part of a bin
    assert carrier.fy == pytest.approx(0.13, abs=BIN)
    assert carrier.fx == pytest.approx(0.19, abs=BIN)
    # the simulated spectrum ends at 1/20; thresholds on speckle miss the radius by some 15 %
    assert carrier.radius == pytest.approx(0.05, rel=0.2)


def test_survey_is_the_same_every_time(holograms: NDArray[Any]) -> None:
    assert survey(holograms) == survey(holograms)


def test_what_is_decided_stays(holograms: NDArray[Any]) -> None:
    given = {"carrier.fy": -0.13, "carrier.fx": -0.19, "carrier.radius": 0.04,
             "motion.max_step_px": 3.0, "optics.frame_interval_s": 2.0}  # fmt: skip
    recipe = survey(holograms, Recipe().with_settings(given))
    assert recipe.with_settings(given) == recipe


def test_other_sideband_is_taken_on_demand(holograms: NDArray[Any]) -> None:
    usual, other = (
        survey(holograms, Recipe().with_settings({"carrier.conjugate": flag})).carrier
        for flag in (False, True)
    )
    assert (other.fy, other.fx) == pytest.approx((-usual.fy, -usual.fx))


def test_aperture_gives_the_radius_where_the_optics_are_known(holograms: NDArray[Any]) -> None:
    optics = {"wavelength_nm": 500.0, "pixel_um": 0.25, "numerical_aperture": 0.1}
    recipe = survey(holograms, recipe_of({"optics": optics}))
    # common practice: the pupil's edge lies at NA / wavelength
    assert recipe.carrier.radius == pytest.approx(0.1 / 0.5 * 0.25)


def test_unusable_frames_do_not_mislead(holograms: NDArray[Any]) -> None:
    spoilt = np.array(holograms, dtype=np.float32)
    spoilt[0] = np.nan
    spoilt[2:] = 7
    assert survey(spoilt).carrier.fx == pytest.approx(0.19, abs=BIN)


def test_left_out_frames_are_not_looked_at(holograms: NDArray[Any]) -> None:
    frames = np.array(holograms)
    frames[:3] = np.rot90(frames[:3], axes=(1, 2))
    recipe = recipe_of({"stack": {"left_out": [{"frame": n} for n in range(3)]}})
    assert survey(frames, recipe).carrier.fx == pytest.approx(0.19, abs=BIN)


@pytest.mark.parametrize(
    ("value", "told"),
    [
        (np.nan, r"none of its 4 frames can be used \(frame 0: 16384 of 16384 pixels are NaN"),
        (5.0, r"none of its 4 frames can be used \(frame 0: all pixels have the same value, 5.0"),
    ],
)
def test_stack_without_a_usable_frame_is_told(value: float, told: str) -> None:
    with pytest.raises(SurveyError, match=told):
        survey(np.full((4, 128, 128), value, dtype=np.float32))


def test_stack_without_fringes_is_told_by_its_file(tmp_path: Path) -> None:
    noise = np.random.default_rng(0).poisson(80, (3, 128, 128)).astype(np.uint8)
    tifffile.imwrite(tmp_path / "flat.tif", noise, photometric="minisblack")
    with pytest.raises(SurveyError, match=r"flat\.tif: no fringes were found \(frame 0: .*recipe"):
        survey(open_stack(tmp_path / "flat.tif"))


@pytest.mark.parametrize(
    ("settings", "told"),
    [
        ({"frames": "9:"}, r"stack\.frames: 9: of frames 0 to 5: the range holds none"),
        ({"frames": "0:1", "left_out": [{"frame": 0}]}, "all of these frames are left out"),
        ({"left_out": [{"frame": 6}]}, "frame 6 is not in the stack, whose frames are 0 to 5"),
        ({"region": [0, 64, 0, 200]}, r"\[0, 64, 0, 200\] reaches beyond the frame of 128x128"),
    ],
)
def test_recipe_that_does_not_fit_the_stack_is_told(
    holograms: NDArray[Any], settings: dict[str, Any], told: str
) -> None:
    with pytest.raises(RecipeError, match=told):
        survey(holograms, recipe_of({"stack": settings}))


def test_chosen_frames_keep_the_stack_numbers(stack_file: Path) -> None:
    recipe = recipe_of(
        {"stack": {"frames": "1:6:2", "left_out": [{"frame": 3, "reason": "bubble"}]}}
    )
    assert chosen_frames(open_stack(stack_file), recipe) == ([1, 5], {3: "bubble"})


def test_longest_step_follows_the_pace_of_the_singularities(holograms: NDArray[Any]) -> None:
    slow = survey(holograms).motion.max_step_px
    still = survey(np.repeat(holograms[:1], 4, axis=0)).motion.max_step_px
    assert isinstance(slow, float)
    assert isinstance(still, float)
    assert 0 < still < slow
