from __future__ import annotations

import re
from typing import Any

import numpy as np
import pandas as pd
import pytest

from hologyre.edits.apply import Misfit
from hologyre.edits.corrections import Applied, Corrections, replay
from hologyre.edits.found import Found, found_of
from hologyre.edits.kinds import (
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
    Reject,
    RenameTrack,
)
from hologyre.edits.lines import Entry
from hologyre.motion import Motion, link_singularities
from hologyre.tables import EVENTS, SINGULARITIES, TRAJECTORIES, conform, empty

N = 6
SHAPE = (100, 100)
WHY: dict[str, Any] = {"reason": "seen by eye"}

# a simulation: where each singularity is seen, at rest but for a slow drift along x
SEEN: dict[str, tuple[int, tuple[float, float], list[int]]] = {
    "steady": (1, (20.0, 20.0), [0, 1, 2, 3, 4, 5]),
    "missed": (1, (20.0, 60.0), [0, 1, 3, 4, 5]),
    "lost": (-1, (60.0, 20.0), [0, 1]),
    "again": (-1, (60.0, 20.0), [5]),
    "dying+": (1, (60.0, 60.0), [0, 1, 2]),
    "dying-": (-1, (60.0, 61.0), [0, 1, 2]),
    "late": (-1, (85.0, 85.0), [3, 4, 5]),
}


def where(name: str, frame: int) -> tuple[float, float]:
    _, (y, x), _ = SEEN[name]
    return y, x + 0.1 * frame


def built(**shift: tuple[float, float]) -> pd.DataFrame:
    rows = []
    for name, (charge, _, frames) in SEEN.items():
        dy, dx = shift.get(name.strip("+-"), (0.0, 0.0))
        for frame in frames:
            y, x = where(name, frame)
            rows.append(
                (frame, y + dy, x + dx, charge, 0.5 * frame, 0.1 * (y + dy), 0.1 * (x + dx))
            )
    names = ["frame", "y_px", "x_px", "charge", "time_s", "y_um", "x_um"]
    table = pd.DataFrame(rows, columns=names).sort_values(["frame", "y_px"], ignore_index=True)
    table = table.assign(
        singularity=np.arange(len(table)), origin="found", trust=0.95, sigma_y_px=0.05,
        sigma_x_px=0.05,
    )  # fmt: skip
    return conform(table, SINGULARITIES)


def linked(table: pd.DataFrame) -> Found:
    options: dict[str, Any] = {"frame_shape": SHAPE, "frames": range(N), "max_step_px": 3.0}
    return found_of(table, link_singularities(table, **options), **options)


@pytest.fixture
def work() -> Corrections:
    return Corrections(linked(built()))


def track_of(work: Corrections, name: str, frame: int) -> int:
    y, x = where(name, frame)
    rows = work.frame(frame)
    rows = rows[rows["charge"] == SEEN[name][0]]
    return int(rows["track"].iloc[np.hypot(rows["y_px"] - y, rows["x_px"] - x).argmin()])


def frames_of(work: Corrections, track: int) -> list[int]:
    chain = work.tables.trajectories
    return chain.loc[chain["track"] == track, "frame"].tolist()


def links_of(work: Corrections, track: int) -> list[str]:
    chain = work.tables.trajectories
    return chain.loc[chain["track"] == track, "link"].tolist()


def kinds(work: Corrections) -> list[tuple[str, int, int, str]]:
    events = work.tables.events
    return list(
        zip(
            events["kind"], events["frame_before"], events["frame_after"], events["tracks"],
            strict=True,
        )
    )  # fmt: skip


def at(name: str, frame: int) -> dict[str, Any]:
    return {"frame": frame, "where": where(name, frame), "charge": SEEN[name][0]}


def both(name: str, frame: int, other: str, later: int) -> dict[str, Any]:
    return {
        "frame": frame, "later_frame": later, "charge": SEEN[name][0],
        "where": (where(name, frame), where(other, later)),
    }  # fmt: skip


def test_the_simulation_is_linked_as_the_tests_take_it(work: Corrections) -> None:
    assert frames_of(work, track_of(work, "missed", 0)) == [0, 1, 3, 4, 5]
    assert track_of(work, "lost", 1) != track_of(work, "again", 5)
    pair = sorted([track_of(work, "dying+", 2), track_of(work, "dying-", 2)])
    assert ("pair_death", 2, 3, f"{pair[0]};{pair[1]}") in kinds(work)
    assert ("unexplained", 2, 3, str(track_of(work, "late", 3))) in kinds(work)


def test_a_singularity_placed_in_a_bridged_gap_fills_it(work: Corrections) -> None:
    track = track_of(work, "missed", 0)
    assert work.do(Place(frame=2, where=where("missed", 2), charge=1, winding=1))
    assert track_of(work, "missed", 2) == track
    assert frames_of(work, track) == [0, 1, 2, 3, 4, 5]
    assert links_of(work, track) == ["", "assigned", "assigned", "assigned", "assigned", "assigned"]


def test_singularities_placed_one_by_one_close_a_gap_too_long_to_be_bridged(
    work: Corrections,
) -> None:
    before, after = track_of(work, "lost", 1), track_of(work, "again", 5)
    for frame in (2, 3, 4):
        assert work.do(Place(frame=frame, where=where("lost", frame), charge=-1, winding=-1))
    assert frames_of(work, before) == [0, 1, 2, 3, 4, 5]
    assert after not in set(work.tables.trajectories["track"])
    named = {name for *_, tracks in kinds(work) for name in tracks.split(";")}
    assert not {str(before), str(after)} & named


def test_a_track_that_is_made_to_begin_earlier_keeps_its_number_and_its_event(
    work: Corrections,
) -> None:
    track = track_of(work, "late", 3)
    work.do(Place(frame=2, where=where("late", 2), charge=-1, winding=-1))
    assert frames_of(work, track) == [2, 3, 4, 5]
    assert [k for k in kinds(work) if k[3] == str(track)] == [("unexplained", 1, 2, str(track))]
    work.do(Place(frame=1, where=where("late", 1), charge=-1, winding=-1))
    work.do(Place(frame=0, where=where("late", 0), charge=-1, winding=-1))
    assert [k for k in kinds(work) if k[3] == str(track)] == []


def test_a_singularity_placed_far_from_any_track_begins_its_own(work: Corrections) -> None:
    work.do(Place(frame=3, where=(40.0, 90.0), charge=1, winding=1))
    chain = work.tables.trajectories
    own = chain[chain["origin"] == "placed"]
    assert (chain["track"] == own["track"].iloc[0]).sum() == 1
    assert [k[:3] for k in kinds(work) if k[3] == str(own["track"].iloc[0])] == [
        ("unexplained", 2, 3),
        ("unexplained", 3, 4),
    ]


def test_two_placed_beside_each_other_with_opposite_charges_are_a_pair(work: Corrections) -> None:
    work.do(Place(frame=3, where=(40.0, 90.0), charge=1, winding=1))
    work.do(Place(frame=3, where=(40.3, 90.2), charge=-1, winding=-1))
    assert [k[0] for k in kinds(work) if ";" in k[3]].count("pair_birth") == 1
    assert ("pair_death", 3, 4) in [k[:3] for k in kinds(work)]


def test_one_placed_at_the_border_came_over_it(work: Corrections) -> None:
    work.do(Place(frame=3, where=(50.0, 0.02), charge=1, winding=1))
    assert [k[0] for k in kinds(work)].count("entry") == 1
    assert [k[0] for k in kinds(work)].count("exit") == 1


def test_what_is_placed_is_told_from_what_is_found(work: Corrections) -> None:
    done = work.do(Place(frame=2, where=(40.0, 90.0), charge=1, winding=1))
    assert isinstance(done, Applied)
    table = work.tables.singularities
    own = table[table["singularity"].isin(done.singularities)].iloc[0]
    assert own["origin"] == "placed"
    assert own["time_s"] == 1.0
    assert own["y_um"] == pytest.approx(4.0)
    assert np.isnan(own[["sigma_y_px", "robustness", "trust", "axis_ratio"]].astype(float)).all()


def test_a_moved_singularity_keeps_its_track_and_its_id(work: Corrections) -> None:
    track = track_of(work, "steady", 2)
    before = work.frame(2)
    work.do(Move(**at("steady", 2), to=(20.5, 20.6), winding=1))
    after = work.frame(2)
    assert frames_of(work, track) == [0, 1, 2, 3, 4, 5]
    assert after["singularity"].tolist() == before["singularity"].tolist()
    moved = after[after["origin"] == "moved"].iloc[0]
    assert tuple(moved[["y_px", "x_px"]]) == (20.5, 20.6)
    assert moved["y_um"] == pytest.approx(2.05)
    assert np.isnan(moved["trust"])


@pytest.mark.parametrize("kind", [Delete, Reject])
def test_one_taken_out_of_the_middle_leaves_a_bridge(
    work: Corrections, kind: type[Delete | Reject]
) -> None:
    track = track_of(work, "steady", 0)
    work.do(kind(**at("steady", 2), **WHY))
    assert frames_of(work, track) == [0, 1, 3, 4, 5]
    assert links_of(work, track)[2] == "bridged"


def test_a_track_falls_apart_where_the_gap_becomes_too_long(work: Corrections) -> None:
    track = track_of(work, "missed", 0)
    for frame in (1, 3, 4):
        work.do(Delete(**at("missed", frame), **WHY))
    assert frames_of(work, track) == [0]
    assert frames_of(work, track_of(work, "missed", 5)) == [5]
    assert ("unexplained", 0, 1, str(track)) in kinds(work)


def test_one_of_a_pair_taken_out_leaves_the_other_unexplained(work: Corrections) -> None:
    other = track_of(work, "dying-", 2)
    work.do(Delete(**at("dying+", 2), **WHY))
    assert ("unexplained", 2, 3, str(other)) in kinds(work)
    assert "pair_death" not in [k[0] for k in kinds(work)]


def test_a_flipped_singularity_leaves_its_track_and_the_gap_is_bridged(work: Corrections) -> None:
    track = track_of(work, "steady", 0)
    work.do(FlipCharge(**at("steady", 2), **WHY))
    assert frames_of(work, track) == [0, 1, 3, 4, 5]
    assert sorted(work.tables.trajectories.groupby("track")["charge"].nunique().unique()) == [1]
    assert (work.frame(2)["charge"] == -1).sum() == 2


def test_flipping_twice_with_a_reason_brings_the_track_back(work: Corrections) -> None:
    track = track_of(work, "steady", 0)
    work.do(FlipCharge(**at("steady", 2), **WHY))
    assert work.do(FlipCharge(frame=2, where=where("steady", 2), charge=-1))
    assert frames_of(work, track) == [0, 1, 2, 3, 4, 5]
    assert len(work.tables.contradictions) == 1


def test_a_cut_makes_two_tracks_and_says_nothing_of_why(work: Corrections) -> None:
    track = track_of(work, "steady", 0)
    assert work.do(CutTrack(**both("steady", 2, "steady", 3)))
    later = track_of(work, "steady", 3)
    assert frames_of(work, track) == [0, 1, 2]
    assert frames_of(work, later) == [3, 4, 5]
    assert links_of(work, later)[0] == ""
    assert ("unexplained", 2, 3, str(track)) in kinds(work)
    assert ("unexplained", 2, 3, str(later)) in kinds(work)


def test_tracks_joined_by_hand_say_so(work: Corrections) -> None:
    track = track_of(work, "lost", 0)
    assert work.do(JoinTracks(**both("lost", 1, "again", 5)))
    assert frames_of(work, track) == [0, 1, 5]
    assert links_of(work, track) == ["", "assigned", "hand"]
    assert str(track) not in [k[3] for k in kinds(work)]


def test_a_cut_joined_again_is_as_before_but_for_the_hand(work: Corrections) -> None:
    before = work.tables
    work.do(CutTrack(**both("steady", 2, "steady", 3)))
    work.do(JoinTracks(**both("steady", 2, "steady", 3)))
    after = work.tables
    pd.testing.assert_frame_equal(after.events, before.events)
    pd.testing.assert_frame_equal(
        after.trajectories.drop(columns="link"), before.trajectories.drop(columns="link")
    )


def test_a_deleted_track_takes_its_singularities_along(work: Corrections) -> None:
    other = track_of(work, "dying-", 2)
    count = len(work.tables.singularities)
    assert work.do(DeleteTrack(**at("dying+", 1), track=0, **WHY))
    assert len(work.tables.singularities) == count - 3
    assert ("unexplained", 2, 3, str(other)) in kinds(work)


def test_a_renamed_track_changes_numbers_with_the_one_that_had_it(work: Corrections) -> None:
    a, b = track_of(work, "steady", 0), track_of(work, "lost", 0)
    work.do(RenameTrack(**at("steady", 3), track=a, new_track=b))
    assert track_of(work, "steady", 0) == b
    assert track_of(work, "lost", 0) == a
    assert ("unexplained", 1, 2, str(a)) in kinds(work)


def test_new_tracks_never_take_a_number_given_by_hand(work: Corrections) -> None:
    track = track_of(work, "steady", 0)
    work.do(RenameTrack(**at("steady", 3), track=track, new_track=40))
    work.do(Place(frame=3, where=(40.0, 90.0), charge=1, winding=1))
    assert work.tables.trajectories["track"].max() == 41


def test_a_pair_marked_by_hand_is_an_event_of_both(work: Corrections) -> None:
    work.do(Place(frame=3, where=(80.0, 80.0), charge=1, winding=1))
    placed = work.tables.trajectories.query("origin == 'placed'")["track"].iloc[0]
    late = track_of(work, "late", 3)
    assert ";" not in "".join(k[3] for k in kinds(work) if k[0] == "pair_birth")
    done = work.do(MarkPair(frame=3, where=((80.0, 80.0), where("late", 3)), event="pair_birth"))
    assert done
    tracks = ";".join(map(str, sorted([placed, late])))
    assert ("pair_birth", 2, 3, tracks) in kinds(work)


def test_an_edit_against_the_winding_asks_for_a_reason(work: Corrections) -> None:
    before = work.tables
    asked = work.do(Delete(**at("steady", 2)))
    assert isinstance(asked, Misfit)
    assert asked.needs_reason
    assert asked.reason == (
        "+1 is taken out where the winding is +1; an edit against the measurement needs a reason."
    )
    pd.testing.assert_frame_equal(work.tables.trajectories, before.trajectories)
    assert work.log.edits == ()


@pytest.mark.parametrize(
    ("edit", "told"),
    [
        (Place(frame=2, where=(40.0, 90.0), charge=1, winding=0, **WHY),
         "+1 is placed where the winding is +0."),
        (Move(**at("steady", 2), to=(21.0, 21.0), winding=0, **WHY),
         "+1 is moved to where the winding is +0."),
        (Reject(**at("steady", 2), **WHY), "+1 is taken out where the winding is +1."),
        (FlipCharge(**at("steady", 2), **WHY), "+1 is turned into -1 where the winding is +1."),
        (DeleteTrack(**at("lost", 0), track=2, **WHY),
         "2 of 2 singularities are taken out where the winding is their charge."),
    ],
)  # fmt: skip
def test_edits_against_the_winding_are_listed(work: Corrections, edit: Edit, told: str) -> None:
    assert work.do(edit)
    listed = work.tables.contradictions
    assert listed[["edit", "kind", "contradiction", "reason"]].to_numpy().tolist() == [
        [1, edit.kind, told, "seen by eye"]
    ]


@pytest.mark.parametrize(
    "edit",
    [
        Place(frame=2, where=(40.0, 90.0), charge=1, winding=1),
        Move(**at("steady", 2), to=(20.1, 20.3), winding=1),
        Confirm(**at("steady", 2)),
        CutTrack(**both("steady", 2, "steady", 3)),
    ],
)
def test_edits_in_keeping_with_the_winding_need_no_reason(work: Corrections, edit: Edit) -> None:
    assert work.do(edit)
    assert work.tables.contradictions.empty


def test_taking_out_what_was_placed_on_no_zero_contradicts_nothing(work: Corrections) -> None:
    work.do(Place(frame=2, where=(40.0, 90.0), charge=1, winding=0, **WHY))
    assert work.do(Delete(frame=2, where=(40.0, 90.0), charge=1))
    assert len(work.tables.contradictions) == 1


@pytest.mark.parametrize(
    ("edit", "told"),
    [
        (Delete(frame=9, where=(1.0, 1.0), charge=1, **WHY),
         "Frame 9 is not among the frames that were measured."),
        (Delete(frame=2, where=(20.0, 28.0), charge=1, **WHY),
         r"No singularity of charge \+1 lies within .* px of \(y=20.0, x=28.0\) px in frame 2; the "
         "nearest is 7.8 px away"),
        (Delete(frame=4, where=(60.0, 61.0), charge=3, **WHY),
         r"No singularity of charge \+3 is left near \(y=60.0, x=61.0\) px in frame 4"),
        (Place(frame=2, where=where("steady", 2), charge=1, winding=1),
         r"A singularity of charge \+1 is listed 0 px from \(y=20.0, x=20.2\) px in frame 2 alre"),
        (CutTrack(**both("lost", 1, "again", 5)),
         "The two singularities of frames 1 and 5 do not follow each other"),
        (JoinTracks(**both("steady", 2, "missed", 3)),
         r"The track of \(y=20.0, x=20.2\) px goes on after frame 2"),
        (JoinTracks(**both("dying+", 2, "missed", 3)),
         r"The track of \(y=20.0, x=60.3\) px begins before frame 3"),
        (MarkPair(frame=2, where=(where("steady", 2), where("dying-", 2)), event="pair_death"),
         r"The track of \(y=20.0, x=20.2\) px goes on after frame 2"),
        (MarkPair(frame=5, where=(where("steady", 5), where("late", 5)), event="pair_death"),
         "Nothing was measured on the other side of frame 5"),
        (Confirm(frame=3, where=(50.0, 50.0), charge=0, what="event"),
         r"No event lies within .* px of \(y=50.0, x=50.0\) px after frame 3"),
    ],
)  # fmt: skip
def test_what_does_not_fit_is_told_and_changes_nothing(
    work: Corrections, edit: Edit, told: str
) -> None:
    before = work.tables
    misfit = work.do(edit)
    assert isinstance(misfit, Misfit)
    assert not misfit
    assert re.search(told, misfit.reason)
    for name in ("singularities", "trajectories", "events"):
        pd.testing.assert_frame_equal(getattr(work.tables, name), getattr(before, name))


LOG = (
    Delete(**at("steady", 2), **WHY),
    Place(frame=2, where=where("missed", 2), charge=1, winding=1),
    CutTrack(**both("missed", 3, "missed", 4)),
    JoinTracks(**both("lost", 1, "again", 5)),
    RenameTrack(**at("late", 4), track=6, new_track=30),
)
ENTRIES = [Entry(number, edit) for number, edit in enumerate(LOG, start=1)]


def test_edits_reattach_where_a_changed_recipe_moved_everything_a_little() -> None:
    # a tenth of a pixel, as another edge treatment may
    moved = built(**dict.fromkeys(["steady", "missed", "lost", "again", "late"], (0.07, -0.07)))
    tables = replay(ENTRIES, linked(moved))
    assert tables.misfits == ()
    chain = tables.trajectories
    assert chain["link"].tolist().count("hand") == 1
    assert sorted(chain.loc[chain["track"] == 30, "frame"]) == [3, 4, 5]
    assert (chain["origin"] == "placed").sum() == 1
    assert len(chain) == len(moved)


def test_what_a_changed_recipe_does_not_have_is_listed_and_the_rest_applied() -> None:
    table = built()
    gone = (table["y_px"] == 60.0) & (table["frame"] == 5)
    table = table[~gone].assign(singularity=range(len(table) - 1))
    tables = replay(ENTRIES, linked(table))
    assert [(m.number, m.edit) for m in tables.misfits] == [(4, LOG[3])]
    assert "No singularity of charge -1" in tables.misfits[0].reason
    assert (tables.trajectories["track"] == 30).any()


def test_a_placed_one_that_a_changed_recipe_finds_is_not_placed_twice() -> None:
    table = built()
    found = table[table["frame"] == 1].iloc[[0]].assign(
        frame=2, y_px=20.02, x_px=60.2, singularity=len(table), charge=1
    )  # fmt: skip
    tables = replay(ENTRIES, linked(pd.concat([table, found])))
    assert [m.number for m in tables.misfits] == [2]
    assert "is listed 0.02 px from" in tables.misfits[0].reason


def test_two_about_as_near_are_not_chosen_between() -> None:
    table = built()
    twin = table[(table["frame"] == 2) & (table["y_px"] == 20.0)].head(1).copy()
    table = pd.concat([table, twin.assign(y_px=20.5, singularity=len(table))])
    edit = Delete(frame=2, where=(20.26, 20.2), charge=1, **WHY)
    (misfit,) = replay([Entry(1, edit)], linked(table)).misfits
    assert misfit.reason.startswith("Two singularities of charge +1 lie about as near to (y=20.3")


def test_edits_work_before_anything_is_linked() -> None:
    table = built()
    found = found_of(table, Motion(empty(TRAJECTORIES), empty(EVENTS)), frame_shape=SHAPE)
    work = Corrections(found)
    assert work.do(Place(frame=2, where=(40.0, 90.0), charge=1, winding=1))
    assert work.do(Delete(**at("steady", 2), **WHY))
    told = work.do(RenameTrack(**at("late", 4), track=6, new_track=30))
    assert isinstance(told, Misfit)
    assert told.reason == "There are no tracks yet."
    assert len(work.tables.singularities) == len(table)
    assert work.tables.trajectories.empty
    assert work.tables.events.empty


def test_tables_with_edits_in_them_are_not_taken_for_found(work: Corrections) -> None:
    work.do(Place(frame=2, where=(40.0, 90.0), charge=1, winding=1))
    tables = work.tables
    with pytest.raises(ValueError, match="expected them as found, got tables with edits by hand"):
        found_of(tables.singularities, Motion(tables.trajectories, tables.events))


def test_trajectories_of_other_singularities_are_refused() -> None:
    table = built()
    motion = link_singularities(table)
    with pytest.raises(ValueError, match="motion: expected every singularity in one track, got"):
        found_of(table.iloc[:-1], motion)


def test_the_border_of_a_region_that_was_searched_is_where_singularities_cross(
    work: Corrections,
) -> None:
    table = built()
    inside = table[(table["y_px"] > 50) & (table["x_px"] > 50)]
    motion = link_singularities(inside, max_step_px=3.0)
    found = found_of(inside, motion, frame_shape=SHAPE, region=(50, 100, 50, 100), max_step_px=3.0)
    cropped = Corrections(found)
    place = Place(frame=2, where=(70.0, 50.02), charge=1, winding=1)
    for one, crossings in ((cropped, 2), (work, 0)):
        before = [k[0] for k in kinds(one)].count("entry") + [k[0] for k in kinds(one)].count(
            "exit"
        )
        assert one.do(place)
        after = [k[0] for k in kinds(one)].count("entry") + [k[0] for k in kinds(one)].count("exit")
        assert after - before == crossings
