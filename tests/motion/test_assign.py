"""Linking singularities by their positions and charges."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from hologyre.motion import link_singularities
from hologyre.tables import EVENTS, SINGULARITIES, TRAJECTORIES, empty


def table(*rows: tuple[int, float, float, int]) -> pd.DataFrame:
    return pd.DataFrame(rows, columns=["frame", "y_px", "x_px", "charge"])


def kinds(motion) -> list[str]:
    return motion.events["kind"].tolist()


def test_tables_have_the_columns_and_order_of_the_contract():
    motion = link_singularities(table((1, 5.0, 5.0, 1), (0, 5.1, 5.0, 1)), max_step_px=2.0)
    assert list(motion.trajectories) == [c.name for c in TRAJECTORIES]
    assert list(motion.events) == [c.name for c in EVENTS]
    assert motion.trajectories["frame"].tolist() == [0, 1]
    assert motion.trajectories["link"].tolist() == ["", "assigned"]


def test_an_empty_table_gives_empty_tables():
    motion = link_singularities(empty(SINGULARITIES))
    assert len(motion.trajectories) == len(motion.events) == 0
    assert list(motion.trajectories) == [c.name for c in TRAJECTORIES]


def test_every_singularity_has_exactly_one_row_in_the_tracks():
    rng = np.random.default_rng(1)
    rows = [
        (f, *rng.uniform(0, 100, 2), int(rng.choice([-1, 1]))) for f in range(9) for _ in "abcdef"
    ]
    motion = link_singularities(table(*rows))
    assert sorted(motion.trajectories["singularity"]) == list(range(len(rows)))


def test_charge_never_changes_along_a_track():
    rng = np.random.default_rng(2)
    rows = [
        (f, *rng.uniform(0, 30, 2), int(rng.choice([-1, 1]))) for f in range(9) for _ in "abcdef"
    ]
    tracks = link_singularities(table(*rows)).trajectories
    assert (tracks.groupby("track")["charge"].nunique() == 1).all()


def test_a_nearer_singularity_of_the_other_charge_is_not_followed():
    motion = link_singularities(
        table((0, 50.0, 50.0, 1), (1, 50.0, 50.5, -1), (1, 50.0, 53.0, 1)),
        max_step_px=5.0,
        frame_shape=(100, 100),
    )
    by_singularity = motion.trajectories.set_index("singularity")["track"]
    assert by_singularity[0] == by_singularity[2] != by_singularity[1]


def test_a_singularity_missed_for_two_frames_keeps_its_track():
    rows = [(f, 50.0 + 0.1 * f, 50.0, 1) for f in (0, 1, 2, 5, 6)]
    motion = link_singularities(
        table(*rows), max_step_px=3.0, max_gap=2, frames=range(7), frame_shape=(100, 100)
    )
    assert motion.trajectories["track"].nunique() == 1
    assert motion.trajectories["link"].tolist() == [
        "", "assigned", "assigned", "bridged", "assigned",
    ]  # fmt: skip
    assert kinds(motion) == []


def test_a_gap_longer_than_allowed_ends_the_track():
    rows = [(f, 50.0, 50.0, 1) for f in (0, 1, 5, 6)]
    motion = link_singularities(
        table(*rows), max_step_px=3.0, max_gap=2, frames=range(7), frame_shape=(100, 100)
    )
    assert motion.trajectories["track"].nunique() == 2
    assert kinds(motion) == ["unexplained", "unexplained"]


def test_frames_that_were_skipped_are_no_deaths():
    rows = [(f, 50.0, x, c) for f in (10, 11, 14, 15) for x, c in ((40.0, 1), (60.0, -1))]
    motion = link_singularities(table(*rows), max_step_px=3.0, frame_shape=(100, 100))
    assert motion.trajectories["track"].nunique() == 2
    assert kinds(motion) == []


def test_a_hole_too_long_to_bridge_ends_tracks_without_events():
    rows = [(f, 50.0, 50.0, 1) for f in (0, 1, 9, 10)]
    motion = link_singularities(table(*rows), max_step_px=3.0, frame_shape=(100, 100))
    assert motion.trajectories["track"].nunique() == 2
    assert kinds(motion) == []


def test_an_opposite_pair_that_closes_in_dies_together():
    rows = [(f, 50.0, 50.0 + c * gap, c) for f, gap in enumerate((4.0, 3.0, 1.5)) for c in (-1, 1)]
    rows += [(3, 20.0, 20.0, 1), *((f, 20.0, 20.0, 1) for f in range(3))]
    motion = link_singularities(table(*rows), max_step_px=3.0, frame_shape=(100, 100))
    event = motion.events.iloc[0]
    assert kinds(motion) == ["pair_death"]
    assert (event["frame_before"], event["frame_after"]) == (2, 3)
    assert (event["y_px"], event["x_px"]) == (50.0, 50.0)
    assert len(event["tracks"].split(";")) == 2


def test_time_reversal_turns_deaths_into_births_and_exits_into_entries():
    rng = np.random.default_rng(3)
    rows = []
    for k in range(30):
        y, x = rng.uniform(0, 200, 2)
        charge = 1 if k % 2 else -1
        life = range(*sorted(rng.integers(0, 12, 2)))
        rows += [(f, y + 0.2 * f, x, charge) for f in life]
    forward = table(*rows)
    backward = forward.assign(frame=11 - forward["frame"])
    options = {"max_step_px": 5.0, "frame_shape": (200, 200), "frames": range(12)}
    a, b = link_singularities(forward, **options), link_singularities(backward, **options)
    mirrored = {"pair_death": "pair_birth", "pair_birth": "pair_death", "exit": "entry",
                "entry": "exit", "unexplained": "unexplained"}  # fmt: skip
    assert sorted(kinds(a)) == sorted(mirrored[k] for k in kinds(b))


def test_a_singularity_that_leaves_through_the_border_exits():
    rows = [(f, 50.0, x, 1) for f, x in enumerate((3.0, 1.8, 0.6))]
    motion = link_singularities(
        table(*rows), max_step_px=3.0, frame_shape=(100, 100), frames=range(5)
    )
    assert kinds(motion) == ["exit"]


def test_a_singularity_that_vanishes_alone_inside_is_unexplained():
    rows = [(f, 50.0, 50.0, 1) for f in range(3)] + [(f, 20.0, 20.0, -1) for f in range(6)]
    motion = link_singularities(table(*rows), max_step_px=3.0, frame_shape=(100, 100))
    assert kinds(motion) == ["unexplained"]


def test_a_double_charge_that_parts_into_two_is_a_split():
    rows = [(0, 50.0, 50.0, 2), (1, 50.0, 50.1, 2), (2, 50.0, 49.0, 1), (2, 50.0, 51.0, 1)]
    motion = link_singularities(table(*rows), max_step_px=4.0, frame_shape=(100, 100))
    assert kinds(motion) == ["split"]
    assert motion.events["tracks"].tolist() == ["0;1;2"]


def test_two_singularities_that_join_into_a_double_charge_are_a_merger():
    rows = [(0, 50.0, 49.0, -1), (0, 50.0, 51.0, -1), (1, 50.0, 50.0, -2)]
    motion = link_singularities(table(*rows), max_step_px=4.0, frame_shape=(100, 100))
    assert kinds(motion) == ["merge"]


def test_times_and_micrometres_follow_those_of_the_table():
    rows = table(*[(f, 50.0, 50.0 + c * (3.0 - f), c) for f in range(3) for c in (-1, 1)])
    rows = pd.concat([rows, table((3, 10.0, 10.0, 1), (2, 10.0, 10.0, 1))], ignore_index=True)
    rows = rows.assign(time_s=0.5 * rows["frame"], y_um=0.2 * rows["y_px"], x_um=0.2 * rows["x_px"])
    event = link_singularities(rows, max_step_px=3.0, frame_shape=(100, 100)).events
    event = event[event["kind"] == "pair_death"].iloc[0]
    assert event["time_s"] == pytest.approx(1.25)
    assert event["y_um"] == pytest.approx(10.0)


def test_the_table_given_is_not_changed():
    rows = table((1, 5.0, 5.0, 1), (0, 5.1, 5.0, 1))
    before = rows.copy()
    link_singularities(rows, max_step_px=2.0)
    pd.testing.assert_frame_equal(rows, before)


@pytest.mark.parametrize(
    ("rows", "options", "message"),
    [
        (table((0, 1.0, 1.0, 0)), {}, "charge must not be 0"),
        (table((0, np.nan, 1.0, 1)), {}, "must be finite"),
        (table((0, 1.0, 1.0, 1)).drop(columns="x_px"), {}, "column x_px is missing"),
        (table((0, 1.0, 1.0, 1)).assign(mass=1), {}, "unknown column mass"),
        (table((0, 1.0, 1.0, 1)), {"max_step_px": -1.0}, "max_step_px: expected"),
        (table((0, 1.0, 1.0, 1)), {"max_gap": -1}, "max_gap: expected 0 or more frames, got -1"),
        (table((0, 1.0, 1.0, 1)), {"margin_px": -1.0}, "margin_px: expected"),
        (table((0, 1.0, 1.0, 1)), {"frame_shape": (0, 9)}, "frame_shape: expected"),
        (table((7, 1.0, 1.0, 1)), {"frames": [1, 2]}, "frames: the table has frame 7"),
    ],
)
def test_bad_input_is_named(rows, options, message):
    with pytest.raises(ValueError, match=message):
        link_singularities(rows, **options)


def test_brownian_particles_are_linked_as_a_general_linker_does():
    # 120 particles on 400 x 400 px with steps of standard deviation 1 px per axis over 40
    # frames: J. C. Crocker and D. G. Grier, J. Colloid Interface Sci. 179, 298 (1996) link
    # 99.9 % of these rightly; at least 99.5 % is common practice at this density.
    rng = np.random.default_rng(5)
    start = rng.uniform(0, 400, (120, 2))
    path = start + np.cumsum(rng.normal(size=(40, 120, 2)), axis=0)
    frame, particle = np.indices((40, 120)).reshape(2, -1)
    rows = pd.DataFrame(
        {"frame": frame, "y_px": path[..., 0].ravel(), "x_px": path[..., 1].ravel(), "charge": 1}
    )
    tracks = link_singularities(rows).trajectories
    same = tracks["track"].to_numpy()[1:] == tracks["track"].to_numpy()[:-1]
    who = particle[tracks["singularity"].to_numpy()]
    right = np.count_nonzero(same & (who[1:] == who[:-1]))
    assert right >= 0.995 * 120 * 39
    assert np.count_nonzero(same) - right <= 0.005 * 120 * 39
