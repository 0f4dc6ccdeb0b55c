from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import tifffile

from hologyre.simulate.scenes import SCENES, stage, write_scene
from hologyre.tables import EVENTS


def test_a_written_scene_holds_stack_truth_and_settings(tmp_path: Path) -> None:
    files = write_scene("vortex-beams", tmp_path / "new", frames=4, shape=(96, 112), seed=3)
    with tifffile.TiffFile(files.stack) as tiff:
        assert tiff.series[0].axes == "TYX"
        assert tiff.series[0].shape == (4, 96, 112)
        assert tiff.is_ome
        stack = tiff.asarray()
    staged = stage("vortex-beams", frames=4, shape=(96, 112), seed=3)
    np.testing.assert_array_equal(stack[2], staged.hologram(2))
    settings = json.loads(files.settings.read_text())
    assert settings["kind"] == "SIMULATION"
    assert settings["seed"] == 3
    assert "SIMULATION" in files.readme.read_text()
    assert list(pd.read_csv(files.events)) == [c.name for c in EVENTS]
    singularities, tracks = pd.read_csv(files.singularities), pd.read_csv(files.trajectories)
    assert len(singularities) == len(tracks)
    assert set(singularities["charge"]) <= {-1, 1}
    assert not list((tmp_path / "new").glob("*part*"))


def test_a_scene_is_the_same_byte_for_byte_each_time(tmp_path: Path) -> None:
    first = write_scene("charge-two", tmp_path / "a", shape=(64, 64), seed=5)
    again = write_scene("charge-two", tmp_path / "b", shape=(64, 64), seed=5)
    for one, other in zip(first, again, strict=True):
        assert one.read_bytes() == other.read_bytes()


@pytest.mark.parametrize(
    ("seed", "shape", "line"),
    [
        (0, None, "hologyre simulate charge-two --out DIR\n"),
        (4, None, "hologyre simulate charge-two --out DIR --seed 4\n"),
        (4, (64, 70), 'write_scene("charge-two", "DIR", seed=4, frames=None, shape=(64, 70))'),
    ],
)
def test_readme_tells_how_to_make_the_scene_again(
    tmp_path: Path, seed: int, shape: tuple[int, int] | None, line: str
) -> None:
    assert line in write_scene("charge-two", tmp_path, seed=seed, shape=shape).readme.read_text()


def test_existing_files_are_not_overwritten(tmp_path: Path) -> None:
    (tmp_path / "scene.json").write_text("mine")
    with pytest.raises(FileExistsError, match=r"scene\.json is there already"):
        write_scene("charge-two", tmp_path, shape=(64, 64))
    assert (tmp_path / "scene.json").read_text() == "mine"
    assert [p.name for p in tmp_path.iterdir()] == ["scene.json"]


@pytest.mark.parametrize("name", SCENES)
def test_every_scene_can_be_staged_small(name: str) -> None:
    hologram = stage(name, frames=1, shape=(64, 72)).hologram(0)
    assert hologram.shape == (64, 72)
    assert hologram.std() > 0


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"name": "film"}, "name: expected one of drying-film"),
        ({"name": "charge-two", "frames": 0}, "frames: expected 1 or more, got 0"),
        ({"name": "charge-two", "shape": (8, 80)}, "shape: expected at least 32"),
        ({"name": "charge-two", "seed": -1}, "seed: expected 0 or more, got -1"),
    ],
)
def test_wrong_settings_are_named(settings: dict, message: str) -> None:
    with pytest.raises(ValueError, match=message):
        stage(**settings)
