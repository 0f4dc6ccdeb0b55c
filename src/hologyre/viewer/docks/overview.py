"""The Overview dock: all steps at a glance, and all of them by one button."""

from __future__ import annotations

from napari import Viewer
from qtpy.QtCore import Qt, QTimer
from qtpy.QtWidgets import QGridLayout, QLabel, QWidget

from hologyre.viewer import launch, steps
from hologyre.viewer.docks.base import SessionDock, button, export_all_button, open_dialog
from hologyre.viewer.session import Session


class OverviewDock(SessionDock):
    """Opens all other docks, shows how far the work is and does all of it."""

    title = "Overview"
    help_text = "Do everything at once here, or step by step in the docks beside this one."
    has_settings = False
    action = "Analyse whole stack"
    action_tip = (
        "Find the carrier, read every frame, find the singularities and follow them, with the "
        "settings of all docks."
    )

    def __init__(self, napari_viewer: Viewer) -> None:
        self._found = {name: QLabel() for name in launch.DOCKS}
        super().__init__(napari_viewer)
        # once napari has put this dock in its place, so that the others come behind it
        QTimer.singleShot(0, self._open_others)

    def show_session(self, session: Session) -> None:
        """Say what each step has found."""
        for name, label in self._found.items():
            label.setText(_finding(name, session))
        self.export_button.setEnabled(session.tables.found_with is not None)

    def run(self, session: Session) -> None:
        """Do every step."""
        if session.stack.sizes["t"] > 1:
            steps.follow_singularities(session)
        else:
            steps.find_singularities(session)

    def _lay_out(self) -> None:
        table = QWidget()
        grid = QGridLayout(table)
        grid.setContentsMargins(0, 0, 0, 0)
        grid.setVerticalSpacing(10)
        grid.setColumnStretch(1, 1)
        for row, (name, found) in enumerate(self._found.items()):
            link = QLabel(f"<a style='color:#56B4E9' href='{name}'>{row + 1}. {name}</a>")
            link.setToolTip(f"Go to the {name} dock.")
            link.linkActivated.connect(lambda name: launch.raise_dock(self.viewer, name))
            found.setWordWrap(True)
            grid.addWidget(link, row, 0, Qt.AlignmentFlag.AlignTop)
            grid.addWidget(found, row, 1)
        self.rows.addWidget(table)
        self.rows.addStretch(1)
        super()._lay_out()
        self.export_button = export_all_button(self)
        self.footer.addWidget(button("Open stack…", "Open a TIFF stack.", self._open))
        self.footer.addWidget(self.export_button)

    def _open(self) -> None:
        open_dialog(self)

    def _open_others(self) -> None:
        if self.parent() is not None:
            launch.open_steps(self.viewer)
            self.parent().raise_()


def _finding(name: str, session: Session) -> str:
    tables, recipe = session.tables, session.recipe
    if name == "Stack":
        sizes = session.stack.sizes
        return f"{sizes['t']} × {sizes['y']} × {sizes['x']} px"
    if name == "Field":
        carrier = recipe.carrier
        if "auto" in (carrier.fy, carrier.fx, carrier.radius):
            return "carrier not decided yet"
        return f"carrier {carrier.fy:.4f}, {carrier.fx:.4f}, radius {carrier.radius:.4f} cycles/px"
    if name == "Phase":
        shown = session.display is not None and session.display.layer("unwrapped") is not None
        return "unwrapped, frame by frame" if shown else "not unwrapped yet"
    if name == "Singularities":
        if not len(tables.frames):
            return "not searched yet"
        done = int((tables.frames["status"] == "done").sum())
        left = len(tables.frames) - done
        told = f"{len(tables.singularities)} in {done} frames"
        told += f", {left} frames not used" if left else ""
        if tables.found_with is None:
            return f"{told}, not all frames searched"
        return told + ("" if steps.singularities_are_current(session) else "; settings changed")
    if name == "Review":
        count = len(session.editing.log.standing)
        return f"{count} edits by hand" if count else "nothing edited by hand"
    if tables.linked_with is None:
        return "not followed yet"
    told = f"{tables.trajectories['track'].nunique()} trajectories, {len(tables.events)} events"
    return told + ("" if steps.motion_is_current(session) else "; settings changed")
