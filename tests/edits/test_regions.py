from __future__ import annotations

import numpy as np
import pandas as pd

from hologyre.edits.corrections import Corrections
from hologyre.edits.found import Found
from hologyre.edits.kinds import Barrier, Bridge, Edit, Place, Point, Region
from hologyre.edits.regions import barriers, bridges, used, used_pixels


def box(y0: float, x0: float, y1: float, x1: float) -> tuple[Point, ...]:
    return ((y0, x0), (y0, x1), (y1, x1), (y1, x0))


def test_without_regions_all_is_used() -> None:
    assert used((), [0, 1], [1.0, 2.0], [3.0, 4.0]).all()
    assert used_pixels((), 0, (4, 4)) is None


def test_a_region_left_out_is_not_used() -> None:
    edits = [Region(frame=None, where=box(1.5, 0.5, 3.5, 2.5), use="leave out")]
    pixels = used_pixels(edits, 7, (5, 4))
    assert pixels is not None
    expected = np.ones((5, 4), np.bool_)
    expected[2:4, 1:3] = False
    np.testing.assert_array_equal(pixels, expected)


def test_regions_to_analyse_add_up_and_those_left_out_win() -> None:
    edits = [
        Region(frame=None, where=box(-1, -1, 4, 4), use="analyse"),
        Region(frame=None, where=box(6, 6, 9, 9), use="analyse"),
        Region(frame=None, where=box(7.5, 7.5, 9, 9), use="leave out"),
    ]
    y = np.array([2.0, 7.0, 8.0, 5.0])
    assert used(edits, np.zeros(4), y, y).tolist() == [True, True, False, False]


def test_a_region_of_one_frame_says_nothing_of_others() -> None:
    edits = [Region(frame=3, where=box(0, 0, 4, 4), use="analyse")]
    assert used(edits, [3, 3, 4], [2.0, 8.0, 8.0], [2.0, 8.0, 8.0]).tolist() == [True, False, True]


def test_a_concave_polygon_holds_what_is_inside_it() -> None:
    ell = ((0.0, 0.0), (0.0, 9.0), (3.0, 9.0), (3.0, 3.0), (9.0, 3.0), (9.0, 0.0))
    edits = [Region(frame=None, where=ell, use="analyse")]
    assert used(edits, 0, [1.0, 6.0, 6.0], [6.0, 1.0, 6.0]).tolist() == [True, True, False]


def test_lines_are_handed_to_unwrapping_by_frame_and_kind() -> None:
    line = ((0.0, 0.0), (5.0, 5.0))
    edits: list[Edit] = [
        Barrier(frame=2, where=line),
        Barrier(frame=None, where=line[::-1]),
        Bridge(frame=3, where=line),
    ]
    assert [b.tolist() for b in barriers(edits, 2)] == [[[0, 0], [5, 5]], [[5, 5], [0, 0]]]
    assert len(barriers(edits, 3)) == 1
    assert len(bridges(edits, 3)) == 1
    assert bridges(edits, 2) == []


def test_singularities_left_out_are_set_aside_and_come_back_by_undo(
    found: Found, table: pd.DataFrame
) -> None:
    work = Corrections(found)
    work.do(Region(frame=None, where=box(0, 0, 60, 120), use="leave out"))
    outside = table["y_px"] > 60
    assert work.tables.singularities["singularity"].tolist() == table.index[outside].tolist()
    assert work.tables.set_aside["singularity"].tolist() == table.index[~outside].tolist()
    assert set(work.tables.trajectories["singularity"]) == set(table.index[outside])
    work.undo()
    assert len(work.tables.singularities) == len(table)


def test_tracks_cross_the_border_of_a_region_by_exit_and_entry(found: Found) -> None:
    work = Corrections(found)
    before = work.tables
    track = before.trajectories.groupby("track").size().idxmax()
    chain = before.trajectories[before.trajectories["track"] == track].reset_index(drop=True)
    gone = chain.iloc[3]
    y, x = gone["y_px"], gone["x_px"]
    around = box(y - 0.01, x - 0.01, y + 0.01, x + 0.01)
    assert work.do(Region(frame=None, where=around, use="leave out"))
    events = work.tables.events
    new = events[~events["event"].isin(before.events["event"])]
    assert new["kind"].tolist() == ["exit", "entry"]
    assert new["tracks"].tolist() == [str(track)] * 2
    assert new["frame_before"].tolist() == chain["frame"].iloc[[2, 3]].tolist()
    left = work.tables.trajectories[work.tables.trajectories["track"] == track]
    assert left["link"].iloc[3] == "bridged"
    assert left["singularity"].tolist() == chain["singularity"].drop(3).tolist()


def test_edits_in_a_part_left_out_stand_and_show_when_it_comes_back(found: Found) -> None:
    work = Corrections(found)
    work.do(Region(frame=None, where=box(0, 0, 120, 120), use="leave out"))
    assert work.do(Place(frame=2, where=(55.0, 3.0), charge=1, winding=1))
    assert work.tables.singularities.empty
    assert work.tables.trajectories.empty
    assert work.tables.events.empty
    assert (work.tables.set_aside["origin"] == "placed").sum() == 1
