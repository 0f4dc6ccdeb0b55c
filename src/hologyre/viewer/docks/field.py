"""The Field dock: the spectrum with the carrier and its band, and how fields are read."""

from __future__ import annotations

from functools import partial
from html import escape
from typing import Any

import numpy as np
from napari import Viewer
from qtpy.QtCore import QTimer
from qtpy.QtGui import QShowEvent
from qtpy.QtWidgets import QCheckBox, QFormLayout, QLabel, QWidget

from hologyre.analyse import Inspection
from hologyre.fields.autofocus import Focus
from hologyre.recipe import Recipe, RecipeError
from hologyre.viewer import steps
from hologyre.viewer.ahead import Ahead
from hologyre.viewer.docks.base import WARN, SessionDock, button, side_by_side, titled
from hologyre.viewer.editors import ChoiceEditor, NumberEditor
from hologyre.viewer.focusing import focus_frame, focus_panel
from hologyre.viewer.forms import RecipeForm, section_paths
from hologyre.viewer.maps import Skipped
from hologyre.viewer.plots import PanelPlot
from hologyre.viewer.preview import TIP, PreviewLayer, preview_phase
from hologyre.viewer.session import Session
from hologyre.viewer.spectrum import Band, SpectrumView

_REST_MS = 250
_FOCUS_TIP = (
    "Refocus the current frame over the range, plot how sharp it is, and put the best distance "
    "into the settings, for all frames."
)
_LABELS = {
    "carrier.fy": "Carrier fy (cycles/px)",
    "carrier.fx": "Carrier fx (cycles/px)",
    "carrier.radius": "Band radius (cycles/px)",
    "carrier.conjugate": "Read the other sideband",
    "field.edges": "Frame edges",
    "field.window": "Band filter",
    "compensation.family": "Take out",
    "compensation.order": "Highest order",
    "refocus.distance_um": "Refocus by",
}
_MEASURES = {
    "modulus": "mean modulus",
    "tamura": "Tamura coefficient",
}
_KINDS = {"phase": "phase object", "amplitude": "amplitude object"}


class FieldDock(SessionDock):
    """Where the sideband lies, and the field read from it."""

    title = "Field"
    help_text = "Drag the blue cross or rim to choose the band by hand."
    action = "Compute fields"
    action_tip = (
        "Read the complex field and show its amplitude and phase; frames are computed as the "
        "time slider reaches them. Finds the carrier first if it is still auto."
    )

    def __init__(self, napari_viewer: Viewer) -> None:
        self._spectrum = SpectrumView()
        self.told = QLabel()
        self.told.setWordWrap(True)
        self._carrier = RecipeForm(section_paths("carrier"), labels=_LABELS)
        self._field = RecipeForm(section_paths("field"), labels=_LABELS)
        self._compensation = RecipeForm(section_paths("compensation"), labels=_LABELS)
        self._refocus = RecipeForm(section_paths("refocus"), labels=_LABELS)
        self._forms = (self._carrier, self._field, self._compensation, self._refocus)
        self.focus_range = NumberEditor(count=2)
        self.focus_range.show_value((-50.0, 50.0))
        self._range_um = (-50.0, 50.0)
        self.focus_measure = ChoiceEditor(list(_MEASURES), list(_MEASURES.values()))
        self.focus_kind = ChoiceEditor(list(_KINDS), list(_KINDS.values()))
        self.focus_plot = PanelPlot("distance (µm)")
        self._ahead = Ahead(self._show_spectrum)
        super().__init__(napari_viewer)

    def showEvent(self, event: QShowEvent) -> None:
        """Catch up with what happened while the dock was hidden."""
        super().showEvent(event)
        self._ask_spectrum()

    def show_session(self, session: Session) -> None:
        """Show the spectrum of the current frame, the carrier and the settings."""
        for form in self._forms:
            form.show_recipe(session.recipe)
        reason = _no_refocus(session)
        self.focus_button.setEnabled(not reason)
        self.focus_button.setToolTip(f"Not now: {reason}." if reason else _FOCUS_TIP)
        if self.focus_plot.panels:
            self.focus_plot.show_marker(session.recipe.refocus.distance_um)
        self._ask_spectrum()

    def run(self, session: Session) -> None:
        """Show amplitude and phase."""
        steps.show_pictures(session, "amplitude", "phase")

    def _lay_out(self) -> None:
        self._rest = QTimer(self)
        self._rest.setSingleShot(True)
        self._rest.setInterval(_REST_MS)
        self._rest.timeout.connect(self._ask_findings)
        self.find_button = button(
            "Find carrier",
            "Look for the carrier in frames spread through the stack, and put it below.",
            lambda: self.with_session(steps.find_carrier),
        )
        arrows = button(
            "Show wavevectors",
            "Draw the local wavevector (gradient of the phase) of the current frame as arrows.",
            lambda: self.with_session(lambda s: steps.show_pictures(s, "wavevectors")),
        )
        self.live = QCheckBox("Preview while dragging")
        self.live.setChecked(True)
        self.live.setToolTip(TIP)
        self.focus_button = button("Autofocus this frame", _FOCUS_TIP, self._focus)
        for part in (
            self._spectrum,
            self.live,
            self.told,
            side_by_side(self.find_button, arrows),
            titled("Carrier and band", self._carrier),
            titled("Field", self._field),
            titled("Compensation", self._compensation),
            titled("Refocusing", self._refocus, self._focusing()),
        ):
            self.rows.addWidget(part)
        self.rows.addStretch(1)
        for form in self._forms:
            form.changed.connect(self.set_recipe)
            form.refused.connect(lambda reason: self.say(reason, warning=True))
        self._spectrum.band_moved.connect(self._move_band)
        self._spectrum.band_chosen.connect(self._choose_band)
        self.focus_range.chosen.connect(self._set_range)
        self.focus_plot.picked.connect(self._move_distance)
        self.focus_plot.chosen.connect(self._choose_distance)
        super()._lay_out()

    def _focusing(self) -> QWidget:
        """Return the controls of the autofocus and its curve."""
        holder = QWidget()
        rows = QFormLayout(holder)
        rows.setContentsMargins(0, 0, 0, 0)
        rows.setVerticalSpacing(4)
        rows.addRow("From, to (µm)", self.focus_range)
        rows.addRow("Sharpness", self.focus_measure)
        rows.addRow("Object", self.focus_kind)
        rows.addRow(self.focus_button)
        rows.addRow(self.focus_plot)
        self.focus_measure.show_value("modulus")
        self.focus_kind.show_value("phase")
        self.focus_plot.show_panels((), "The autofocus curve comes here.")
        self.focus_plot.setToolTip(f"Drag to choose the distance. {TIP}")
        return holder

    def _attach(self) -> None:
        self._preview = PreviewLayer(self.viewer)
        self.viewer.dims.events.current_step.connect(self._ask_spectrum)
        super()._attach()

    def _release(self) -> None:
        self.viewer.dims.events.current_step.disconnect(self._ask_spectrum)
        self._rest.stop()
        self._ahead.stop()
        super()._release()

    def _ask_spectrum(self, event: Any = None) -> None:
        """Have the spectrum of the current frame computed, and shortly after what it allows."""
        session = self.session()
        if session is None:
            self._spectrum.show_band(None)
            self._spectrum.show_picture(None, "The spectrum of the hologram comes here.")
            self.told.setText("")
            return
        if not self.isVisible():
            return
        self._show_spectrum()
        self._ask(session, "spectrum")
        self._rest.start()

    def _ask_findings(self) -> None:
        """Have the frame looked at once the time slider rests; it takes longer than a step."""
        session = self.session()
        if session is not None and self.isVisible():
            undecided = bool(session.recipe.undecided())
            self._ask(session, "spectrum", "carrier" if undecided else "inspection")

    def _ask(self, session: Session, *quantities: str) -> None:
        maps, recipe, frame = session.maps, session.recipe, session.frame
        self._ahead.ask(
            [
                partial(maps.prepare, name, recipe, frame)
                for name in quantities
                if maps.ready(name, recipe, frame) is None
            ]
        )

    def _show_spectrum(self) -> None:
        session = self.session()
        if session is None:
            return
        maps, recipe, frame = session.maps, session.recipe, session.frame
        picture = maps.ready("spectrum", recipe, frame)
        if picture is not None:
            self._spectrum.show_picture(picture)
        band = _band(session)
        if band is not None:
            self._spectrum.show_band(band)
            seen = maps.ready("inspection", recipe, frame)
            self.told.setText(_report(seen) if seen else words_for(band))
            return
        found = maps.ready("carrier", recipe, frame)
        if found is None:
            return
        if isinstance(found, Skipped):
            self._spectrum.show_band(None)
            self.told.setText(f"No carrier in frame {frame}: {found.reason}.")
            return
        self._spectrum.show_band(Band(found.fy, found.fx, found.radius))
        self.told.setText(
            f"In frame {frame}: carrier {found.fy:.4f}, {found.fx:.4f} cycles/px, visibility "
            f"{found.visibility:.2f}. " + words_for(Band(found.fy, found.fx, found.radius))
        )

    def _move_band(self, band: Band) -> None:
        """Say what the band means, and show the phase it gives."""
        self.told.setText(words_for(band))
        session = self.session()
        if session is not None and self.live.isChecked():
            self._show_preview(session, band, session.recipe.refocus.distance_um)

    def _move_distance(self, distance_um: float) -> None:
        session = self.session()
        self.focus_plot.show_marker(distance_um)
        if session is None or not self.live.isChecked():
            return
        band = _band(session)
        if band is not None:
            self._show_preview(session, band, distance_um)

    def _choose_distance(self, distance_um: float) -> None:
        session = self.session()
        if session is not None:
            settings = {"refocus.distance_um": float(f"{distance_um:.4g}")}
            self._settle(session, session.recipe.with_settings(settings))

    def _show_preview(self, session: Session, band: Band, distance_um: float) -> None:
        maps, window = session.maps, session.recipe.field.window
        optics = None if _no_refocus(session) else session.optics
        try:
            found = preview_phase(
                maps.hologram(session.frame),
                band,
                window=window,
                distance_um=distance_um,
                optics=optics,
            )
        except ValueError as error:
            self.say(str(error), warning=True)
            return
        self._preview.show(session, found)

    def _settle(self, session: Session, recipe: Recipe) -> None:
        """Take a recipe, and leave the place to pictures that follow it: the phase if none does."""
        self.set_recipe(recipe)
        if self._preview.layer(session) is None:
            return
        self._preview.remove(session)
        display = session.display
        if display is not None and not display.shows_picture() and session.task is None:
            steps.show_pictures(session, "phase")

    def _set_range(self, value: Any) -> None:
        fits = isinstance(value, tuple) and len(value) == 2 and value[0] < value[1]
        self.focus_range.show_problem(not fits)
        if fits:
            self._range_um = (float(value[0]), float(value[1]))
        else:
            self.say("Autofocus takes two distances in µm, the smaller one first.", warning=True)

    def _focus(self) -> None:
        def find(session: Session) -> None:
            focus_frame(
                session,
                self._range_um,
                measure=self.focus_measure.box.currentData(),
                kind=self.focus_kind.box.currentData(),
                on_done=lambda found: self._show_focus(session, found),
            )

        self.with_session(find)

    def _show_focus(self, session: Session, found: Focus) -> None:
        distance_um = float(found.distance_um)
        self.focus_plot.show_panels([focus_panel(found)])
        self.focus_plot.show_marker(distance_um)
        if bool(found.at_end):
            self.say("The best distance is at an end of the range: widen it.", warning=True)
            return
        self._choose_distance(distance_um)
        self.say(f"In focus at {distance_um:.3g} µm.")

    def _choose_band(self, band: Band) -> None:
        settings = {
            "carrier.fy": round(band.fy, 5),
            "carrier.fx": round(band.fx, 5),
            "carrier.radius": round(band.radius, 5),
        }
        session = self.session()
        if session is None:
            return
        try:
            recipe = session.recipe.with_settings(settings)
        except RecipeError as error:
            self.say(str(error), warning=True)
            self._show_spectrum()
        else:
            self._settle(session, recipe)


def _no_refocus(session: Session) -> str:
    """Return why fields cannot be refocused, or nothing."""
    if session.recipe.undecided():
        return "find the carrier first"
    optics = session.optics
    if optics.wavelength_nm is None or optics.pixel_um is None:
        return "give the wavelength and the pixel size in the Stack dock first"
    return ""


def words_for(band: Band) -> str:
    """Say what a band means for the picture, and what is wrong with it."""
    length = float(np.hypot(band.fy, band.fx))
    told = [f"{1 / max(length, 1e-6):.1f} px per fringe; finest detail {1 / band.radius:.1f} px."]
    if length < 3 * band.radius:
        told.append("The band reaches into the zero order (orange): make it smaller.")
    if max(abs(band.fy), abs(band.fx)) + band.radius > 0.5:
        told.append("The band is cut off by the end of the spectrum: make it smaller.")
    return " ".join(told)


def _report(seen: Inspection) -> str:
    """Return what was seen in a frame: findings in one line, then warnings."""
    warnings = "".join(f"<br><span style='{WARN}'>{escape(w)}</span>" for w in seen.warnings)
    return f"Frame {seen.frame}: {escape(seen.summary())}.{warnings}"


def _band(session: Session) -> Band | None:
    carrier = session.recipe.carrier
    if carrier.fy == "auto" or carrier.fx == "auto" or carrier.radius == "auto":
        return None
    return Band(carrier.fy, carrier.fx, carrier.radius)
