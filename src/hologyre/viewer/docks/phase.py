"""The Phase dock: the unwrapped phase and its cuts."""

from __future__ import annotations

from typing import Any

from napari import Viewer
from qtpy.QtWidgets import QLabel

from hologyre.viewer import steps
from hologyre.viewer.docks.base import SessionDock
from hologyre.viewer.forms import RecipeForm, section_paths
from hologyre.viewer.maps import Skipped
from hologyre.viewer.session import Session

_LABELS = {"phase.weight": "Weight of an edge"}


class PhaseDock(SessionDock):
    """The phase without its 2 pi wraps, and the cuts where it has to jump."""

    title = "Phase"
    help_text = (
        "Around a singularity the phase cannot be without a jump; cuts show where it lies. The "
        "cheapest cuts are taken."
    )
    action = "Unwrap"
    action_tip = (
        "Unwrap the phase of the current frame and show it with its cuts; other frames follow "
        "as the time slider reaches them."
    )

    def __init__(self, napari_viewer: Viewer) -> None:
        self.form = RecipeForm(section_paths("phase"), labels=_LABELS)
        self.told = QLabel()
        self.told.setWordWrap(True)
        super().__init__(napari_viewer)

    def show_session(self, session: Session) -> None:
        """Show the settings and what is known of the current frame's cuts."""
        self.form.show_recipe(session.recipe)
        self._tell()

    def run(self, session: Session) -> None:
        """Show the unwrapped phase with its cuts."""
        steps.show_pictures(session, "unwrapped", "cuts")

    def _lay_out(self) -> None:
        self.rows.addWidget(self.form)
        self.rows.addWidget(self.told)
        self.rows.addStretch(1)
        self.form.changed.connect(self.set_recipe)
        self.form.refused.connect(lambda reason: self.say(reason, warning=True))
        super()._lay_out()

    def _attach(self) -> None:
        self.viewer.dims.events.current_step.connect(self._tell)
        super()._attach()

    def _release(self) -> None:
        self.viewer.dims.events.current_step.disconnect(self._tell)
        super()._release()

    def _tell(self, event: Any = None) -> None:
        session = self.session()
        if session is None:
            self.told.setText("")
            return
        frame = session.frame
        found = session.maps.ready("cuts", session.recipe, frame)
        if found is None:
            self.told.setText("")
        elif isinstance(found, Skipped):
            self.told.setText(f"Frame {frame} is not used: {found.reason}.")
        else:
            self.told.setText(
                f"Frame {frame}: {len(found.cuts)} cuts, {found.cut_length_px:.0f} px long in "
                f"all; {100 * found.near_pi:.2g} % of neighbouring pixels differ by nearly π."
            )
