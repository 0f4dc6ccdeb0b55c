"""The Motion dock: follow singularities from frame to frame, and export."""

from __future__ import annotations

from napari import Viewer
from qtpy.QtWidgets import QLabel

from hologyre.viewer import steps
from hologyre.viewer.docks.base import SessionDock, button, export_all_button, export_button
from hologyre.viewer.forms import RecipeForm, section_paths
from hologyre.viewer.session import Session

_LABELS = {
    "motion.method": "Method",
    "motion.max_step_px": "Longest step",
    "motion.max_gap": "Frames missed at most",
}
_KINDS = {
    "pair_birth": "pair births ★",
    "pair_death": "pair deaths ✕",
    "entry": "entries ▲",
    "exit": "exits ▼",
    "split": "splits ◆",
    "merge": "merges ■",
    "unexplained": "unexplained ●",
}


class MotionDock(SessionDock):
    """Trajectories of singularities, and what happened to them."""

    title = "Motion"
    help_text = "Trajectories keep their charge; they begin and end in pairs or at the border."
    action = "Follow singularities"
    action_tip = "Link the singularities of all frames to trajectories; find them first if need be."

    def __init__(self, napari_viewer: Viewer) -> None:
        self.form = RecipeForm(section_paths("motion"), labels=_LABELS)
        self.told = QLabel()
        self.told.setWordWrap(True)
        super().__init__(napari_viewer)

    def show_session(self, session: Session) -> None:
        """Show the settings and the totals."""
        self.form.show_recipe(session.recipe)
        self.told.setText("\n".join(_sentences(session)))
        known = session.tables.linked_with is not None
        for widget in (self.export_button, self.export_all_button, self._events):
            widget.setEnabled(known)

    def blocked(self, session: Session) -> str:
        """Motion takes two frames."""
        return "" if session.stack.sizes["t"] > 1 else "the stack has one frame"

    def run(self, session: Session) -> None:
        """Link all frames."""
        steps.follow_singularities(session)

    def _lay_out(self) -> None:
        self._events = button(
            "Show events",
            "Mark births, deaths, entries and exits as points.",
            lambda: self.with_session(_show_events),
        )
        self.export_button = export_button(self, "trajectories")
        self.export_all_button = export_all_button(self)
        for part in (self.form, self.told, self._events):
            self.rows.addWidget(part)
        self.rows.addStretch(1)
        self.form.changed.connect(self.set_recipe)
        self.form.refused.connect(lambda reason: self.say(reason, warning=True))
        super()._lay_out()
        self.footer.addWidget(self.export_button)
        self.footer.addWidget(self.export_all_button)


def _show_events(session: Session) -> None:
    if session.display is not None:
        session.display.show("events")


def _sentences(session: Session) -> list[str]:
    tables = session.tables
    if tables.linked_with is None:
        return ["Not followed yet."]
    told = []
    if not steps.motion_is_current(session):
        told.append("Settings have changed since these were followed; follow them again.")
    lengths = tables.trajectories.groupby("track").size()
    if len(lengths):
        told.append(
            f"{len(lengths)} trajectories, {lengths.median():.0f} frames long in the median, "
            f"{lengths.max()} at most."
        )
    else:
        told.append("No trajectories.")
    counts = tables.events["kind"].value_counts()
    if len(counts):
        told.append(
            "Events: "
            + ", ".join(f"{counts[k]} {name}" for k, name in _KINDS.items() if k in counts)
            + "."
        )
    done = tables.frames[tables.frames["status"] == "done"]
    odd = done.loc[~done["audit"].isin(["ok", ""]), "frame"]
    if len(odd):
        told.append(f"Charges do not add up in frames {', '.join(map(str, odd[:8]))}.")
    return told
