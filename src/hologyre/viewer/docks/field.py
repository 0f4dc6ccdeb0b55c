"""The Field dock: the spectrum with the carrier and its band, and how fields are read."""

from __future__ import annotations

from functools import partial
from html import escape
from typing import Any

import numpy as np
from napari import Viewer
from qtpy.QtCore import QTimer
from qtpy.QtGui import QShowEvent
from qtpy.QtWidgets import QLabel

from hologyre.analyse import Inspection
from hologyre.recipe import RecipeError
from hologyre.viewer import steps
from hologyre.viewer.ahead import Ahead
from hologyre.viewer.docks.base import WARN, SessionDock, button, side_by_side, titled
from hologyre.viewer.forms import RecipeForm, section_paths
from hologyre.viewer.maps import Skipped
from hologyre.viewer.session import Session
from hologyre.viewer.spectrum import Band, SpectrumView

_REST_MS = 250
_LABELS = {
    "carrier.fy": "Carrier fy (cycles/px)",
    "carrier.fx": "Carrier fx (cycles/px)",
    "carrier.radius": "Band radius (cycles/px)",
    "carrier.conjugate": "Read the other sideband",
    "field.edges": "Frame edges",
    "field.window": "Band filter",
    "refocus.distance_um": "Refocus by",
}


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
        self._field = RecipeForm(section_paths("field", "refocus"), labels=_LABELS)
        self._ahead = Ahead(self._show_spectrum)
        super().__init__(napari_viewer)

    def showEvent(self, event: QShowEvent) -> None:
        """Catch up with what happened while the dock was hidden."""
        super().showEvent(event)
        self._ask_spectrum()

    def show_session(self, session: Session) -> None:
        """Show the spectrum of the current frame, the carrier and the settings."""
        for form in (self._carrier, self._field):
            form.show_recipe(session.recipe)
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
        for part in (
            self._spectrum,
            self.told,
            side_by_side(self.find_button, arrows),
            titled("Carrier and band", self._carrier),
            titled("Field", self._field),
        ):
            self.rows.addWidget(part)
        self.rows.addStretch(1)
        for form in (self._carrier, self._field):
            form.changed.connect(self.set_recipe)
            form.refused.connect(lambda reason: self.say(reason, warning=True))
        self._spectrum.band_moved.connect(lambda band: self.told.setText(words_for(band)))
        self._spectrum.band_chosen.connect(self._choose_band)
        super()._lay_out()

    def _attach(self) -> None:
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
            self.set_recipe(session.recipe.with_settings(settings))
        except RecipeError as error:
            self.say(str(error), warning=True)
            self._show_spectrum()


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
