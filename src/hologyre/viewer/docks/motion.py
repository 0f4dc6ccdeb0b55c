"""The Motion dock: follow singularities from frame to frame, look at their lives, and export."""

from __future__ import annotations

from functools import partial
from typing import Any, Literal

from napari import Viewer
from qtpy.QtCore import QItemSelectionModel, QModelIndex, QSignalBlocker, Qt
from qtpy.QtWidgets import (
    QAbstractItemView,
    QComboBox,
    QHeaderView,
    QLabel,
    QSizePolicy,
    QTableView,
)

from hologyre.viewer import steps
from hologyre.viewer.colouring import colour_by, columns_of
from hologyre.viewer.docks.base import (
    SessionDock,
    button,
    export_all_button,
    export_button,
    side_by_side,
)
from hologyre.viewer.forms import RecipeForm, section_paths
from hologyre.viewer.history import Happened, step_event, track_panels, track_sentence
from hologyre.viewer.picking import Picker, bring_into_view, draw_picked
from hologyre.viewer.plots import PanelPlot
from hologyre.viewer.session import Session
from hologyre.viewer.spacetime import SpaceTime
from hologyre.viewer.tracks_list import TrackModel

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
PREVIOUS_KEY, NEXT_KEY = ",", "."
_LIST_HEIGHT = 84


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
        self.model = TrackModel()
        self.list = QTableView()
        self.colours = QComboBox()
        self.kinds = QComboBox()
        self.life = QLabel()
        self.life.setWordWrap(True)
        self.plot = PanelPlot("frame")
        self._seen: int | None = None
        super().__init__(napari_viewer)

    def show_session(self, session: Session) -> None:
        """Show the settings, the totals and the tracks."""
        self.form.show_recipe(session.recipe)
        self.told.setText("\n".join(_sentences(session)))
        known = session.tables.linked_with is not None
        for widget in (self.export_button, self.export_all_button, *self._looking):
            widget.setEnabled(known)
        track = self.track
        others = self.model.show_trajectories(session.tables.trajectories)
        if others or not self.colours.count():
            # the layer of trajectories comes after their table
            self._show_choices(session)
        if others:
            self.pick(track)

    @property
    def track(self) -> int | None:
        """The track that is picked in the list, if any."""
        rows = self.list.selectionModel().selectedRows()
        return self.model.track_at(rows[0].row()) if rows else None

    def pick(self, track: int | None) -> None:
        """Pick a track in the list, and with it show its life."""
        row = None if track is None else self.model.row_of(track)
        if row is None:
            self.list.clearSelection()
        else:
            flags = QItemSelectionModel.SelectionFlag
            where = self.model.index(row, 0)
            self.list.selectionModel().select(where, flags.ClearAndSelect | flags.Rows)
            self.list.scrollTo(where)
        self._show_life()

    def step(self, towards: Literal["next", "previous"]) -> None:
        """Go to the next or previous event: its frame, its place, its first track."""
        session = self.session()
        if session is None or session.display is None:
            return
        kind = self.kinds.currentData() or ""
        events = session.tables.events
        found = step_event(events, session.frame, self._seen, towards, kind=kind)
        if found is None:
            self.say(f"No {towards} event.")
            return
        self._seen = found.event
        self._go_to(session, found)
        if found.tracks:
            self.pick(found.tracks[0])
            draw_picked(self.viewer, session, found.tracks[0], (found.y_px, found.x_px))
        what = _KINDS.get(found.kind, found.kind)
        self.say(f"Frame {found.frame}: one of the {what}, at {found.y_px:.1f}, {found.x_px:.1f}.")

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
        self.spacetime_button = button(
            "View in x, y, t",
            "Show all trajectories as lines in space and time, pairs joined where they are born "
            "or die; time is stretched. Press again to come back.",
            self._toggle_spacetime,
        )
        self.previous_button = button(
            "◀",
            f"Go to the event before; key {PREVIOUS_KEY} in the picture.",
            partial(self.step, "previous"),
        )
        self.next_button = button(
            "▶",
            f"Go to the next event; key {NEXT_KEY} in the picture.",
            partial(self.step, "next"),
        )
        self.export_button = export_button(self, "trajectories")
        self.export_all_button = export_all_button(self)
        self.colours.setToolTip("Colour trajectories by a column of their table.")
        self.kinds.setToolTip("Which events to stop at.")
        for box in (self.colours, self.kinds):
            box.setSizeAdjustPolicy(
                QComboBox.SizeAdjustPolicy.AdjustToMinimumContentsLengthWithIcon
            )
            box.setMinimumContentsLength(1)
            box.setMinimumWidth(70)
            box.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Fixed)
        self._set_up_list()
        self._looking = (
            self._events,
            self.spacetime_button,
            self.colours,
            self.previous_button,
            self.kinds,
            self.next_button,
            self.list,
        )
        for arrow in (self.previous_button, self.next_button):
            arrow.setFixedWidth(30)
        colour = QLabel("Colour")
        colour.setSizePolicy(QSizePolicy.Policy.Fixed, QSizePolicy.Policy.Fixed)
        choices = side_by_side(
            self.previous_button, self.kinds, self.next_button, colour, self.colours
        )
        for part in (
            self.form,
            self.told,
            side_by_side(self._events, self.spacetime_button),
            choices,
            self.list,
            self.life,
            self.plot,
        ):
            self.rows.addWidget(part)
        self.rows.addStretch(1)
        self.form.changed.connect(self.set_recipe)
        self.form.refused.connect(lambda reason: self.say(reason, warning=True))
        self.colours.activated.connect(self._colour)
        self.plot.picked.connect(self._go_to_frame)
        super()._lay_out()
        self.footer.addWidget(self.export_button)
        self.footer.addWidget(self.export_all_button)

    def _set_up_list(self) -> None:
        self.list.setModel(self.model)
        self.list.setSortingEnabled(True)
        self.list.sortByColumn(3, Qt.SortOrder.DescendingOrder)
        self.list.setSelectionBehavior(QAbstractItemView.SelectionBehavior.SelectRows)
        self.list.setSelectionMode(QAbstractItemView.SelectionMode.SingleSelection)
        self.list.setFixedHeight(_LIST_HEIGHT)
        self.list.verticalHeader().hide()
        self.list.verticalHeader().setDefaultSectionSize(20)
        self.list.horizontalHeader().setSectionResizeMode(QHeaderView.ResizeMode.Stretch)
        self.list.setToolTip("Pick a trajectory here, or click on a singularity in the picture.")
        self.list.clicked.connect(self._clicked)
        self.list.selectionModel().currentRowChanged.connect(self._show_life)

    def _attach(self) -> None:
        self._spacetime = SpaceTime(self.viewer)
        self._picker = Picker(self.viewer, self.session, self.pick)
        self._keys = {
            PREVIOUS_KEY: partial(self._press, "previous"),
            NEXT_KEY: partial(self._press, "next"),
        }
        for key, act in self._keys.items():
            self.viewer.bind_key(key, act, overwrite=True)
        self.viewer.dims.events.current_step.connect(self._show_marker)
        super()._attach()

    def _release(self) -> None:
        self.viewer.dims.events.current_step.disconnect(self._show_marker)
        for key in self._keys:
            self.viewer.bind_key(key, None, overwrite=True)
        self._picker.release()
        self._spacetime.release()
        session = self.session()
        if session is not None:
            draw_picked(self.viewer, session, None)
        super()._release()

    def _press(self, towards: Literal["next", "previous"], viewer: Any) -> None:
        self.step(towards)

    def _show_choices(self, session: Session) -> None:
        """Offer the columns and kinds of events that there are."""
        display = session.display
        layer = None if display is None else display.layer("tracks")
        with QSignalBlocker(self.colours), QSignalBlocker(self.kinds):
            self.colours.clear()
            if layer is not None:
                self.colours.addItems(columns_of(layer))
                self.colours.setCurrentText(layer.color_by)
            kind = self.kinds.currentData()
            self.kinds.clear()
            self.kinds.addItem("all events", "")
            there = set(session.tables.events["kind"])
            for name, words in _KINDS.items():
                if name in there:
                    self.kinds.addItem(words, name)
            self.kinds.setCurrentIndex(max(self.kinds.findData(kind), 0))

    def _colour(self) -> None:
        session = self.session()
        display = None if session is None else session.display
        layer = None if display is None else display.layer("tracks")
        if layer is not None:
            colour_by(layer, self.colours.currentText())

    def _clicked(self, index: QModelIndex) -> None:
        """Show where a track that was picked in the list is."""
        session = self.session()
        if session is None or session.display is None:
            return
        rows = session.tables.trajectories
        rows = rows[rows["track"] == self.model.track_at(index.row())]
        if session.frame not in rows["frame"].to_numpy():
            session.display.go_to(int(rows["frame"].iloc[0]))
        self._show_life()

    def _show_life(self, *_: object) -> None:
        session, track = self.session(), self.track
        if session is None:
            return
        tables = session.tables
        draw_picked(self.viewer, session, track)
        if track is None:
            self.life.setText("")
            self.plot.show_panels(
                (), "Pick a trajectory, or click on a singularity, to see its life."
            )
            return
        self.life.setText(track_sentence(tables.trajectories, tables.events, track))
        self.plot.show_panels(
            track_panels(tables.trajectories, tables.events, track, session.optics),
            "Seen in one frame only.",
        )
        self._show_marker()

    def _show_marker(self, event: Any = None) -> None:
        session = self.session()
        self.plot.show_marker(None if session is None else float(session.frame))

    def _go_to(self, session: Session, found: Happened) -> None:
        if session.display is None:
            return
        self._spacetime.leave()
        session.display.go_to(found.frame)
        bring_into_view(self.viewer, session, found.y_px, found.x_px)

    def _go_to_frame(self, frame: float) -> None:
        session = self.session()
        if session is not None and session.display is not None:
            session.display.go_to(round(frame))

    def _toggle_spacetime(self) -> None:
        session = self.session()
        if self._spacetime.active:
            self._spacetime.leave()
        elif session is not None:
            self._spacetime.enter(session)


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
            f"{len(lengths)} trajectories, in the median of {lengths.median():.0f} frames, at most "
            f"of {lengths.max()}."
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
