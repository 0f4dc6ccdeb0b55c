from __future__ import annotations

import csv
import json
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
import tifffile
from numpy.typing import NDArray

from hologyre.cli import main
from hologyre.edits import Log, Place
from hologyre.recipe import load_recipe
from hologyre.results import load_result

COMMAND = [sys.executable, "-c", "from hologyre.cli import main; main()"]


@dataclass(frozen=True)
class Outcome:
    status: int
    out: str
    err: str


@pytest.fixture(autouse=True)
def _own_signals() -> Iterator[None]:
    before = signal.getsignal(signal.SIGTERM)
    yield
    signal.signal(signal.SIGTERM, before)


@pytest.fixture
def hologyre(capfd: pytest.CaptureFixture[str]) -> Any:
    def call(*arguments: object) -> Outcome:
        with pytest.raises(SystemExit) as end:
            main([str(argument) for argument in arguments])
        captured = capfd.readouterr()
        assert isinstance(end.value.code, int)
        return Outcome(end.value.code, captured.out, captured.err)

    return call


def tree(folder: Path) -> set[str]:
    return {str(path.relative_to(folder)) for path in folder.rglob("*")}


def test_run_tells_where_the_tables_and_the_figure_went(
    hologyre: Any, stack_file: Path, tmp_path: Path
) -> None:
    done = hologyre("run", stack_file, "--out", tmp_path / "out", "--workers", 2)
    assert done.status == 0
    assert "speckle: 6 of 6 frames measured: " in done.out
    assert f"trajectories: {tmp_path}/out/trajectories.csv" in done.out
    assert f"overview: {tmp_path}/out/overview.png" in done.out
    assert (tmp_path / "out" / "overview.png").read_bytes().startswith(b"\x89PNG")
    assert "skipped" not in done.err


def test_results_go_beside_the_stack_by_default(
    hologyre: Any, holograms: NDArray[Any], tmp_path: Path
) -> None:
    tifffile.imwrite(tmp_path / "film.ome.tif", holograms[:2], ome=True, metadata={"axes": "TYX"})
    assert hologyre("run", tmp_path / "film.ome.tif").status == 0
    assert (tmp_path / "film.hologyre" / "run.json").exists()


def test_frames_option_keeps_the_stack_numbers(
    hologyre: Any, stack_file: Path, tmp_path: Path
) -> None:
    assert hologyre("run", stack_file, "--out", tmp_path, "--frames", "2:4").status == 0
    assert load_result(tmp_path).frames["frame"].tolist() == [2, 3]


def test_keep_fields_writes_them(hologyre: Any, stack_file: Path, tmp_path: Path) -> None:
    options = ("--out", tmp_path, "--frames", ":2", "--keep-fields")
    assert hologyre("run", stack_file, *options).status == 0
    fields = load_result(tmp_path).fields
    assert fields is not None
    assert len(fields) == 2


def test_annotations_are_replayed(hologyre: Any, stack_file: Path, tmp_path: Path) -> None:
    log = tmp_path / "ada.jsonl"
    Log(log).append(Place(frame=1, where=(3.0, 3.0), charge=1, winding=1))
    out = tmp_path / "out"
    options = ("run", stack_file, "--out", out, "--frames", ":2", "--annotations", log)
    assert hologyre(*options).status == 0
    result = load_result(out)
    assert result.singularities["origin"].eq("placed").sum() == 1
    assert result.annotations == out / "edits.jsonl"
    done = hologyre(*options, "--resume")
    assert done.status == 0
    assert "2 of 2 frames measured" in done.out


def test_edits_that_do_not_fit_are_told_and_the_run_is_done(
    hologyre: Any, stack_file: Path, tmp_path: Path
) -> None:
    log = tmp_path / "ada.jsonl"
    Log(log).append(Place(frame=5, where=(3.0, 3.0), charge=1, winding=1))
    options = ("--out", tmp_path / "out", "--frames", ":2", "--annotations", log)
    done = hologyre("run", stack_file, *options)
    assert done.status == 0
    assert "hologyre: speckle: Edit 1 (place): Frame 5 is not among the frames" in done.err


@pytest.mark.parametrize("text", [None, "frame,y,x\n0,1,2\n"])
def test_bad_log_of_edits_is_one_sentence_status_2_and_nothing_written(
    hologyre: Any, stack_file: Path, tmp_path: Path, text: str | None
) -> None:
    log = tmp_path / "ada.jsonl"
    if text is not None:
        log.write_text(text, encoding="utf-8")
    before = tree(tmp_path)
    done = hologyre("run", stack_file, "--out", tmp_path / "out", "--annotations", log)
    assert done.status == 2
    assert done.err.startswith(f"hologyre: {log}")
    assert done.err.count("\n") == 1
    assert tree(tmp_path) == before


def test_annotations_take_one_stack(hologyre: Any, stack_file: Path, tmp_path: Path) -> None:
    options = ("--out", tmp_path / "out", "--annotations", tmp_path / "ada.jsonl")
    done = hologyre("run", stack_file, stack_file, *options)
    assert done.status == 2
    assert "--annotations: a log of edits is of one stack, and 2 are given" in done.err
    assert not (tmp_path / "out").exists()


def test_recipe_command_writes_what_run_then_uses(
    hologyre: Any, stack_file: Path, tmp_path: Path
) -> None:
    recipe = tmp_path / "mine.toml"
    assert hologyre("recipe", stack_file, "--out", recipe).status == 0
    assert load_recipe(recipe).undecided() == ()
    out = tmp_path / "out"
    assert hologyre("run", stack_file, "--recipe", recipe, "--out", out).status == 0
    assert load_result(out).recipe == load_recipe(recipe)


def test_recipe_command_prints_without_out(hologyre: Any, stack_file: Path) -> None:
    done = hologyre("recipe", stack_file)
    assert done.status == 0
    assert "[carrier]" in done.out


def test_recipe_is_not_written_over(hologyre: Any, stack_file: Path, tmp_path: Path) -> None:
    (tmp_path / "r.toml").write_text("mine")
    done = hologyre("recipe", stack_file, "--out", tmp_path / "r.toml")
    assert done.status == 2
    assert "r.toml: there is such a file already" in done.err
    assert (tmp_path / "r.toml").read_text() == "mine"


def test_inspect_speaks_in_words_and_in_json(hologyre: Any, stack_file: Path) -> None:
    words, data = hologyre("inspect", stack_file), hologyre("inspect", stack_file, "--json")
    assert words.status == data.status == 0
    assert "px per fringe; visibility" in words.out
    found = json.loads(data.out)
    assert found["frames"] == 6
    assert found["fx_per_px"] == pytest.approx(0.19, abs=1 / 128)


def test_several_stacks_get_a_folder_each_and_a_summary(
    hologyre: Any, holograms: NDArray[Any], tmp_path: Path
) -> None:
    for name in ("a/one.tif", "b/one.tif", "two.tif"):
        (tmp_path / name).parent.mkdir(exist_ok=True)
        tifffile.imwrite(tmp_path / name, holograms[:2], photometric="minisblack")
    (tmp_path / "bad.tif").touch()
    names = ("a/one.tif", "bad.tif", "b/one.tif", "two.tif")
    done = hologyre("run", *(tmp_path / n for n in names), "--out", tmp_path / "out")
    assert done.status == 2
    assert "bad.tif: the file is empty" in done.err
    folders = {path.name for path in (tmp_path / "out").iterdir()}
    assert folders == {"one.hologyre", "one-2.hologyre", "two.hologyre", "summary.csv"}
    text = (tmp_path / "out" / "summary.csv").read_text(encoding="utf-8")
    rows = list(csv.DictReader(text.splitlines()))
    assert [row["status"] for row in rows] == ["done", "done", "done", "failed"]
    assert [row["folder"] for row in rows[:3]] == ["one.hologyre", "one-2.hologyre", "two.hologyre"]
    assert "empty" in rows[3]["remark"]


def test_quoted_pattern_is_one_stack(
    hologyre: Any, holograms: NDArray[Any], tmp_path: Path
) -> None:
    for n, frame in enumerate(holograms[:3]):
        tifffile.imwrite(tmp_path / f"f{n}.tif", frame)
    done = hologyre("run", tmp_path / "f*.tif", "--out", tmp_path / "out")
    assert done.status == 0
    assert len(load_result(tmp_path / "out").frames) == 3


def test_many_single_frames_are_told_how_to_become_one_stack(
    hologyre: Any, holograms: NDArray[Any], tmp_path: Path
) -> None:
    files = [tmp_path / f"f{n}.tif" for n in range(4)]
    for file in files:
        tifffile.imwrite(file, holograms[0])
    done = hologyre("run", *files, "--out", tmp_path / "out")
    assert done.status == 0
    assert "4 files of one frame each are taken for as many stacks; quote a pattern" in done.err


def test_view_opens_the_stack_with_the_result_beside_it(
    hologyre: Any, stack_file: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    stack = tmp_path / "a.tif"
    stack.write_bytes(stack_file.read_bytes())
    seen: list[Any] = []
    launch = SimpleNamespace(view=lambda source, result: seen.append((source, result)))
    monkeypatch.setitem(sys.modules, "napari", SimpleNamespace(run=lambda: seen.append("run")))
    monkeypatch.setitem(sys.modules, "hologyre.viewer.launch", launch)
    assert hologyre("view", stack).status == 0
    assert hologyre("run", stack, "--frames", ":1").status == 0
    assert hologyre("view", stack).status == 0
    assert hologyre("view", stack, "--result", tmp_path).status == 0
    beside = tmp_path / "a.hologyre"
    opened = [(str(stack), None), (str(stack), beside), (str(stack), tmp_path)]
    assert seen == [opened[0], "run", opened[1], "run", opened[2], "run"]


def test_simulate_writes_a_stack_that_runs(hologyre: Any, tmp_path: Path) -> None:
    done = hologyre("simulate", "weak-fringes", "--out", tmp_path / "sim")
    assert done.status == 0
    stack = next((tmp_path / "sim").glob("*.tif"))
    assert f"stack: {stack}" in done.out
    again = hologyre("simulate", "weak-fringes", "--out", tmp_path / "sim")
    assert again.status == 2
    assert "choose another folder by --out" in again.err


def test_skipped_frames_are_told_and_the_run_is_done(
    hologyre: Any, holograms: NDArray[Any], tmp_path: Path
) -> None:
    frames = np.array(holograms[:3])
    frames[1] = 7
    tifffile.imwrite(tmp_path / "a.tif", frames, compression="zlib", photometric="minisblack")
    done = hologyre("run", tmp_path / "a.tif", "--out", tmp_path / "out")
    assert done.status == 0
    assert "1 frames skipped" in done.out
    assert "hologyre: a: Frame 1 skipped: all pixels have the same value, 7.\n" in done.err


def unusable(kind: str, folder: Path, holograms: NDArray[Any]) -> Path:
    """Write an input that cannot be used."""
    path = folder / f"{kind}.tif"
    rng = np.random.default_rng(0)
    if kind == "empty":
        path.touch()
    elif kind == "text":
        path.write_text("frame,y,x\n0,1,2\n")
    elif kind == "truncated":
        tifffile.imwrite(path, holograms, photometric="minisblack")
        path.write_bytes(path.read_bytes()[:-1000])
    elif kind == "colour":
        tifffile.imwrite(path, np.stack([holograms[0]] * 3, axis=-1), photometric="rgb")
    elif kind == "channels":
        tifffile.imwrite(path, holograms.reshape(3, 2, 128, 128), imagej=True,
                         metadata={"axes": "TCYX"})  # fmt: skip
    elif kind == "sizes":
        with tifffile.TiffWriter(path) as writer:
            writer.write(holograms[0])
            writer.write(holograms[0, :64])
    elif kind == "nan":
        tifffile.imwrite(path, np.full((3, 128, 128), np.nan, "float32"), photometric="minisblack")
    elif kind == "fringeless":
        tifffile.imwrite(path, rng.poisson(80, (2, 128, 128)).astype("uint8"))
    return path


BAD_INPUTS = {
    "missing": "there is no such file; check the name",
    "empty": "the file is empty (0 bytes); copy or export it again",
    "text": "this is not a TIFF file (it begins with b'frame,y,x",
    "truncated": "the file is cut short: ",
    "colour": "holds colour frames (3 samples a pixel)",
    "channels": "holds several channels (3 along time and 2 along channel)",
    "sizes": "holds frames of different sizes (128x128, 64x128 px)",
    "nan": "none of its 3 frames can be used (frame 0: 16384 of 16384 pixels are NaN",
    "fringeless": "no fringes were found (frame 0: ",
}


@pytest.mark.parametrize("command", ["run", "inspect", "recipe"])
@pytest.mark.parametrize("kind", list(BAD_INPUTS))
def test_bad_input_is_one_sentence_status_2_and_nothing_written(
    hologyre: Any, holograms: NDArray[Any], tmp_path: Path, kind: str, command: str
) -> None:
    path = unusable(kind, tmp_path, holograms)
    before = tree(tmp_path)
    done = hologyre(command, path)
    assert done.status == 2
    assert done.out == ""
    assert done.err.startswith(f"hologyre: {path}: {BAD_INPUTS[kind]}")
    assert done.err.count("\n") == 1
    assert tree(tmp_path) == before


def test_bad_recipe_is_told_by_its_path_and_nothing_written(
    hologyre: Any, stack_file: Path, tmp_path: Path
) -> None:
    recipe = tmp_path / "r.toml"
    recipe.write_text('[carrier]\nradius = "wide"\nfz = 1\n')
    done = hologyre("run", stack_file, "--recipe", recipe, "--out", tmp_path / "out")
    assert done.status == 2
    assert f'{recipe}: carrier.radius: expected "auto" or a number above 0' in done.err
    assert "carrier.fz: unknown setting" in done.err
    assert done.err.count("\n") == 1
    assert not (tmp_path / "out").exists()


def test_folder_of_another_run_is_told_and_kept(
    hologyre: Any, stack_file: Path, tmp_path: Path
) -> None:
    arguments = ("run", stack_file, "--out", tmp_path, "--frames", ":1")
    assert hologyre(*arguments).status == 0
    before = (tmp_path / "run.json").read_bytes()
    done = hologyre(*arguments)
    assert done.status == 2
    assert "holds the results of another run; write over them by --replace" in done.err
    assert (tmp_path / "run.json").read_bytes() == before
    assert hologyre(*arguments, "--replace").status == 0


def test_folder_that_cannot_be_written_is_told_before_computing(
    hologyre: Any, stack_file: Path, tmp_path: Path
) -> None:
    (tmp_path / "file").touch()
    done = hologyre("run", stack_file, "--out", tmp_path / "file" / "out")
    assert done.status == 2
    assert "results cannot be written there" in done.err
    assert tree(tmp_path) == {"file"}


@pytest.mark.parametrize(
    ("arguments", "told"),
    [
        (("--replace", "--resume"), "--replace and --resume exclude each other"),
        (("--workers", "2", "--scheduler", "tcp://x"), "--workers and --scheduler exclude"),
        (("--frames", "3"), "stack.frames: expected A:B"),
        (("--frames", "7:9"), "stack.frames: 7:9 of frames 0 to 5: the range holds none"),
        (("--workers", "0"), "Invalid value for '--workers'"),
        (("--bogus",), "No such option"),
    ],
)
def test_options_that_do_not_fit_are_told(
    hologyre: Any, stack_file: Path, tmp_path: Path, arguments: tuple[str, ...], told: str
) -> None:
    done = hologyre("run", stack_file, "--out", tmp_path / "out", *arguments)
    assert done.status == 2
    assert told in done.err
    assert not (tmp_path / "out").exists()


def test_scheduler_that_does_not_answer_is_told(
    hologyre: Any, stack_file: Path, tmp_path: Path
) -> None:
    done = hologyre("run", stack_file, "--out", tmp_path / "out", "--scheduler", "nowhere")
    assert done.status == 2
    assert "nowhere: no dask scheduler answers at this address" in done.err
    assert not (tmp_path / "out").exists()


def test_unknown_scene_is_told_with_the_known_ones(hologyre: Any, tmp_path: Path) -> None:
    done = hologyre("simulate", "sunset", "--out", tmp_path / "out")
    assert done.status == 2
    assert "sunset: there is no such scene; choose among drying-film" in done.err
    assert not (tmp_path / "out").exists()


def test_version_is_told(hologyre: Any) -> None:
    done = hologyre("--version")
    assert done.status == 0
    assert done.out == "hologyre 0.1.0\n"


def test_viewer_that_is_not_installed_is_told(
    hologyre: Any, stack_file: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(sys.modules, "napari", None)
    done = hologyre("view", stack_file)
    assert done.status == 2
    assert done.err == (
        "hologyre: the viewer needs napari, which is not installed; run: pip install "
        "'hologyre[viewer]'.\n"
    )


def test_interrupted_run_keeps_what_is_finished_and_resumes(
    hologyre: Any, holograms: NDArray[Any], tmp_path: Path
) -> None:
    stack, out = tmp_path / "long.tif", tmp_path / "out"
    tifffile.imwrite(stack, np.concatenate([holograms] * 5), photometric="minisblack")
    options = ("run", str(stack), "--out", str(out))
    status, err = interrupted(options, out, signal.SIGINT)
    assert status == 130
    assert "Interrupted after" in err
    assert "Traceback" not in err
    kept = load_result(out)
    assert kept.run["status"] == "interrupted"
    assert 1 <= len(kept.frames) < 30
    assert hologyre(*options, "--resume").status == 0
    assert len(load_result(out).frames) == 30


def test_run_ended_by_a_cluster_keeps_what_is_finished(
    holograms: NDArray[Any], tmp_path: Path
) -> None:
    stack, out = tmp_path / "long.tif", tmp_path / "out"
    tifffile.imwrite(stack, np.concatenate([holograms] * 5), photometric="minisblack")
    status, err = interrupted(("run", str(stack), "--out", str(out)), out, signal.SIGTERM)
    assert status == 130
    assert "Interrupted after" in err
    assert load_result(out).run["status"] == "interrupted"


def interrupted(options: tuple[str, ...], out: Path, how: signal.Signals) -> tuple[int, str]:
    """Start a run, send it a signal once a frame is finished, return its status and stderr."""
    with subprocess.Popen(
        [*COMMAND, *options, "--workers", "1"], stderr=subprocess.PIPE, text=True
    ) as process:
        deadline = time.monotonic() + 60
        while not list(out.glob(".partial/*0.npz")) and time.monotonic() < deadline:
            time.sleep(0.01)
        process.send_signal(how)
        _, err = process.communicate(timeout=60)
    return process.returncode, err


def test_followed_folder_reports_each_new_image(holograms: NDArray[Any], tmp_path: Path) -> None:
    tifffile.imwrite(tmp_path / "f1.tif", holograms[0])
    with subprocess.Popen(
        [*COMMAND, "inspect", str(tmp_path), "--follow"],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
    ) as process:  # fmt: skip
        assert process.stdout is not None
        assert process.stdout.readline().startswith("f1.tif: carrier 0.1")
        (tmp_path / "f2.tif").write_bytes((tmp_path / "f1.tif").read_bytes()[:5000])
        tifffile.imwrite(tmp_path / "f3.tif", holograms[1])
        assert process.stdout.readline().startswith("f3.tif: carrier 0.1")
        process.send_signal(signal.SIGINT)
        _, err = process.communicate(timeout=30)
    assert process.returncode == 130
    assert "Traceback" not in err
