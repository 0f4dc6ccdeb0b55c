from __future__ import annotations

from typing import Any

import pytest

from hologyre.edits import kinds
from hologyre.edits.kinds import Edit

AT: dict[str, Any] = {"time": "2026-03-01T09:30:00Z"}


@pytest.fixture(scope="session")
def one_of_each() -> list[Edit]:
    """One edit of every kind."""
    here, there = (10.25, 20.5), (11.0, 21.75)
    return [
        kinds.Place(frame=3, where=here, charge=1, winding=0, reason="seen by eye", **AT),
        kinds.Move(frame=3, where=here, charge=-1, to=there, winding=-1, **AT),
        kinds.Delete(frame=3, where=here, charge=-1, author="Ada", reason="dust", **AT),
        kinds.FlipCharge(frame=3, where=here, charge=1, **AT),
        kinds.Confirm(frame=3, where=here, charge=1, **AT),
        kinds.Confirm(frame=3, where=here, charge=0, what="event", **AT),
        kinds.Reject(frame=3, where=here, charge=1, reason="noise “twins”", **AT),
        kinds.CutTrack(frame=3, where=(here, there), later_frame=4, charge=1, **AT),
        kinds.JoinTracks(frame=3, where=(here, there), later_frame=6, charge=1, **AT),
        kinds.DeleteTrack(frame=0, where=here, charge=1, track=7, **AT),
        kinds.RenameTrack(frame=0, where=here, charge=1, track=7, new_track=40, **AT),
        kinds.MarkPair(frame=5, where=(here, there), event="pair_death", **AT),
        kinds.Barrier(frame=2, where=(here, there), **AT),
        kinds.Bridge(frame=None, where=(here, there, (0.0, 0.0)), **AT),
        kinds.Region(frame=None, where=(here, there, (0.0, 0.0)), use="leave out", **AT),
    ]
