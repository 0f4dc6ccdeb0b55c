"""Conservation of charge, frame by frame."""

from __future__ import annotations

import pandas as pd
import pytest

from hologyre.motion import audit, follow_threads, link_singularities
from hologyre.simulate.truth import border_winding
from hologyre.tables import EVENTS, TRAJECTORIES, empty


def table(*rows: tuple[int, float, float, int]) -> pd.DataFrame:
    return pd.DataFrame(rows, columns=["frame", "y_px", "x_px", "charge"])


@pytest.mark.parametrize("speckle", ["slow_speckle", "fast_speckle"])
def test_threads_of_exact_fields_add_up_in_every_frame(speckle, request):
    speckle = request.getfixturevalue(speckle)
    motion = follow_threads(speckle.fields(), speckle.table)
    winding = {
        t: border_winding(speckle.wave, speckle.window, float(t)) for t in range(speckle.n_frames)
    }
    found = audit(motion.trajectories, motion.events, winding)
    assert found["audit"].tolist() == ["ok"] * speckle.n_frames
    # N+ - N- follows the winding of the border
    assert (found["positive"] - found["negative"] == found["border_winding"]).all()


def test_a_missing_singularity_shows_as_charge_and_as_undetected():
    rows = [(f, 50.0, x, c) for f in range(5) for x, c in ((40.0, 1), (60.0, -1))]
    rows.remove((2, 50.0, 40.0, 1))
    motion = link_singularities(table(*rows), max_step_px=3.0, frame_shape=(100, 100))
    found = audit(motion.trajectories, motion.events, dict.fromkeys(range(5), 0))
    assert found["audit"].tolist() == [
        "ok",
        "ok",
        "charge -1 but +0 turns along the border; 1 undetected",
        "ok",
        "ok",
    ]


def test_an_end_without_an_event_is_told_in_the_frame_after_it():
    rows = [(f, 50.0, 40.0, 1) for f in range(3)] + [(f, 20.0, 20.0, -1) for f in range(7)]
    motion = link_singularities(table(*rows), max_step_px=3.0, max_gap=1, frame_shape=(100, 100))
    found = audit(motion.trajectories, motion.events)
    assert found.set_index("frame")["audit"].to_dict() == {
        **dict.fromkeys(range(7), "ok"),
        3: "1 ended unexplained",
    }


def test_an_event_that_changes_the_charge_is_told():
    rows = [(f, 50.0, 50.0 + c * (3.0 - f), c) for f in range(3) for c in (-1, 1)]
    rows += [(f, 20.0, 20.0, 1) for f in range(5)]
    motion = link_singularities(table(*rows), max_step_px=3.0, frame_shape=(100, 100))
    forged = motion.trajectories.assign(charge=1)
    assert "pair death that changes the charge by -2" in set(audit(forged, motion.events)["audit"])


def test_charges_of_all_tracks_of_an_event_are_added_up():
    # a track of +1 parts into +1, +1 and -1 (kept), later one of +1 parts into +1 and +1 (not)
    tracks = {0: (0, 1), 1: (1, 1), 2: (1, 1), 3: (1, -1), 4: (2, 1), 5: (2, 1)}
    ends = {0: 1, 1: 2}
    rows = [
        (track, frame, 10.0, 10.0, charge)
        for track, (first, charge) in tracks.items()
        for frame in range(first, ends.get(track, 3))
    ]
    trajectories = pd.DataFrame(rows, columns=["track", "frame", "y_px", "x_px", "charge"])
    events = pd.DataFrame(
        [("split", 0, 1, "0;1;2;3"), ("entry", 0, 1, "2"), ("split", 1, 2, "1;4;5")],
        columns=["kind", "frame_before", "frame_after", "tracks"],
    )
    found = audit(trajectories, events, frames=range(3))
    assert found["audit"].tolist() == ["ok", "ok", "split that changes the charge by +1"]


def test_frames_in_which_nothing_is_left_are_audited():
    found = audit(empty(TRAJECTORIES), empty(EVENTS), {0: 0, 1: 1}, frames=[0, 1])
    assert found["audit"].tolist() == ["ok", "charge +0 but +1 turns along the border"]


def test_frames_without_singularities_are_counted_too():
    motion = link_singularities(table((1, 5.0, 5.0, 1)), frame_shape=(10, 10), frames=[0, 1, 2])
    found = audit(motion.trajectories, motion.events, {0: 0, 1: 1, 2: 0}, frames=[0, 1, 2])
    assert found["positive"].tolist() == [0, 1, 0]
    assert found["border_winding"].tolist() == [0, 1, 0]
