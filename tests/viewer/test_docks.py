from __future__ import annotations

import gc
import weakref
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
import tifffile
from napari.layers import Shapes
from npe2 import PluginManifest
from qtpy.QtWidgets import QFileDialog, QInputDialog

import hologyre
from hologyre.recipe import Recipe, load_recipe
from hologyre.viewer import launch
from hologyre.viewer.docks.field import FieldDock
from hologyre.viewer.docks.motion import MotionDock
from hologyre.viewer.docks.overview import OverviewDock
from hologyre.viewer.docks.phase import PhaseDock
from hologyre.viewer.docks.singularities import SingularitiesDock
from hologyre.viewer.docks.stack import StackDock
from hologyre.viewer.opening import show_stack
from hologyre.viewer.spectrum import Band, SpectrumView

STEPS = (StackDock, FieldDock, PhaseDock, SingularitiesDock, MotionDock)


@pytest.fixture
def film(make_napari_viewer: Any, stack_file: Path, recipe: Recipe) -> Any:
    viewer = make_napari_viewer()
    return viewer, show_stack(viewer, stack_file, recipe=recipe)


def docked(viewer: Any, kind: Any) -> Any:
    dock = kind(viewer)
    viewer.window.add_dock_widget(dock)
    return dock


def test_the_manifest_offers_docks_and_samples_that_exist() -> None:
    manifest = PluginManifest.from_file(Path(hologyre.__file__).with_name("napari.yaml"))
    offered = [w.display_name for w in manifest.contributions.widgets or ()]
    assert offered == [launch.OVERVIEW, *launch.DOCKS]
    assert not [c for c in manifest.contributions.commands or () if c.python_name is None]
    assert len(manifest.contributions.sample_data or ()) == 5


@pytest.mark.parametrize("kind", [OverviewDock, *STEPS])
def test_a_dock_alone_and_without_a_stack_says_what_it_needs(
    make_napari_viewer: Any, kind: Any
) -> None:
    viewer = make_napari_viewer()
    dock = docked(viewer, kind)
    assert "No hologram stack" in dock.header.text()
    if kind is StackDock:
        assert dock.action_button.isEnabled()
    else:
        assert not dock.action_button.isEnabled()
        assert "open a hologram stack" in dock.action_button.toolTip()


@pytest.mark.parametrize("kind", [OverviewDock, *STEPS])
def test_a_dock_opened_after_the_stack_speaks_to_it(film: Any, kind: Any) -> None:
    viewer, session = film
    dock = docked(viewer, kind)
    assert dock.header.text() == session.name
    assert dock.action_button.isEnabled()


def test_one_action_opens_all_docks_in_the_order_of_the_work(film: Any) -> None:
    viewer, _ = film
    launch.open_docks(viewer)
    names = [f"{name} (hologyre)" for name in (launch.OVERVIEW, *launch.DOCKS)]
    assert [n for n in viewer.window.dock_widgets if "hologyre" in n] == names
    titles = [viewer.window.dock_widgets[n].parent().windowTitle() for n in names]
    assert titles == ["Overview", *launch.DOCKS]
    launch.open_docks(viewer)
    assert len(viewer.window.dock_widgets) == len(names)


def test_docks_can_be_closed_and_opened_again_and_still_work(film: Any, finish: Any) -> None:
    viewer, session = film
    for _ in range(2):
        launch.open_docks(viewer)
        docks = dict(viewer.window.dock_widgets)
        docks["Singularities (hologyre)"].action_button.click()
        finish(session)
        found = len(session.tables.singularities)
        assert found > 0
        assert f"In all {found}" in docks["Singularities (hologyre)"].told.text()
        for name in docks:
            viewer.window.remove_dock_widget(docks[name].parent())
        assert len(viewer.window.dock_widgets) == 0
    assert session.tables.found_with == session.recipe


def test_a_closed_dock_is_forgotten(film: Any, qtbot: Any) -> None:
    viewer, session = film
    dock = docked(viewer, PhaseDock)
    gone = weakref.ref(dock)
    viewer.window.remove_dock_widget(dock.parent())
    del dock
    session.recipe = session.recipe.with_settings({"phase.weight": "amplitude"})
    qtbot.wait(10)
    gc.collect()
    assert gone() is None


def test_docks_turn_to_the_stack_whose_layer_is_selected(film: Any, stack_file: Path) -> None:
    viewer, first = film
    second = show_stack(viewer, stack_file, recipe=first.recipe)
    viewer.layers[1].name = "other"
    dock = docked(viewer, MotionDock)
    dock.form.changed.emit(second.recipe.with_settings({"motion.max_gap": 9}))
    assert second.recipe.motion.max_gap == 9
    assert first.recipe.motion.max_gap != 9
    viewer.layers.selection.active = viewer.layers[0]
    assert dock.form.editors["motion.max_gap"].line.text() == str(first.recipe.motion.max_gap)


def test_docks_show_a_recipe_that_was_changed_elsewhere(film: Any) -> None:
    viewer, session = film
    dock = docked(viewer, SingularitiesDock)
    session.recipe = session.recipe.with_settings({"singularities.margin_px": 4})
    assert dock.form.editors["singularities.margin_px"].line.text() == "4"


def test_an_image_layer_is_taken_as_a_stack_by_a_button(
    make_napari_viewer: Any, holograms: Any
) -> None:
    viewer = make_napari_viewer()
    viewer.add_image(np.array(holograms), name="mine")
    dock = docked(viewer, PhaseDock)
    assert not dock.use_button.isHidden()
    assert "mine" in dock.use_button.text()
    dock.use_button.click()
    assert dock.header.text() == "mine"
    assert dock.use_button.isHidden()


def test_motion_of_one_frame_is_refused_with_the_reason(
    make_napari_viewer: Any, holograms: Any, tmp_path: Path
) -> None:
    path = tmp_path / "one.tif"
    tifffile.imwrite(path, holograms[0])
    viewer = make_napari_viewer()
    show_stack(viewer, path)
    dock = docked(viewer, MotionDock)
    assert not dock.action_button.isEnabled()
    assert "one frame" in dock.action_button.toolTip()


def test_a_frame_is_left_out_and_taken_back_with_its_reason(
    film: Any, monkeypatch: pytest.MonkeyPatch
) -> None:
    viewer, session = film
    dock = docked(viewer, StackDock)
    session.display.go_to(3)
    monkeypatch.setattr(QInputDialog, "getText", lambda *_: ("bubble", True))
    dock.leave_out_button.click()
    assert [(x.frame, x.reason) for x in session.recipe.stack.left_out] == [(3, "bubble")]
    assert "3: bubble" in dock.left_out.text()
    dock.take_back_button.click()
    assert session.recipe.stack.left_out == ()


def test_a_drawn_rectangle_becomes_the_region_in_pixels(film: Any) -> None:
    viewer, session = film
    corners = np.array([[10.2, 20.0], [10.2, 90.4], [99.5, 90.4], [99.5, 20.0]])
    drawn = viewer.add_shapes([corners], shape_type="rectangle", scale=(0.25, 0.25))
    assert isinstance(drawn, Shapes)
    dock = docked(viewer, StackDock)
    dock.region_button.click()
    # pixels whose centres lie inside, the ends not included
    assert session.recipe.stack.region == (11, 100, 20, 91)


def test_a_recipe_is_saved_and_loaded(
    film: Any, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    viewer, session = film
    path = tmp_path / "film.toml"
    monkeypatch.setattr(QFileDialog, "getSaveFileName", lambda *_: (str(path), ""))
    monkeypatch.setattr(QFileDialog, "getOpenFileName", lambda *_: (str(path), ""))
    dock, saved = docked(viewer, StackDock), session.recipe
    dock.save_button.click()
    assert load_recipe(path) == saved
    session.recipe = Recipe()
    dock.load_button.click()
    assert session.recipe == saved
    path.write_text("carrier = 3")
    dock.load_button.click()
    assert "carrier" in dock.message.text()
    assert session.recipe == saved


def test_a_stack_that_cannot_be_opened_is_told_in_a_sentence(
    make_napari_viewer: Any, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "empty.tif"
    path.write_bytes(b"")
    monkeypatch.setattr(QFileDialog, "getOpenFileNames", lambda *_: ([str(path)], ""))
    viewer = make_napari_viewer()
    dock = docked(viewer, StackDock)
    dock.action_button.click()
    assert "empty.tif" in dock.message.text()
    assert len(viewer.layers) == 0


def test_the_spectrum_shows_the_carrier_before_and_after_it_is_decided(
    make_napari_viewer: Any, stack_file: Path, recipe: Recipe, qtbot: Any, finish: Any
) -> None:
    viewer = make_napari_viewer(show=True)
    session = show_stack(viewer, stack_file)
    launch.open_docks(viewer)
    launch.raise_dock(viewer, "Field")
    dock = viewer.window.dock_widgets["Field (hologyre)"]
    view = dock.findChild(SpectrumView)
    qtbot.waitUntil(lambda: view.band is not None, timeout=20_000)
    assert session.recipe.carrier.fy == "auto"
    assert (view.band.fy, view.band.fx) == pytest.approx((0.13, 0.19), abs=0.01)
    dock.find_button.click()
    finish(session)
    assert view.band == Band(*(getattr(session.recipe.carrier, n) for n in ("fy", "fx", "radius")))
    qtbot.waitUntil(lambda: "visibility" in dock.told.text(), timeout=20_000)


def test_a_band_chosen_by_hand_goes_into_the_recipe_and_the_pictures(film: Any) -> None:
    viewer, session = film
    dock = docked(viewer, FieldDock)
    session.display.show("phase")
    before = np.asarray(session.display.layer("phase").data[0])
    dock.findChild(SpectrumView).band_chosen.emit(Band(0.12, 0.2, 0.05))
    carrier = session.recipe.carrier
    assert (carrier.fy, carrier.fx, carrier.radius) == (0.12, 0.2, 0.05)
    assert not np.array_equal(np.asarray(session.display.layer("phase").data[0]), before)


def test_a_table_is_exported_as_csv(
    film: Any, finish: Any, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    viewer, session = film
    dock = docked(viewer, SingularitiesDock)
    assert not dock.export_button.isEnabled()
    dock.action_button.click()
    finish(session)
    path = tmp_path / "zeros.csv"
    monkeypatch.setattr(QFileDialog, "getSaveFileName", lambda *_: (str(path), ""))
    dock.export_button.click()
    assert len(pd.read_csv(path)) == len(session.tables.singularities)
    assert "zeros.csv" in dock.message.text()
    monkeypatch.setattr(
        QFileDialog, "getSaveFileName", lambda *_: (str(tmp_path / "no" / "z.csv"), "")
    )
    dock.export_button.click()
    assert "No such file" in dock.message.text()
