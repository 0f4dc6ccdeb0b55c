"""The log of edits: one line each, safe on disk before the edit counts as done."""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from hologyre.edits.kinds import Edit, utc_now
from hologyre.edits.lines import (
    Entry,
    Step,
    check_header,
    entry_of,
    header_line,
    is_broken_off,
    line_of,
)

NAME = "edits.jsonl"
"""Name of the log in a result folder."""


class LogError(ValueError):
    """A log that cannot be read or written; one sentence naming file, line and fault."""


@dataclass(frozen=True)
class NothingToStep:
    """Nothing to undo, or to redo; falsy."""

    reason: str

    def __bool__(self) -> Literal[False]:
        return False


class Log:
    """Edits in the order they were made.

    An undo is a line of its own, so that nothing is ever taken out of the file; which edits
    stand is worked out from the lines. The file is made with the first edit.

    Parameters
    ----------
    path : path, optional
        The file, read if it is there. Without it the log is kept in memory alone.
    author : str
        Who is undoing and redoing; edits carry their own.

    Raises
    ------
    LogError
        If the file cannot be read, is not a log, or has a line that is not understood. A last
        line broken off in the middle is told in `warnings` and left out.
    """

    def __init__(self, path: str | Path | None = None, *, author: str = "") -> None:
        self.path = None if path is None else Path(path)
        self.author = author
        self.warnings: tuple[str, ...] = ()
        self._standing: list[Entry] = []
        self._undone: list[Entry] = []
        self._last_number = 0
        # bytes in the file, bytes of it that are whole lines, and what ends the last of them
        self._size = self._keep = 0
        self._end = b""
        if self.path is not None:
            self._read(self.path)

    @property
    def standing(self) -> tuple[Entry, ...]:
        """The edits that stand, in the order they were made."""
        return tuple(self._standing)

    @property
    def edits(self) -> tuple[Edit, ...]:
        """The edits that stand, without their numbers."""
        return tuple(entry.edit for entry in self._standing)

    @property
    def undone(self) -> tuple[Entry, ...]:
        """The edits that `redo` would bring back, the next one last."""
        return tuple(self._undone)

    @property
    def next_number(self) -> int:
        """The number the next edit will have."""
        return self._last_number + 1

    def append(self, edit: Edit) -> Entry:
        """Add an edit; it is on the disk when this returns.

        Raises
        ------
        LogError
            If the file cannot be written, or another program has changed it. The edit is not
            in the log then.
        """
        entry = Entry(self.next_number, edit)
        self._write(line_of(entry))
        self._take(entry)
        return entry

    def undo(self) -> Entry | NothingToStep:
        """Take back the last edit that stands; return it."""
        return self._step("undo", self._standing)

    def redo(self) -> Entry | NothingToStep:
        """Bring back the edit undone last; return it. A new edit leaves nothing to redo."""
        return self._step("redo", self._undone)

    def _step(self, name: str, source: Sequence[Entry]) -> Entry | NothingToStep:
        if not source:
            return NothingToStep(f"There is nothing to {name}.")
        entry = source[-1]
        step = Step("undo" if name == "undo" else "redo", entry.number, utc_now(), self.author)
        self._write(line_of(step))
        self._take(step)
        return entry

    def _take(self, item: Entry | Step) -> None:
        """Account for one line.

        Raises
        ------
        ValueError
            If it does not follow from those before.
        """
        if isinstance(item, Entry):
            if item.number <= self._last_number:
                raise ValueError(
                    f"edit: expected a number above {self._last_number}, got {item[0]}"
                )
            self._last_number = item.number
            self._standing.append(item)
            self._undone.clear()
            return
        source, target = self._standing, self._undone
        if item.step == "redo":
            source, target = target, source
        if not source or source[-1].number != item.number:
            expected = f"edit {source[-1].number}" if source else "nothing"
            raise ValueError(f"{item.step}: edit {item.number} is not next in turn ({expected} is)")
        target.append(source.pop())

    def _read(self, path: Path) -> None:
        try:
            content = path.read_bytes()
        except FileNotFoundError:
            return
        except OSError as error:
            raise LogError(f"{path}: the log cannot be read: {error.strerror}.") from error
        lines = content.split(b"\n")
        kept = 0
        for number, raw in enumerate(lines, start=1):
            last = number == len(lines)
            try:
                text = raw.decode("utf-8")
                if last and not text:
                    break
                if number == 1:
                    check_header(text)
                elif text.strip():
                    self._take(entry_of(text))
            except ValueError as error:
                # a line that was being written has no end yet
                ours = number > 1 or header_line().encode().startswith(raw)
                if last and ours and is_broken_off(raw):
                    self.warnings = (_torn(path, number, raw),)
                    break
                why = "it is not UTF-8 text" if isinstance(error, UnicodeDecodeError) else error
                raise LogError(f"{path}, line {number}: {why}.") from error
            kept += len(raw) + 1
        # a complete last line that lacks its end gets it with the next one
        self._end = b"\n" if kept > len(content) else b""
        self._keep, self._size = min(kept, len(content)), len(content)

    def _write(self, line: str) -> None:
        """Append a line and see it on the disk."""
        if self.path is None:
            return
        head = b"" if self._keep else header_line().encode() + b"\n"
        added = self._end + head + line.encode() + b"\n"
        try:
            self.path.parent.mkdir(parents=True, exist_ok=True)
            with open(self.path, "ab") as file:
                if file.tell() != self._size:
                    raise LogError(
                        f"{self.path}: another program has changed this log; open the result again."
                    )
                # what a crash left of a broken line
                file.truncate(self._keep)
                try:
                    file.write(added)
                    file.flush()
                    os.fsync(file.fileno())
                except OSError:
                    file.truncate(self._keep)
                    raise
        except OSError as error:
            raise LogError(
                f"{self.path}: the edit could not be saved: {error.strerror}; it was not made."
            ) from error
        self._end = b""
        self._size = self._keep = self._keep + len(added)


def load_log(path: str | Path) -> Log:
    """Read a log that must be there.

    Raises
    ------
    LogError
        If there is no such file, or it cannot be read.
    """
    if not Path(path).is_file():
        raise LogError(
            f"{path}: there is no such log; name the {NAME} that lies in a result folder."
        )
    return Log(path)


def _torn(path: Path, number: int, raw: bytes) -> str:
    return (
        f"{path}, line {number}: this last line is broken off after {len(raw)} bytes and was left "
        "out; all lines before it are kept."
    )
