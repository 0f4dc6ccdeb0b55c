from __future__ import annotations

from typing import get_args

import numpy as np
import pytest

from hologyre.grid import Window
from hologyre.simulate.random_waves import Spectrum
from hologyre.simulate.truth import find_zeros
from hologyre.simulate.waves import RandomWaves


def test_mean_intensity_is_one_and_contrast_that_of_speckle() -> None:
    # <I^2> / <I>^2 = 2 for a Gaussian field: J. W. Goodman, Speckle Phenomena in Optics; a sum of
    # N equal waves has 2 - <|a|^4> / N more exactly, 1 % less here. 4e4 far points: errors 0.5 %
    # and 1.6 %.
    wave = RandomWaves("disc", 24.0, seed=2, count=400)
    y, x = np.random.default_rng(0).uniform(-1e6, 1e6, (2, 40_000))
    intensity = np.abs(wave.field(y, x, 0.0)) ** 2
    assert intensity.mean() == pytest.approx(1.0, abs=0.02)
    assert (intensity**2).mean() / intensity.mean() ** 2 == pytest.approx(2.0, abs=0.07)


@pytest.mark.parametrize("spectrum", get_args(Spectrum))
def test_drawn_wavevectors_follow_the_spectrum(spectrum: Spectrum) -> None:
    wave = RandomWaves(spectrum, 24.0, seed=1, count=20_000)
    k = np.hypot(wave.modes.ky, wave.modes.kx)
    assert k.max() <= 2 * np.pi / 24 * (1 + 1e-12)
    # Spread of k^2 over its mean at most 1; 20 000 draws weighted at random: 1 %.
    assert wave.mean_square_k == pytest.approx(wave.expected_mean_square_k, rel=0.03)


@pytest.mark.parametrize(("spectrum", "draws"), [("ring", 10), ("disc", 14), ("gauss", 40)])
def test_density_of_zeros_is_mean_square_wavevector_over_four_pi(
    spectrum: Spectrum, draws: int
) -> None:
    # M. V. Berry and M. R. Dennis, Proc. R. Soc. Lond. A 456, 2059 (2000).
    box, shortest = 192.0, 24.0
    counts, theory = [], []
    for seed in range(draws):
        wave = RandomWaves(spectrum, shortest, seed=seed, box_px=box)
        zeros = find_zeros(wave, Window(0.0, box, 0.0, box))
        assert zeros["charge"].sum() == 0
        counts.append(len(zeros))
        theory.append(box**2 * wave.mean_square_k / (4 * np.pi))
    error = np.std(np.array(counts) - theory, ddof=1) / np.sqrt(len(counts))
    assert abs(np.mean(counts) - np.mean(theory)) < 0.01 * np.mean(theory) + 3 * error
    # The test would notice a few percent.
    assert error < 0.04 * np.mean(theory)


def test_box_is_the_period_of_the_field() -> None:
    wave = RandomWaves("gauss", 20.0, seed=3, box_px=130.0)
    y, x = np.random.default_rng(0).uniform(0, 130, (2, 20))
    np.testing.assert_allclose(wave.field(y + 130, x - 260, 0.7), wave.field(y, x, 0.7), atol=1e-11)


def test_speeds_of_zeros_follow_the_law_of_a_gaussian_field() -> None:
    # P(v < V) = V^2 / (V^2 + w^2), w^2 = 2 Var(omega) / <k^2>: median w, P(v > 2 w) = 1/5.
    # Berry and Dennis (2000); two-dimensional form derived from v = -J^-1 psi_t.
    relative = []
    for seed in range(6):
        wave = RandomWaves("disc", 24.0, 0.1, seed=seed, count=300)
        zeros = find_zeros(wave, Window(0.0, 300.0, 0.0, 300.0))
        jet = wave.jet(zeros["y_px"], zeros["x_px"], 0.0)
        jacobian = jet.dx.real * jet.dy.imag - jet.dx.imag * jet.dy.real
        vx = (jet.dt.imag * jet.dy.real - jet.dt.real * jet.dy.imag) / jacobian
        vy = (jet.dt.real * jet.dx.imag - jet.dt.imag * jet.dx.real) / jacobian
        w = np.sqrt(2 * wave.frequency_variance / wave.mean_square_k)
        relative.append(np.hypot(vx, vy) / w)
    speeds = np.concatenate(relative)
    # About 1500 zeros: the median errs by w / sqrt(n) = 2.6 %, the share by 1 %; three of each.
    assert len(speeds) > 1200
    assert np.median(speeds) == pytest.approx(1.0, abs=0.08)
    assert np.mean(speeds > 2) == pytest.approx(0.2, abs=0.03)


def test_a_drying_clock_slows_the_same_path() -> None:
    free = RandomWaves("disc", 24.0, 0.1, seed=4, count=50)
    slow = RandomWaves("disc", 24.0, 0.1, seed=4, count=50, slowing_frames=10.0)
    tau = 10 * (1 - np.exp(-2.0))
    np.testing.assert_allclose(slow.field(3.0, 4.0, 20.0), free.field(3.0, 4.0, tau), atol=1e-12)
    ratio = slow.rate(3.0, 4.0, 20.0) / free.rate(3.0, 4.0, tau)
    assert ratio == pytest.approx(np.exp(-2.0), rel=1e-9)


def test_the_same_seed_gives_the_same_waves() -> None:
    one, other = (RandomWaves("gauss", 24.0, 0.1, seed=s).modes for s in (7, 7))
    for a, b in zip(one, other, strict=True):
        np.testing.assert_array_equal(a, b)
    different = RandomWaves("gauss", 24.0, 0.1, seed=8).modes
    assert not np.array_equal(one.ky, different.ky)


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"spectrum": "square"}, "spectrum: expected one of ring, disc, gauss, got 'square'"),
        ({"shortest_px": 0.0}, "shortest_px: expected a positive number, got 0.0"),
        ({"count": 0}, "count: expected a positive number, got 0"),
        ({"spread_rad_per_frame": -1.0}, "spread_rad_per_frame: expected 0 or more, got -1.0"),
        ({"slowing_frames": 0.0}, "slowing_frames: expected a positive number, got 0.0"),
        ({"box_px": 30.0}, "box_px: expected more than two shortest wavelengths, got 30.0"),
    ],
)
def test_wrong_settings_are_named(settings: dict, message: str) -> None:
    good = {"spectrum": "disc", "shortest_px": 24.0}
    with pytest.raises(ValueError, match=message):
        RandomWaves(**(good | settings))
