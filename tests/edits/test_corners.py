"""What reviews and replays do with gaps before events and with close pairs."""

from __future__ import annotations

import pandas as pd

from hologyre.edits import Confirm, found_of, recount, replay, review
from hologyre.motion import Motion
from hologyre.tables import EVENTS, FRAMES, SINGULARITIES, TRAJECTORIES, conform, empty


def unseen_before_its_death() -> tuple[pd.DataFrame, Motion]:
    """Simulation by hand: a pair dies between frames 3 and 4, one of it last seen in frame 2."""
    rows = [(0, f, 10.0, 10.0 + f, 1) for f in range(3)]
    rows += [(1, f, 10.0, 20.0 - f, -1) for f in range(4)]
    found = pd.DataFrame(rows, columns=["track", "frame", "y_px", "x_px", "charge"])
    found = found.assign(singularity=range(len(found)), origin="found", link="thread")
    first = ~found["track"].duplicated()
    found.loc[first, "link"] = ""
    event = {"event": 0, "kind": "pair_death", "frame_before": 3, "frame_after": 4}
    events = pd.DataFrame([{**event, "y_px": 10.0, "x_px": 15.0, "tracks": "0;1"}])
    singularities = conform(found.drop(columns=["track", "link"]), SINGULARITIES)
    singularities = singularities.sort_values(["frame", "singularity"], ignore_index=True)
    return singularities, Motion(conform(found, TRAJECTORIES), conform(events, EVENTS))


def test_an_event_across_a_gap_keeps_both_its_tracks() -> None:
    singularities, motion = unseen_before_its_death()
    found = found_of(singularities, motion, frames=range(5), frame_shape=(40, 40), max_step_px=5.0)
    corrected = replay([], found)
    assert corrected.events["tracks"].tolist() == ["0;1"]
    pd.testing.assert_frame_equal(corrected.trajectories, motion.trajectories)


def test_tables_with_gaps_are_recounted_and_reviewed_without_complaint() -> None:
    singularities, motion = unseen_before_its_death()
    found = found_of(singularities, motion, frames=range(5), frame_shape=(40, 40), max_step_px=5.0)
    corrected = replay([], found)
    frames = conform(
        pd.DataFrame({"frame": range(5), "status": "done", "border_winding": 0}), FRAMES
    )
    counted = recount(frames, corrected)
    assert counted["positive"].tolist() == [1, 1, 1, 0, 0]
    assert counted["negative"].tolist() == [1, 1, 1, 1, 0]
    review(corrected.singularities, corrected.trajectories, corrected.events, counted, (40, 40))


def test_confirming_one_of_a_close_pair_leaves_the_other_to_be_looked_at() -> None:
    pair = pd.DataFrame({"frame": 0, "y_px": 10.0, "x_px": [10.0, 10.2], "charge": [1, -1]})
    pair = conform(pair.assign(singularity=[0, 1], trust=0.5, origin="found"), SINGULARITIES)
    edit = Confirm(frame=0, where=(10.0, 10.0), charge=1)
    table = review(
        pair, conform(pair.assign(track=[0, 1], link=""), TRAJECTORIES), empty(EVENTS),
        empty(FRAMES), (40, 40), edits=[edit],
    )  # fmt: skip
    listed = table[table["what"] == "singularity"].set_index("charge")["done"]
    assert listed.to_dict() == {1: True, -1: False}
