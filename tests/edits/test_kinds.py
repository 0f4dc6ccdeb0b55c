from __future__ import annotations

from datetime import datetime
from typing import Any

import numpy as np
import pytest

from hologyre.edits.kinds import (
    KINDS,
    Barrier,
    Confirm,
    CutTrack,
    Delete,
    Edit,
    FlipCharge,
    MarkPair,
    Region,
    RenameTrack,
)

HERE = (1.0, 2.0)


def test_every_kind_is_covered_by_the_examples(one_of_each: list[Edit]) -> None:
    assert {type(edit) for edit in one_of_each} == set(KINDS.values())


def test_an_edit_knows_the_time_it_was_made_in_utc() -> None:
    time = datetime.fromisoformat(Delete(frame=0, where=HERE, charge=1).time)
    offset = time.utcoffset()
    assert offset is not None
    assert offset.total_seconds() == 0


def test_a_flipped_charge_is_the_opposite_one() -> None:
    assert FlipCharge(frame=0, where=HERE, charge=-1).new_charge == 1


@pytest.mark.parametrize(
    ("kind", "values", "told"),
    [
        (Delete, {"frame": -1, "where": HERE, "charge": 1}, "frame: expected a frame number"),
        (Delete, {"frame": None, "where": HERE, "charge": 1}, "frame: expected a frame number"),
        (Barrier, {"frame": 1.5, "where": (HERE, HERE)}, "expected a frame number or None"),
        (Delete, {"frame": 0, "where": (1.0, float("nan")), "charge": 1}, "where: expected a"),
        (Delete, {"frame": 0, "where": (HERE,), "charge": 1}, r"where: expected a place \(y, x\)"),
        (Barrier, {"frame": 0, "where": (HERE,)}, "where: expected 2 places or more in px"),
        (Region, {"frame": 0, "where": (HERE,) * 2, "use": "analyse"}, "expected 3 places or more"),
        (Region, {"frame": 0, "where": (HERE,) * 3, "use": "skip"}, "use: expected analyse or"),
        (
            MarkPair,
            {"frame": 0, "where": (HERE,) * 3, "event": "pair_birth"},
            "where: expected 2 places in px",
        ),
        (Delete, {"frame": 0, "where": HERE, "charge": 0.5}, "charge: expected a whole number"),
        (Delete, {"frame": 0, "where": HERE, "charge": 1, "time": "noon"}, "time: expected ISO"),
        (
            Delete,
            {"frame": 0, "where": HERE, "charge": 1, "time": "2026-03-01T09:30:00+01:00"},
            "time: expected ISO 8601 in UTC",
        ),
        (Delete, {"frame": 0, "where": HERE, "charge": 1, "reason": None}, "reason: expected a"),
        (FlipCharge, {"frame": 0, "where": HERE, "charge": 1, "new_charge": 1}, "new_charge: exp"),
        (Confirm, {"frame": 0, "where": HERE, "charge": 1, "what": "event"}, "charge: expected 0"),
        (
            CutTrack,
            {"frame": 3, "where": (HERE, HERE), "later_frame": 3, "charge": 1},
            "later_frame: expected one after frame 3, got 3",
        ),
        (
            RenameTrack,
            {"frame": 3, "where": HERE, "charge": 1, "track": 1, "new_track": -2},
            "new_track: expected a whole number from 0, got -2",
        ),
    ],
)
def test_an_edit_that_makes_no_sense_is_refused(
    kind: type[Edit], values: dict[str, Any], told: str
) -> None:
    with pytest.raises(ValueError, match=told):
        kind(**values)


def test_numbers_of_numpy_become_plain_ones() -> None:
    edit = Delete(frame=np.int64(3), where=np.array([1, 2]), charge=np.int32(1))  # type: ignore[arg-type]
    assert edit == Delete(frame=3, where=(1.0, 2.0), charge=1, time=edit.time)
    assert [type(v) for v in (edit.frame, edit.charge, *edit.where)] == [int, int, float, float]
