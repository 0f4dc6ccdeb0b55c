from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from qtpy.QtCore import Qt

from hologyre.recipe import Recipe
from hologyre.viewer.docks.motion import NEXT_KEY, PREVIOUS_KEY, MotionDock
from hologyre.viewer.layers import points_from_events
from hologyre.viewer.opening import show_stack
from hologyre.viewer.plots import Curve, Panel, PanelPlot


@pytest.fixture
def followed(make_napari_viewer: Any, stack_file: Path, recipe: Recipe, finish: Any) -> Any:
    viewer = make_napari_viewer()
    session = show_stack(viewer, stack_file, recipe=recipe)
    dock = MotionDock(viewer)
    viewer.window.add_dock_widget(dock)
    dock.action_button.click()
    finish(session)
    return viewer, session, dock


def layer_named(viewer: Any, start: str) -> Any:
    return next((x for x in viewer.layers if x.name.startswith(start)), None)


def test_a_picked_track_shows_its_life_and_its_way(followed: Any) -> None:
    viewer, session, dock = followed
    table = session.tables.trajectories
    track = int(table["track"].value_counts().idxmax())
    dock.pick(track)
    assert dock.track == track
    assert f"Track {track}" in dock.life.text()
    assert any("speed" in panel.title for panel in dock.plot.panels)
    drawn = layer_named(viewer, "picked trajectory").data[0]
    rows = table[table["track"] == track]
    np.testing.assert_allclose(drawn, rows[["y_px", "x_px"]], rtol=1e-6)


def test_a_click_on_a_singularity_picks_its_track(followed: Any) -> None:
    _, session, dock = followed
    row = session.tables.trajectories.query("frame == 0").iloc[3]
    pixel = session.optics.pixel_um
    where = (0.0, row["y_px"] * pixel, row["x_px"] * pixel)
    assert dock._picker.track_near(where) == row["track"]
    assert dock._picker.track_near((0.0, -9e3, -9e3)) is None


def test_steps_between_events_move_slider_and_camera_and_pick_the_track(followed: Any) -> None:
    viewer, session, dock = followed
    viewer.scene.camera.zoom = 1e4
    dock.next_button.click()
    data, features = points_from_events(session.tables.events)
    first = features.iloc[np.lexsort((features["event"], data[:, 0]))[0]]
    place = data[features.index.get_loc(first.name)]
    assert session.frame == place[0]
    assert str(dock.track) in first["tracks"].split(";")
    pixel = session.optics.pixel_um
    np.testing.assert_allclose(viewer.scene.camera.center[-2:], place[1:] * pixel)
    dock.previous_button.click()
    assert "No previous event" in dock.message.text()


def test_the_keys_for_events_go_with_the_dock(followed: Any) -> None:
    viewer, _, dock = followed
    keys = {str(key) for key in viewer.keymap}
    assert {PREVIOUS_KEY, NEXT_KEY} <= keys
    viewer.window.remove_dock_widget(dock.parent())
    assert not {PREVIOUS_KEY, NEXT_KEY} & {str(key) for key in viewer.keymap}


def test_trajectories_take_the_colours_of_a_column(followed: Any) -> None:
    _, session, dock = followed
    layer = session.display.layer("tracks")
    offered = [dock.colours.itemText(i) for i in range(dock.colours.count())]
    assert "axis_ratio" in offered
    before = np.array(layer.track_colors)
    dock.colours.setCurrentText("axis_ratio")
    dock.colours.activated.emit(0)
    assert layer.color_by == "axis_ratio"
    assert not np.array_equal(before, layer.track_colors)


def test_lines_in_space_and_time_come_and_go_and_leave_everything_as_it_was(followed: Any) -> None:
    viewer, session, dock = followed
    session.display.go_to(2)
    before = {layer.name: layer.visible for layer in viewer.layers}
    dock.spacetime_button.click()
    shown = [layer.name for layer in viewer.layers if layer.visible]
    assert viewer.dims.ndisplay == 3
    assert shown == [f"trajectories in time [{session.name}]"]
    dock.spacetime_button.click()
    assert viewer.dims.ndisplay == 2
    assert {layer.name: layer.visible for layer in viewer.layers} == before
    assert session.frame == 2


def test_napari_own_button_also_leads_back_from_space_and_time(followed: Any) -> None:
    viewer, _, dock = followed
    dock.spacetime_button.click()
    viewer.dims.ndisplay = 2
    assert layer_named(viewer, "trajectories in time") is None


def test_a_click_into_a_plot_tells_the_place_on_its_axis(qtbot: Any) -> None:
    plot = PanelPlot("frame")
    qtbot.addWidget(plot)
    curve = Curve(np.array([2.0, 12.0]), np.array([0.0, 1.0]), "#000000")
    plot.show_panels([Panel("speed", (curve,))])
    plot.resize(300, plot.sizeHint().height())
    seen: list[float] = []
    plot.picked.connect(seen.append)
    box = plot._box(0)
    qtbot.mouseClick(plot, Qt.MouseButton.LeftButton, pos=box.center().toPoint())
    # within a pixel of the middle
    assert seen == pytest.approx([7.0], abs=10 / box.width())
