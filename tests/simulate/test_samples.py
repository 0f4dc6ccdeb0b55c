from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import tifffile

from hologyre.grid import Grid
from hologyre.simulate.scenes import stage, write_scene
from hologyre.simulate.truth import find_zeros

SAMPLES = Path(__file__).parents[2] / "sample_data"


@pytest.mark.parametrize("frame", [0, 23])
def test_frames_of_the_sample_can_be_made_again(frame: int) -> None:
    sample = tifffile.imread(SAMPLES / "drying_film.tif", key=frame)
    made = stage("drying-film").hologram(frame)
    # Rounding of the last bit of an exponential may differ from one machine to another, and with
    # it a draw of the noise; on the same machine not one pixel does.
    assert np.mean(sample != made) < 1e-3


def test_truth_of_the_sample_can_be_found_again() -> None:
    truth = pd.read_csv(SAMPLES / "truth_singularities.csv")
    truth = truth[truth["frame"] == 17].reset_index(drop=True)
    zeros = find_zeros(stage("drying-film").wave, Grid.pixels((384, 384)).valid, 17.0)
    # Tables are rounded to 0.0001 px.
    columns = ["y_px", "x_px", "charge"]
    np.testing.assert_allclose(truth[columns], zeros[columns], atol=6e-5)


def test_single_frames_of_the_samples_can_be_made_again(tmp_path: Path) -> None:
    for name in ("charge-two", "weak-fringes"):
        files = write_scene(name, tmp_path / name)
        stem = files.stack.stem
        made, sample = (
            tifffile.imread(p / files.stack.name) for p in (files.stack.parent, SAMPLES)
        )
        assert np.mean(made != sample) < 1e-3
        committed = pd.read_csv(SAMPLES / f"{stem}.truth_singularities.csv")
        pd.testing.assert_frame_equal(
            pd.read_csv(files.singularities), committed, atol=2e-4, rtol=0
        )


def test_samples_say_that_they_are_simulations_and_stay_small() -> None:
    assert json.loads((SAMPLES / "scene.json").read_text())["kind"] == "SIMULATION"
    readme = (SAMPLES / "README.md").read_text()
    assert "SIMULATION" in readme
    assert "hologyre simulate drying-film --out DIR" in readme
    files = [p for p in SAMPLES.iterdir() if p.is_file()]
    assert sum(p.stat().st_size for p in files) < 6_000_000


def test_trajectories_hold_every_singularity_of_the_sample() -> None:
    columns = ["frame", "y_px", "x_px", "charge"]
    singularities, trajectories = (
        pd.read_csv(SAMPLES / f"truth_{name}.csv")[columns]
        for name in ("singularities", "trajectories")
    )
    trajectories = trajectories.sort_values(["frame", "y_px", "x_px"], ignore_index=True)
    pd.testing.assert_frame_equal(singularities, trajectories)
