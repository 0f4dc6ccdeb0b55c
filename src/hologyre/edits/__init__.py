"""Edits by hand: their log, their replay on tables, what deserves a look, how two logs agree."""

from __future__ import annotations

from hologyre.edits.apply import Misfit
from hologyre.edits.compare import Agreement, compare
from hologyre.edits.corrected import Corrected
from hologyre.edits.corrections import Applied, Corrections, replay
from hologyre.edits.found import Found, found_of
from hologyre.edits.kinds import (
    Barrier,
    Bridge,
    Confirm,
    CutTrack,
    Delete,
    DeleteTrack,
    Edit,
    FlipCharge,
    JoinTracks,
    MarkPair,
    Move,
    Place,
    Region,
    Reject,
    RenameTrack,
)
from hologyre.edits.lines import Entry
from hologyre.edits.log import NAME, Log, LogError, NothingToStep, load_log
from hologyre.edits.recount import recount
from hologyre.edits.regions import barriers, bridges, used_pixels
from hologyre.edits.remeasure import remeasure
from hologyre.edits.review import review
from hologyre.edits.snap import NoZero, Snap, snap

__all__ = [
    "NAME",
    "Agreement",
    "Applied",
    "Barrier",
    "Bridge",
    "Confirm",
    "Corrected",
    "Corrections",
    "CutTrack",
    "Delete",
    "DeleteTrack",
    "Edit",
    "Entry",
    "FlipCharge",
    "Found",
    "JoinTracks",
    "Log",
    "LogError",
    "MarkPair",
    "Misfit",
    "Move",
    "NoZero",
    "NothingToStep",
    "Place",
    "Region",
    "Reject",
    "RenameTrack",
    "Snap",
    "barriers",
    "bridges",
    "compare",
    "found_of",
    "load_log",
    "recount",
    "remeasure",
    "replay",
    "review",
    "snap",
    "used_pixels",
]
