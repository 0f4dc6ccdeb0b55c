"""The state of tables under edit: what was found, and what hands have changed of it."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator
from typing import Any, Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray

from hologyre.edits.found import Found

Side = Literal["end", "start"]
Tip = tuple[int, Side]
"""The end, or the start, of a track: its last, or first, row."""


class Row(NamedTuple):
    """What an edit may change of a singularity.

    `winding` is what was measured where it lies; `kept` is false once it is taken out.
    """

    y_px: float
    x_px: float
    charge: int
    winding: int
    origin: str
    kept: bool
    previous: int
    following: int
    link: str
    track: int


class Happened(NamedTuple):
    """An event, told by the ends and starts of tracks it concerns.

    `source` is its row in the table that was found, -1 for events made since.
    """

    kind: str
    frame_before: int
    frame_after: int
    y_px: float
    x_px: float
    tips: tuple[Tip, ...]
    source: int


class FrameRows(NamedTuple):
    """Rows of a frame that are not taken out."""

    row: NDArray[np.int64]
    y_px: NDArray[np.float64]
    x_px: NDArray[np.float64]
    charge: NDArray[np.int64]
    previous: NDArray[np.int64]
    following: NDArray[np.int64]


_ABSENT: Any = object()
Change = tuple[dict[Any, Any], Any, Any]


class State:
    """What was found, with the changes of all edits laid over it.

    Only rows that an edit has touched are kept apart; every change is written down with what
    was there before, so that it can be taken back.

    Parameters
    ----------
    found : Found
        What the run found. Not changed.
    """

    def __init__(self, found: Found) -> None:
        self.found = found
        self.rows: dict[int, Row] = {}
        self.placed: dict[int, tuple[int, int]] = {}
        self.events: dict[int, Happened] = {}
        self.event_of: dict[Tip, int] = {}
        self.by_track: dict[int, int] = {}
        self.contradictions: dict[int, tuple[Any, str]] = {}
        self.drawn: dict[int, Any] = {}
        self.next: dict[str, int] = {}
        self._changes: list[Change] = []
        self._touched: defaultdict[int, set[int]] = defaultdict(set)
        self._lay_out()

    def _lay_out(self) -> None:
        found = self.found
        heads = np.flatnonzero((found.track >= 0) & (found.previous < 0))
        self.by_track = dict(zip(found.track[heads].tolist(), heads.tolist(), strict=True))
        tails = {
            int(found.track[row]): int(row)
            for row in np.flatnonzero((found.track >= 0) & (found.following < 0))
        }
        events = found.events
        columns = ("event", "kind", "frame_before", "frame_after", "y_px", "x_px", "tracks")
        for source, one in enumerate(events[list(columns)].itertuples(index=False)):
            tips: list[Tip] = []
            for name in filter(None, one.tracks.split(";")):
                head, tail = self.by_track.get(int(name), -1), tails.get(int(name), -1)
                # across a gap a track may be seen last before, or first after, the event's frames
                if tail >= 0 and found.frame[tail] <= one.frame_before:
                    tips.append((tail, "end"))
                elif head >= 0 and found.frame[head] >= one.frame_after:
                    tips.append((head, "start"))
            self.events[one.event] = Happened(
                one.kind, one.frame_before, one.frame_after, one.y_px, one.x_px, tuple(tips), source
            )
            for tip in tips:
                self.event_of[tip] = one.event
        self.next = {
            "row": len(found.table),
            "track": int(found.track.max(initial=-1)) + 1,
            "event": int(events["event"].max()) + 1 if len(events) else 0,
        }

    def __getitem__(self, row: int) -> Row:
        known = self.rows.get(row)
        if known is not None:
            return known
        found = self.found
        charge = int(found.charge[row])
        return Row(
            float(found.y_px[row]), float(found.x_px[row]), charge, charge,
            str(found.columns["origin"][row]), True, int(found.previous[row]),
            int(found.following[row]), str(found.link[row]), int(found.track[row]),
        )  # fmt: skip

    def frame_of(self, row: int) -> int:
        """Return a row's frame."""
        placed = self.placed.get(row)
        return int(self.found.frame[row]) if placed is None else placed[0]

    def id_of(self, row: int) -> int:
        """Return a row's singularity id."""
        placed = self.placed.get(row)
        return int(self.found.singularity[row]) if placed is None else placed[1]

    def put(self, mapping: dict[Any, Any], key: Any, value: Any) -> None:
        """Set an entry of one of the state's mappings."""
        self._changes.append((mapping, key, mapping.get(key, _ABSENT)))
        mapping[key] = value

    def drop(self, mapping: dict[Any, Any], key: Any) -> None:
        """Remove an entry, if it is there, of one of the state's mappings."""
        if key in mapping:
            self._changes.append((mapping, key, mapping.pop(key)))

    def set(self, row: int, **values: Any) -> None:
        """Change some of a row's values."""
        self.put(self.rows, row, self[row]._replace(**values))
        self._touched[self.frame_of(row)].add(row)

    def add(self, frame: int, singularity: int, row: Row) -> int:
        """Add a singularity; return its row."""
        index = self.number("row")
        self.put(self.placed, index, (frame, singularity))
        self.put(self.rows, index, row)
        self._touched[frame].add(index)
        return index

    def number(self, what: str) -> int:
        """Return the next number of a row, track or event."""
        value = self.next[what]
        self.put(self.next, what, value + 1)
        return value

    def take_changes(self) -> list[Change]:
        """Return the changes since the last call."""
        changes, self._changes = self._changes, []
        return changes

    def take_back(self, changes: list[Change]) -> None:
        """Put everything back as it was before these changes."""
        for mapping, key, before in reversed(changes):
            if before is _ABSENT:
                del mapping[key]
            else:
                mapping[key] = before

    def in_frame(self, frame: int) -> FrameRows:
        """Return the rows of a frame that are not taken out."""
        found, part = self.found, self.found.rows_of(frame)
        untouched = FrameRows(
            np.arange(part.start, part.stop),
            found.y_px[part],
            found.x_px[part],
            found.charge[part],
            found.previous[part],
            found.following[part],
        )
        touched = self.touched_in(frame)
        if not touched:
            return untouched
        rest = np.ones(len(untouched.row), np.bool_)
        rest[[row - part.start for row in touched if row < part.stop]] = False
        changed = [(row, self.rows[row]) for row in touched if self.rows[row].kept]
        return FrameRows(
            np.concatenate([untouched.row[rest], _ints(row for row, _ in changed)]),
            np.concatenate([untouched.y_px[rest], [own.y_px for _, own in changed]]),
            np.concatenate([untouched.x_px[rest], [own.x_px for _, own in changed]]),
            np.concatenate([untouched.charge[rest], _ints(own.charge for _, own in changed)]),
            np.concatenate([untouched.previous[rest], _ints(own.previous for _, own in changed)]),
            np.concatenate([untouched.following[rest], _ints(own.following for _, own in changed)]),
        )

    def touched_in(self, frame: int) -> list[int]:
        """Return the rows of a frame that edits have changed, taken out or added, sorted."""
        return [row for row in sorted(self._touched.get(frame, ())) if row in self.rows]

    def chain(self, row: int) -> Iterator[int]:
        """Yield the rows of a track from this one on."""
        while row >= 0:
            yield row
            row = self[row].following

    def head(self, row: int) -> int:
        """Return the first row of a row's track."""
        return self.by_track[self[row].track]


def _ints(values: Iterable[int]) -> NDArray[np.int64]:
    return np.fromiter(values, dtype=np.int64)
