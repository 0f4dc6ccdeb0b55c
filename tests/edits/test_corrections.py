from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from pandas.testing import assert_frame_equal

from hologyre.edits.corrected import Corrected
from hologyre.edits.corrections import Applied, Corrections, replay
from hologyre.edits.found import Found
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
    Region,
    Reject,
    RenameTrack,
)
from hologyre.edits.log import NAME, Log, LogError
from hologyre.motion import Motion
from hologyre.tables import EVENTS, SINGULARITIES, TRAJECTORIES, conform

TABLES = ("singularities", "trajectories", "events", "set_aside", "contradictions")
WHY: dict[str, Any] = {"reason": "seen by eye"}


def assert_same(a: Corrected, b: Corrected) -> None:
    for name in TABLES:
        assert_frame_equal(getattr(a, name), getattr(b, name), check_exact=True)
    assert a.misfits == b.misfits


def assert_sound(tables: Corrected) -> None:
    """Tracks are what tracks must be, and events name tracks that there are."""
    chain = tables.trajectories
    assert sorted(chain["singularity"]) == sorted(tables.singularities["singularity"])
    assert not tables.singularities["singularity"].duplicated().any()
    same = chain["track"].diff() == 0
    assert (chain["frame"].diff()[same] > 0).all()
    assert (chain["charge"].diff()[same] == 0).all()
    assert (chain["link"][~same] == "").all()
    assert (chain["link"][same] != "").all()
    named = {int(n) for text in tables.events["tracks"] for n in text.split(";")}
    assert named <= set(chain["track"])
    assert not tables.events["event"].duplicated().any()
    for kind, side in (("pair_death", "last"), ("pair_birth", "first")):
        for event in tables.events[tables.events["kind"] == kind].itertuples():
            own = chain[chain["track"].isin([int(n) for n in event.tracks.split(";")])]
            assert own.groupby("track")["charge"].first().sum() == 0
            tips = own.groupby("track")["frame"].agg(side)
            assert set(tips) == {event.frame_before if side == "last" else event.frame_after}


def row(tables: pd.DataFrame, pick: int) -> Any:
    return next(tables.iloc[[pick % len(tables)]].itertuples(index=False))


def an_edit(tables: Corrected, kind: str, pick: int, other: int) -> Edit | None:
    """Make an edit of a kind on rows picked by numbers; None where there is none to make."""
    if tables.trajectories.empty:
        return None
    one = row(tables.trajectories, pick)
    at: dict[str, Any] = {"frame": one.frame, "where": (one.y_px, one.x_px), **WHY}
    if kind == "place":
        place = (5.0 + pick % 110, 5.0 + other % 110)
        return Place(
            frame=one.frame,
            where=place,
            charge=1 if other % 2 else -1,
            winding=other % 3 - 1,
            **WHY,
        )
    if kind == "move":
        to = (one.y_px + 0.01 * (other % 100), one.x_px - 0.01 * (pick % 100))
        return Move(**at, charge=one.charge, to=to, winding=one.charge)
    if kind in ("cut", "join"):
        chain = tables.trajectories
        later = chain[(chain["charge"] == one.charge) & (chain["frame"] > one.frame)]
        if kind == "cut":
            later = later[later["track"] == one.track].head(1)
        if later.empty:
            return None
        two = row(later, other)
        cls = CutTrack if kind == "cut" else JoinTracks
        return cls(
            frame=one.frame, later_frame=two.frame, charge=one.charge,
            where=((one.y_px, one.x_px), (two.y_px, two.x_px)),
        )  # fmt: skip
    if kind == "pair":
        chain = tables.trajectories
        mates = chain[(chain["frame"] == one.frame) & (chain["charge"] == -one.charge)]
        if mates.empty:
            return None
        two = row(mates, other)
        places = ((one.y_px, one.x_px), (two.y_px, two.x_px))
        return MarkPair(
            frame=one.frame, where=places if one.charge > 0 else places[::-1],
            event="pair_birth" if other % 2 else "pair_death",
        )  # fmt: skip
    if kind == "region":
        y, x, side = pick % 100, other % 100, 20.0
        square = ((y, x), (y, x + side), (y + side, x + side), (y + side, x))
        return Region(
            frame=None if pick % 2 else one.frame, use="analyse" if other % 5 == 0 else "leave out",
            where=tuple((float(a), float(b)) for a, b in square),
        )  # fmt: skip
    if kind in ("delete track", "rename"):
        if kind == "rename":
            return RenameTrack(**at, charge=one.charge, track=one.track, new_track=other % 60)
        return DeleteTrack(**at, charge=one.charge, track=one.track)
    simple = {"delete": Delete, "reject": Reject, "flip": FlipCharge, "confirm": Confirm}
    return simple[kind](**at, charge=one.charge)


KINDS = (
    "place", "move", "delete", "reject", "flip", "confirm", "cut", "join", "delete track",
    "rename", "pair",
)  # fmt: skip


def steps(*kinds: str) -> st.SearchStrategy[list[tuple[str, int, int]]]:
    return st.lists(
        st.tuples(st.sampled_from(kinds), st.integers(0, 500), st.integers(0, 500)), max_size=8
    )


SLOW = settings(max_examples=15, deadline=None, suppress_health_check=[HealthCheck.too_slow])


def work(corrections: Corrections, plan: list[tuple[str, int, int]]) -> None:
    for kind, pick, other in plan:
        if kind == "undo":
            corrections.undo()
        elif kind == "redo":
            corrections.redo()
        else:
            edit = an_edit(corrections.tables, kind, pick, other)
            if edit is not None:
                corrections.do(edit)


@SLOW
@given(steps(*KINDS, *KINDS, "undo", "redo"))
def test_edits_one_at_a_time_are_the_same_as_all_replayed(
    found: Found, plan: list[tuple[str, int, int]]
) -> None:
    corrections = Corrections(found)
    work(corrections, plan)
    assert_same(corrections.tables, replay(corrections.log.standing, found))
    assert_sound(corrections.tables)


@SLOW
@given(steps(*KINDS, "region"))
def test_undoing_all_gives_what_was_found_and_redoing_all_gives_it_back(
    found: Found, plan: list[tuple[str, int, int]]
) -> None:
    corrections = Corrections(found)
    work(corrections, plan)
    done = corrections.tables
    while corrections.undo():
        pass
    assert_same(corrections.tables, replay((), found))
    while corrections.redo():
        pass
    assert_same(corrections.tables, done)


@SLOW
@given(steps(*KINDS, "region", "undo", "redo"))
def test_a_log_opened_again_gives_the_same_tables(
    found: Found,
    tmp_path_factory: pytest.TempPathFactory,
    plan: list[tuple[str, int, int]],
) -> None:
    path = tmp_path_factory.mktemp("log") / NAME
    corrections = Corrections(found, Log(path))
    work(corrections, plan)
    assert_same(Corrections(found, Log(path)).tables, corrections.tables)
    again = Corrections(found, Log(path))
    while again.undo():
        pass
    assert_same(again.tables, replay((), found))


@SLOW
@given(steps(*KINDS))
def test_a_frame_asked_for_alone_is_that_of_the_tables(
    found: Found, plan: list[tuple[str, int, int]]
) -> None:
    corrections = Corrections(found)
    work(corrections, plan)
    whole = corrections.tables.singularities
    for frame in range(8):
        alone = corrections.frame(frame).drop(columns="track").reset_index(drop=True)
        assert_frame_equal(alone, whole[whole["frame"] == frame].reset_index(drop=True))


@SLOW
@given(steps(*KINDS, "undo", "redo"))
def test_what_an_edit_says_it_changed_is_all_that_changed(
    found: Found, plan: list[tuple[str, int, int]]
) -> None:
    corrections = Corrections(found)
    for one in plan:
        before = corrections.tables
        count = len(corrections.log.standing)
        work(corrections, [one])
        after = corrections.tables
        if one[0] in ("undo", "redo") or len(corrections.log.standing) == count:
            continue
        corrections.undo()
        told = corrections.redo()
        assert isinstance(told, Applied)
        for name, key, changed in (
            ("singularities", "frame", told.frames),
            ("singularities", "singularity", told.singularities),
            ("trajectories", "track", told.tracks),
            ("events", "event", told.events),
        ):
            a, b = (
                t[~t[key].isin(changed)].reset_index(drop=True)
                for t in (getattr(before, name), getattr(after, name))
            )
            if name == "events":
                # an event elsewhere may name a track by its new number
                a, b = a.drop(columns="tracks"), b.drop(columns="tracks")
            assert_frame_equal(a, b)


def test_without_edits_the_tables_are_those_found(
    found: Found, table: pd.DataFrame, motion: Motion
) -> None:
    tables = replay((), found)
    assert_frame_equal(tables.singularities, conform(table, SINGULARITIES), check_exact=True)
    assert_frame_equal(
        tables.trajectories, conform(motion.trajectories, TRAJECTORIES), check_exact=True
    )
    assert_frame_equal(tables.events, conform(motion.events, EVENTS), check_exact=True)


def test_an_edit_that_cannot_be_saved_is_not_done(found: Found, tmp_path: Path) -> None:
    corrections = Corrections(found, Log(tmp_path / "folder" / NAME))
    (tmp_path / "folder").write_text("in the way")
    edit = an_edit(corrections.tables, "delete", 3, 0)
    assert edit is not None
    with pytest.raises(LogError):
        corrections.do(edit)
    assert_same(corrections.tables, replay((), found))


def test_edits_carry_the_author_of_the_log(found: Found, tmp_path: Path) -> None:
    corrections = Corrections(found, Log(tmp_path / NAME, author="Ada"))
    edit = an_edit(corrections.tables, "confirm", 3, 0)
    assert edit is not None
    corrections.do(edit)
    assert corrections.log.edits[0].author == "Ada"


def test_placed_ids_are_above_those_found_and_never_used_again(found: Found) -> None:
    corrections = Corrections(found)
    last = int(found.singularity.max())
    ids: list[int] = []
    for undone in (False, True, False):
        done = corrections.do(Place(frame=2, where=(60.5 + len(ids) * 9, 3.5), charge=1, winding=1))
        assert isinstance(done, Applied)
        ids.append(last + done.entry.number)
        assert ids[-1] in set(corrections.frame(2)["singularity"])
        if undone:
            corrections.undo()
    assert ids == [last + 1, last + 2, last + 3]
    assert np.isin([ids[0], ids[2]], corrections.tables.singularities["singularity"]).all()
