"""The Singularities dock: find them in every frame, and what the current frame has."""

from __future__ import annotations

from typing import Any

from napari import Viewer
from qtpy.QtWidgets import QLabel

from hologyre.viewer import steps
from hologyre.viewer.docks.base import SessionDock, export_button
from hologyre.viewer.forms import RecipeForm, section_paths
from hologyre.viewer.session import Session
from hologyre.viewer.styles import NEGATIVE, POSITIVE

_LABELS = {"singularities.margin_px": "Keep off the border"}


class SingularitiesDock(SessionDock):
    """The zeros of the field, where the phase turns."""

    title = "Singularities"
    help_text = (
        f"<span style='color:{POSITIVE}'>▲</span> charge +1: the phase grows clockwise on the "
        f"screen. <span style='color:{NEGATIVE}'>▼</span> charge −1."
    )
    action = "Find singularities"
    action_tip = "Find the singularities of every frame, to a part of a pixel."

    def __init__(self, napari_viewer: Viewer) -> None:
        self.form = RecipeForm(section_paths("singularities"), labels=_LABELS)
        self.told = QLabel()
        self.told.setWordWrap(True)
        super().__init__(napari_viewer)

    def show_session(self, session: Session) -> None:
        """Show the settings and the counts."""
        self.form.show_recipe(session.recipe)
        self.export_button.setEnabled(len(session.tables.singularities) > 0)
        self._tell()

    def run(self, session: Session) -> None:
        """Find the singularities of all frames."""
        steps.find_singularities(session)

    def _lay_out(self) -> None:
        self.export_button = export_button(self, "singularities")
        self.rows.addWidget(self.form)
        self.rows.addWidget(self.told)
        self.rows.addStretch(1)
        self.form.changed.connect(self.set_recipe)
        self.form.refused.connect(lambda reason: self.say(reason, warning=True))
        super()._lay_out()
        self.footer.addWidget(self.export_button)

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
        self.told.setText("\n".join(_sentences(session, session.frame)))


def _sentences(session: Session, frame: int) -> list[str]:
    tables = session.tables
    if tables.found_with is None and not len(tables.frames):
        return ["Not searched yet."]
    told = []
    if tables.found_with is None:
        told.append("Not all frames are searched.")
    elif not steps.singularities_are_current(session):
        told.append("Settings have changed since these were found; find them again.")
    row = tables.frames[tables.frames["frame"] == frame]
    if not len(row):
        told.append(f"Frame {frame} was not searched.")
    elif row["status"].iloc[0] == "skipped":
        told.append(f"Frame {frame} is not used: {row['reason'].iloc[0]}.")
    else:
        plus, minus = int(row["positive"].iloc[0]), int(row["negative"].iloc[0])
        told.append(
            f"Frame {frame}: {plus} positive, {minus} negative; the phase turns "
            f"{int(row['border_winding'].iloc[0]):+d} times along the border."
        )
    done = tables.frames["status"] == "done"
    told.append(
        f"In all {len(tables.singularities)} in {int(done.sum())} frames"
        + (f"; {int((~done).sum())} frames not used." if (~done).any() else ".")
    )
    return told
