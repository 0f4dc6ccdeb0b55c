from __future__ import annotations

import json
import os
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from numpy.typing import NDArray

from hologyre.analyse import analyse
from hologyre.recipe import Recipe, load_recipe
from hologyre.results import (
    OutputError,
    RunSummary,
    csv_bytes,
    default_folder,
    load_result,
    read_csv,
    run,
    write_whole,
)
from hologyre.results.store import FrameStore
from hologyre.stacks import as_stack, open_stack
from hologyre.survey import SurveyError, survey
from hologyre.tables import SINGULARITIES, TRAJECTORIES, empty

TABLES = ("trajectories.csv", "singularities.csv", "events.csv", "frames.csv")


@pytest.fixture(scope="module")
def stack(stack_file: Path) -> xr.DataArray:
    return open_stack(stack_file)


@pytest.fixture(scope="module")
def recipe(stack: xr.DataArray) -> Recipe:
    return survey(stack)


@pytest.fixture(scope="module")
def finished(
    stack: xr.DataArray, recipe: Recipe, tmp_path_factory: pytest.TempPathFactory
) -> RunSummary:
    folder = tmp_path_factory.mktemp("finished") / "out"
    return run(stack, folder, recipe, keep_fields=True, draw=lambda analysis: b"a picture")


def content(folder: Path) -> dict[str, bytes]:
    """All that must not depend on how a run came to its end: everything but run.json."""
    return {
        str(path.relative_to(folder)): path.read_bytes()
        for path in sorted(folder.rglob("*"))
        if path.is_file() and path.name != "run.json"
    }


def stop_after(count: int) -> Callable[[int, int], None]:
    """Press Ctrl-C after some frames."""

    def progress(done: int, total: int) -> None:
        if done == count:
            raise KeyboardInterrupt

    return progress


def test_run_writes_every_file_and_leaves_nothing_else(finished: RunSummary) -> None:
    written = {path.name for path in finished.folder.iterdir()}
    assert written == {*TABLES, "recipe.toml", "run.json", "overview.png", "fields.zarr"}
    assert set(finished.files) == written


def test_run_json_tells_the_input_the_versions_and_the_outcome(
    finished: RunSummary, stack_file: Path
) -> None:
    about = json.loads((finished.folder / "run.json").read_text(encoding="utf-8"))
    assert about["status"] == finished.status == "done"
    assert about["input"]["paths"] == [str(stack_file)]
    assert about["input"]["shape"] == [6, 128, 128]
    assert about["input"]["checksum"].startswith("sha256:")
    assert {"python", "numpy", "scipy"} <= set(about["versions"])
    assert about["counts"]["frames"] == 6
    assert set(about["seconds"]) == {"survey", "frames", "motion", "writing"}


def test_run_is_what_analyse_finds(
    finished: RunSummary, stack: xr.DataArray, recipe: Recipe
) -> None:
    analysis, result = analyse(stack, recipe), load_result(finished.folder)
    assert result.recipe == analysis.recipe
    for name in ("singularities", "trajectories", "events", "frames"):
        pd.testing.assert_frame_equal(
            getattr(result, name), getattr(analysis, name), check_exact=True
        )
    assert result.fields is not None
    assert len(result.fields) == 6
    kept, found = result.fields[4], analysis.fields[4]
    np.testing.assert_array_equal(kept.values, found.values)
    assert (kept.grid, kept.tilt_per_px) == (found.grid, found.tilt_per_px)
    assert kept.radius_per_px == found.radius_per_px


def test_tables_are_sorted_as_the_contract_says(finished: RunSummary) -> None:
    result = load_result(finished.folder)
    for table, keys in (
        (result.trajectories, ["track", "frame"]),
        (result.singularities, ["frame", "singularity"]),
        (result.frames, ["frame"]),
    ):
        pd.testing.assert_frame_equal(table, table.sort_values(keys, kind="stable"))


def test_recipe_as_used_is_written(finished: RunSummary, recipe: Recipe) -> None:
    assert load_recipe(finished.folder / "recipe.toml") == recipe


def test_csv_floats_read_back_bit_for_bit(tmp_path: Path) -> None:
    values = np.random.default_rng(1).normal(size=50) * 10.0 ** np.arange(-25, 25)
    table = empty(SINGULARITIES).reindex(range(50)).assign(
        frame=range(50), charge=1, singularity=range(50), y_px=values, origin="found"
    )  # fmt: skip
    (tmp_path / "t.csv").write_bytes(csv_bytes(table, SINGULARITIES))
    again = read_csv(tmp_path / "t.csv", SINGULARITIES)
    assert again["y_px"].tolist() == values.tolist()
    assert again["x_px"].isna().all()


def test_csv_is_plain_text_with_unix_line_ends() -> None:
    text = csv_bytes(empty(TRAJECTORIES), TRAJECTORIES)
    assert text == (",".join(c.name for c in TRAJECTORIES) + "\n").encode()


@pytest.mark.parametrize("workers", [1, 2])
def test_interrupted_run_keeps_what_is_finished(
    stack: xr.DataArray, recipe: Recipe, tmp_path: Path, workers: int
) -> None:
    summary = run(stack, tmp_path / "out", recipe, workers=workers, progress=stop_after(3))
    assert summary.status == "interrupted"
    result = load_result(tmp_path / "out")
    assert result.run["status"] == "interrupted"
    assert result.frames["frame"].tolist() == [0, 1, 2]
    assert result.trajectories["frame"].max() == 2
    assert "Interrupted after 3 of 6 frames; go on by --resume." in result.run["warnings"]


def test_resumed_run_ends_with_the_same_bytes(
    finished: RunSummary, stack: xr.DataArray, recipe: Recipe, tmp_path: Path
) -> None:
    folder = tmp_path / "out"
    run(stack, folder, recipe, progress=stop_after(2))
    seen: list[int] = []
    summary = run(
        stack, folder, recipe, existing="resume", keep_fields=True, workers=2,
        progress=lambda done, total: seen.append(done), draw=lambda analysis: b"a picture",
    )  # fmt: skip
    assert seen == [2, 3, 4, 5, 6]
    assert summary.status == "done"
    assert content(folder) == content(finished.folder)


def test_killed_run_can_be_resumed(
    finished: RunSummary, stack: xr.DataArray, recipe: Recipe, tmp_path: Path
) -> None:
    folder = tmp_path / "out"

    def die(done: int, total: int) -> None:
        if done == 2:
            raise MemoryError

    with pytest.raises(MemoryError):
        run(stack, folder, recipe, progress=die)
    assert not (folder / "run.json").exists()
    run(stack, folder, recipe, existing="resume", keep_fields=True, draw=lambda _: b"a picture")
    assert content(folder) == content(finished.folder)


def test_resuming_a_finished_run_changes_nothing(
    finished: RunSummary, stack: xr.DataArray, recipe: Recipe
) -> None:
    before = content(finished.folder)
    again = run(stack, finished.folder, recipe, existing="resume", progress=stop_after(0))
    assert again == finished
    assert content(finished.folder) == before


def test_folder_of_another_run_is_refused(
    finished: RunSummary, stack: xr.DataArray, recipe: Recipe
) -> None:
    before = content(finished.folder)
    with pytest.raises(OutputError, match=r"holds the results of another run; .*--replace"):
        run(stack, finished.folder, recipe)
    assert content(finished.folder) == before


def test_interrupted_run_is_refused_with_both_ways_out(
    stack: xr.DataArray, recipe: Recipe, tmp_path: Path
) -> None:
    run(stack, tmp_path, recipe, progress=stop_after(1))
    with pytest.raises(OutputError, match=r"interrupted after 1 frames; .*--resume .* --replace"):
        run(stack, tmp_path, recipe)


def test_replaced_run_is_begun_anew(stack: xr.DataArray, recipe: Recipe, tmp_path: Path) -> None:
    run(stack, tmp_path, recipe, progress=stop_after(1), keep_fields=True)
    seen: list[int] = []
    run(stack, tmp_path, recipe, existing="replace", progress=lambda n, _: seen.append(n))
    assert seen == [0, 1, 2, 3, 4, 5, 6]
    assert not (tmp_path / "fields.zarr").exists()


def test_run_is_not_resumed_with_other_images_or_another_recipe(
    stack: xr.DataArray, recipe: Recipe, holograms: NDArray[Any], tmp_path: Path
) -> None:
    run(stack, tmp_path, recipe, progress=stop_after(1))
    other = recipe.with_settings({"motion.max_gap": 5})
    with pytest.raises(OutputError, match=r"another recipe \(there max_gap = 2, here max_gap = 5"):
        run(stack, tmp_path, other, existing="resume")
    images = as_stack(holograms[:, ::-1].copy())
    with pytest.raises(OutputError, match="begun with other images"):
        run(images, tmp_path, recipe, existing="resume")


def test_finished_run_is_not_written_over_by_resuming_another(
    finished: RunSummary, stack: xr.DataArray, recipe: Recipe
) -> None:
    before = content(finished.folder)
    other = recipe.with_settings({"motion.max_gap": 5})
    with pytest.raises(OutputError, match="finished results of other images or another recipe"):
        run(stack, finished.folder, other, existing="resume")
    assert content(finished.folder) == before


def test_foreign_files_in_the_folder_are_left_alone(
    stack: xr.DataArray, recipe: Recipe, tmp_path: Path
) -> None:
    (tmp_path / "notes.txt").write_text("mine")
    run(stack, tmp_path, recipe.with_settings({"stack.frames": ":2"}))
    assert (tmp_path / "notes.txt").read_text() == "mine"


def test_folder_that_cannot_be_written_is_told_before_computing(
    stack: xr.DataArray, recipe: Recipe, tmp_path: Path
) -> None:
    (tmp_path / "file").write_text("x")
    for folder in (tmp_path / "file", tmp_path / "file" / "out"):
        with pytest.raises(OutputError, match=r"file.*--out"):
            run(stack, folder, recipe, progress=stop_after(0))


def test_run_in_which_no_frame_can_be_used_leaves_no_folder(
    stack: xr.DataArray, recipe: Recipe, tmp_path: Path
) -> None:
    flat = as_stack(np.random.default_rng(0).poisson(80, (2, 128, 128)).astype(np.uint8))
    with pytest.raises(SurveyError, match=r"none of its 2 frames could be used \(no fringes"):
        run(flat, tmp_path / "out", recipe)
    assert not (tmp_path / "out").exists()


def test_one_frame_runs_without_motion(stack: xr.DataArray, recipe: Recipe, tmp_path: Path) -> None:
    summary = run(stack, tmp_path, recipe.with_settings({"stack.frames": "3:4"}))
    assert (summary.frames, summary.tracks, summary.events) == (1, 0, 0)
    result = load_result(tmp_path)
    assert result.frames["frame"].tolist() == [3]
    assert result.trajectories.empty


def test_skipped_frames_are_told_once_for_each_reason(
    holograms: NDArray[Any], recipe: Recipe, tmp_path: Path
) -> None:
    frames = np.array(holograms)
    frames[1:4] = 9
    summary = run(as_stack(frames), tmp_path, recipe)
    told = [warning for warning in summary.warnings if "skipped" in warning]
    assert told == ["Frames 1, 2, 3 skipped: all pixels have the same value, 9."]


def test_what_is_wrong_with_the_fringes_is_told(
    holograms: NDArray[Any], recipe: Recipe, tmp_path: Path
) -> None:
    weak = np.clip(0.1 * (holograms.astype(np.float32) - 60) + 60, 0, 255)
    summary = run(as_stack(weak), tmp_path, recipe)
    assert any(warning.startswith("The fringes are weak") for warning in summary.warnings)


def test_file_held_open_by_a_spreadsheet_gets_a_name_beside_it(
    stack: xr.DataArray, recipe: Recipe, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    really = os.replace

    def locked(source: Path, target: Path) -> None:
        if Path(target).name == "trajectories.csv":
            raise PermissionError(13, "in use")
        really(source, target)

    monkeypatch.setattr(os, "replace", locked)
    summary = run(stack, tmp_path, recipe.with_settings({"stack.frames": ":2"}))
    told = "trajectories.csv is open in another program; it was written as trajectories-new.csv."
    assert told in summary.warnings
    assert summary.files["trajectories.csv"] == tmp_path / "trajectories-new.csv"
    assert len(load_result(tmp_path).trajectories) > 0
    assert not list(tmp_path.glob(".trajectories*"))


def test_file_that_cannot_be_put_anywhere_is_told(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def locked(source: Path, target: Path) -> None:
        raise PermissionError(13, "in use")

    monkeypatch.setattr(os, "replace", locked)
    with pytest.raises(OutputError, match=r"a\.csv: another program holds this file"):
        write_whole(tmp_path / "a.csv", b"")
    assert list(tmp_path.iterdir()) == []


def test_file_is_never_seen_half_written(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "a.csv").write_bytes(b"before")

    def full(path: Path, data: bytes) -> int:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(Path, "write_bytes", full)
    with pytest.raises(OSError, match="No space left"):
        write_whole(tmp_path / "a.csv", b"after")
    assert (tmp_path / "a.csv").read_bytes() == b"before"


def test_stored_frame_comes_back_exactly(
    stack: xr.DataArray, recipe: Recipe, tmp_path: Path
) -> None:
    run(stack, tmp_path, recipe, progress=stop_after(2))
    store = FrameStore(tmp_path / ".partial")
    assert store.frames() == (0, 1)
    field = store.field(1)
    np.testing.assert_array_equal(field.values, analyse(stack, recipe).fields[1].values)


def test_folder_without_a_result_is_told(tmp_path: Path) -> None:
    with pytest.raises(OutputError, match=r"holds no result \(run\.json is missing\)"):
        load_result(tmp_path)


def test_default_folder_lies_beside_the_stack(stack: xr.DataArray, stack_file: Path) -> None:
    assert default_folder(stack) == stack_file.parent / "speckle.hologyre"
