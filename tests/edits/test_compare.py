from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from hologyre.edits.compare import compare
from hologyre.edits.corrections import Corrections
from hologyre.edits.found import Found
from hologyre.edits.kinds import Confirm, CutTrack, Delete, Edit, FlipCharge, Move, Place


def annotated(found: Found, *edits: Edit) -> Corrections:
    work = Corrections(found)
    for edit in edits:
        assert work.do(edit)
    return work


def spot(table: pd.DataFrame, row: int) -> dict[str, object]:
    one = table.iloc[row]
    return {
        "frame": int(one.frame), "where": (float(one.y_px), float(one.x_px)),
        "charge": int(one.charge),
    }  # fmt: skip


def deletion(table: pd.DataFrame, row: int) -> Delete:
    return Delete(**spot(table, row), reason="noise")  # type: ignore[arg-type]


def confirmation(table: pd.DataFrame, row: int) -> Confirm:
    return Confirm(**spot(table, row))  # type: ignore[arg-type]


def agreement(a: Corrections, b: Corrections):  # type: ignore[no-untyped-def]
    return compare(
        a.tables, b.tables, first_edits=a.log.edits, second_edits=b.log.edits, within_px=1.0
    )


def test_the_same_annotations_agree_fully(found: Found, table: pd.DataFrame) -> None:
    a = annotated(found, deletion(table, 5), confirmation(table, 6))
    told = agreement(a, a)
    assert (told.both, told.only_first, told.only_second) == (len(table) - 1, 0, 0)
    assert told.dice == 1.0
    assert told.kappa == 1.0
    assert told.looked_at == 2
    assert told.largest_px == 0.0
    assert told.links_both == len(a.tables.trajectories) - a.tables.trajectories["track"].nunique()
    assert told.differences.empty


def test_what_one_has_and_the_other_has_not_is_listed(found: Found, table: pd.DataFrame) -> None:
    place = Place(frame=2, where=(57.0, 4.0), charge=1, winding=1)
    told = agreement(annotated(found, deletion(table, 5)), annotated(found, place))
    assert (told.only_first, told.only_second) == (0, 2)
    rows = told.differences[told.differences["what"] == "singularity"]
    assert rows[["frame", "first", "second"]].to_numpy().tolist() == [
        [int(table["frame"].iloc[5]), "none", f"{table['charge'].iloc[5]:+d}"],
        [2, "none", "+1"],
    ]


def test_kappa_is_that_of_the_textbook(found: Found, table: pd.DataFrame) -> None:
    # ten looked at: seven kept by both, one dropped by both, one dropped by each alone
    a = annotated(found, deletion(table, 0), deletion(table, 1),
                  *(confirmation(table, k) for k in range(2, 10)))  # fmt: skip
    b = annotated(found, deletion(table, 0), deletion(table, 2),
                  *(confirmation(table, k) for k in (1, *range(3, 10))))  # fmt: skip
    told = agreement(a, b)
    assert told.looked_at == 10
    votes = [np.sign(table["charge"].to_numpy()[:10]) for _ in range(2)]
    votes[0][[0, 1]] = 0
    votes[1][[0, 2]] = 0
    # (p_o - p_e) / (1 - p_e), J. Cohen, Educ. Psychol. Meas. 20, 37, 1960
    observed = np.mean(votes[0] == votes[1])
    chance = sum(np.mean(votes[0] == v) * np.mean(votes[1] == v) for v in (-1, 0, 1))
    assert told.kappa == pytest.approx((observed - chance) / (1 - chance))


def test_charges_that_differ_are_one_difference(found: Found, table: pd.DataFrame) -> None:
    flip = FlipCharge(**spot(table, 7), reason="by eye")  # type: ignore[arg-type]
    told = agreement(annotated(found), annotated(found, flip))
    rows = told.differences[told.differences["what"] != "link"]
    charge = int(table["charge"].iloc[7])
    assert rows[["what", "first", "second"]].to_numpy().tolist() == [
        ["charge", f"{charge:+d}", f"{-charge:+d}"]
    ]


def test_places_that_differ_are_measured(found: Found, table: pd.DataFrame) -> None:
    at = spot(table, 7)
    y, x = table[["y_px", "x_px"]].iloc[7]
    winding = int(table["charge"].iloc[7])
    move = Move(**at, to=(y + 0.3, x + 0.4), winding=winding)  # type: ignore[arg-type]
    told = agreement(annotated(found), annotated(found, move))
    assert told.largest_px == pytest.approx(0.5)
    assert told.median_px == 0.0
    assert told.only_first == told.only_second == 0


def test_links_that_differ_are_listed(found: Found) -> None:
    work = annotated(found)
    chain = work.tables.trajectories
    long = chain[chain["track"] == chain.groupby("track").size().idxmax()]
    one, two = long.iloc[2], long.iloc[3]
    cut = CutTrack(
        frame=int(one.frame), later_frame=int(two.frame), charge=int(one.charge),
        where=((float(one.y_px), float(one.x_px)), (float(two.y_px), float(two.x_px))),
    )  # fmt: skip
    told = agreement(work, annotated(found, cut))
    assert (told.links_only_first, told.links_only_second) == (1, 0)
    assert told.differences[["what", "frame", "first", "second"]].to_numpy().tolist() == [
        ["link", one.frame, f"joined to frame {two.frame}", f"not joined to frame {two.frame}"]
    ]


def test_comparing_the_other_way_round_swaps_the_sides(found: Found, table: pd.DataFrame) -> None:
    a = annotated(found, deletion(table, 5), deletion(table, 9))
    b = annotated(found, Place(frame=2, where=(57.0, 4.0), charge=1, winding=1))
    there, back = agreement(a, b), agreement(b, a)
    assert (there.only_first, there.only_second) == (back.only_second, back.only_first)
    assert there.kappa == back.kappa
    swapped = back.differences.rename(columns={"first": "second", "second": "first"})
    pd.testing.assert_frame_equal(there.differences, swapped[there.differences.columns])


def test_nothing_looked_at_has_no_kappa(found: Found) -> None:
    told = agreement(annotated(found), annotated(found))
    assert np.isnan(told.kappa)
    assert told.looked_at == 0


def test_a_reach_out_of_range_is_refused(found: Found) -> None:
    work = annotated(found)
    with pytest.raises(ValueError, match="within_px: expected a positive number, got 0"):
        compare(work.tables, work.tables, within_px=0)
