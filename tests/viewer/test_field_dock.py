from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from qtpy.QtCore import Qt

from hologyre.fields.carrier import Carrier
from hologyre.fields.demodulate import demodulate
from hologyre.fields.interpolate import evaluate
from hologyre.optics import Optics
from hologyre.recipe import Recipe
from hologyre.viewer.docks.field import FieldDock
from hologyre.viewer.opening import show_stack
from hologyre.viewer.preview import ROLE, preview_phase
from hologyre.viewer.session import role_of
from hologyre.viewer.spectrum import Band, SpectrumView

BAND = Band(0.13, 0.19, 0.055)
OPTICS = Optics(wavelength_nm=633.0, camera_pixel_um=5.0, magnification=20.0)


@pytest.fixture
def dock(make_napari_viewer: Any, stack_file: Path, recipe: Recipe) -> Any:
    viewer = make_napari_viewer()
    session = show_stack(viewer, stack_file, recipe=recipe)
    dock = FieldDock(viewer)
    viewer.window.add_dock_widget(dock)
    return viewer, session, dock


def previews(viewer: Any) -> list[Any]:
    return [layer for layer in viewer.layers if role_of(layer) == ROLE]


def test_the_preview_is_the_phase_of_the_field_with_plain_edges(holograms: NDArray[Any]) -> None:
    found = preview_phase(holograms[0], BAND)
    carrier = Carrier(BAND.fy, BAND.fx, BAND.radius)
    field = demodulate(holograms[0], carrier, edges="plain", saturation=np.inf)
    rows, columns = (
        o + s * np.arange(n)
        for o, s, n in zip(found.origin_px, found.step_px, found.phase.shape, strict=True)
    )
    value, _, _ = evaluate(field, *np.meshgrid(rows, columns, indexing="ij"))
    # both in single precision; near a zero the phase is worth less
    miss = np.abs(np.exp(1j * found.phase) - value / np.abs(value)) * np.abs(value)
    assert miss.max() < 1e-4 * np.abs(value).max()
    assert max(rows[-1], columns[-1]) <= holograms.shape[-1] - 1


def test_the_preview_of_a_large_frame_is_no_finer_than_the_eye(holograms: NDArray[Any]) -> None:
    large = np.tile(holograms[0], (6, 6))
    assert max(preview_phase(large, BAND).phase.shape) <= 513


def test_the_preview_is_refocused_where_the_optics_are_known(holograms: NDArray[Any]) -> None:
    plain = preview_phase(holograms[0], BAND)
    moved = preview_phase(holograms[0], BAND, distance_um=40.0, optics=OPTICS)
    assert moved.phase.shape == plain.phase.shape
    assert not np.allclose(moved.phase, plain.phase)


def test_dragging_the_band_shows_a_preview_and_releasing_it_the_pictures(dock: Any) -> None:
    viewer, session, field = dock
    session.display.show("phase")
    view = field.findChild(SpectrumView)
    before = session.recipe
    for radius in (0.05, 0.045):
        view.band_moved.emit(Band(0.13, 0.19, radius))
    (layer,) = previews(viewer)
    assert session.recipe == before
    shown = np.array(layer.data)
    np.testing.assert_array_equal(
        shown, preview_phase(session.maps.hologram(0), Band(0.13, 0.19, 0.045)).phase
    )
    view.band_chosen.emit(Band(0.13, 0.19, 0.045))
    assert not previews(viewer)
    assert session.recipe.carrier.radius == 0.045


def test_a_preview_with_no_picture_under_it_leaves_the_phase(dock: Any, finish: Any) -> None:
    viewer, session, field = dock
    view = field.findChild(SpectrumView)
    view.band_moved.emit(Band(0.13, 0.19, 0.05))
    view.band_chosen.emit(Band(0.13, 0.19, 0.05))
    finish(session)
    assert not previews(viewer)
    assert session.display.is_visible("phase")


def test_dragging_previews_nothing_when_it_is_switched_off(dock: Any) -> None:
    viewer, _, field = dock
    field.live.setChecked(False)
    field.findChild(SpectrumView).band_moved.emit(Band(0.13, 0.19, 0.05))
    assert not previews(viewer)


def test_compensation_and_refocusing_are_settings_of_the_dock(dock: Any) -> None:
    _, session, field = dock
    field._compensation.editors["compensation.family"].chosen.emit("tilt")
    assert session.recipe.compensation.family == "tilt"


def test_autofocus_waits_for_the_optics_and_says_so(dock: Any) -> None:
    _, _, field = dock
    assert not field.focus_button.isEnabled()
    assert "wavelength" in field.focus_button.toolTip()


def test_autofocus_plots_its_curve_and_sets_the_distance(dock: Any, finish: Any) -> None:
    _, session, field = dock
    session.recipe = session.recipe.with_settings({"optics.wavelength_nm": 633.0})
    field.focus_range.chosen.emit((-30.0, 30.0))
    field.focus_button.click()
    finish(session)
    (panel,) = field.focus_plot.panels
    assert panel.curves[0].x[[0, -1]].tolist() == [-30.0, 30.0]
    at_end = "end of the range" in field.message.text()
    assert at_end or session.recipe.refocus.distance_um == pytest.approx(
        field.focus_plot.marker, rel=1e-3
    )


def test_a_click_on_the_autofocus_curve_sets_the_distance(
    dock: Any, finish: Any, qtbot: Any
) -> None:
    viewer, session, field = dock
    session.recipe = session.recipe.with_settings({"optics.wavelength_nm": 633.0})
    field.focus_button.click()
    finish(session)
    field.focus_plot.resize(300, field.focus_plot.sizeHint().height())
    box = field.focus_plot._box(0)
    qtbot.mouseClick(field.focus_plot, Qt.MouseButton.LeftButton, pos=box.center().toPoint())
    # the middle of -50 to 50 um, to a pixel
    assert session.recipe.refocus.distance_um == pytest.approx(0.0, abs=100 / box.width())
    finish(session)
    assert not previews(viewer)


def test_a_range_of_autofocus_that_is_none_is_refused_in_words(dock: Any) -> None:
    _, _, field = dock
    field.focus_range.chosen.emit((5.0, 1.0))
    assert "smaller one first" in field.message.text()
