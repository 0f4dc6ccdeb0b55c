from __future__ import annotations

import io
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from matplotlib.image import imread
from numpy.typing import NDArray

from hologyre.analyse import Analysis, analyse
from hologyre.recipe import Recipe
from hologyre.report import NEGATIVE, POSITIVE, overview_png
from hologyre.stacks import open_stack
from hologyre.survey import survey


@pytest.fixture(scope="module")
def recipe(holograms: NDArray[Any]) -> Recipe:
    return survey(holograms)


@pytest.fixture(scope="module")
def analysis(stack_file: Path) -> Analysis:
    return analyse(open_stack(stack_file))


def pixels(png: bytes) -> NDArray[Any]:
    return (imread(io.BytesIO(png))[..., :3] * 255).round().astype(int)


def share_of(image: NDArray[Any], colour: str) -> float:
    rgb = [int(colour[i : i + 2], 16) for i in (1, 3, 5)]
    return float(np.mean(np.all(np.abs(image - rgb) <= 3, axis=-1)))


def test_overview_is_a_wide_picture_with_both_charges_drawn(analysis: Analysis) -> None:
    image = pixels(overview_png(analysis))
    assert image.shape == (1056, 1650, 3)
    assert share_of(image, POSITIVE) > 2e-4
    assert share_of(image, NEGATIVE) > 2e-4


def test_overview_is_the_same_every_time(analysis: Analysis) -> None:
    assert overview_png(analysis) == overview_png(analysis)


def test_overview_of_one_frame_is_drawn(holograms: NDArray[Any], recipe: Recipe) -> None:
    image = pixels(overview_png(analyse(holograms[0], recipe)))
    assert share_of(image, POSITIVE) > 1e-4


def test_overview_is_drawn_with_skipped_frames_and_unknown_optics(
    holograms: NDArray[Any], recipe: Recipe
) -> None:
    frames = np.array(holograms)
    frames[1] = 5
    image = pixels(overview_png(analyse(frames, recipe)))
    # the skipped frame is a grey band among the counts
    assert share_of(image, "#dddddd") > 1e-3


def test_overview_without_a_measured_frame_is_refused(
    holograms: NDArray[Any], recipe: Recipe
) -> None:
    nothing = analyse(np.full_like(holograms[:2], 5), recipe)
    with pytest.raises(ValueError, match="analysis: no frame was measured"):
        overview_png(nothing)
