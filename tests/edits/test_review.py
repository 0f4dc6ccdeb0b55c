from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from hologyre.edits.kinds import Confirm, Edit, FlipCharge, JoinTracks, Move
from hologyre.edits.review import review
from hologyre.tables import EVENTS, FRAMES, SINGULARITIES, TRAJECTORIES, conform, empty

SHAPE = (100, 100)


def table(**columns: object) -> pd.DataFrame:
    rows = pd.DataFrame(columns)
    return conform(rows.assign(singularity=range(len(rows))), SINGULARITIES)


def tracks(rows: pd.DataFrame, track: list[int], link: list[str]) -> pd.DataFrame:
    return conform(rows.assign(track=track, link=link), TRAJECTORIES)


def listed(
    singularities: pd.DataFrame | None = None,
    trajectories: pd.DataFrame | None = None,
    events: pd.DataFrame | None = None,
    frames: pd.DataFrame | None = None,
    edits: tuple[Edit, ...] = (),
) -> pd.DataFrame:
    return review(
        empty(SINGULARITIES) if singularities is None else singularities,
        empty(TRAJECTORIES) if trajectories is None else trajectories,
        empty(EVENTS) if events is None else events,
        empty(FRAMES) if frames is None else frames,
        SHAPE,
        edits=edits,
    )


def three() -> pd.DataFrame:
    return table(
        frame=[0, 0, 1], y_px=[10.0, 50.0, 50.0], x_px=[10.0, 50.0, 20.0], charge=[1, -1, 1],
        trust=[0.3, 0.99, 0.6], robustness_snr=[1.0, 20.0, 2.0],
    )  # fmt: skip


def walking(frames: list[int], x_px: list[float], link: list[str]) -> pd.DataFrame:
    count = len(frames)
    rows = table(frame=frames, y_px=[50.0] * count, x_px=x_px, charge=[1] * count)
    return tracks(rows, [4] * count, link)


def unexplained() -> pd.DataFrame:
    rows = pd.DataFrame(
        {"event": [3, 4], "kind": ["unexplained", "exit"], "frame_before": [5, 6],
         "frame_after": [6, 7], "y_px": [40.0, 0.1], "x_px": [30.0, 9.0], "tracks": ["4", "5"]}
    )  # fmt: skip
    return conform(rows, EVENTS)


def test_an_empty_result_leaves_nothing_to_look_at() -> None:
    assert listed().empty


def test_singularities_of_little_trust_come_worst_first() -> None:
    items = listed(three())
    assert items["singularity"].tolist() == [0, 2]
    assert items["score"].tolist() == pytest.approx([0.7, 0.4])
    assert items["reason"].tolist() == ["trust is only 0.30", "trust is only 0.60"]
    assert items["track"].tolist() == [-1, -1]


def test_without_trust_robustness_over_the_noise_is_taken() -> None:
    items = listed(three().assign(trust=np.nan, robustness_snr=[0.9, 20.0, 4.0]))
    assert items["singularity"].tolist() == [0]
    assert items["reason"].tolist() == ["noise may have made it: robustness is 0.9 times the noise"]


def test_singularities_of_which_nothing_is_known_are_not_listed() -> None:
    assert listed(three().assign(trust=np.nan, robustness_snr=np.nan)).empty


def test_singularities_near_the_border_are_listed_with_both_reasons() -> None:
    items = listed(three().assign(y_px=[98.5, 0.2, 50.0]))
    assert items["reason"].tolist() == [
        "trust is only 0.30; 0.5 px from the border of the frame",
        "trust is only 0.60",
        "0.2 px from the border of the frame",
    ]


def test_links_across_a_gap_are_listed_at_the_singularity_they_lead_to() -> None:
    chain = walking([0, 1, 4], [20.0, 20.1, 20.4], ["", "thread", "bridged"])
    (item,) = listed(trajectories=chain).itertuples()
    assert (item.what, item.frame, item.x_px, item.track) == ("link", 4, 20.4, 4)
    assert item.reason == "joined across 2 frames that do not show it"


def test_assigned_links_much_longer_than_usual_are_listed() -> None:
    x = [20.0, 20.1, 20.2, 20.3, 23.3]
    chain = walking([0, 1, 2, 3, 4], x, ["", *["assigned"] * 4])
    (item,) = listed(trajectories=chain).itertuples()
    assert item.reason == "joined by a step of 3.0 px, 30 times the usual one"
    assert listed(trajectories=chain.assign(link=["", *["thread"] * 4])).empty


def test_only_events_that_are_unexplained_are_listed() -> None:
    (item,) = listed(events=unexplained()).itertuples()
    assert (item.what, item.event, item.track, item.frame) == ("event", 3, 4, 5)
    assert item.reason == (
        "track 4 begins or ends between frames 5 and 6 with no partner and away from the border"
    )


def test_frames_that_do_not_add_up_come_first() -> None:
    frames = conform(
        pd.DataFrame({"frame": [0, 1], "audit": ["ok", "charge +1 but +0 turns"]}), FRAMES
    )
    items = listed(three(), events=unexplained(), frames=frames)
    assert items["what"].tolist() == ["frame", "event", "singularity", "singularity"]
    assert items["reason"].iloc[0] == "the frame does not add up: charge +1 but +0 turns"


@pytest.mark.parametrize(
    ("edit", "done"),
    [
        (Confirm(frame=0, where=(10.0, 10.1), charge=1), [True, False]),
        (Confirm(frame=1, where=(10.0, 10.0), charge=1), [False, False]),
        (Confirm(frame=0, where=(10.0, 11.0), charge=1), [False, False]),
        (Confirm(frame=0, where=(10.0, 10.0), charge=1, what="link"), [False, False]),
        (Move(frame=1, where=(49.0, 20.0), charge=1, to=(50.0, 20.0), winding=1), [False, True]),
        (FlipCharge(frame=1, where=(50.0, 20.0), charge=-1), [False, True]),
    ],
)
def test_what_an_edit_has_settled_is_marked_done(edit: Edit, done: list[bool]) -> None:
    assert listed(three(), edits=(edit,))["done"].tolist() == done


def test_links_and_events_are_settled_by_their_own_confirmation() -> None:
    chain = walking([0, 1, 4], [20.0, 20.1, 20.4], ["", "thread", "bridged"])
    edits = (
        Confirm(frame=4, where=(50.0, 20.4), charge=1, what="link"),
        Confirm(frame=5, where=(40.0, 30.0), charge=0, what="event"),
    )
    assert listed(trajectories=chain, events=unexplained(), edits=edits)["done"].all()


def test_a_gap_joined_by_hand_is_settled() -> None:
    chain = walking([0, 1, 5], [20.0, 20.1, 20.5], ["", "thread", "hand"])
    join = JoinTracks(frame=1, later_frame=5, where=((50.0, 20.1), (50.0, 20.5)), charge=1)
    assert listed(trajectories=chain, edits=(join,))["done"].tolist() == [True]


def test_options_out_of_range_are_refused() -> None:
    with pytest.raises(ValueError, match="trusted: expected a number from 0 to 1, got 2"):
        review(
            empty(SINGULARITIES), empty(TRAJECTORIES), empty(EVENTS), empty(FRAMES), SHAPE,
            trusted=2,
        )  # fmt: skip
