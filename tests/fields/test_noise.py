from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from hologyre.fields.blanks import Blanks
from hologyre.fields.carrier import Carrier
from hologyre.fields.demodulate import demodulate
from hologyre.fields.interpolate import on_pixels
from hologyre.fields.noise import field_noise
from hologyre.fields.pixel_noise import pixel_variance, repeat_variance

CARRIER = Carrier(0.2013, 0.1801, 1 / 24)
GAIN = 255 / 1e4
"""Counts per electron of the simulated camera; shot noise makes it the variance's slope."""


def test_the_line_in_the_counts_is_that_of_the_camera(speckle: Callable[..., Any]) -> None:
    hologram = speckle((384, 448)).hologram.astype(float)
    offset, gain = pixel_variance(hologram, CARRIER)
    bright, dark = np.quantile(hologram, [0.9, 0.2])
    for counts in (bright, dark, hologram.mean()):
        # Shot noise and quantisation to whole counts; 3 % in sigma.
        expected = GAIN * counts + 1 / 12
        assert np.sqrt((offset + gain * counts) / expected) == pytest.approx(1, abs=0.03)


def test_repeated_frames_give_the_same_line() -> None:
    rng = np.random.default_rng(0)
    light = np.linspace(100, 2000, 128 * 128).reshape(128, 128)
    frames = rng.poisson(light * np.array([1, 1.02, 0.99, 1.01])[:, None, None])
    frames = frames + rng.normal(0, 8, frames.shape)
    offset, gain = repeat_variance(frames)
    assert gain == pytest.approx(1, rel=0.05)
    # A line's value at zero counts from counts far above it.
    assert offset == pytest.approx(64, abs=30)


@pytest.mark.parametrize("edges", ["plain", "taper", "fit"])
def test_the_map_is_the_variance_of_repeated_fields(
    speckle: Callable[..., Any], edges: Any
) -> None:
    scene = speckle((160, 180))
    rng = np.random.default_rng(3)
    holograms = scene.expected + rng.normal(size=(60, 160, 180)) * np.sqrt(scene.expected * GAIN)
    fields = on_pixels(demodulate(holograms, CARRIER, edges=edges, saturation=np.inf))
    spread = np.var(fields, axis=0, ddof=1)
    noise = field_noise(holograms[0], CARRIER, edges=edges, saturation=np.inf)
    y, x = np.mgrid[:160, :180]
    map_ = noise.at(y, x)
    assert noise.rms == pytest.approx(np.sqrt(spread.mean()), rel=0.03)
    # Bright and dark parts apart: shot noise follows the light.
    bright = map_ > np.median(map_)
    for part in (bright, ~bright):
        assert np.sqrt(spread[part].mean() / map_[part].mean()) == pytest.approx(1, abs=0.04)


def test_the_total_error_of_the_fit_is_the_noise(speckle: Callable[..., Any]) -> None:
    scene = speckle((256, 288), full_well=2e3)
    field = on_pixels(demodulate(scene.hologram, CARRIER))
    noise = field_noise(scene.hologram, CARRIER)
    y, x = np.mgrid[8:248, 8:280]
    error = np.abs(field - scene.field)[8:248, 8:280] ** 2
    assert np.sqrt((error / noise.at(y, x)).mean()) == pytest.approx(1, abs=0.05)


# sigma_phi = sqrt(2 eta / N) / V, eta the filter's area in (cycles/px)^2: form of
# Ultramicroscopy 50, 269 (1993) (from memory). Values simulated independently.
@pytest.mark.parametrize(
    ("electrons", "visibility", "radius", "sigma"),
    [
        (1e4, 1, 0.1, 0.002508),
        (1e4, 0.5, 0.1, 0.005016),
        (1e3, 0.8, 0.16, 0.015847),
        (2e4, 0.3, 0.16, 0.009449),
    ],
)
def test_phase_noise_is_that_of_shot_noise(
    electrons: float, visibility: float, radius: float, sigma: float
) -> None:
    n = 256
    fy, fx = 90 / n, 85 / n
    y, x = np.mgrid[:n, :n]
    light = electrons * (1 + visibility * np.cos(2 * np.pi * (fy * y + fx * x)))
    holograms = np.random.default_rng(7).poisson(light, (6, n, n)).astype(float)
    carrier = Carrier(fy, fx, radius)
    field = on_pixels(demodulate(holograms, carrier, edges="plain", reach=radius))
    assert np.std(np.angle(field)) == pytest.approx(sigma, rel=0.03)
    # The same from the map: half of the noise is in the phase's direction.
    amplitude = electrons * visibility / 2
    assert np.sqrt(electrons * np.pi * radius**2 / 2) / amplitude == pytest.approx(sigma, rel=1e-3)


def test_the_noise_map_of_a_flat_frame_is_the_filters_area(speckle: Callable[..., Any]) -> None:
    n = 256
    y, x = np.mgrid[:n, :n]
    light = 1000 * (1 + 0.5 * np.cos(2 * np.pi * (64 * y + 51 * x) / n))
    hologram = np.random.default_rng(2).poisson(light).astype(float)
    noise = field_noise(hologram, Carrier(64 / n, 51 / n, 0.05), edges="plain", reach=0.05)
    assert noise.rms == pytest.approx(np.sqrt(1000 * np.pi * 0.05**2), rel=0.02)


def test_an_empty_frame_magnifies_the_noise_where_it_is_dark(speckle: Callable[..., Any]) -> None:
    scene = speckle((128, 128))
    y, x = np.mgrid[:128, :128]
    fade = 25 - 15 * np.tanh((x - 64) / 30)
    empty = 100 + 2 * fade * np.cos(2 * np.pi * (CARRIER.fy * y + CARRIER.fx * x))
    plain = field_noise(scene.hologram, CARRIER)
    divided = field_noise(scene.hologram, CARRIER, blanks=Blanks(empty=empty))
    ratio = divided.at(64, [20, 108]) / plain.at(64, [20, 108])
    assert ratio[1] / ratio[0] == pytest.approx((fade[0, 20] / fade[0, 108]) ** 2, rel=0.05)


def test_noise_between_lattice_points_and_outside_is_finite(speckle: Callable[..., Any]) -> None:
    noise = field_noise(speckle((96, 80)).hologram, CARRIER)
    values = noise.at(np.array([-3.0, 0.5, 47.2, 300.0]), 11.3)
    assert values.shape == (4,)
    assert (values > 0).all()


def test_a_full_spectrum_leaves_nowhere_to_measure() -> None:
    with pytest.raises(ValueError, match="carrier: zero order and sidebands take the whole"):
        field_noise(np.random.default_rng(0).normal(size=(64, 64)), Carrier(0.25, 0.25, 0.3))


def test_frames_with_nan_are_refused() -> None:
    with pytest.raises(ValueError, match="hologram: holds NaN or infinity"):
        field_noise(np.full((64, 64), np.nan), CARRIER)
    with pytest.raises(ValueError, match="frames: expected at least two"):
        repeat_variance(np.zeros((1, 4, 4)))
