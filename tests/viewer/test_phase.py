from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr

from hologyre.edits import Barrier, Bridge
from hologyre.recipe import Recipe
from hologyre.stacks import as_stack
from hologyre.viewer.barriers import Lines, lines_of, residue_points
from hologyre.viewer.docks.phase import PhaseDock
from hologyre.viewer.gestures import Gestures, gestures_of
from hologyre.viewer.maps import FrameMaps, Skipped
from hologyre.viewer.opening import show_stack
from hologyre.viewer.session import Session

LINE = ((10.0, 20.0), (90.0, 20.0))


@pytest.fixture
def drawing(
    make_napari_viewer: Any, stack: xr.DataArray, recipe: Recipe, finish: Any, qtbot: Any
) -> tuple[Any, Session, PhaseDock]:
    viewer = make_napari_viewer()
    session = show_stack(viewer, as_stack(np.array(stack.data)), recipe=recipe)
    dock = PhaseDock(viewer)
    qtbot.addWidget(dock)
    dock.action_button.click()
    finish(session)
    return viewer, session, dock


def cut_points(session: Session) -> np.ndarray:
    assert session.display is not None
    lines = session.display.layer("cuts").data
    return np.concatenate([np.asarray(line) for line in lines])


def crossing(session: Session, line: Any) -> int:
    """Count the cuts' steps across a vertical line at x = 20 px."""
    found = session.maps.unwrapping(session.recipe, session.frame)
    assert not isinstance(found, Skipped)
    (y0, x), (y1, _) = line
    count = 0
    for path in found.cuts.polylines:
        a, b = path[:-1], path[1:]
        across = (a[:, 1] - x) * (b[:, 1] - x) < 0
        count += int((across & (a[:, 0] > y0) & (a[:, 0] < y1)).sum())
    return count


def draw(session: Session, role: str, line: Any, qtbot: Any) -> None:
    layer = session.display.layer(role)
    before = len(session.editing.log.standing)
    layer.add([np.array(line)], shape_type="path")
    qtbot.waitUntil(lambda: len(session.editing.log.standing) != before, timeout=5000)


def test_lines_hold_in_their_own_frame_or_in_every_one() -> None:
    edits = [Barrier(frame=2, where=LINE), Bridge(frame=None, where=LINE)]
    assert lines_of(edits, 2) == Lines((LINE,), (LINE,))
    assert lines_of(edits, 3) == Lines((), (LINE,))
    assert not lines_of([], 0)


def test_residues_lie_between_pixels_and_spare_pixels_left_out() -> None:
    y, x = np.mgrid[:9, :9] - 4.5
    phase = np.arctan2(y, x)
    places, charge = residue_points(phase)
    np.testing.assert_array_equal(places, [[4.5, 4.5]])
    np.testing.assert_array_equal(charge, [1])
    phase[4, 4] = np.nan
    assert len(residue_points(phase)[0]) == 0


def test_a_bridge_keeps_cuts_from_crossing_and_undo_lets_them_again(
    drawing: Any, qtbot: Any
) -> None:
    _, session, dock = drawing
    x = next(
        float(np.floor(p[1])) for p in cut_points(session) if 30 < p[0] < 60 and 10 < p[1] < 110
    )
    line = ((20.0, x), (70.0, x))
    assert crossing(session, line) > 0
    before = session.display.layer("unwrapped").data
    dock.bridge_button.click()
    draw(session, "bridges", line, qtbot)
    assert crossing(session, line) == 0
    qtbot.waitUntil(lambda: session.display.layer("unwrapped").data is not before, timeout=5000)
    shown = np.asarray(session.display.layer("unwrapped").data[session.frame])
    expected = session.maps.unwrapped(session.recipe, session.frame)
    np.testing.assert_array_equal(shown, expected)
    gestures = gestures_of(drawing[0], session)
    assert isinstance(gestures, Gestures)
    gestures.undo()
    assert crossing(session, line) > 0
    assert len(session.display.layer("bridges").data) == 0


def test_a_barrier_draws_cuts_to_it(drawing: Any, qtbot: Any) -> None:
    _, session, dock = drawing
    dock.barrier_button.click()
    free = session.maps.unwrapping(session.recipe, 0)
    draw(session, "barriers", LINE, qtbot)
    led = session.maps.unwrapping(session.recipe, 0)
    assert led.cost < free.cost


def test_a_line_moved_or_deleted_in_its_layer_leaves_the_others(drawing: Any, qtbot: Any) -> None:
    _, session, dock = drawing
    dock.barrier_button.click()
    draw(session, "barriers", LINE, qtbot)
    draw(session, "barriers", ((10.0, 60.0), (90.0, 60.0)), qtbot)
    layer = session.display.layer("barriers")
    layer.selected_data = {0}
    layer.remove_selected()
    qtbot.waitUntil(lambda: len(session.editing.log.standing) == 1, timeout=5000)
    assert session.editing.log.edits[0].where[0] == (10.0, 60.0)
    assert [int(n) for n in layer.features["edit"]] == [session.editing.log.standing[0].number]


def test_lines_belong_to_the_frame_they_are_drawn_in(drawing: Any, qtbot: Any) -> None:
    _, session, dock = drawing
    dock.barrier_button.click()
    draw(session, "barriers", LINE, qtbot)
    session.display.go_to(2)
    assert len(session.display.layer("barriers").data) == 0
    dock.every_frame.setChecked(True)
    draw(session, "barriers", LINE, qtbot)
    assert [edit.frame for edit in session.editing.log.edits] == [0, None]
    session.display.go_to(0)
    assert len(session.display.layer("barriers").data) == 2


def test_a_residue_shut_in_by_bridges_is_told(drawing: Any, qtbot: Any) -> None:
    _, session, dock = drawing
    places, _ = session.maps.residues(session.recipe, 0)
    y, x = places[np.argmin(np.hypot(*(places - 64).T))]
    box = [(y - 1, x - 1), (y - 1, x + 1), (y + 1, x + 1), (y + 1, x - 1), (y - 1, x - 1)]
    dock.bridge_button.click()
    draw(session, "bridges", np.array(box), qtbot)
    qtbot.waitUntil(lambda: "shut in" in dock.told.text(), timeout=5000)


def test_residues_and_jumps_are_shown(drawing: Any, finish: Any, qtbot: Any) -> None:
    _, session, dock = drawing
    dock.residues_button.click()
    finish(session)
    layer = session.display.layer("residues")
    qtbot.waitUntil(lambda: len(layer.data) > 0, timeout=5000)
    assert len(layer.data) == len(session.maps.residues(session.recipe, 0)[0])
    dock.jumps_button.click()
    finish(session)
    jumps = np.asarray(session.display.layer("jumps").data[0])
    assert set(np.unique(jumps)) <= {0.0, 1.0, 2.0}
    assert jumps.any()
    assert not session.display.is_visible("unwrapped")


def test_frames_with_the_same_lines_are_not_solved_again(
    stack: xr.DataArray, recipe: Recipe
) -> None:
    maps = FrameMaps(stack)
    first = maps.unwrapping(recipe, 0)
    maps.lines = lambda frame: Lines((LINE,)) if frame == 1 else Lines()
    assert maps.unwrapping(recipe, 0) is first
    maps.unwrapping(recipe, 1)
    maps.lines = lambda _: Lines()
    assert maps.ready("unwrapped", recipe, 1) is None


def test_the_log_of_a_stack_with_a_file_lies_where_a_run_would_put_it(
    make_napari_viewer: Any, stack_file: Path, recipe: Recipe, tmp_path: Path, qtbot: Any
) -> None:
    path = tmp_path / "speckle.tif"
    path.write_bytes(stack_file.read_bytes())
    viewer = make_napari_viewer()
    session = show_stack(viewer, path, recipe=recipe)
    gestures = gestures_of(viewer, session)
    assert gestures is not None
    gestures.draw_on("barriers")
    draw(session, "barriers", LINE, qtbot)
    lines = (tmp_path / "speckle.hologyre" / "edits.jsonl").read_text().splitlines()
    assert len(lines) == 2
    again = show_stack(viewer, path, recipe=recipe)
    assert again.editing.log.edits == session.editing.log.edits
