"""Edits by hand on what a session found: the log, and the tables with the edits in them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, TypeVar

import pandas as pd
import xarray as xr
from psygnal import Signal

from hologyre.edits import (
    NAME,
    Applied,
    Barrier,
    Bridge,
    Corrections,
    Edit,
    Entry,
    Found,
    Log,
    LogError,
    Misfit,
    NothingToStep,
    Region,
    found_of,
    recount,
)
from hologyre.motion import Motion
from hologyre.results.folder import default_folder
from hologyre.tables import SINGULARITIES, empty
from hologyre.viewer.barriers import Lines, lines_of

if TYPE_CHECKING:
    from hologyre.viewer.session import Tables

Told = TypeVar("Told", bound=Applied | Misfit | NothingToStep)

_KEEP_FRAMES = 16

_FARTHEST = 50
"""Frames looked through for the neighbour of a singularity in its track."""


class Editing:
    """What hands have done to a session's tables.

    Tables are kept as they were found; with the edits in them they are made when asked for. The
    log lies in the result folder, or where a run would put it; a stack without a file has its
    log in memory until a place is chosen.

    Parameters
    ----------
    stack : DataArray
        Holograms (t, y, x).
    found : Tables
        Nothing found yet.
    """

    changed = Signal(object)
    """Told with the frames that changed, or None if any may have."""

    def __init__(self, stack: xr.DataArray, found: Tables) -> None:
        self._shape = (stack.sizes["y"], stack.sizes["x"])
        self.log = Log()
        self.trouble = ""
        self._found = found
        self._laid_out: Found | None = None
        self._corrections: Corrections | None = None
        self._tables: Tables | None = None
        self._frames: dict[int, pd.DataFrame] = {}
        self._place = default_folder(stack) / NAME if stack.attrs.get("home") else None
        if self._place is not None and self._place.is_file():
            try:
                self.keep_in(self._place)
            except LogError as error:
                self.trouble = str(error)

    @property
    def found(self) -> Tables:
        """The tables without any edits."""
        return self._found

    @found.setter
    def found(self, found: Tables) -> None:
        self._found = found
        self._laid_out = self._corrections = self._tables = None
        self._frames.clear()

    @property
    def tables(self) -> Tables:
        """The tables with the edits that stand."""
        if not self.log.standing or self.corrections is None:
            return self._found
        if self._tables is None:
            corrected = self.corrections.tables
            self._tables = replace(
                self._found,
                singularities=corrected.singularities,
                trajectories=corrected.trajectories,
                events=corrected.events,
                frames=recount(self._found.frames, corrected),
            )
        return self._tables

    @property
    def corrections(self) -> Corrections | None:
        """The tables under edit; None while not all frames are searched."""
        if self._corrections is None and self._found.found_with is not None:
            try:
                self._laid_out = self._laid_out or self._lay_out()
            except ValueError as error:
                # tables of a run that had edits replayed into them
                self.trouble = f"{error}; find the singularities again to edit them."
                return None
            self._corrections = Corrections(self._laid_out, self.log)
        return self._corrections

    def keep_in(self, path: Path) -> None:
        """Keep the log in a file from now on, taking up the edits it has already.

        Raises
        ------
        LogError
            If it cannot be read or written, or both it and this session have edits.
        """
        log = Log(path, author=self.log.author)
        if self.log.standing and (log.standing or log.undone):
            raise LogError(f"{path}: holds other edits already; choose another place.")
        for edit in self.log.edits:
            log.append(edit)
        self.log = log
        self.trouble = " ".join(log.warnings)
        self._renew()

    def do(self, edit: Edit) -> Applied | Misfit:
        """Apply an edit and write it into the log.

        Raises
        ------
        LogError
            If it cannot be written. It is not done then.
        """
        if self.log.path is None and self._place is not None:
            self.keep_in(self._place)
        corrections = self.corrections
        if corrections is not None:
            done = corrections.do(edit)
        elif isinstance(edit, Barrier | Bridge | Region):
            done = _alone(self.log.append(edit))
        else:
            return Misfit(edit, self.trouble or "The singularities are not found yet.")
        return self._told(done)

    def undo(self) -> Applied | NothingToStep:
        """Take back the last edit that stands."""
        if self.corrections is not None:
            return self._told(self.corrections.undo())
        entry = self.log.undo()
        return self._told(_alone(entry) if isinstance(entry, Entry) else entry)

    def redo(self) -> Applied | Misfit | NothingToStep:
        """Do again the edit undone last."""
        if self.corrections is not None:
            return self._told(self.corrections.redo())
        entry = self.log.redo()
        return self._told(_alone(entry) if isinstance(entry, Entry) else entry)

    def take_out(self, number: int) -> None:
        """Take back one edit, which need not be the last; those after it are done again."""
        later: list[Edit] = []
        while self.log.standing and self.log.standing[-1].number >= number:
            entry = self.log.undo()
            if isinstance(entry, Entry) and entry.number != number:
                later.append(entry.edit)
        for edit in reversed(later):
            self.log.append(edit)
        self._renew()

    def frame(self, frame: int) -> pd.DataFrame:
        """Return one frame's singularities as they are now, with their `track`."""
        if self.corrections is None:
            return empty(SINGULARITIES).assign(track=pd.Series(dtype="int64"))
        if frame not in self._frames:
            if len(self._frames) >= _KEEP_FRAMES:
                self._frames.clear()
            self._frames[frame] = self.corrections.frame(frame)
        return self._frames[frame]

    @property
    def drawn_lines(self) -> tuple[Edit, ...]:
        """The barriers and bridges of all frames."""
        return tuple(edit for edit in self.log.edits if isinstance(edit, Barrier | Bridge))

    def lines(self, frame: int) -> Lines:
        """Return the barriers and bridges of a frame."""
        return lines_of(self.log.edits, frame)

    def neighbour(self, track: int, frame: int, step: int) -> pd.Series | None:
        """Return where a track was last before (step -1), or is next after (+1), a frame."""
        if self.corrections is None or track < 0:
            return None
        searched = self.corrections.found.searched
        near = searched[searched < frame][::-1] if step < 0 else searched[searched > frame]
        for other in near[:_FARTHEST].tolist():
            rows = self.frame(other)
            rows = rows[rows["track"] == track]
            if len(rows):
                return rows.iloc[0]
        return None

    def _lay_out(self) -> Found:
        found = self._found
        recipe = found.linked_with or found.found_with
        if recipe is None:
            raise ValueError("the singularities are not found yet")
        frames = found.frames
        return found_of(
            found.singularities,
            Motion(found.trajectories, found.events),
            frames=frames.loc[frames["status"] == "done", "frame"].to_numpy(),
            frame_shape=self._shape,
            region=recipe.stack.region,
            margin_px=recipe.singularities.margin_px,
            max_step_px=recipe.motion.max_step_px,
            max_gap=recipe.motion.max_gap,
        )

    def _renew(self) -> None:
        self._corrections = self._tables = None
        self._frames.clear()
        self.changed.emit(None)

    def _told(self, done: Told) -> Told:
        if isinstance(done, Applied):
            self._tables = None
            for frame in done.frames:
                self._frames.pop(frame, None)
            self.changed.emit(done.frames)
        return done


def _alone(entry: Entry) -> Applied:
    """Tell of an edit where there are no tables yet."""
    frame = entry.edit.frame
    return Applied(entry, () if frame is None else (frame,), (), (), ())


Reader = Callable[[int], pd.DataFrame]


def last_steps(rows_of: Reader, frame: int, *, back: int = 3) -> pd.DataFrame:
    """Return the steps that led to a frame's singularities in the frames just before it.

    Parameters
    ----------
    rows_of : callable
        From a frame to its singularities with their `track`.
    frame : int
    back : int
        Frames looked back.

    Returns
    -------
    DataFrame
        y0_px, x0_px, y_px and x_px of each step of the tracks that are seen in the frame or in
        those before it, gaps bridged.
    """
    names = ["track", "y_px", "x_px"]
    first = max(frame - back, 0)
    parts = [rows_of(t)[names].assign(frame=t) for t in range(first, frame + 1)]
    rows = pd.concat(parts)
    rows = rows[rows["track"] >= 0].sort_values(["track", "frame"], kind="stable")
    before = rows.shift()
    linked = (rows["track"] == before["track"]).to_numpy()
    return pd.DataFrame(
        {
            "y0_px": before.loc[linked, "y_px"].to_numpy(),
            "x0_px": before.loc[linked, "x_px"].to_numpy(),
            "y_px": rows.loc[linked, "y_px"].to_numpy(),
            "x_px": rows.loc[linked, "x_px"].to_numpy(),
        }
    )
