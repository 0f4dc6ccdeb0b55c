"""From what is done with napari's tools on a session's layers to edits, and back."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd
from napari import Viewer
from napari.layers import Layer
from psygnal import Signal
from qtpy.QtCore import QTimer

from hologyre.edits import (
    Applied,
    Barrier,
    Bridge,
    Delete,
    Edit,
    LogError,
    Misfit,
    Move,
    NothingToStep,
    Place,
    Region,
    snap,
)
from hologyre.edits.kinds import Point
from hologyre.viewer.display import Display
from hologyre.viewer.maps import Skipped
from hologyre.viewer.review_log import last_steps
from hologyre.viewer.review_points import (
    Drawn,
    changed_lines,
    changed_points,
    draw_lines,
    draw_points,
    lines_in,
    selected_ids,
)
from hologyre.viewer.session import Session
from hologyre.viewer.styles import Role

if TYPE_CHECKING:
    from hologyre.viewer.review_deeds import Review

LINES: tuple[Role, ...] = ("barriers", "bridges", "analysed", "left_out")
_AREAS: tuple[Role, ...] = ("analysed", "left_out")
UNDO, REDO = "Control-Z", "Control-Shift-Z"


@dataclass(frozen=True)
class Question:
    """Edits that need a reason: what is odd about them, and what can be done."""

    text: str
    choices: tuple[tuple[str, tuple[Edit, ...]], ...]


class Gestures:
    """Keeps the layers that hands work on in step with a session's edits, both ways.

    Napari's own tools change a layer; what has changed is worked out once the event is over,
    made edits of, and the layer is drawn again from the tables. So nothing is in a layer that
    is not in the log.
    """

    asked = Signal()
    """Another question, or none, is open."""

    def __init__(self, viewer: Viewer, session: Session, display: Display) -> None:
        self.viewer = viewer
        self.session = session
        self.every_frame = False
        self.question: Question | None = None
        self.review: Review | None = None
        self._display = display
        self._keys: dict[str, Callable[[], object]] = {UNDO: self.undo, REDO: self.redo}
        self._rows: pd.DataFrame | None = None
        self._lines: dict[Role, list[Drawn]] = {}
        self._frame = display.frame
        self._drawing = False
        self._seen: dict[Role, int] = {}
        self._commit = QTimer()
        self._commit.setSingleShot(True)
        self._commit.setInterval(0)
        self._commit.timeout.connect(self.commit)
        viewer.dims.events.current_step.connect(self._follow_slider)
        viewer.layers.events.removed.connect(self._follow_removal)
        session.editing.changed.connect(self._follow_edits)
        session.tables_changed.connect(self._follow_tables)

    @property
    def reviewing(self) -> bool:
        """Whether singularities can be edited now."""
        return self._display.layer("review") is not None

    def begin(self, keys: dict[str, Callable[[], object]]) -> None:
        """Show the current frame's singularities for editing, with keys for what to do."""
        self._keys |= keys
        self._display.show("steps", "review")
        self._display.hide("singularities")
        layer = self._display.layer("review")
        if layer is not None:
            self._watch("review", layer)
            self.draw()
            layer.mode = "select"
            self.viewer.layers.selection.active = layer

    def end(self) -> None:
        """Take the layers of the review away and show all frames again."""
        self.commit()
        for role in ("review", "steps"):
            layer = self._display.layer(role)
            if layer is not None:
                self.viewer.layers.remove(layer)
        self._display.show("singularities")

    def draw_on(self, role: Role) -> None:
        """Make a layer ready for lines or polygons of a kind."""
        self._display.show(role)
        layer = self._display.layer(role)
        if layer is None:
            return
        self._watch(role, layer)
        self.draw()
        self.viewer.layers.selection.active = layer
        layer.mode = "add_polygon" if role in _AREAS else "add_polyline"

    def selected(self) -> pd.DataFrame:
        """Return the selected singularities of the current frame, with their `track`."""
        self.commit()
        layer = self._display.layer("review")
        if layer is None or self._rows is None:
            return pd.DataFrame(columns=["singularity"])
        return self._rows[self._rows["singularity"].isin(selected_ids(layer))]

    def select(self, singularity: int) -> None:
        """Select one singularity, if the current frame has it."""
        layer = self._display.layer("review")
        if layer is not None and self._rows is not None:
            rows = np.flatnonzero(self._rows["singularity"].to_numpy() == singularity)
            layer.selected_data = set(rows.tolist())

    @property
    def frame(self) -> int:
        """The frame that is drawn."""
        return self._frame

    def do(self, edits: Iterable[Edit]) -> list[Applied]:
        """Do edits; ask for a reason where they contradict what was measured."""
        done: list[Applied] = []
        doubted: list[Misfit] = []
        for edit in edits:
            try:
                with self._no_edits():
                    outcome = self.session.editing.do(edit)
            except LogError as error:
                self.session.told.emit(str(error), True)
                break
            if isinstance(outcome, Applied):
                done.append(outcome)
            elif outcome.needs_reason:
                doubted.append(outcome)
            else:
                self.session.told.emit(outcome.reason, True)
        self.draw()
        if doubted:
            again = tuple(one.edit for one in doubted)
            more = f" ({len(again)} alike)" if len(again) > 1 else ""
            self.ask(Question(f"{_sentence(doubted[0])}{more}", (("Do it", again),)))
        return done

    def ask(self, question: Question | None) -> None:
        """Put a question, or none, in place of the one that is open."""
        self.question = question
        self.asked.emit()

    def answer(self, choice: int, reason: str) -> None:
        """Do what was asked about, for a reason."""
        if self.question is None or not reason.strip():
            return
        label, edits = self.question.choices[choice]
        self.ask(None)
        done = self.do(replace(edit, reason=reason.strip()) for edit in edits)
        if done:
            self.session.told.emit(f"{label}: done, and listed in the audit.", False)

    def undo(self) -> None:
        """Take back the last edit, and go to where it was."""
        self._step(self.session.editing.undo, "Undone")

    def redo(self) -> None:
        """Do the edit undone last again, and go to where it is."""
        self._step(self.session.editing.redo, "Done again")

    def commit(self) -> None:
        """Turn what has changed in the layers into edits."""
        self._commit.stop()
        if self._drawing:
            return
        with self._no_edits():
            edits = [*self._point_edits(), *self._line_edits()]
        self.do(edits)

    def draw(self) -> None:
        """Draw all layers for the current frame from the tables."""
        display, editing = self._display, self.session.editing
        self._frame = frame = display.frame
        with self._no_edits():
            layer = display.layer("review")
            self._rows = None
            if layer is not None:
                self._rows = editing.frame(frame)
                draw_points(layer, self._rows)
            steps = display.layer("steps")
            if steps is not None:
                found = last_steps(editing.frame, frame)
                start = found[["y0_px", "x0_px"]].to_numpy()
                ways = np.stack([start, found[["y_px", "x_px"]].to_numpy() - start], axis=1)
                if not np.array_equal(steps.data, ways):
                    steps.data = ways
            for role in LINES:
                layer = display.layer(role)
                if layer is not None:
                    self._lines[role] = self._lines_of(role, frame)
                    draw_lines(layer, self._lines[role], _shape(role))

    def _point_edits(self) -> Iterator[Edit]:
        layer, rows = self._display.layer("review"), self._rows
        if layer is None or rows is None or "singularity" not in layer.features:
            return
        changes = changed_points(rows, layer.data, layer.features["singularity"])
        place = rows[["y_px", "x_px"]].to_numpy()
        charge = rows["charge"].to_numpy()
        for row in changes.removed:
            yield Delete(frame=self._frame, where=tuple(place[row]), charge=charge[row])
        for row, to in changes.moved:
            yield from self._moved(tuple(place[row]), int(charge[row]), to)
        for at in changes.added:
            yield from self._placed(at)

    def _moved(self, where: Point, charge: int, to: Point) -> Iterator[Edit]:
        zero = self._snapped(to)
        if zero is None:
            yield Move(frame=self._frame, where=where, charge=charge, to=to, winding=0)
            return
        (y, x), winding = zero
        if np.hypot(y - where[0], x - where[1]) < 1e-2:
            self.session.told.emit("It lies on its zero already.", False)
            return
        self.session.told.emit(
            f"Snapped to the zero of charge {winding:+d} at {_at((y, x))}.", False
        )
        yield Move(frame=self._frame, where=where, charge=charge, to=(y, x), winding=winding)

    def _placed(self, at: Point) -> Iterator[Edit]:
        zero = self._snapped(at)
        if zero is None:
            choices = tuple(
                (f"Place {charge:+d}", (Place(frame=self._frame, where=at, charge=charge,
                                              winding=0),))
                for charge in (1, -1)
            )  # fmt: skip
            self.ask(Question(f"The field has no zero near {_at(at)}. Place one all the same?",
                              choices))  # fmt: skip
            return
        where, winding = zero
        away = float(np.hypot(where[0] - at[0], where[1] - at[1]))
        self.session.told.emit(
            f"Snapped {away:.1f} px to the zero of charge {winding:+d} at {_at(where)}.", False
        )
        yield Place(frame=self._frame, where=where, charge=winding, winding=winding)

    def _snapped(self, at: Point) -> tuple[Point, int] | None:
        recipe = self.session.editing.found.found_with
        if recipe is None:
            return None
        field = self.session.maps.field(recipe, self._frame)
        if isinstance(field, Skipped):
            return None
        found = snap(field, *at)
        return ((found.y_px, found.x_px), found.charge) if found else None

    def _line_edits(self) -> Iterator[Edit]:
        for role in LINES:
            layer = self._display.layer(role)
            if layer is None or role not in self._lines:
                continue
            added, removed = changed_lines(self._lines[role], lines_in(layer))
            for number in removed:
                try:
                    self.session.editing.take_out(number)
                except LogError as error:
                    self.session.told.emit(str(error), True)
            frame = None if self.every_frame else self._frame
            for where in added:
                try:
                    yield _line(role, frame, where)
                except ValueError as error:
                    self.session.told.emit(str(error), True)

    def _lines_of(self, role: Role, frame: int) -> list[Drawn]:
        return [
            Drawn(number, edit.where)
            for number, edit in self.session.editing.log.standing
            if _role(edit) == role and edit.frame in (None, frame)
        ]

    def _watch(self, role: Role, layer: Layer) -> None:
        """Listen to a layer and give it the keys, once; a layer that came back is another."""
        for key, act in self._keys.items():
            layer.bind_key(key, _on_key(act), overwrite=True)
        if self._seen.get(role) != id(layer):
            self._seen[role] = id(layer)
            layer.events.data.connect(self._follow_layer)

    @contextmanager
    def _no_edits(self) -> Iterator[None]:
        before, self._drawing = self._drawing, True
        try:
            yield
        finally:
            self._drawing = before

    def _follow_layer(self, event: Any) -> None:
        # while the event lasts, napari is not done with the layer
        if not self._drawing and str(event.action) in ("added", "removed", "changed"):
            self._commit.start()

    def _follow_slider(self, event: Any = None) -> None:
        if self._display.frame == self._frame:
            return
        for role in LINES:
            layer = self._display.layer(role)
            if layer is not None and str(layer.mode).startswith("add"):
                # a line that is being drawn belongs to the frame it was begun in
                mode, layer.mode = layer.mode, "pan_zoom"
                layer.mode = mode
        self.commit()

    def _follow_removal(self, event: Any) -> None:
        for role in (*LINES, "review"):
            if self._display.layer(role) is None:
                self._seen.pop(role, None)
                self._lines.pop(role, None)
        if not self.reviewing:
            self._rows = None

    def _follow_edits(self, frames: tuple[int, ...] | None) -> None:
        if not self._drawing and not self._commit.isActive():
            self.draw()

    def _follow_tables(self) -> None:
        if not self.reviewing:
            return
        self._display.hide("singularities")
        # most often the same rows come back, while a point or a line may be in the hand
        if self._rows is None or not self._rows.equals(self.session.editing.frame(self._frame)):
            self.draw()

    def _step(self, step: Callable[[], Applied | Misfit | NothingToStep], word: str) -> None:
        self.commit()
        try:
            outcome = step()
        except LogError as error:
            self.session.told.emit(str(error), True)
            return
        if not isinstance(outcome, Applied):
            self.session.told.emit(outcome.reason, True)
            return
        edit = outcome.entry.edit
        if edit.frame is not None and edit.frame != self._display.frame:
            self._display.go_to(edit.frame)
        where = "in every frame" if edit.frame is None else f"in frame {edit.frame}"
        self.session.told.emit(f"{word}: {edit.kind} {where}.", False)


def gestures_of(viewer: Viewer, session: Session) -> Gestures | None:
    """Return the one object that edits a session, made when first asked for."""
    display = session.display
    if display is None:
        return None
    if display.gestures is None:
        display.gestures = Gestures(viewer, session, display)
    return display.gestures


def _on_key(act: Callable[[], object]) -> Callable[[Any], None]:
    def pressed(layer: Any) -> None:
        act()

    return pressed


def _line(role: Role, frame: int | None, where: tuple[Point, ...]) -> Edit:
    if role == "barriers":
        return Barrier(frame=frame, where=where)
    if role == "bridges":
        return Bridge(frame=frame, where=where)
    return Region(frame=frame, where=where, use="analyse" if role == "analysed" else "leave out")


def _role(edit: Edit) -> Role | None:
    if isinstance(edit, Barrier):
        return "barriers"
    if isinstance(edit, Bridge):
        return "bridges"
    if isinstance(edit, Region):
        return "analysed" if edit.use == "analyse" else "left_out"
    return None


def _shape(role: Role) -> str:
    return "polygon" if role in _AREAS else "path"


def _sentence(misfit: Misfit) -> str:
    text = misfit.reason.partition(";")[0]
    return f"{text}: why?"


def _at(place: Point) -> str:
    return f"(y={place[0]:.1f}, x={place[1]:.1f}) px"
