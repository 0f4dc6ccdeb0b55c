from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from qtpy.QtCore import QPoint, QPointF, Qt
from qtpy.QtTest import QTest
from qtpy.QtWidgets import QApplication, QFileDialog, QInputDialog

from hologyre.analyse import analyse
from hologyre.edits import found_of, load_log, recount, replay
from hologyre.motion import Motion
from hologyre.recipe import Recipe
from hologyre.results import csv_bytes
from hologyre.stacks import open_stack
from hologyre.tables import EVENTS, FRAMES, SINGULARITIES, TRAJECTORIES
from hologyre.viewer import launch, steps
from hologyre.viewer.exporting import export_all
from hologyre.viewer.opening import show_stack
from hologyre.viewer.session import Session

COLUMNS = {
    "singularities": SINGULARITIES,
    "trajectories": TRAJECTORIES,
    "events": EVENTS,
    "frames": FRAMES,
}


class Window:
    """A viewer with a stack under review, and a hand with a mouse and keys."""

    def __init__(self, viewer: Any, session: Session, qtbot: Any) -> None:
        self.viewer, self.session, self.qtbot = viewer, session, qtbot
        self.canvas = viewer.window._qt_viewer.canvas

    @property
    def dock(self) -> Any:
        return self.viewer.window.dock_widgets["Review (hologyre)"]

    @property
    def layer(self) -> Any:
        assert self.session.display is not None
        return self.session.display.layer("review")

    @property
    def rows(self) -> pd.DataFrame:
        return self.session.editing.frame(self.session.frame)

    @property
    def edits(self) -> list[str]:
        return [edit.kind for edit in self.session.editing.log.edits]

    def at(self, place: Any) -> QPoint:
        """Return where a place of the hologram is on the canvas's widget."""
        view, canvas = self.viewer.window._qt_viewer.canvas.view, self.canvas.native
        node = self.viewer.window._qt_viewer.canvas.layer_to_visual[self.layer].node
        y, x = place
        spot = node.get_transform("visual", "canvas").map([x, y])[:2]
        ratio = canvas.devicePixelRatioF()
        assert view is not None
        return QPointF(float(spot[0]) / ratio, float(spot[1]) / ratio).toPoint()

    def click(self, place: Any) -> None:
        self.settle()
        spot = self.at(place)
        QTest.mouseMove(self.canvas.native, spot)
        QApplication.processEvents()
        QTest.mouseClick(self.canvas.native, Qt.MouseButton.LeftButton, pos=spot)
        self.settle()

    def drag(self, start: Any, end: Any) -> None:
        self.settle()
        native, button = self.canvas.native, Qt.MouseButton.LeftButton
        first, last = self.at(start), self.at(end)
        QTest.mouseMove(native, first)
        QApplication.processEvents()
        QTest.mousePress(native, button, pos=first)
        for part in (0.3, 0.6, 1.0):
            spot = first + (last - first) * part
            event = _move(native, spot)
            QApplication.sendEvent(native, event)
            QApplication.processEvents()
        QTest.mouseRelease(native, button, pos=last)
        self.settle()

    def key(self, key: Any, modifier: Any = Qt.KeyboardModifier.NoModifier) -> None:
        QTest.keyClick(self.canvas.native, key, modifier)
        self.settle()

    def type_reason(self, text: str) -> None:
        line = self.dock.reason.lineEdit()
        line.clear()
        QTest.keyClicks(line, text)
        QTest.keyClick(line, Qt.Key.Key_Return)
        self.settle()

    def settle(self) -> None:
        for _ in range(3):
            QApplication.processEvents()
            self.qtbot.wait(10)


def _move(native: Any, spot: QPoint) -> Any:
    from qtpy.QtCore import QEvent
    from qtpy.QtGui import QMouseEvent

    return QMouseEvent(
        QEvent.Type.MouseMove,
        QPointF(spot),
        QPointF(native.mapToGlobal(spot)),
        Qt.MouseButton.NoButton,
        Qt.MouseButton.LeftButton,
        Qt.KeyboardModifier.NoModifier,
    )


@pytest.fixture
def film(tmp_path: Path, stack_file: Path) -> Path:
    path = tmp_path / "speckle.tif"
    path.write_bytes(stack_file.read_bytes())
    return path


@pytest.fixture
def window(
    make_napari_viewer: Any, film: Path, recipe: Recipe, finish: Callable[[Any], None], qtbot: Any
) -> Window:
    viewer = make_napari_viewer(show=True)
    viewer.window.resize(1280, 800)
    session = show_stack(viewer, film, recipe=recipe)
    steps.follow_singularities(session)
    finish(session)
    launch.raise_dock(viewer, "Review")
    made = Window(viewer, session, qtbot)
    made.dock.action_button.click()
    viewer.reset_view()
    made.settle()
    return made


def place_of(row: pd.Series) -> tuple[float, float]:
    return float(row["y_px"]), float(row["x_px"])


def lonely(rows: pd.DataFrame, charge: int = 1) -> pd.Series:
    """Return the singularity of a charge farthest from the others and from the border."""
    place = rows[["y_px", "x_px"]].to_numpy()
    apart = np.hypot(*(place[:, None] - place[None]).transpose(2, 0, 1))
    np.fill_diagonal(apart, np.inf)
    border = np.minimum(place, 127 - place).min(axis=1)
    room = np.minimum(apart.min(axis=1), border)
    room[rows["charge"] != charge] = -1
    return rows.iloc[int(np.argmax(room))]


def headless(window: Window) -> dict[str, bytes]:
    """Replay the log beside the stack on a fresh run, without a screen."""
    path, recipe = window.session.editing.log.path, window.session.tables.linked_with
    assert path is not None
    stack = open_stack(path.parent.parent / "speckle.tif")
    found = analyse(stack, recipe)
    laid_out = found_of(
        found.singularities,
        Motion(found.trajectories, found.events),
        frames=found.frames["frame"].to_numpy(),
        frame_shape=(stack.sizes["y"], stack.sizes["x"]),
        max_gap=recipe.motion.max_gap,
    )
    corrected = replay(load_log(path).standing, laid_out)
    assert corrected.misfits == ()
    tables = {
        name: getattr(corrected, name) for name in ("singularities", "trajectories", "events")
    }
    tables["frames"] = recount(found.frames, corrected)
    return {name: csv_bytes(table, COLUMNS[name]) for name, table in tables.items()}


def test_a_click_in_the_add_mode_snaps_to_a_zero_that_was_deleted(window: Window) -> None:
    row = lonely(window.rows)
    window.click(place_of(row))
    assert window.layer.selected_data
    window.key(Qt.Key.Key_Delete)
    assert window.dock.asking.isVisible()
    assert window.edits == []
    window.type_reason("not sure")
    assert window.edits == ["delete"]
    assert len(window.rows) == len(window.layer.data)
    assert row["singularity"] not in set(window.rows["singularity"])

    window.key(Qt.Key.Key_P)
    assert str(window.layer.mode) == "add"
    y, x = place_of(row)
    window.click((y + 1.0, x - 1.0))
    assert window.edits == ["delete", "place"]
    placed = window.rows[window.rows["origin"] == "placed"].iloc[0]
    assert np.hypot(placed["y_px"] - y, placed["x_px"] - x) < 1e-3
    assert placed["charge"] == row["charge"]
    assert "Snapped" in window.dock.message.text()


def test_where_there_is_no_zero_one_must_insist_and_say_why(window: Window) -> None:
    rows = window.rows
    y, x = np.mgrid[20:108:1.0, 20:108:1.0].reshape(2, -1)
    apart = np.hypot(y[:, None] - rows["y_px"].to_numpy(), x[:, None] - rows["x_px"].to_numpy())
    far = int(np.argmax(apart.min(axis=1)))
    window.key(Qt.Key.Key_P)
    window.click((y[far], x[far]))
    assert "no zero" in window.dock.question.text()
    assert window.edits == []
    window.type_reason("seen by eye")
    assert window.edits == ["place"]
    edit = window.session.editing.log.edits[0]
    assert (edit.winding, edit.charge, edit.reason) == (0, 1, "seen by eye")
    assert (window.session.tables.singularities["origin"] == "placed").sum() == 1
    audit = window.session.tables.frames["audit"].iloc[window.session.frame]
    assert "by hand against the winding" in audit


def test_a_drag_moves_a_singularity_back_to_its_zero_or_asks(window: Window) -> None:
    row = lonely(window.rows)
    y, x = place_of(row)
    window.drag((y, x), (y + 1.5, x + 1.5))
    assert window.edits == []
    assert "zero already" in window.dock.message.text()
    np.testing.assert_allclose(window.rows[["y_px", "x_px"]], window.layer.data)


def test_keys_flip_confirm_and_reject_what_is_selected(window: Window) -> None:
    row = lonely(window.rows)
    window.click(place_of(row))
    window.key(Qt.Key.Key_C)
    assert window.edits == ["confirm"]
    window.key(Qt.Key.Key_F)
    window.type_reason("turned")
    flipped = window.rows[window.rows["singularity"] == row["singularity"]].iloc[0]
    assert flipped["charge"] == -row["charge"]
    window.key(Qt.Key.Key_X)
    assert window.edits == ["confirm", "flip charge", "reject"]


def test_undo_and_redo_by_key_go_back_and_forth(window: Window) -> None:
    row = lonely(window.rows)
    before = window.rows
    window.click(place_of(row))
    window.key(Qt.Key.Key_F)
    window.type_reason("turned")
    after = window.rows
    control = Qt.KeyboardModifier.ControlModifier
    window.key(Qt.Key.Key_Z, control)
    pd.testing.assert_frame_equal(window.rows, before)
    window.key(Qt.Key.Key_Z, control | Qt.KeyboardModifier.ShiftModifier)
    pd.testing.assert_frame_equal(window.rows, after)
    lines = window.session.editing.log.path.read_text().splitlines()[1:]
    assert [next(iter(json.loads(line))) for line in lines] == ["edit", "undo", "redo"]


def test_tracks_are_cut_joined_renamed_and_deleted_by_key(
    window: Window, monkeypatch: pytest.MonkeyPatch
) -> None:
    session, editing = window.session, window.session.editing
    session.display.go_to(1)
    window.settle()
    row = next(
        row
        for _, row in window.rows.iterrows()
        if editing.neighbour(int(row["track"]), 1, -1) is not None
        and place_of(row) == place_of(lonely(window.rows, row["charge"]))
    )
    before = editing.neighbour(int(row["track"]), 1, -1)
    window.click(place_of(row))
    window.key(Qt.Key.Key_K)
    assert window.edits == ["cut track"]
    assert (
        editing.neighbour(int(window.dock._review.gestures.selected().iloc[0]["track"]), 1, -1)
        is None
    )

    window.key(Qt.Key.Key_J)
    session.display.go_to(0)
    window.settle()
    window.click(place_of(before))
    window.key(Qt.Key.Key_J)
    assert window.edits == ["cut track", "join tracks"]

    monkeypatch.setattr(QInputDialog, "getInt", lambda *_: (900, True))
    window.key(Qt.Key.Key_R)
    assert window.edits[-1] == "rename track"
    assert 900 in set(window.rows["track"])

    window.key(Qt.Key.Key_X, Qt.KeyboardModifier.ShiftModifier)
    window.type_reason("all of it is noise")
    assert window.edits[-1] == "delete track"
    assert 900 not in set(window.session.tables.trajectories["track"])


def test_export_after_edits_is_what_a_headless_replay_writes(
    window: Window, tmp_path: Path
) -> None:
    control = Qt.KeyboardModifier.ControlModifier
    first = lonely(window.rows, +1)
    window.click(place_of(first))
    window.key(Qt.Key.Key_Delete)
    window.type_reason("noise")
    window.session.display.go_to(2)
    window.settle()
    second = lonely(window.rows, -1)
    window.click(place_of(second))
    window.key(Qt.Key.Key_C)
    window.key(Qt.Key.Key_K)
    window.key(Qt.Key.Key_F)
    window.type_reason("turned")
    window.key(Qt.Key.Key_Z, control)
    window.dock._draw_on("left_out")
    polygon = np.array([(5.0, 5.0), (5.0, 40.0), (40.0, 40.0), (40.0, 5.0)])
    window.session.display.layer("left_out").add([polygon], shape_type="polygon")
    window.qtbot.waitUntil(lambda: "region" in window.edits, timeout=5000)
    assert window.edits == ["delete", "confirm", "cut track", "region"]
    export_all(window.session, tmp_path / "out")
    for name, expected in headless(window).items():
        assert (tmp_path / "out" / f"{name}.csv").read_bytes() == expected, name


def test_the_log_is_replayed_when_the_stack_is_opened_again(
    window: Window, finish: Callable[[Any], None]
) -> None:
    window.click(place_of(lonely(window.rows)))
    window.key(Qt.Key.Key_Delete)
    window.type_reason("noise")
    path = window.session.editing.log.path
    assert path.name == "edits.jsonl"
    again = show_stack(
        window.viewer, path.parent.parent / "speckle.tif", recipe=window.session.recipe
    )
    steps.follow_singularities(again)
    finish(again)
    pd.testing.assert_frame_equal(again.tables.trajectories, window.session.tables.trajectories)


def test_the_list_goes_on_by_key_and_what_is_confirmed_is_done(window: Window) -> None:
    review = window.dock._review
    assert len(review.items) > 1
    assert review.items["score"].is_monotonic_decreasing
    window.key(Qt.Key.Key_N)
    while review.item["what"] == "frame":
        window.key(Qt.Key.Key_N)
    first = review.item["singularity"]
    assert window.session.frame == review.item["frame"]
    window.key(Qt.Key.Key_C)
    assert review.item["singularity"] != first
    assert window.edits == ["confirm"]
    review.refresh()
    # a singularity may be listed for more than one reason
    done = review.items[review.items["done"]]
    assert set(done["singularity"]) == {first}
    assert review.progress[0] == len(done)
    assert window.dock.progress.value() == len(done)
    window.key(Qt.Key.Key_B)
    assert review.item["singularity"] == first
    assert review.item["done"]


def test_the_dock_may_be_closed_and_opened_while_a_review_runs(window: Window) -> None:
    viewer = window.viewer
    viewer.window.remove_dock_widget(window.dock)
    window.settle()
    window.click(place_of(lonely(window.rows)))
    window.key(Qt.Key.Key_F)
    assert window.edits == []
    launch.raise_dock(viewer, "Review")
    window.settle()
    assert window.dock.asking.isVisible()
    window.type_reason("turned")
    assert window.edits == ["flip charge"]


def test_layers_renamed_or_deleted_in_use_do_no_harm(window: Window) -> None:
    window.layer.name = "mine"
    window.click(place_of(lonely(window.rows)))
    window.key(Qt.Key.Key_C)
    assert window.edits == ["confirm"]
    window.viewer.layers.remove(window.layer)
    window.session.display.go_to(3)
    window.settle()
    window.dock._act("confirm")
    window.dock.action_button.click()
    window.settle()
    assert len(window.layer.data) == len(window.rows)
    window.click(place_of(lonely(window.rows)))
    window.key(Qt.Key.Key_C)
    assert len(window.edits) >= 2
    window.dock.end_button.click()
    assert window.layer is None
    assert window.session.display.is_visible("singularities")


def test_edits_go_to_the_stack_that_is_selected(
    window: Window, recipe: Recipe, tmp_path: Path, stack_file: Path, finish: Callable[[Any], None]
) -> None:
    (tmp_path / "b").mkdir()
    other_file = tmp_path / "b" / "speckle.tif"
    other_file.write_bytes(stack_file.read_bytes())
    other = show_stack(window.viewer, other_file, recipe=recipe)
    steps.follow_singularities(other)
    finish(other)
    window.viewer.layers.selection.active = other.display.layer("singularities")
    window.dock.action_button.click()
    second = Window(window.viewer, other, window.qtbot)
    second.click(place_of(lonely(second.rows)))
    second.key(Qt.Key.Key_C)
    assert second.edits == ["confirm"]
    assert window.edits == []


def test_without_a_file_edits_are_in_memory_until_a_place_is_chosen(
    make_napari_viewer: Any, stack: Any, recipe: Recipe, finish: Any, tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch, qtbot: Any,
) -> None:  # fmt: skip
    viewer = make_napari_viewer(show=True)
    session = show_stack(viewer, stack, recipe=recipe)
    steps.find_singularities(session)
    finish(session)
    launch.raise_dock(viewer, "Review")
    window = Window(viewer, session, qtbot)
    window.dock.action_button.click()
    window.click(place_of(lonely(window.rows)))
    window.key(Qt.Key.Key_C)
    assert "memory" in window.dock.told.text()
    path = tmp_path / "edits.jsonl"
    monkeypatch.setattr(QFileDialog, "getSaveFileName", lambda *_, **__: (str(path), ""))
    window.dock.keep_button.click()
    assert str(path) in window.dock.told.text()
    assert load_log(path).edits == session.editing.log.edits
