"""What can be done to the selected singularities and their tracks, and the list to go through."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np
import pandas as pd
from napari import Viewer
from psygnal import Signal

from hologyre.edits import (
    Confirm,
    CutTrack,
    DeleteTrack,
    Edit,
    FlipCharge,
    JoinTracks,
    MarkPair,
    Reject,
    RenameTrack,
    review,
)
from hologyre.edits.kinds import Point
from hologyre.viewer.gestures import Gestures, gestures_of
from hologyre.viewer.layers import placement
from hologyre.viewer.session import Session

_CLOSE_PX = 6.0
"""Screen pixels for one of the hologram's when an item is looked at."""

_SAME = ["what", "frame", "singularity", "event"]


class Key(NamedTuple):
    """A key of the review, its name on screen and what it does."""

    key: str
    shown: str
    does: str


KEYS = {
    "next": Key("n", "N", "next in the list"),
    "previous": Key("b", "B", "back in the list"),
    "confirm": Key("c", "C", "confirm"),
    "reject": Key("x", "X", "reject"),
    "flip": Key("f", "F", "flip charge"),
    "cut": Key("k", "K", "cut track before this frame"),
    "join": Key("j", "J", "join tracks: press on the end, then on the start"),
    "pair": Key("e", "E", "mark two selected as born or dying together"),
    "rename": Key("r", "R", "give the track another number"),
    "delete_track": Key("Shift-X", "Shift+X", "delete the track"),
}


class Review:
    """The list of what deserves a look, and the edits by key.

    Parameters
    ----------
    gestures : Gestures
        Of the session that is reviewed.
    """

    changed = Signal()
    """The list, or the place in it, is another."""

    renaming = Signal(int)
    """A track is to get another number; told with the one it has."""

    def __init__(self, gestures: Gestures) -> None:
        self.gestures = gestures
        self.session = gestures.session
        self.items = pd.DataFrame(columns=[*_SAME, "done", "reason", "score"])
        self.row = -1
        self._from: tuple[int, Point, int] | None = None
        self.session.tables_changed.connect(self.refresh)

    def begin(self) -> None:
        """Show the layers and the list."""
        self.gestures.begin({KEYS[name].key: getattr(self, name) for name in KEYS})
        self.refresh()

    def refresh(self) -> None:
        """Make the list anew, the place in it kept."""
        if not self.gestures.reviewing:
            return
        tables = self.session.tables
        if tables.found_with is None:
            return
        current = self.item
        stack = self.session.stack
        # steps within a frame, from one track to the next, are not looked at
        with np.errstate(divide="ignore", invalid="ignore"):
            self.items = review(
                tables.singularities,
                tables.trajectories,
                tables.events,
                tables.frames,
                (stack.sizes["y"], stack.sizes["x"]),
                edits=self.session.editing.log.edits,
            )
        self.row = -1
        if current is not None:
            same = (self.items[_SAME] == current[_SAME]).all(axis=1).to_numpy()
            self.row = int(np.argmax(same)) if same.any() else min(
                int(current.name), len(self.items)
            ) - 1  # fmt: skip
        self.changed.emit()

    @property
    def item(self) -> pd.Series | None:
        """What is looked at now."""
        return self.items.iloc[self.row] if 0 <= self.row < len(self.items) else None

    @property
    def progress(self) -> tuple[int, int]:
        """Items done, and items in all."""
        return int(self.items["done"].sum()), len(self.items)

    def next(self) -> None:
        """Go to the next item that is not done."""
        self._step(range(self.row + 1, len(self.items)))

    def previous(self) -> None:
        """Go back to the item before, done or not."""
        if self.row > 0:
            self.go_to(self.row - 1)

    def go_to(self, row: int) -> None:
        """Show an item: its frame, its place in the middle, its singularity selected."""
        self.row = row
        item, display = self.item, self.session.display
        if item is None or display is None:
            return
        display.go_to(int(item["frame"]))
        self.gestures.draw()
        if np.isfinite(item["y_px"]):
            self._look_at(float(item["y_px"]), float(item["x_px"]))
            self.gestures.select(int(item["singularity"]))
        self.session.told.emit(_sentence(item), False)
        self.changed.emit()

    def confirm(self) -> None:
        """Say that what is looked at, or else what is selected, is right."""
        item, chosen = self.item, self.gestures.selected()
        here = item is not None and item["frame"] == self.gestures.frame
        if item is not None and here and set(chosen["singularity"]) <= {item["singularity"]}:
            if item["what"] == "frame":
                self._say("A frame is done when its charges add up.", warning=True)
                return
            edit = Confirm(
                frame=int(item["frame"]),
                where=(float(item["y_px"]), float(item["x_px"])),
                charge=int(item["charge"]),
                what=item["what"],
            )
            if self.gestures.do([edit]):
                self._done()
            return
        self._each(lambda frame, at, row: Confirm(frame=frame, where=at, charge=row["charge"]))

    def reject(self) -> None:
        """Judge that the selected singularities are none."""
        self._each(lambda frame, at, row: Reject(frame=frame, where=at, charge=row["charge"]))

    def flip(self) -> None:
        """Turn the charge of the selected singularities over."""
        self._each(lambda frame, at, row: FlipCharge(frame=frame, where=at, charge=row["charge"]))

    def cut(self) -> None:
        """Cut the track of the selected singularity between it and where it was before."""
        one = self._one()
        if one is None:
            return
        frame, at, row = one
        before = self.session.editing.neighbour(int(row["track"]), frame, -1)
        if before is None:
            self._say("The track begins here; select it in a later frame.", warning=True)
            return
        earlier = int(before["frame"])
        if self.gestures.do([CutTrack(frame=earlier, later_frame=frame, charge=int(row["charge"]),
                                      where=(_place(before), at))]):  # fmt: skip
            self._say(f"Cut between frames {earlier} and {frame}.")

    def join(self) -> None:
        """Take the selected singularity as one end, or join it to the end taken before."""
        one = self._one()
        if one is None:
            return
        frame, at, row = one
        charge = int(row["charge"])
        if self._from is None or self._from[0] == frame:
            self._from = (frame, at, charge)
            self._say("Now go to the frame where it goes on, select it there and press J again.")
            return
        (first, start, other), (later, end) = self._from, (frame, at)
        self._from = None
        if other != charge:
            self._say("They have opposite charges and cannot be one.", warning=True)
            return
        if later < first:
            first, start, later, end = later, end, first, start
        if self.gestures.do([JoinTracks(frame=first, later_frame=later, charge=charge,
                                        where=(start, end))]):  # fmt: skip
            self._say(f"Joined from frame {first} to frame {later}.")

    def pair(self) -> None:
        """Say that the two selected singularities were born, or die, together."""
        chosen = self.gestures.selected()
        if len(chosen) != 2 or set(chosen["charge"]) != {1, -1}:
            self._say("Select two singularities of opposite charge.", warning=True)
            return
        frame = self.gestures.frame
        neighbour = self.session.editing.neighbour
        tracks = chosen["track"].astype(int).tolist()
        ends = all(neighbour(track, frame, +1) is None for track in tracks)
        begins = all(neighbour(track, frame, -1) is None for track in tracks)
        if begins == ends:
            self._say("Both tracks must begin, or both must end, in this frame.", warning=True)
            return
        places = {int(row["charge"]): _place(row) for _, row in chosen.iterrows()}
        event: Any = "pair_birth" if begins else "pair_death"
        if self.gestures.do([MarkPair(frame=frame, where=(places[1], places[-1]), event=event)]):
            self._say("Marked as born together." if begins else "Marked as dying together.")

    def rename(self) -> None:
        """Ask for another number for the selected singularity's track."""
        one = self._one()
        if one is None:
            return
        if one[2]["track"] < 0:
            self._say("There are no tracks yet; follow the singularities first.", warning=True)
            return
        self.renaming.emit(int(one[2]["track"]))

    def rename_to(self, number: int) -> None:
        """Give the selected singularity's track another number."""
        one = self._one()
        if one is not None:
            frame, at, row = one
            self.gestures.do([RenameTrack(frame=frame, where=at, charge=int(row["charge"]),
                                          track=int(row["track"]), new_track=number)])  # fmt: skip

    def delete_track(self) -> None:
        """Take out the selected singularity's track, with all its singularities."""
        one = self._one()
        if one is not None:
            frame, at, row = one
            if row["track"] < 0:
                self._say("There are no tracks yet.", warning=True)
                return
            self.gestures.do([DeleteTrack(frame=frame, where=at, charge=int(row["charge"]),
                                          track=int(row["track"]))])  # fmt: skip

    def _each(self, make: Callable[[int, Point, pd.Series], Edit]) -> None:
        chosen = self.gestures.selected()
        if not len(chosen):
            self._say("Select a singularity first.", warning=True)
            return
        frame = self.gestures.frame
        done = self.gestures.do([make(frame, _place(row), row) for _, row in chosen.iterrows()])
        if done:
            self._say(f"{done[0].entry.edit.kind.capitalize()}: {len(done)} done.")

    def _one(self) -> tuple[int, Point, pd.Series] | None:
        chosen = self.gestures.selected()
        if len(chosen) != 1:
            self._say("Select one singularity first.", warning=True)
            return None
        row = chosen.iloc[0]
        return self.gestures.frame, _place(row), row

    def _done(self) -> None:
        self.items.loc[self.items.index[self.row], "done"] = True
        self.next()

    def _step(self, rows: range) -> None:
        done = self.items["done"].to_numpy(dtype=bool)
        row = next((row for row in rows if not done[row]), None)
        if row is None:
            self._say("Nothing else in the list." if len(done) else "Nothing deserves a look.")
            self.changed.emit()
            return
        self.go_to(row)

    def _look_at(self, y_px: float, x_px: float) -> None:
        scale = placement(self.session.optics).scale[-1]
        camera = self.gestures.viewer.scene.camera
        camera.center = (0.0, y_px * scale, x_px * scale)
        camera.zoom = max(camera.zoom, _CLOSE_PX / scale)

    def _say(self, text: str, *, warning: bool = False) -> None:
        self.session.told.emit(text, warning)


def review_of(viewer: Viewer, session: Session) -> Review | None:
    """Return the review of a session, made when first asked for."""
    gestures = gestures_of(viewer, session)
    if gestures is None:
        return None
    if gestures.review is None:
        gestures.review = Review(gestures)
    return gestures.review


def _place(row: pd.Series) -> Point:
    return float(row["y_px"]), float(row["x_px"])


def _sentence(item: pd.Series) -> str:
    return f"{str(item['what']).capitalize()}, frame {item['frame']}: {item['reason']}."
