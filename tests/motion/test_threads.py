"""Linking by following zeros through the field between frames."""

from __future__ import annotations

import weakref

import numpy as np
import pandas as pd
import pytest

from hologyre.grid import Window
from hologyre.motion import follow_threads
from hologyre.simulate.waves import RandomWaves, ThreeWaves, VortexBeam
from hologyre.singularities.locate import locate_singularities


def kinds(motion) -> dict[str, int]:
    return motion.events["kind"].value_counts().to_dict()


@pytest.mark.parametrize("speckle", ["slow_speckle", "fast_speckle"])
def test_every_true_link_of_exact_fields_is_found_and_no_other(speckle, request, links_of):
    speckle = request.getfixturevalue(speckle)
    motion = follow_threads(speckle.fields(), speckle.table)
    assert links_of(motion.trajectories) == speckle.links()
    assert set(motion.trajectories["link"]) == {"", "thread"}


# At 0.1 rad a frame the field between frames is known to 1e-4 of its size, at 0.5 to 1e-2 at
# the ends of a record; the time and place of a turning line answer to that steeply.
@pytest.mark.parametrize(
    ("speckle", "frames", "px"), [("slow_speckle", 0.005, 0.05), ("fast_speckle", 0.1, 0.5)]
)
def test_events_are_the_true_ones_at_their_time_and_place(speckle, frames, px, request):
    speckle = request.getfixturevalue(speckle)
    table = speckle.table.assign(time_s=speckle.table["frame"].astype(float))
    events = follow_threads(speckle.fields(), table).events
    order = ["kind", "frame_before", "time_s"]
    found = events.sort_values(order, ignore_index=True)
    true = speckle.truth.events.sort_values(order, ignore_index=True)
    for column in ("kind", "frame_before", "frame_after"):
        assert found[column].tolist() == true[column].tolist()
    np.testing.assert_allclose(found["time_s"], true["time_s"], atol=frames)
    np.testing.assert_allclose(found["y_px"], true["y_px"], atol=px)
    np.testing.assert_allclose(found["x_px"], true["x_px"], atol=px)


def test_a_phase_of_its_own_in_every_frame_changes_nothing(slow_speckle, links_of):
    rng = np.random.default_rng(0)
    fields = [
        f.with_values(f.values * np.exp(1j * rng.uniform(-np.pi, np.pi)))
        for f in slow_speckle.fields()
    ]
    motion = follow_threads(fields, slow_speckle.table)
    assert links_of(motion.trajectories) == slow_speckle.links()


def test_conjugate_fields_give_the_same_links_and_events(fast_speckle, links_of):
    fields = [f.with_values(f.values.conj()) for f in fast_speckle.fields()]
    table = fast_speckle.table.assign(charge=-fast_speckle.table["charge"])
    mirrored = follow_threads(fields, table)
    plain = follow_threads(fast_speckle.fields(), fast_speckle.table)
    assert links_of(mirrored.trajectories) == links_of(plain.trajectories)
    assert kinds(mirrored) == kinds(plain)


def test_played_backwards_births_are_deaths(fast_speckle, links_of):
    last = fast_speckle.n_frames - 1
    table = fast_speckle.table.assign(frame=last - fast_speckle.table["frame"])
    backward = follow_threads(fast_speckle.fields()[::-1], table)
    forward = follow_threads(fast_speckle.fields(), fast_speckle.table)
    mirror = {
        "pair_birth": "pair_death",
        "pair_death": "pair_birth",
        "entry": "exit",
        "exit": "entry",
    }
    assert kinds(backward) == {mirror[k]: n for k, n in kinds(forward).items()}
    turned = {(b, a) for a, b in links_of(backward.trajectories)}
    assert turned == links_of(forward.trajectories)


def test_a_dipole_dies_once_at_the_published_moment(field_at):
    # Closed form of a vortex dipole in a Gaussian beam (G. Indebetouw, J. Mod. Opt. 40, 73,
    # 1993): zeros at +-a annihilate at zeta = 2 a^2 / (w0 sqrt(w0^2 - 4 a^2)),
    # y = zeta (a - w0^2 / (2 a)); for a = 0.4 w0: 0.533333 and -0.453333 w0.
    waist, rate = 40.0, 0.05
    wave = VortexBeam.hosting(
        [(80.0, 80.0 + 0.4 * waist)],
        [(80.0, 80.0 - 0.4 * waist)],
        waist_px=waist,
        centre_px=(80.0, 80.0),
        zeta_rate=rate,
    )
    window = Window(0.0, 159.0, 0.0, 159.0)
    frames = range(16)
    # The beam has fallen to exp(-36) where its period closes.
    fields = [
        field_at(wave, float(t), (480.0, 480.0), (60, 60), window, origin_px=-160.0) for t in frames
    ]
    zeta = rate * np.arange(11)
    x = np.sqrt(0.4**2 + zeta**2 * (1 - 1 / (4 * 0.4**2)))
    y = zeta * (0.4 - 1 / (2 * 0.4))
    table = pd.concat(
        [
            pd.DataFrame(
                {
                    "frame": range(11),
                    "time_s": np.arange(11.0),
                    "y_px": 80.0 + waist * y,
                    "x_px": 80.0 + charge * waist * x,
                    "charge": charge,
                }
            )
            for charge in (1, -1)
        ]
    )
    # a lone zero far away tells the time of the last frames
    times = pd.DataFrame(
        {"frame": range(11, 16), "time_s": np.arange(11.0, 16.0), "y_px": 5.0, "x_px": 5.0}
    )
    table = pd.concat([table, times.assign(charge=1)], ignore_index=True)
    motion = follow_threads(fields, table)
    deaths = motion.events[motion.events["kind"] == "pair_death"]
    assert len(deaths) == 1
    event = deaths.iloc[0]
    moment = 0.533333 / rate
    assert (event["frame_before"], event["frame_after"]) == (10, 11)
    # interpolation in time of a field that is no polynomial: a hundredth of a frame
    assert event["time_s"] == pytest.approx(moment, abs=0.01)
    assert event["y_px"] == pytest.approx(80.0 - 0.453333 * waist, abs=0.1)
    assert event["x_px"] == pytest.approx(80.0, abs=0.1)


@pytest.mark.parametrize(
    ("rate", "kind"), [(0.1, "pair_death"), (-0.1, "pair_birth")], ids=["up", "down"]
)
def test_all_pairs_of_three_plane_waves_meet_when_one_outweighs_the_others(
    rate, kind, field_at, zeros_of
):
    # Zeros exist while the amplitudes (1, 1, a3) form a triangle, so while a3 < 2.
    wavelength = 24.0
    wave = ThreeWaves(wavelength, third=2.0 - rate * 4.3, third_rate=rate)
    window = Window(0.0, 119.0, 0.0, 119.0)
    period = (16 * wavelength / np.sqrt(3.0), 8 * wavelength)
    frames = range(9)
    fields = [field_at(wave, float(t), period, (32, 32), window) for t in frames]
    alive = range(5) if rate > 0 else range(5, 9)
    table = zeros_of(wave, window, alive)
    motion = follow_threads(fields, table)
    pairs = motion.events[motion.events["kind"] == kind]
    assert len(pairs) > 10
    assert (pairs["frame_before"] == 4).all()
    opposite = "pair_birth" if kind == "pair_death" else "pair_death"
    assert opposite not in set(motion.events["kind"])
    assert "unexplained" not in set(motion.events["kind"])


def test_a_zero_the_table_leaves_out_is_bridged_on_its_thread(slow_speckle):
    tracks = slow_speckle.table.assign(track=slow_speckle.track)
    longest = tracks.groupby("track").size().idxmax()
    missing = tracks[(tracks["track"] == longest) & tracks["frame"].isin([3, 4])].index
    table = slow_speckle.table.drop(missing)
    motion = follow_threads(slow_speckle.fields(), table)
    rows = motion.trajectories.set_index("singularity")
    before = tracks[(tracks["track"] == longest) & (tracks["frame"] == 2)].index[0]
    after = tracks[(tracks["track"] == longest) & (tracks["frame"] == 5)].index[0]
    assert rows.loc[before, "track"] == rows.loc[after, "track"]
    assert rows.loc[after, "link"] == "bridged"
    assert "unexplained" not in kinds(motion)


def test_a_death_of_a_zero_the_table_left_out_is_still_told(slow_speckle):
    deaths = slow_speckle.truth.events.query("kind == 'pair_death' and frame_before >= 3")
    event = deaths.iloc[0]
    track = int(event["tracks"].split(";")[0])
    gone = (slow_speckle.track == track) & (slow_speckle.table["frame"] == event["frame_before"])
    motion = follow_threads(slow_speckle.fields(), slow_speckle.table[~gone])
    found = motion.events[motion.events["kind"] == "pair_death"]
    assert event["frame_after"] in found["frame_after"].to_list()
    assert len(found) == len(slow_speckle.truth.events.query("kind == 'pair_death'"))


def test_a_singularity_placed_where_no_zero_is_gets_assigned(slow_speckle):
    # in the middle of nowhere, at rest
    zeros = slow_speckle.table[["y_px", "x_px"]].to_numpy()
    grid = np.stack(np.meshgrid(np.arange(20.0, 76.0), np.arange(20.0, 76.0)), -1).reshape(-1, 2)
    distance = np.linalg.norm(grid[:, None] - zeros, axis=2).min(axis=1)
    y, x = grid[distance.argmax()]
    placed = pd.DataFrame(
        {"frame": range(8), "y_px": y, "x_px": x, "charge": 1, "singularity": range(900, 908)}
    )
    table = pd.concat([slow_speckle.table, placed], ignore_index=True)
    rows = follow_threads(slow_speckle.fields(), table).trajectories.query("singularity >= 900")
    assert rows["track"].nunique() == 1
    assert rows["link"].tolist() == [""] + 7 * ["assigned"]


def test_frames_left_out_are_bridged_and_no_deaths(slow_speckle, links_of):
    kept = [f for f in range(8) if f != 4]
    table = slow_speckle.table[slow_speckle.table["frame"] != 4]
    motion = follow_threads(
        slow_speckle.fields(kept),
        table.assign(frame=table["frame"] + 100),
        frames=[100 + f for f in kept],
    )
    found = links_of(motion.trajectories)
    rows = slow_speckle.table.assign(track=slow_speckle.track).loc[table.index]
    assert found == links_of(rows)
    across = motion.trajectories.query("frame == 105 and link != ''")
    assert set(across["link"]) == {"bridged"}


def test_every_singularity_has_exactly_one_row(fast_speckle):
    motion = follow_threads(fast_speckle.fields(), fast_speckle.table)
    assert sorted(motion.trajectories["singularity"]) == fast_speckle.table.index.tolist()


def test_fields_are_taken_one_after_another_and_let_go(slow_speckle):
    taken: list[weakref.ref] = []

    def stream():
        for field in slow_speckle.fields() * 3:
            assert sum(ref() is not None for ref in taken) <= 2
            single = field.with_values(field.values)
            taken.append(weakref.ref(single))
            yield single
            del single

    follow_threads(stream(), slow_speckle.table, frames=range(24))
    assert len(taken) == 24


def test_a_singularity_moved_by_hand_keeps_its_track(slow_speckle):
    tracks = slow_speckle.table.assign(track=slow_speckle.track)
    longest = tracks.groupby("track").size().idxmax()
    moved = (tracks["track"] == longest) & (tracks["frame"] == 4)
    # farther than the field can tell: a length of it is 5 px
    table = slow_speckle.table.assign(x_px=slow_speckle.table["x_px"] + 3.5 * moved)
    motion = follow_threads(slow_speckle.fields(), table)
    rows = motion.trajectories[motion.trajectories["singularity"].isin(tracks.index[moved])]
    track = motion.trajectories[motion.trajectories["track"] == rows["track"].iloc[0]]
    assert len(track) == (tracks["track"] == longest).sum()
    assert rows["link"].tolist() == ["assigned"]


def test_frames_too_far_apart_for_their_field_to_be_told_are_assigned(field_at):
    wave = RandomWaves("disc", 12.0, 3.0, seed=2, box_px=144.0)
    window = Window(0.0, 143.0, 0.0, 143.0)
    fields = [field_at(wave, float(t), (144.0, 144.0), (30, 30), window) for t in range(6)]
    tables = [locate_singularities(f).assign(frame=t) for t, f in enumerate(fields)]
    table = pd.concat(tables, ignore_index=True).assign(singularity=lambda t: range(len(t)))
    links = set(follow_threads(fields, table).trajectories["link"])
    assert "thread" not in links
    assert "thread" in set(follow_threads(fields, table, method="threads").trajectories["link"])


def test_assignment_can_be_asked_for(slow_speckle):
    motion = follow_threads(slow_speckle.fields(), slow_speckle.table, method="assignment")
    assert set(motion.trajectories["link"]) == {"", "assigned"}


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"method": "guess"}, "method: expected one of auto, threads, assignment, got 'guess'"),
        ({"max_gap": -1}, "max_gap: expected"),
        ({"margin_px": -1.0}, "margin_px: expected"),
        ({"frames": range(1, 9)}, "frames: the table has frame 0, of which there is no field"),
        ({"frames": [0, 1]}, "frames: fewer numbers than fields"),
        ({"frames": [0, 1, 1, 2, 3, 4, 5, 6]}, "frames: expected increasing numbers"),
    ],
)
def test_bad_options_are_named(slow_speckle, options, message):
    with pytest.raises(ValueError, match=message):
        follow_threads(slow_speckle.fields(), slow_speckle.table, **options)
