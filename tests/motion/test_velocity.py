"""Velocities of singularities, from the field and from tracks."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from hologyre.grid import Window
from hologyre.motion import field_velocity, follow_threads, track_velocity
from hologyre.simulate.waves import RandomWaves
from hologyre.singularities.locate import locate_singularities


def true_velocity(wave, table: pd.DataFrame) -> np.ndarray:
    """v = -J^-1 dE/dt on the formula of the wave."""
    jet = wave.jet(table["y_px"].to_numpy(), table["x_px"].to_numpy(), table["frame"].to_numpy())
    rows = [np.stack([part.real, part.imag]) for part in (jet.dy, jet.dx, jet.dt)]
    jacobian = np.stack(rows[:2], axis=-1).transpose(1, 0, 2)
    return -np.linalg.solve(jacobian, rows[2].T[..., None])[..., 0]


def test_the_field_gives_the_exact_velocity(slow_speckle):
    found = field_velocity(slow_speckle.fields(), slow_speckle.table)
    table = slow_speckle.table.sort_values(["frame", "singularity"])
    true = true_velocity(slow_speckle.wave, table)
    assert found["singularity"].tolist() == table["singularity"].tolist()
    error = np.hypot(*(found[["vy_px_per_frame", "vx_px_per_frame"]].to_numpy() - true).T)
    speed = np.hypot(*true.T)
    inner = table["frame"].between(2, 5).to_numpy()
    # the rate is good to 1e-3 in the record's middle; velocities of near-degenerate zeros less
    assert np.median(error[inner] / speed[inner]) < 3e-3
    assert np.quantile(error[inner] / speed[inner], 0.9) < 2e-2


def test_the_phase_of_a_frame_does_not_change_velocities(slow_speckle):
    rng = np.random.default_rng(4)
    turned = [
        f.with_values(f.values * np.exp(1j * rng.uniform(-3, 3))) for f in slow_speckle.fields()
    ]
    a = field_velocity(slow_speckle.fields(), slow_speckle.table)
    b = field_velocity(turned, slow_speckle.table)
    np.testing.assert_allclose(a["vy_px_per_frame"], b["vy_px_per_frame"], rtol=1e-6)


def test_errors_of_velocities_tell_how_far_off_they_are(field_at):
    wave = RandomWaves("disc", 12.0, 0.5, seed=2, box_px=144.0)
    window = Window(0.0, 143.0, 0.0, 143.0)
    rng = np.random.default_rng(0)
    fields = [field_at(wave, float(t), (144.0, 144.0), (30, 30), window) for t in range(8)]
    table = pd.concat(
        [locate_singularities(fields[t]).assign(frame=t) for t in (3, 4)], ignore_index=True
    ).assign(singularity=lambda rows: range(len(rows)))
    noise = 0.02 * rng.normal(size=(8, 30, 30, 2)).view(complex)[..., 0]
    noisy = [f.with_values(f.values + n) for f, n in zip(fields, noise, strict=True)]
    # the table tells the noise: covariance (E|n|^2 / 2) (J^T J)^-1 with E|n|^2 = 2 * 0.02^2
    jet = wave.jet(table["y_px"], table["x_px"], table["frame"])
    det = np.abs(jet.dx.real * jet.dy.imag - jet.dy.real * jet.dx.imag)
    table = table.assign(
        sigma_y_px=0.02 * np.abs(jet.dx) / det, sigma_x_px=0.02 * np.abs(jet.dy) / det
    )
    found = field_velocity(noisy, table)
    true = true_velocity(wave, table)
    for axis, name in enumerate(("vy", "vx")):
        pull = (found[f"{name}_px_per_frame"] - true[:, axis]) / found[f"sigma_{name}_px_per_frame"]
        # what the memory leaves open is learnt from some hundred coherence areas
        assert 0.6 < np.median(np.abs(pull)) / 0.6745 < 1.6


def test_speeds_of_random_waves_follow_the_published_law(field_at):
    # P(v) = 2 v w^2 / (v^2 + w^2)^2, so a median of w = sqrt(2 Var(omega) / <k^2>),
    # P(v > 2 w) = 1/5 and P(v > 3 w) = 1/10: it follows for a rate independent of the gradient
    # from M. V. Berry and M. R. Dennis, Proc. R. Soc. Lond. A 456, 2059 (2000).
    window = Window(0.0, 191.0, 0.0, 191.0)
    speeds = []
    for seed in range(3):
        wave = RandomWaves("disc", 8.0, 0.1, seed=seed, box_px=192.0)
        zeros = locate_singularities(field_at(wave, 0.0, (192.0, 192.0), (60, 60), window))
        w = np.sqrt(2 * wave.frequency_variance / wave.mean_square_k)
        speeds.append(np.hypot(*true_velocity(wave, zeros).T) / w)
    speed = np.concatenate(speeds)
    # 2,700 zeros that are not independent: four standard errors of as many independent ones
    n = len(speed)
    assert np.median(speed) == pytest.approx(1.0, abs=4 / np.sqrt(n))
    assert np.mean(speed > 2) == pytest.approx(0.2, abs=4 * np.sqrt(0.16 / n))
    assert np.mean(speed > 3) == pytest.approx(0.1, abs=4 * np.sqrt(0.09 / n))


def test_tracks_at_constant_speed_have_that_velocity_and_its_error():
    rows = pd.DataFrame({"track": 0, "frame": [3, 4, 6], "sigma_y_px": 0.3, "sigma_x_px": 0.4})
    rows = rows.assign(y_px=2.0 * rows["frame"], x_px=-0.5 * rows["frame"])
    found = track_velocity(rows)
    np.testing.assert_allclose(found["vy_px_per_frame"], 2.0)
    np.testing.assert_allclose(found["vx_px_per_frame"], -0.5)
    expected = 0.3 * np.sqrt(2) / np.array([1, 3, 2])
    np.testing.assert_allclose(found["sigma_vy_px_per_frame"], expected)


def test_a_track_of_one_row_has_no_velocity():
    found = track_velocity(pd.DataFrame({"track": [0], "frame": [1], "y_px": [1.0], "x_px": [1.0]}))
    assert found["vy_px_per_frame"].isna().all()


def test_both_velocities_agree_on_slow_zeros(slow_speckle):
    motion = follow_threads(slow_speckle.fields(), slow_speckle.table)
    tracks = track_velocity(motion.trajectories).assign(
        singularity=motion.trajectories["singularity"]
    )
    both = field_velocity(slow_speckle.fields(), slow_speckle.table).merge(
        tracks, on=["frame", "singularity"], suffixes=("_field", "_track")
    )
    difference = np.abs(both["vy_px_per_frame_field"] - both["vy_px_per_frame_track"])
    # central differences err by the third derivative of a path, one-sided ones by the second
    assert difference.median() < 0.1
