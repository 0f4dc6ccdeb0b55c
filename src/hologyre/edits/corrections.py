"""Edits at work: done, undone and done again on tables, one at a time or all in turn."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace

import pandas as pd

from hologyre.edits.apply import Misfit, apply
from hologyre.edits.corrected import Corrected, frame_rows, tables_of
from hologyre.edits.found import Found
from hologyre.edits.kinds import Barrier, Bridge, Edit, Region
from hologyre.edits.lines import Entry
from hologyre.edits.log import Log, LogError, NothingToStep
from hologyre.edits.state import Change, State


@dataclass(frozen=True)
class Applied:
    """What an edit, or taking it back, has changed.

    Parameters
    ----------
    entry : Entry
        The edit with its number.
    frames : tuple of int
        Frames whose singularities or their tracks changed, or in which something was drawn.
    singularities : tuple of int
        Ids that changed, came or went.
    tracks : tuple of int
        Numbers of the tracks that changed, came or went.
    events : tuple of int
        Numbers of the events that changed, came or went.
    """

    entry: Entry
    frames: tuple[int, ...]
    singularities: tuple[int, ...]
    tracks: tuple[int, ...]
    events: tuple[int, ...]


def replay(entries: Iterable[Entry], found: Found) -> Corrected:
    """Apply all edits that stand, one after another, to what a run found.

    Parameters
    ----------
    entries : iterable of Entry
        As `Log.standing` has them.
    found : Found
        Of `found_of`; of the same recipe or another.

    Returns
    -------
    Corrected
        The tables, with the edits that fit no longer in `misfits`.
    """
    state = State(found)
    misfits = []
    for entry in entries:
        misfit = apply(state, entry)
        state.take_changes()
        if misfit is not None:
            misfits.append(misfit)
    return tables_of(state, tuple(misfits))


class Corrections:
    """Tables under edit and the log of what is done to them.

    The edits that stand in the log are applied at once. Afterwards the tables are at any time
    those that `replay` makes of the log.

    Parameters
    ----------
    found : Found
        What the run found. Not changed.
    log : Log, optional
        Where edits are written. Without it they are kept in memory alone.
    """

    def __init__(self, found: Found, log: Log | None = None) -> None:
        self.found = found
        self.log = Log() if log is None else log
        self._state = State(found)
        self._changes: list[list[Change]] = []
        self._misfits: dict[int, Misfit] = {}
        self._tables: Corrected | None = None
        for entry in self.log.standing:
            self._apply(entry)

    @property
    def misfits(self) -> tuple[Misfit, ...]:
        """Edits of the log that do not fit these tables and are passed over."""
        return tuple(self._misfits.values())

    @property
    def tables(self) -> Corrected:
        """All tables as they are now; made when asked for."""
        if self._tables is None:
            self._tables = tables_of(self._state, self.misfits)
        return self._tables

    def frame(self, frame: int) -> pd.DataFrame:
        """Return one frame's singularities as they are now, quickly, with their `track`."""
        return frame_rows(self._state, frame)

    def do(self, edit: Edit) -> Applied | Misfit:
        """Apply an edit and write it into the log.

        Returns
        -------
        Applied or Misfit
            Misfit is falsy and says why nothing was done; with `needs_reason`, do the same edit
            with a reason.

        Raises
        ------
        LogError
            If the log cannot be written. The edit is not done then.
        """
        if not edit.author and self.log.author:
            edit = replace(edit, author=self.log.author)
        entry = Entry(self.log.next_number, edit)
        misfit = apply(self._state, entry)
        if misfit is not None:
            return replace(misfit, number=0)
        changes = self._state.take_changes()
        try:
            self.log.append(edit)
        except LogError:
            self._state.take_back(changes)
            raise
        self._changes.append(changes)
        return self._told(entry, changes)

    def undo(self) -> Applied | NothingToStep:
        """Take back the last edit that stands."""
        entry = self.log.undo()
        if isinstance(entry, NothingToStep):
            return entry
        changes = self._changes.pop()
        self._misfits.pop(entry.number, None)
        told = self._told(entry, changes)
        self._state.take_back(changes)
        return told

    def redo(self) -> Applied | Misfit | NothingToStep:
        """Do again the edit undone last; a Misfit if it did not fit in the first place."""
        entry = self.log.redo()
        if isinstance(entry, NothingToStep):
            return entry
        changes = self._apply(entry)
        misfit = self._misfits.get(entry.number)
        return self._told(entry, changes) if misfit is None else misfit

    def _apply(self, entry: Entry) -> list[Change]:
        misfit = apply(self._state, entry)
        if misfit is not None:
            self._misfits[entry.number] = misfit
        changes = self._state.take_changes()
        self._changes.append(changes)
        self._tables = None
        return changes

    def _told(self, entry: Entry, changes: list[Change]) -> Applied:
        """Say what changed; to be asked while the changes stand."""
        self._tables = None
        state = self._state
        rows = {key for mapping, key, _ in changes if mapping is state.rows}
        tracks = {state[row].track for row in rows}
        tracks |= {key for mapping, key, _ in changes if mapping is state.by_track}
        frames = {state.frame_of(row) for row in rows}
        if isinstance(entry.edit, Barrier | Bridge | Region):
            drawn = entry.edit.frame
            frames |= set(self.found.searched.tolist()) if drawn is None else {drawn}
        return Applied(
            entry,
            tuple(sorted(frames)),
            tuple(sorted(state.id_of(row) for row in rows)),
            tuple(sorted(tracks - {-1})),
            tuple(sorted({key for mapping, key, _ in changes if mapping is state.events})),
        )
