from __future__ import annotations

import pandas as pd
import pytest

from hologyre.edits.corrections import Corrections
from hologyre.edits.found import Found
from hologyre.edits.kinds import Delete, FlipCharge, Place, Region
from hologyre.edits.recount import recount
from hologyre.tables import FRAMES, conform


@pytest.fixture
def frames(table: pd.DataFrame) -> pd.DataFrame:
    """A table of frames whose borders wind as often as their charges ask for; frame 8 skipped."""
    net = table.groupby("frame")["charge"].sum()
    rows = pd.DataFrame({"frame": range(9), "status": ["done"] * 8 + ["skipped"], "reason": ""})
    rows["border_winding"] = net.reindex(range(9)).astype("Int64")
    return conform(rows, FRAMES)


def test_what_was_found_adds_up(found: Found, frames: pd.DataFrame, table: pd.DataFrame) -> None:
    counted = recount(frames, Corrections(found).tables)
    assert not counted["audit"].str.contains("turns along the border").any()
    by_sign = table.groupby(["frame", "charge"]).size().unstack(fill_value=0)
    assert counted["positive"].iloc[:8].tolist() == by_sign[1].tolist()
    assert counted["negative"].iloc[:8].tolist() == by_sign[-1].tolist()


def test_a_frame_that_was_skipped_stays_as_it_is(found: Found, frames: pd.DataFrame) -> None:
    counted = recount(frames, Corrections(found).tables)
    assert pd.isna(counted["positive"].iloc[8])
    assert counted["audit"].iloc[8] == ""


def test_an_edit_that_breaks_the_winding_shows_in_its_frame(
    found: Found, frames: pd.DataFrame, table: pd.DataFrame
) -> None:
    work = Corrections(found)
    gone = table[table["frame"] == 3].iloc[0]
    work.do(
        Delete(frame=3, where=(gone.y_px, gone.x_px), charge=gone.charge, reason="dust on the lens")
    )
    told = recount(frames, work.tables)["audit"]
    net = int(table.loc[table["frame"] == 3, "charge"].sum())
    assert f"charge {net - gone.charge:+d} but {net:+d} turns along the border" in told.iloc[3]
    assert told.iloc[3].endswith("edit 1 by hand against the winding")
    assert not told.drop(3).str.contains("winding").any()


def test_a_pair_put_in_keeps_the_charge_of_the_frame(found: Found, frames: pd.DataFrame) -> None:
    work = Corrections(found)
    work.do(Place(frame=3, where=(60.0, 4.0), charge=1, winding=1))
    work.do(Place(frame=3, where=(60.4, 4.2), charge=-1, winding=-1))
    before = recount(frames, Corrections(found).tables)
    counted = recount(frames, work.tables)
    assert counted["positive"].iloc[3] == before["positive"].iloc[3] + 1
    assert counted["audit"].tolist() == before["audit"].tolist()


def test_what_is_set_aside_is_taken_off_the_winding(found: Found, frames: pd.DataFrame) -> None:
    work = Corrections(found)
    half = ((0.0, 0.0), (0.0, 120.0), (60.0, 120.0), (60.0, 0.0))
    work.do(Region(frame=None, where=half, use="analyse"))
    told = recount(frames, work.tables)["audit"]
    assert not told.str.contains("turns along the border").any()


def test_the_table_of_frames_is_not_changed(
    found: Found, frames: pd.DataFrame, table: pd.DataFrame
) -> None:
    work = Corrections(found)
    one = table.iloc[0]
    work.do(FlipCharge(frame=0, where=(one.y_px, one.x_px), charge=one.charge, reason="by eye"))
    before = frames.copy()
    recount(frames, work.tables)
    pd.testing.assert_frame_equal(frames, before)
