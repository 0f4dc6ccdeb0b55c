"""The kinds of edit: one immutable value for each thing a hand can do to a result."""

from __future__ import annotations

from dataclasses import dataclass, field, fields
from datetime import UTC, datetime
from math import isfinite
from numbers import Integral, Real
from typing import Any, ClassVar, Literal, get_args

import numpy as np

Point = tuple[float, float]
"""A place (y_px, x_px) on the hologram's own pixels."""

Checked = Literal["singularity", "link", "event"]
PairEvent = Literal["pair_birth", "pair_death"]
Use = Literal["analyse", "leave out"]


def utc_now() -> str:
    """Return the time as ISO 8601 in UTC, to the second."""
    return datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")


@dataclass(frozen=True, kw_only=True)
class Edit:
    """What all edits have.

    Parameters
    ----------
    frame : int or None
        The stack's own frame number. Drawn lines and regions take None: every frame.
    time : str
        When it was done, ISO 8601 in UTC.
    author : str
        Who did it; may be empty.
    reason : str
        Why; needed where the edit contradicts the measured winding.
    """

    kind: ClassVar[str]
    layout: ClassVar[dict[str, str]] = {}
    """Where in its line each field of the kind's own is written."""

    points: ClassVar[int | None] = 1
    """Places in `where`; 1 is a place itself, None for lines."""

    least_points: ClassVar[int] = 1

    frame: int | None
    where: Any
    time: str = field(default_factory=utc_now)
    author: str = ""
    reason: str = ""

    def __post_init__(self) -> None:
        for one in fields(self):
            plain = _plain(getattr(self, one.name), one.name in ("where", "to"))
            object.__setattr__(self, one.name, plain)
        drawn = isinstance(self, (Barrier, Bridge, Region))
        if not (_whole(self.frame, 0) or (drawn and self.frame is None)):
            takes = "a frame number" + (" or None" if drawn else "")
            raise ValueError(f"frame: expected {takes}, got {self.frame!r}")
        self._check_where()
        try:
            zone = datetime.fromisoformat(self.time).utcoffset()
        except (TypeError, ValueError):
            zone = None
        if zone is None or zone.total_seconds() != 0:
            raise ValueError(f"time: expected ISO 8601 in UTC, got {self.time!r}")
        for name in ("author", "reason"):
            if not isinstance(getattr(self, name), str):
                raise ValueError(f"{name}: expected a text, got {getattr(self, name)!r}")
        for one in fields(self):
            _check_own(one.name, getattr(self, one.name))

    def _check_where(self) -> None:
        if self.points == 1:
            ok, takes = _is_point(self.where), "a place (y, x)"
        else:
            ok = isinstance(self.where, tuple) and all(_is_point(p) for p in self.where)
            count = len(self.where) if ok else 0
            ok = ok and (count == self.points if self.points else count >= self.least_points)
            takes = (
                f"{self.points} places" if self.points else f"{self.least_points} places or more"
            )
        if not ok:
            raise ValueError(f"where: expected {takes} in px, got {self.where!r}")


@dataclass(frozen=True, kw_only=True)
class Place(Edit):
    """Put a singularity where none is listed.

    Parameters
    ----------
    where : (y_px, x_px)
    charge : int
    winding : int
        The winding measured there, 0 where the field has no zero.
    """

    kind: ClassVar[str] = "place"
    layout: ClassVar[dict[str, str]] = {"charge": "after.charge", "winding": "before.winding"}
    where: Point
    charge: int
    winding: int


@dataclass(frozen=True, kw_only=True)
class Move(Edit):
    """Move a singularity.

    Parameters
    ----------
    where : (y_px, x_px)
        Where it was.
    charge : int
        Its charge.
    to : (y_px, x_px)
        Where it is put.
    winding : int
        The winding measured there, 0 where the field has no zero.
    """

    kind: ClassVar[str] = "move"
    layout: ClassVar[dict[str, str]] = {
        "charge": "before.charge",
        "to": "after.where",
        "winding": "after.winding",
    }
    where: Point
    charge: int
    to: Point
    winding: int


@dataclass(frozen=True, kw_only=True)
class Delete(Edit):
    """Take a singularity out."""

    kind: ClassVar[str] = "delete"
    layout: ClassVar[dict[str, str]] = {"charge": "before.charge"}
    where: Point
    charge: int


@dataclass(frozen=True, kw_only=True)
class FlipCharge(Edit):
    """Turn a singularity's charge into its opposite; `new_charge` follows from `charge`."""

    kind: ClassVar[str] = "flip charge"
    layout: ClassVar[dict[str, str]] = {"charge": "before.charge", "new_charge": "after.charge"}
    where: Point
    charge: int
    new_charge: int | None = None

    def __post_init__(self) -> None:
        super().__post_init__()
        if self.new_charge is None:
            object.__setattr__(self, "new_charge", -self.charge)
        if self.new_charge != -self.charge:
            raise ValueError(
                f"new_charge: expected {-self.charge:+d}, the opposite of charge, "
                f"got {self.new_charge!r}"
            )


@dataclass(frozen=True, kw_only=True)
class Confirm(Edit):
    """Say that something was looked at and is right; changes no table.

    Parameters
    ----------
    where : (y_px, x_px)
    charge : int
        Of the singularity, or of the one a link leads to; 0 for an event.
    what : {"singularity", "link", "event"}
        A link is told by the singularity it leads to, an event by its place and the last
        frame before it.
    """

    kind: ClassVar[str] = "confirm"
    layout: ClassVar[dict[str, str]] = {"charge": "before.charge", "what": "after.what"}
    where: Point
    charge: int
    what: Checked = "singularity"

    def __post_init__(self) -> None:
        super().__post_init__()
        if (self.charge == 0) != (self.what == "event"):
            raise ValueError(
                f"charge: expected 0 for an event and else not 0, got {self.charge!r} "
                f"for the {self.what}"
            )


@dataclass(frozen=True, kw_only=True)
class Reject(Edit):
    """Judge that a listed singularity is none; it is taken out."""

    kind: ClassVar[str] = "reject"
    layout: ClassVar[dict[str, str]] = {"charge": "before.charge"}
    where: Point
    charge: int


@dataclass(frozen=True, kw_only=True)
class CutTrack(Edit):
    """Cut a track between two of its singularities that follow each other.

    Parameters
    ----------
    frame, later_frame : int
        Frames of the two.
    where : two (y_px, x_px)
        Their places.
    charge : int
    """

    kind: ClassVar[str] = "cut track"
    layout: ClassVar[dict[str, str]] = {"later_frame": "later_frame", "charge": "before.charge"}
    points: ClassVar[int | None] = 2
    where: tuple[Point, Point]
    later_frame: int
    charge: int

    def __post_init__(self) -> None:
        super().__post_init__()
        _check_later(self.frame, self.later_frame)


@dataclass(frozen=True, kw_only=True)
class JoinTracks(Edit):
    """Join the last singularity of a track to the first of another; as `CutTrack`."""

    kind: ClassVar[str] = "join tracks"
    layout: ClassVar[dict[str, str]] = {"later_frame": "later_frame", "charge": "before.charge"}
    points: ClassVar[int | None] = 2
    where: tuple[Point, Point]
    later_frame: int
    charge: int

    def __post_init__(self) -> None:
        super().__post_init__()
        _check_later(self.frame, self.later_frame)


@dataclass(frozen=True, kw_only=True)
class DeleteTrack(Edit):
    """Take out a track with all its singularities, told by one of them."""

    kind: ClassVar[str] = "delete track"
    layout: ClassVar[dict[str, str]] = {"charge": "before.charge", "track": "before.track"}
    where: Point
    charge: int
    track: int


@dataclass(frozen=True, kw_only=True)
class RenameTrack(Edit):
    """Give a track, told by one of its singularities, another number.

    The track that had this number, if any, takes the old one.
    """

    kind: ClassVar[str] = "rename track"
    layout: ClassVar[dict[str, str]] = {
        "charge": "before.charge",
        "track": "before.track",
        "new_track": "after.track",
    }
    where: Point
    charge: int
    track: int
    new_track: int


@dataclass(frozen=True, kw_only=True)
class MarkPair(Edit):
    """Say that two tracks were born together, or died together.

    Parameters
    ----------
    frame : int
        The frame both begin, or end, in.
    where : two (y_px, x_px)
        The singularity of positive charge, and that of negative charge.
    event : {"pair_birth", "pair_death"}
    """

    kind: ClassVar[str] = "mark pair"
    layout: ClassVar[dict[str, str]] = {"event": "after.event"}
    points: ClassVar[int | None] = 2
    where: tuple[Point, Point]
    event: PairEvent


@dataclass(frozen=True, kw_only=True)
class Barrier(Edit):
    """A line along which unwrapping may cut at no cost; frame None: in every frame."""

    kind: ClassVar[str] = "barrier"
    points: ClassVar[int | None] = None
    least_points: ClassVar[int] = 2
    where: tuple[Point, ...]


@dataclass(frozen=True, kw_only=True)
class Bridge(Edit):
    """A line that unwrapping must not cut; frame None: in every frame."""

    kind: ClassVar[str] = "bridge"
    points: ClassVar[int | None] = None
    least_points: ClassVar[int] = 2
    where: tuple[Point, ...]


@dataclass(frozen=True, kw_only=True)
class Region(Edit):
    """A polygon to analyse, or to leave out; frame None: in every frame."""

    kind: ClassVar[str] = "region"
    layout: ClassVar[dict[str, str]] = {"use": "after.use"}
    points: ClassVar[int | None] = None
    least_points: ClassVar[int] = 3
    where: tuple[Point, ...]
    use: Use


KINDS: dict[str, type[Edit]] = {
    one.kind: one
    for one in (
        Place,
        Move,
        Delete,
        FlipCharge,
        Confirm,
        Reject,
        CutTrack,
        JoinTracks,
        DeleteTrack,
        RenameTrack,
        MarkPair,
        Barrier,
        Bridge,
        Region,
    )
}
"""Every kind of edit by the name it has in a log."""


def _plain(value: Any, place: bool) -> Any:
    """Turn numbers of any kind into Python's own, and lists of places into tuples."""
    if isinstance(value, bool):
        return value
    if place and isinstance(value, list | tuple | np.ndarray):
        return tuple(_plain(v, place) for v in value)
    if isinstance(value, Real) and place:
        return float(value)
    return int(value) if isinstance(value, Integral) else value


def _whole(value: Any, least: int | None = None) -> bool:
    whole = isinstance(value, int) and not isinstance(value, bool)
    return whole and (least is None or value >= least)


def _is_point(value: Any) -> bool:
    return (
        isinstance(value, tuple)
        and len(value) == 2
        and all(isinstance(v, float) and isfinite(v) for v in value)
    )


_CHOICES: dict[str, tuple[str, ...]] = {
    "what": get_args(Checked),
    "event": get_args(PairEvent),
    "use": get_args(Use),
}


def _check_own(name: str, value: Any) -> None:
    """Check a field that only some kinds have."""
    if name in _CHOICES and value not in _CHOICES[name]:
        raise ValueError(f"{name}: expected {' or '.join(_CHOICES[name])}, got {value!r}")
    if name in ("track", "new_track", "later_frame") and not _whole(value, 0):
        raise ValueError(f"{name}: expected a whole number from 0, got {value!r}")
    if name in ("charge", "winding") and not _whole(value):
        raise ValueError(f"{name}: expected a whole number, got {value!r}")
    if name == "to" and not _is_point(value):
        raise ValueError(f"to: expected a place (y, x) in px, got {value!r}")


def _check_later(frame: int | None, later_frame: int) -> None:
    if frame is None or later_frame <= frame:
        raise ValueError(f"later_frame: expected one after frame {frame}, got {later_frame}")
