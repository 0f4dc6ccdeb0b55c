"""Path, spreading, drift, pairs and lifetimes."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from hologyre.motion import (
    Motion,
    estimate_drift,
    fit_diffusion,
    fit_square_root,
    follow_threads,
    lifetimes,
    link_singularities,
    mean_squared_displacement,
    pair_separation,
    remove_drift,
    summarise_tracks,
    survival,
)


def brownian(d: float, sigma: float, tracks: int, steps: int, seed: int) -> pd.DataFrame:
    rng = np.random.default_rng(seed)
    path = np.cumsum(rng.normal(0, np.sqrt(2 * d), (tracks, steps, 2)), axis=1)
    path += rng.normal(0, sigma, path.shape)
    track, frame = np.indices((tracks, steps)).reshape(2, -1)
    place = path.reshape(-1, 2)
    return pd.DataFrame(
        {"track": track, "frame": frame, "y_px": place[:, 0], "x_px": place[:, 1], "charge": 1}
    )


def test_brownian_steps_spread_as_four_d_tau_plus_the_localisation_error():
    # MSD = 4 D tau + 4 sigma^2 in two dimensions (A. Einstein, Ann. Phys. 322, 549, 1905).
    msd = mean_squared_displacement(brownian(0.5, 0.3, 2000, 200, seed=1), max_lag=10)
    expected = 4 * 0.5 * msd["lag_frames"] + 4 * 0.3**2
    # 2000 x 200 steps: 1 % up to lag 10 is three standard errors
    np.testing.assert_allclose(msd["msd_px2"], expected, rtol=0.01)
    assert msd["pairs"].tolist() == [2000 * (200 - k) for k in range(1, 11)]


@pytest.mark.filterwarnings("ignore:The inplace keyword")
def test_tracks_open_in_trackpy_after_one_rename():
    import trackpy

    rows = brownian(0.5, 0.3, 20, 30, seed=9)
    renamed = rows.rename(columns={"track": "particle", "y_px": "y", "x_px": "x"})
    theirs = trackpy.emsd(renamed, mpp=1.0, fps=1.0, max_lagtime=5)
    ours = mean_squared_displacement(rows, max_lag=5)
    np.testing.assert_allclose(theirs.to_numpy(), ours["msd_px2"], rtol=1e-9)


def test_diffusion_and_localisation_error_are_told_apart():
    fit = fit_diffusion(brownian(0.5, 0.3, 400, 100, seed=2))
    assert abs(fit.d_px2_per_frame - 0.5) < 4 * fit.d_error
    assert fit.d_error < 0.01
    assert fit.sigma_px == pytest.approx(0.3, abs=0.03)
    assert fit.tracks == 400


def test_the_error_of_diffusion_is_the_spread_over_repeats():
    fits = [fit_diffusion(brownian(0.5, 0.3, 30, 40, seed=s)) for s in range(60)]
    spread = np.std([f.d_px2_per_frame for f in fits])
    # a standard deviation of 60 values is good to 9 %
    assert np.mean([f.d_error for f in fits]) == pytest.approx(spread, rel=0.3)


def test_gaps_count_at_their_own_lag():
    rows = pd.DataFrame({"track": 0, "frame": [0, 1, 3], "y_px": [0.0, 1.0, 3.0], "x_px": 0.0})
    msd = mean_squared_displacement(rows, max_lag=3)
    assert msd["pairs"].tolist() == [1, 1, 1]
    assert msd["msd_px2"].tolist() == [1.0, 4.0, 9.0]


def test_path_and_displacement_of_a_walk_there_and_back():
    rows = pd.DataFrame(
        {"track": 7, "frame": [2, 3, 4], "y_px": [0.0, 3.0, 0.0], "x_px": 0.0, "charge": -1}
    )
    found = summarise_tracks(rows).iloc[0]
    assert (found["track"], found["path_px"], found["displacement_px"]) == (7, 6.0, 0.0)
    assert (found["first_frame"], found["last_frame"], found["rows"]) == (2, 4, 3)


def test_a_common_motion_is_found_and_taken_out():
    rng = np.random.default_rng(3)
    still = pd.DataFrame(
        {
            "track": np.repeat(np.arange(40), 6),
            "frame": np.tile([0, 1, 2, 4, 5, 6], 40),
            "y_px": np.repeat(rng.uniform(0, 100, 40), 6),
            "x_px": np.repeat(rng.uniform(0, 100, 40), 6),
        }
    )
    still = still.assign(y_um=0.1 * still["y_px"], x_um=0.1 * still["x_px"])
    shift = 0.3 * still["frame"] ** 1.5
    moved = still.assign(y_px=still["y_px"] + shift, y_um=still["y_um"] + 0.1 * shift)
    # a few run away: a median does not follow them
    moved.loc[moved["track"] < 5, "x_px"] += 5.0 * moved["frame"]
    drift = estimate_drift(moved)
    # over the missing frame 3 the drift is taken as even, so frame 4 is right
    np.testing.assert_allclose(drift["drift_y_px"], 0.3 * drift["frame"] ** 1.5, atol=1e-9)
    np.testing.assert_allclose(drift["drift_x_px"], 0.0, atol=1e-9)
    back = remove_drift(moved, drift)
    np.testing.assert_allclose(back["y_px"], still["y_px"], atol=1e-9)
    np.testing.assert_allclose(back["y_um"], still["y_um"], atol=1e-6)


def test_drift_that_lacks_a_frame_is_refused():
    rows = pd.DataFrame({"track": 0, "frame": [0, 1], "y_px": 0.0, "x_px": 0.0})
    with pytest.raises(ValueError, match="drift: frame 1 is missing"):
        remove_drift(rows, estimate_drift(rows).iloc[:1])


@pytest.fixture
def dipole() -> Motion:
    # squared separation linear in time: x = +-2 sqrt(6.3 - t), dead after frame 6
    rows = [(f, 50.0, 50.0 + c * 2.0 * np.sqrt(6.3 - f), c) for f in range(7) for c in (-1, 1)] + [
        (f, 20.0, 20.0, 1) for f in range(9)
    ]
    table = pd.DataFrame(rows, columns=["frame", "y_px", "x_px", "charge"])
    return link_singularities(table, max_step_px=5.0, frame_shape=(100, 100))


def test_the_square_root_law_gives_the_moment_of_death(dipole):
    separation = pair_separation(dipole.trajectories, dipole.events)
    assert separation["frames_away"].tolist()[-1] == 0
    law = fit_square_root(separation)
    assert law.moment_frame == pytest.approx(6.3, abs=1e-9)
    assert law.rate_px2_per_frame == pytest.approx(16.0, abs=1e-9)
    assert law.residual_px2 < 1e-9


def test_pairs_of_random_waves_part_as_the_root_of_time(slow_speckle):
    table = slow_speckle.table.assign(time_s=slow_speckle.table["frame"].astype(float))
    motion = follow_threads(slow_speckle.fields(), table)
    separation = pair_separation(motion.trajectories, motion.events)
    moment = motion.events.set_index("event")["time_s"]
    errors = [
        fit_square_root(rows, frames=2).moment_frame - moment[event]
        for event, rows in separation.groupby("event")
        if len(rows) >= 2 and rows["separation_px"].iloc[:2].max() < 8
    ]
    assert len(errors) >= 5
    # the next term of the law is a few per cent of a frame at a third of a wavelength
    assert np.median(np.abs(errors)) < 0.1


def test_a_fit_needs_two_rows_of_one_event(dipole):
    separation = pair_separation(dipole.trajectories, dipole.events)
    with pytest.raises(ValueError, match="at least two rows, got 1"):
        fit_square_root(separation.iloc[:1])
    with pytest.raises(ValueError, match="rows of one event"):
        fit_square_root(pd.concat([separation, separation.assign(event=9)]))


def test_lives_tell_how_they_began_and_ended(dipole):
    lives = lifetimes(dipole.trajectories, dipole.events).set_index("charge")
    assert lives.loc[-1, "began"] == "record"
    assert lives.loc[-1, "ended"] == "pair"
    assert lives.loc[-1, "life_frames"] == 6.5


def test_survival_of_a_constant_death_rate_is_exponential_however_many_are_cut_short():
    # product-limit estimate: E. L. Kaplan and P. Meier, J. Am. Stat. Assoc. 53, 457 (1958)
    rng = np.random.default_rng(6)
    death, cut = rng.exponential(10.0, 5000), rng.exponential(15.0, 5000)
    lives = pd.DataFrame(
        {
            "life_frames": np.minimum(death, cut),
            "began": "pair",
            "ended": np.where(death < cut, "pair", "border"),
        }
    )
    found = survival(lives)
    at = np.searchsorted(found["age_frames"], [2.0, 5.0, 10.0, 20.0]) - 1
    expected = np.exp(-np.array([2.0, 5.0, 10.0, 20.0]) / 10.0)
    rows = found.iloc[at]
    assert (np.abs(rows["alive"] - expected) < 4 * rows["error"]).all()
    assert (rows["error"] < 0.02).all()


def test_survival_of_the_worked_textbook_sample():
    # ages 6 6 6 6* 7 9* 10 10* 11* 13 16 17* 19* 20* 22 23 25* 32* 32* 34* 35* (* cut short):
    # the 6-MP arm of E. Freireich et al., Blood 21, 699 (1963), whose product-limit estimate
    # is printed in many textbooks (from memory): 0.857, 0.807, 0.753, 0.690, 0.627, 0.538, 0.448
    ages = [6, 6, 6, 6, 7, 9, 10, 10, 11, 13, 16, 17, 19, 20, 22, 23, 25, 32, 32, 34, 35]
    died = [1, 1, 1, 0, 1, 0, 1, 0, 0, 1, 1, 0, 0, 0, 1, 1, 0, 0, 0, 0, 0]
    lives = pd.DataFrame(
        {
            "life_frames": np.array(ages, dtype=float),
            "began": "pair",
            "ended": np.where(died, "pair", "record"),
        }
    )
    expected = [0.857, 0.807, 0.753, 0.690, 0.627, 0.538, 0.448]
    np.testing.assert_allclose(survival(lives)["alive"], expected, atol=5e-4)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda t: mean_squared_displacement(t, max_lag=0), "max_lag: expected 1 or more"),
        (lambda t: fit_diffusion(t, lags=1), "lags: expected 2 or more"),
        (lambda t: fit_diffusion(t.iloc[:3]), "fewer than two tracks"),
    ],
)
def test_bad_options_are_named(call, message):
    with pytest.raises(ValueError, match=message):
        call(brownian(0.5, 0.0, 2, 10, seed=0))
