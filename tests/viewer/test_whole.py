from __future__ import annotations

import subprocess
import sys
import threading
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import tifffile
from napari.utils.notifications import notification_manager
from qtpy.QtCore import QThreadPool
from qtpy.QtWidgets import QFileDialog, QMenu

from hologyre.analyse import analyse
from hologyre.edits import Delete, Log
from hologyre.recipe import Recipe
from hologyre.results import OutputError, csv_bytes, load_result, run
from hologyre.stacks import as_stack, open_stack
from hologyre.survey import survey
from hologyre.tables import EVENTS, FRAMES, SINGULARITIES, TRAJECTORIES
from hologyre.viewer import launch, steps
from hologyre.viewer.opening import current_session, show_stack
from hologyre.viewer.samples import scene_stack
from hologyre.viewer.session import role_of

COLUMNS = {
    "trajectories": TRAJECTORIES,
    "singularities": SINGULARITIES,
    "events": EVENTS,
    "frames": FRAMES,
}


@pytest.fixture
def slow(monkeypatch: pytest.MonkeyPatch) -> Any:
    """Let every frame wait until it is let go."""
    gate = threading.Event()
    measure = steps.iter_frames

    def waiting(*args: Any, **options: Any) -> Any:
        for result in measure(*args, **options):
            yield result
            gate.wait(0.2)

    monkeypatch.setattr(steps, "iter_frames", waiting)
    yield gate
    gate.set()


def dock(viewer: Any, name: str) -> Any:
    return viewer.window.dock_widgets[f"{name} (hologyre)"]


def actions(menu: QMenu) -> dict[str, Any]:
    menu.aboutToShow.emit()
    return {action.text().replace("&", ""): action for action in menu.actions()}


def test_from_the_menu_to_the_same_csv_as_the_command_writes(
    make_napari_viewer: Any,
    stack_file: Path,
    tmp_path: Path,
    finish: Any,
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    viewer = make_napari_viewer(show=True)
    session = show_stack(viewer, stack_file)
    plugins = actions(viewer.window.plugins_menu)
    actions(plugins["hologyre"].menu())[f"{launch.OVERVIEW} (hologyre)"].trigger()
    dock(viewer, launch.OVERVIEW).action_button.click()
    finish(session)
    assert not {"phase", "singularities", "tracks"} - {role_of(x) for x in viewer.layers}

    monkeypatch.setattr(QFileDialog, "getExistingDirectory", lambda *_: str(tmp_path / "out"))
    dock(viewer, launch.OVERVIEW).export_button.click()
    headless = analyse(open_stack(stack_file), survey(open_stack(stack_file)))
    assert len(headless.trajectories) > 100
    for name, columns in COLUMNS.items():
        written = (tmp_path / "out" / f"{name}.csv").read_bytes()
        assert written == csv_bytes(getattr(headless, name), columns), name


def test_steps_one_by_one_give_the_same_as_all_at_once(
    make_napari_viewer: Any, stack_file: Path, finish: Any
) -> None:
    viewer = make_napari_viewer()
    session = show_stack(viewer, stack_file)
    launch.open_docks(viewer)
    for name in launch.DOCKS[1:-1]:
        dock(viewer, name).action_button.click()
        finish(session)
    roles = [role_of(layer) for layer in viewer.layers]
    assert roles[:4] == ["stack", "amplitude", "phase", "unwrapped"]
    assert set(roles[4:]) == {"cuts", "singularities", "tracks"}
    headless = analyse(session.stack, session.recipe)
    assert csv_bytes(session.tables.trajectories, TRAJECTORIES) == csv_bytes(
        headless.trajectories, TRAJECTORIES
    )


def test_linking_anew_does_not_search_again(
    make_napari_viewer: Any, stack_file: Path, recipe: Recipe, finish: Any
) -> None:
    viewer = make_napari_viewer()
    session = show_stack(viewer, stack_file, recipe=recipe)
    steps.find_singularities(session)
    finish(session)
    found = session.tables.singularities
    session.recipe = session.recipe.with_settings({"motion.max_gap": 0})
    assert steps.singularities_are_current(session)
    steps.follow_singularities(session)
    finish(session)
    assert session.tables.singularities is found
    assert steps.motion_is_current(session)
    session.recipe = session.recipe.with_settings({"carrier.radius": 0.05})
    assert not steps.singularities_are_current(session)
    assert not steps.motion_is_current(session)


def test_cancelled_work_leaves_the_session_ready_for_the_next(
    make_napari_viewer: Any, stack_file: Path, recipe: Recipe, qtbot: Any, finish: Any, slow: Any
) -> None:
    viewer = make_napari_viewer()
    session = show_stack(viewer, stack_file, recipe=recipe)
    launch.open_docks(viewer)
    button = dock(viewer, "Singularities")
    button.action_button.click()
    assert not button.action_button.isEnabled()
    assert "finding singularities" in button.action_button.toolTip()
    qtbot.waitUntil(lambda: session.task.steps > 1, timeout=10_000)
    button.cancel_button.click()
    finish(session)
    assert session.tables.found_with is None
    assert not steps.singularities_are_current(session)
    assert button.action_button.isEnabled()
    slow.set()
    button.action_button.click()
    finish(session)
    assert len(session.tables.frames) == 6


def test_closing_the_viewer_ends_its_work(
    make_napari_viewer: Any, stack_file: Path, recipe: Recipe, qtbot: Any, slow: Any
) -> None:
    viewer = make_napari_viewer()
    session = show_stack(viewer, stack_file, recipe=recipe)
    launch.open_docks(viewer)
    steps.follow_singularities(session)
    qtbot.waitUntil(lambda: session.task.steps > 0, timeout=10_000)
    task = session.task
    viewer.close()
    assert task.cancelled
    qtbot.waitUntil(lambda: session.task is None, timeout=10_000)
    assert QThreadPool.globalInstance().waitForDone(5_000)


CLOSED_IN_MID_WORK = """
import sys, threading
import napari
from qtpy.QtCore import QTimer
from hologyre.viewer import launch, steps
from hologyre.viewer.opening import current_session

measure = steps.iter_frames
def slow(*args, **options):
    for result in measure(*args, **options):
        yield result
        threading.Event().wait(0.2)
steps.iter_frames = slow

viewer = launch.view(sys.argv[1])
session = current_session(viewer)
window = viewer.window.dock_widgets["Motion (hologyre)"].window()
steps.follow_singularities(session)
session.task.stepped.connect(lambda: QTimer.singleShot(50, window.close))
napari.run()
sys.exit(0 if session.tables.linked_with is None else 3)
"""


def test_a_window_closed_in_mid_work_ends_the_program_cleanly(stack_file: Path) -> None:
    ended = subprocess.run(
        [sys.executable, "-c", CLOSED_IN_MID_WORK, str(stack_file)],
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    )
    assert ended.returncode == 0, ended.stderr
    assert "Traceback" not in ended.stderr


def test_layers_deleted_while_work_runs_do_no_harm(
    make_napari_viewer: Any, stack_file: Path, recipe: Recipe, qtbot: Any, finish: Any, slow: Any
) -> None:
    viewer = make_napari_viewer()
    session = show_stack(viewer, stack_file, recipe=recipe)
    session.display.show("phase", "cuts")
    steps.follow_singularities(session)
    qtbot.waitUntil(lambda: session.task.steps > 0, timeout=10_000)
    viewer.layers.remove(session.display.layer("cuts"))
    viewer.layers.remove(session.display.layer("phase"))
    slow.set()
    finish(session)
    assert {role_of(layer) for layer in viewer.layers} == {
        "stack",
        "phase",
        "singularities",
        "tracks",
    }


def test_a_stack_removed_while_work_runs_ends_it(
    make_napari_viewer: Any, stack_file: Path, recipe: Recipe, qtbot: Any, slow: Any
) -> None:
    viewer = make_napari_viewer()
    session = show_stack(viewer, stack_file, recipe=recipe)
    steps.follow_singularities(session)
    qtbot.waitUntil(lambda: session.task.steps > 0, timeout=10_000)
    viewer.layers.clear()
    qtbot.waitUntil(lambda: session.task is None, timeout=10_000)
    assert len(viewer.layers) == 0


def test_two_stacks_are_worked_on_side_by_side(
    make_napari_viewer: Any, stack_file: Path, recipe: Recipe, finish: Any
) -> None:
    viewer = make_napari_viewer()
    first = show_stack(viewer, stack_file, recipe=recipe)
    second = show_stack(
        viewer, stack_file, recipe=recipe.with_settings({"carrier.conjugate": True})
    )
    viewer.layers[0].name, viewer.layers[1].name = "b", "a"
    steps.follow_singularities(first)
    steps.follow_singularities(second)
    finish(first)
    finish(second)
    assert len(viewer.layers) == 8
    for session in (first, second):
        expected = analyse(session.stack, session.recipe)
        shown = session.display.layer("singularities").data
        np.testing.assert_array_equal(shown[:, 1], expected.singularities["y_px"])


def test_fringes_that_are_not_there_are_told_in_one_sentence(
    make_napari_viewer: Any, finish: Any
) -> None:
    viewer = make_napari_viewer()
    rng = np.random.default_rng(0)
    viewer.add_image(rng.integers(90, 110, (3, 96, 96)).astype(np.uint8), name="dark")
    launch.open_docks(viewer)
    field = dock(viewer, "Field")
    field.use_button.click()
    session = current_session(viewer)
    before = len(notification_manager.records)
    field.action_button.click()
    finish(session)
    told = [record.message for record in notification_manager.records[before:]]
    assert len(told) == 1
    assert "no fringes" in told[0]
    assert len(viewer.layers) == 1
    assert field.action_button.isEnabled()


def test_a_result_is_loaded_with_its_stack(
    make_napari_viewer: Any, stack_file: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    run(open_stack(stack_file), tmp_path / "result")
    monkeypatch.setattr(launch, "Viewer", make_napari_viewer)
    viewer = launch.view(stack_file, result=tmp_path / "result")
    session = current_session(viewer)
    assert {role_of(x) for x in viewer.layers} == {"stack", "phase", "singularities", "tracks"}
    assert session.recipe == session.tables.linked_with
    assert len(session.display.layer("tracks").data) == len(session.tables.trajectories)


def test_a_result_with_edits_is_loaded_as_found_with_its_log(
    make_napari_viewer: Any, stack_file: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    first = load_result(run(open_stack(stack_file), tmp_path / "first").folder)
    one = first.singularities.iloc[0]
    where, frame, charge = (one["y_px"], one["x_px"]), int(one["frame"]), int(one["charge"])
    log = Log(tmp_path / "log.jsonl")
    log.append(Delete(frame=frame, where=where, charge=charge, reason="dust"))
    run(open_stack(stack_file), tmp_path / "second", annotations=tmp_path / "log.jsonl")
    monkeypatch.setattr(launch, "Viewer", make_napari_viewer)
    session = current_session(launch.view(stack_file, result=tmp_path / "second"))
    assert len(session.editing.found.singularities) == len(first.singularities)
    assert len(session.tables.singularities) == len(first.singularities) - 1
    assert session.editing.log.edits[0].reason == "dust"


def test_the_result_of_another_stack_is_refused(
    stack_file: Path, holograms: Any, tmp_path: Path
) -> None:
    run(open_stack(stack_file), tmp_path / "result")
    tifffile.imwrite(tmp_path / "less.tif", holograms[:2])
    with pytest.raises(OutputError, match=r"6 x 128 x 128 px, and this one has 2 x 128 x 128 px"):
        launch.view(tmp_path / "less.tif", result=tmp_path / "result")


def test_frames_that_can_none_be_used_are_told_with_the_reason(
    make_napari_viewer: Any, recipe: Recipe, finish: Any
) -> None:
    viewer = make_napari_viewer()
    session = show_stack(viewer, as_stack(np.full((3, 128, 128), 9, np.uint8)), recipe=recipe)
    before = len(notification_manager.records)
    steps.find_singularities(session)
    finish(session)
    told = [record.message for record in notification_manager.records[before:]]
    assert told == [
        f"{session.name}: none of its 3 frames could be used (all pixels have the same value, 9)."
    ]


def test_a_sample_opens_at_its_start_in_its_own_micrometres_with_all_docks(
    make_napari_viewer: Any,
) -> None:
    viewer = make_napari_viewer()
    viewer.open_sample("hologyre", "drying-film")
    assert len(viewer.window.dock_widgets) == len((launch.OVERVIEW, *launch.DOCKS))
    session = current_session(viewer)
    assert session.display.frame == 0
    assert session.stack.chunks[0] == (1,) * session.stack.sizes["t"]
    assert session.optics.wavelength_nm == 532
    assert [str(u) for u in viewer.layers[0].units] == ["second", "micrometer", "micrometer"]
    assert dock(viewer, "Stack").header.text() == session.name


def test_a_sample_s_frames_are_those_of_the_scene() -> None:
    from hologyre.simulate.scenes import stage

    stack, _ = scene_stack("vortex-beams")
    staged = stage("vortex-beams")
    assert stack.shape == (staged.frames, *staged.setup.shape)
    np.testing.assert_array_equal(stack[7], staged.hologram(7))
