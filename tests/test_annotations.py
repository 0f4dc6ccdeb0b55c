"""Edits by hand replayed by a run."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from numpy.typing import NDArray

from hologyre.analyse import analyse
from hologyre.edits import (
    NAME,
    Barrier,
    Corrections,
    CutTrack,
    Delete,
    FlipCharge,
    Found,
    Log,
    LogError,
    Move,
    Place,
    Region,
    RenameTrack,
    found_of,
    recount,
)
from hologyre.motion import Motion
from hologyre.recipe import Recipe
from hologyre.results import OutputError, Result, RunSummary, csv_bytes, load_result, run
from hologyre.stacks import as_stack, open_stack
from hologyre.survey import survey
from hologyre.tables import EVENTS, FRAMES, SINGULARITIES, TRAJECTORIES

TABLES = {
    "singularities": SINGULARITIES,
    "trajectories": TRAJECTORIES,
    "events": EVENTS,
    "frames": FRAMES,
}


@pytest.fixture(scope="module")
def stack(stack_file: Path) -> xr.DataArray:
    return open_stack(stack_file)


@pytest.fixture(scope="module")
def recipe(stack: xr.DataArray) -> Recipe:
    return survey(stack)


@pytest.fixture(scope="module")
def plain(
    stack: xr.DataArray, recipe: Recipe, tmp_path_factory: pytest.TempPathFactory
) -> RunSummary:
    return run(stack, tmp_path_factory.mktemp("plain") / "out", recipe)


def laid_out(tables: Any, recipe: Recipe) -> Found:
    return found_of(
        tables.singularities,
        Motion(tables.trajectories, tables.events),
        frames=range(6),
        frame_shape=(128, 128),
        region=recipe.stack.region,
        margin_px=recipe.singularities.margin_px,
        max_step_px=recipe.motion.max_step_px,
        max_gap=recipe.motion.max_gap,
    )


def work_on(tables: Any, recipe: Recipe, path: Path) -> Corrections:
    """A session: edits of many kinds, one against the winding, one undone."""
    work = Corrections(laid_out(tables, recipe), Log(path, author="Ada"))
    track = tables.trajectories.groupby("track").filter(lambda rows: len(rows) == 6)
    rows = [rows for _, rows in track.groupby("track")]
    assert len(rows) >= 5
    a, b, c, d, e = (one.set_index("frame")[["y_px", "x_px", "charge"]] for one in rows[:5])
    done = [
        Delete(frame=2, where=place(a, 2), charge=charge(a), reason="dust on the lens"),
        Move(frame=3, where=place(b, 3), charge=charge(b), to=place(b, 3, 0.2), winding=charge(b)),
        CutTrack(frame=1, where=(place(c, 1), place(c, 2)), later_frame=2, charge=charge(c)),
        RenameTrack(frame=0, where=place(d, 0), charge=charge(d), track=0, new_track=900),
        Place(frame=4, where=(3.0, 3.0), charge=1, winding=1),
        Place(frame=4, where=(3.4, 3.3), charge=-1, winding=-1),
        Region(frame=None, where=((90, 90), (90, 110), (110, 110), (110, 90)), use="leave out"),
        Barrier(frame=1, where=((10.0, 10.0), (20.0, 30.0))),
        FlipCharge(frame=5, where=place(e, 5), charge=charge(e), reason="a slip"),
    ]
    for edit in done:
        assert work.do(edit), edit
    assert work.undo()
    return work


def place(track: pd.DataFrame, frame: int, by: float = 0.0) -> tuple[float, float]:
    return float(track.loc[frame, "y_px"]) + by, float(track.loc[frame, "x_px"])


def charge(track: pd.DataFrame) -> int:
    return int(track["charge"].iloc[0])


@pytest.fixture(scope="module")
def log_file(plain: RunSummary, recipe: Recipe, tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("log") / "ada.jsonl"
    work_on(load_result(plain.folder), recipe, path)
    return path


@pytest.fixture(scope="module")
def annotated(
    stack: xr.DataArray, recipe: Recipe, log_file: Path, tmp_path_factory: pytest.TempPathFactory
) -> RunSummary:
    folder = tmp_path_factory.mktemp("annotated") / "out"
    return run(stack, folder, recipe, annotations=log_file)


def content(folder: Path) -> dict[str, bytes]:
    return {
        str(path.relative_to(folder)): path.read_bytes()
        for path in sorted(folder.rglob("*"))
        if path.is_file() and path.name != "run.json"
    }


def about(folder: Path) -> dict[str, Any]:
    described: dict[str, Any] = json.loads((folder / "run.json").read_text(encoding="utf-8"))
    return described


def stop_after(count: int) -> Callable[[int, int], None]:
    def progress(done: int, total: int) -> None:
        if done == count:
            raise KeyboardInterrupt

    return progress


def test_replayed_tables_are_those_of_a_session_byte_for_byte(
    annotated: RunSummary, stack: xr.DataArray, recipe: Recipe, tmp_path: Path
) -> None:
    # the session works on what analyse finds, not on files
    analysis = analyse(stack, recipe)
    tables = work_on(analysis, recipe, tmp_path / NAME).tables
    expected = {
        "singularities": tables.singularities,
        "trajectories": tables.trajectories,
        "events": tables.events,
        "frames": recount(analysis.frames, tables),
    }
    assert {"placed", "moved"} <= set(tables.singularities["origin"])
    for name, columns in TABLES.items():
        written = (annotated.folder / f"{name}.csv").read_bytes()
        assert written == csv_bytes(expected[name], columns), name


def test_tables_as_found_and_the_log_are_kept_with_the_results(
    annotated: RunSummary, plain: RunSummary, log_file: Path
) -> None:
    for name in TABLES:
        kept, without = annotated.folder / "found", plain.folder
        assert (kept / f"{name}.csv").read_bytes() == (without / f"{name}.csv").read_bytes()
        assert f"found/{name}.csv" in annotated.files
    assert (annotated.folder / NAME).read_bytes() == log_file.read_bytes()
    assert {path.name for path in annotated.folder.iterdir()} == {
        *(f"{name}.csv" for name in TABLES), "found", NAME, "recipe.toml", "run.json",
    }  # fmt: skip


def test_run_json_names_the_log_with_its_checksum(annotated: RunSummary, log_file: Path) -> None:
    assert about(annotated.folder)["annotations"] == {
        "path": str(log_file),
        "checksum": f"sha256:{hashlib.sha256(log_file.read_bytes()).hexdigest()}",
        "edits": 8,
        "misfits": 0,
        "contradictions": 1,
    }


def test_counts_of_the_summary_are_those_of_the_corrected_tables(annotated: RunSummary) -> None:
    result = load_result(annotated.folder)
    assert annotated.singularities == len(result.singularities)
    assert annotated.tracks == result.trajectories["track"].nunique()
    assert annotated.events == len(result.events)


def test_edits_against_the_winding_are_told(annotated: RunSummary) -> None:
    told = "1 edit contradicts the measured winding (number 1); why is told in edits.jsonl."
    assert told in annotated.warnings
    audit = load_result(annotated.folder).frames.set_index("frame")["audit"]
    assert audit[2].endswith("edit 1 by hand against the winding")


def test_later_session_takes_the_work_up_from_the_folder(
    annotated: RunSummary, recipe: Recipe
) -> None:
    result = load_result(annotated.folder)
    assert result.annotations == annotated.folder / NAME
    work = Corrections(laid_out(result.as_found, recipe), Log(result.annotations))
    tables = work.tables
    pd.testing.assert_frame_equal(tables.singularities, result.singularities, check_exact=True)
    pd.testing.assert_frame_equal(tables.trajectories, result.trajectories, check_exact=True)
    pd.testing.assert_frame_equal(
        recount(result.as_found.frames, tables), result.frames, check_exact=True
    )


def test_result_without_edits_is_as_found(plain: RunSummary) -> None:
    result: Result = load_result(plain.folder)
    assert result.annotations is None
    assert about(plain.folder)["annotations"] is None
    assert result.as_found.singularities is result.singularities


def test_torn_last_line_is_told_and_left_out(
    stack: xr.DataArray, recipe: Recipe, log_file: Path, tmp_path: Path
) -> None:
    lines = log_file.read_bytes().splitlines(keepends=True)
    torn, whole = tmp_path / "torn.jsonl", tmp_path / "whole.jsonl"
    torn.write_bytes(b"".join(lines[:3]) + lines[3][:40])
    whole.write_bytes(b"".join(lines[:3]))
    summary = run(stack, tmp_path / "torn", recipe, annotations=torn)
    run(stack, tmp_path / "whole", recipe, annotations=whole)
    assert any("line 4: this last line is broken off" in told for told in summary.warnings)
    for name in TABLES:
        assert (
            summary.files[f"{name}.csv"].read_bytes()
            == (tmp_path / "whole" / f"{name}.csv").read_bytes()
        )


def test_edits_that_fit_no_longer_are_listed_by_number(
    stack: xr.DataArray, recipe: Recipe, plain: RunSummary, tmp_path: Path
) -> None:
    log = Log(tmp_path / "log.jsonl")
    log.append(Delete(frame=2, where=(-50.0, -50.0), charge=1, reason="dust"))
    log.append(Place(frame=70, where=(5.0, 5.0), charge=1, winding=1))
    summary = run(stack, tmp_path / "out", recipe, annotations=tmp_path / "log.jsonl")
    assert any(told.startswith("Edit 1 (delete): No singularity") for told in summary.warnings)
    assert "Edit 2 (place): Frame 70 is not among the frames that were measured." in (
        summary.warnings
    )
    assert about(tmp_path / "out")["annotations"]["misfits"] == 2
    assert summary.singularities == plain.singularities


def test_edits_are_replayed_on_what_another_recipe_finds(
    stack: xr.DataArray, recipe: Recipe, log_file: Path, tmp_path: Path
) -> None:
    other = recipe.with_settings({"singularities.margin_px": 8.0, "motion.max_gap": 1})
    run(stack, tmp_path, other, annotations=log_file)
    result = load_result(tmp_path)
    work = Corrections(laid_out(result.as_found, other), Log(log_file))
    pd.testing.assert_frame_equal(work.tables.trajectories, result.trajectories, check_exact=True)
    # the pair put in at (3, 3) lies in the margin: it stays what the hand has made of it
    placed = result.singularities[result.singularities["origin"] == "placed"]
    assert placed["y_px"].tolist() == [3.0, 3.4]


@pytest.mark.parametrize(
    ("text", "told"),
    [
        (None, r"log\.jsonl: there is no such log"),
        ('{"edit": 1}\n', r"line 1: this is not a log of edits"),
        ('{"log": "hologyre edits", "version": 1}\n{"edit": 1, "kind": "smudge"}\n',
         r"line 2: kind: unknown kind of edit 'smudge'"),
    ],
)  # fmt: skip
def test_log_that_cannot_be_read_is_told_before_anything_is_written(
    stack: xr.DataArray, recipe: Recipe, tmp_path: Path, text: str | None, told: str
) -> None:
    path = tmp_path / "log.jsonl"
    if text is not None:
        path.write_text(text, encoding="utf-8")
    with pytest.raises(LogError, match=told):
        run(stack, tmp_path / "out", recipe, annotations=path, progress=stop_after(0))
    assert not (tmp_path / "out").exists()


def test_resumed_run_ends_with_the_same_bytes(
    annotated: RunSummary, stack: xr.DataArray, recipe: Recipe, log_file: Path, tmp_path: Path
) -> None:
    stopped = run(stack, tmp_path, recipe, annotations=log_file, progress=stop_after(3))
    assert "Edit 5 (place): Frame 4 is not among the frames that were measured." in (
        stopped.warnings
    )
    run(stack, tmp_path, recipe, annotations=log_file, existing="resume")
    assert content(tmp_path) == content(annotated.folder)


def test_interrupted_run_may_go_on_with_other_edits(
    annotated: RunSummary, stack: xr.DataArray, recipe: Recipe, log_file: Path, tmp_path: Path
) -> None:
    run(stack, tmp_path, recipe, progress=stop_after(3))
    run(stack, tmp_path, recipe, annotations=log_file, existing="resume")
    assert content(tmp_path) == content(annotated.folder)


def test_resuming_a_finished_run_changes_nothing(
    annotated: RunSummary, stack: xr.DataArray, recipe: Recipe, log_file: Path
) -> None:
    before = content(annotated.folder)
    again = run(
        stack, annotated.folder, recipe, annotations=log_file, existing="resume",
        progress=stop_after(0),
    )  # fmt: skip
    assert again == annotated
    assert content(annotated.folder) == before


def test_finished_run_is_not_written_over_by_resuming_it_with_other_edits(
    annotated: RunSummary, plain: RunSummary, stack: xr.DataArray, recipe: Recipe, log_file: Path
) -> None:
    for summary, log in ((annotated, None), (plain, log_file)):
        before = content(summary.folder)
        with pytest.raises(OutputError, match="with other edits by hand; write over them"):
            run(stack, summary.folder, recipe, annotations=log, existing="resume")
        assert content(summary.folder) == before


def test_log_that_lies_in_the_result_folder_is_replayed_and_kept(
    stack: xr.DataArray, recipe: Recipe, log_file: Path, tmp_path: Path
) -> None:
    # a viewer session writes it there, before any run
    log = tmp_path / NAME
    log.write_bytes(log_file.read_bytes())
    summary = run(stack, tmp_path, recipe.with_settings({"stack.frames": ":2"}), annotations=log)
    assert summary.files[NAME] == log
    assert log.read_bytes() == log_file.read_bytes()
    assert load_result(tmp_path).annotations == log


def test_other_work_by_hand_in_the_folder_is_never_written_over(
    stack: xr.DataArray, recipe: Recipe, log_file: Path, tmp_path: Path
) -> None:
    mine = Log(tmp_path / NAME)
    mine.append(Barrier(frame=0, where=((0.0, 0.0), (9.0, 9.0))))
    before = (tmp_path / NAME).read_bytes()
    with pytest.raises(OutputError, match=r"holds other edits than .*; replay that log"):
        run(stack, tmp_path, recipe, annotations=log_file, existing="replace")
    assert content(tmp_path) == {NAME: before}


def test_work_begun_in_the_folder_during_the_run_is_kept_beside_the_copy(
    stack: xr.DataArray, recipe: Recipe, log_file: Path, tmp_path: Path
) -> None:
    def work(done: int, total: int) -> None:
        if done == 1:
            Log(tmp_path / NAME).append(Barrier(frame=0, where=((0.0, 0.0), (9.0, 9.0))))

    two = recipe.with_settings({"stack.frames": ":2"})
    summary = run(stack, tmp_path, two, annotations=log_file, progress=work)
    assert len(Log(tmp_path / NAME).edits) == 1
    assert summary.files[NAME] == tmp_path / "edits-replayed.jsonl"
    assert summary.files[NAME].read_bytes() == log_file.read_bytes()


def test_run_with_another_log_replaces_the_copy_of_the_first(
    stack: xr.DataArray, recipe: Recipe, log_file: Path, tmp_path: Path
) -> None:
    two = recipe.with_settings({"stack.frames": ":2"})
    run(stack, tmp_path / "out", two, annotations=log_file)
    other = tmp_path / "other.jsonl"
    Log(other).append(Barrier(frame=0, where=((0.0, 0.0), (9.0, 9.0))))
    summary = run(stack, tmp_path / "out", two, annotations=other, existing="replace")
    assert summary.files[NAME] == tmp_path / "out" / NAME
    assert summary.files[NAME].read_bytes() == other.read_bytes()


def test_run_without_edits_leaves_no_tables_as_found_and_tells_of_the_log(
    stack: xr.DataArray, recipe: Recipe, log_file: Path, tmp_path: Path
) -> None:
    two = recipe.with_settings({"stack.frames": ":2"})
    run(stack, tmp_path, two, annotations=log_file)
    summary = run(stack, tmp_path, two, existing="replace")
    assert not (tmp_path / "found").exists()
    assert (tmp_path / NAME).read_bytes() == log_file.read_bytes()
    told = "The edits by hand in edits.jsonl are not in the tables; replay them by --annotations."
    assert told in summary.warnings


def test_one_frame_without_tracks_takes_edits_of_singularities(
    stack: xr.DataArray, recipe: Recipe, log_file: Path, tmp_path: Path
) -> None:
    one = recipe.with_settings({"stack.frames": "4:5"})
    summary = run(stack, tmp_path, one, annotations=log_file)
    result = load_result(tmp_path)
    assert result.trajectories.empty
    assert (result.singularities["origin"] == "placed").sum() == 2
    assert any("Edit 1 (delete): Frame 2" in told for told in summary.warnings)


def test_stack_without_singularities_takes_edits(recipe: Recipe, tmp_path: Path) -> None:
    y, x = np.indices((128, 128))
    phase = 2 * np.pi * (recipe.carrier.fy * y + recipe.carrier.fx * x)  # type: ignore[operator]
    plane: NDArray[Any] = np.round(100 + 60 * np.cos(phase)).astype(np.uint8)
    Log(tmp_path / "log").append(Place(frame=1, where=(5.0, 5.0), charge=1, winding=1))
    run(as_stack(np.stack([plane] * 3)), tmp_path / "out", recipe, annotations=tmp_path / "log")
    result = load_result(tmp_path / "out")
    assert result.as_found.singularities.empty
    assert result.singularities[["frame", "y_px"]].to_numpy().tolist() == [[1, 5.0]]
    assert result.frames["positive"].tolist() == [0, 1, 0]
