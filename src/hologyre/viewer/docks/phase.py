"""The Phase dock: the unwrapped phase and its cuts."""

from __future__ import annotations

from typing import Any

from napari import Viewer
from qtpy.QtWidgets import QCheckBox, QLabel

from hologyre.viewer import steps
from hologyre.viewer.docks.base import WARN, SessionDock, button, side_by_side, titled
from hologyre.viewer.forms import RecipeForm, section_paths
from hologyre.viewer.gestures import gestures_of
from hologyre.viewer.maps import Skipped
from hologyre.viewer.session import Session
from hologyre.viewer.styles import BARRIER, BRIDGE, Role

_LABELS = {"phase.weight": "Weight of an edge"}
_LINES_HELP = (
    f"<span style='color:{BARRIER}'>Barrier</span>: a cut may run along it at no cost. "
    f"<span style='color:{BRIDGE}'>Bridge</span>: no cut may cross it. Click its corners, end "
    "with a double click; the frame is unwrapped anew at once. Delete or drag lines with "
    "napari's select tool; Ctrl+Z takes back."
)


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
        self.jumps_button = button(
            "Show jumps",
            "Show by how many turns each pixel's phase jumps towards a neighbour.",
            lambda: self.with_session(lambda s: steps.show_pictures(s, "jumps", "cuts")),
        )
        self.residues_button = button(
            "Show residues",
            "Mark the residues of the wrapped phase, where cuts begin and end.",
            lambda: self.with_session(lambda s: steps.show_pictures(s, "residues")),
        )
        self.barrier_button = button(
            "Draw barriers",
            "Draw lines along which the phase may be cut at no cost.",
            lambda: self.with_session(lambda s: self._draw_on(s, "barriers")),
        )
        self.bridge_button = button(
            "Draw bridges",
            "Draw lines that no cut may cross.",
            lambda: self.with_session(lambda s: self._draw_on(s, "bridges")),
        )
        self.every_frame = QCheckBox("New lines hold in every frame")
        self.every_frame.setToolTip("Otherwise they hold in the frame they are drawn in.")
        self.every_frame.toggled.connect(self._set_every_frame)
        lines_help = QLabel(_LINES_HELP)
        lines_help.setWordWrap(True)
        self.rows.addWidget(self.form)
        self.rows.addWidget(self.told)
        self.rows.addWidget(side_by_side(self.jumps_button, self.residues_button))
        self.rows.addWidget(
            titled(
                "Cuts by hand",
                lines_help,
                side_by_side(self.barrier_button, self.bridge_button),
                self.every_frame,
            )
        )
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

    def _bind(self, session: Session | None) -> None:
        old = self._bound
        super()._bind(session)
        if session is old:
            return
        if old is not None:
            old.drawn.disconnect(self._tell)
            old.told.disconnect(self._repeat)
        if session is not None:
            session.drawn.connect(self._tell)
            session.told.connect(self._repeat)

    def _repeat(self, text: str, warning: bool) -> None:
        self.say(text, warning=warning)

    def _draw_on(self, session: Session, role: Role) -> None:
        gestures = gestures_of(self.viewer, session)
        if gestures is None:
            return
        if session.display is not None and not session.display.is_visible("cuts"):
            steps.show_pictures(session, "unwrapped", "cuts")
        gestures.every_frame = self.every_frame.isChecked()
        gestures.draw_on(role)

    def _set_every_frame(self, every: bool) -> None:
        session = self.session()
        gestures = None if session is None else gestures_of(self.viewer, session)
        if gestures is not None:
            gestures.every_frame = every

    def _tell(self, event: Any = None) -> None:
        session = self.session()
        self.told.setStyleSheet("")
        if session is None:
            self.told.setText("")
            return
        frame = session.frame
        found = session.maps.ready("cuts", session.recipe, frame)
        if found is None:
            self.told.setText("")
        elif isinstance(found, Skipped):
            self.told.setStyleSheet(WARN)
            self.told.setText(f"Frame {frame} cannot be unwrapped: {found.reason.rstrip('.')}.")
        else:
            self.told.setText(
                f"Frame {frame}: {len(found.cuts)} cuts, {found.cut_length_px:.0f} px long in "
                f"all; {100 * found.near_pi:.2g} % of neighbouring pixels differ by nearly π."
            )
