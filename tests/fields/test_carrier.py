from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
import skimage.data

from hologyre.fields.carrier import (
    Carrier,
    NoFringes,
    find_carrier,
    follow_carrier,
    rank_candidates,
)
from hologyre.fields.tone import fit_tone


def fringes(
    shape: tuple[int, int], fy: float, fx: float, visibility: float = 0.8, mean: float = 500
) -> np.ndarray:
    y, x = np.arange(shape[0])[:, None], np.arange(shape[1])
    return mean * (1 + visibility * np.cos(2 * np.pi * (fy * y + fx * x) + 0.7))


def found(hologram: np.ndarray, **options: Any) -> Carrier:
    carrier = find_carrier(hologram, **options)
    assert isinstance(carrier, Carrier), carrier
    return carrier


def test_the_tone_of_plain_fringes_attains_the_cramer_rao_bound() -> None:
    # Bound of a complex tone's frequency, Rife and Boorstyn, IEEE Trans. Inf. Theory 20, 591
    # (1974), for two dimensions: sigma^2 / (8 pi^2 |a|^2 sum (y - <y>)^2).
    ny, nx, sigma, amplitude = 64, 72, 30.0, 20.0
    rng = np.random.default_rng(0)
    errors = []
    for _ in range(200):
        fy, fx = 0.123 + rng.uniform(-0.01, 0.01), 0.23 + rng.uniform(-0.01, 0.01)
        clean = fringes((ny, nx), fy, fx, visibility=2 * amplitude / 100, mean=100)
        tone = fit_tone(clean + rng.normal(0, sigma, clean.shape), fy + 0.3 / ny, fx - 0.3 / nx)
        errors.append([tone.fy - fy, tone.fx - fx])
    moment = np.array([nx * ny * (ny**2 - 1) / 12, ny * nx * (nx**2 - 1) / 12])
    bound = sigma / np.sqrt(8 * np.pi**2 * amplitude**2 * moment)
    ratio = np.sqrt(np.mean(np.square(errors), axis=0)) / bound
    # 200 trials: the ratio's own spread is 5 %.
    assert (ratio < 1.15).all()
    assert (ratio > 0.85).all()


@pytest.mark.parametrize("shape", [(200, 220), (129, 257), (64, 64), (1100, 40)])
def test_plain_fringes_are_found_with_their_error(shape: tuple[int, int]) -> None:
    clean = fringes(shape, 0.1234, 0.2345)
    hologram = np.random.default_rng(3).poisson(clean)
    carrier = found(hologram)
    assert carrier.kind == "fringes"
    # Five standard errors.
    assert abs(carrier.fy - 0.1234) < 5 * carrier.sigma_fy
    assert abs(carrier.fx - 0.2345) < 5 * carrier.sigma_fx
    assert carrier.visibility == pytest.approx(0.8, abs=0.03)
    assert 0 < carrier.radius <= carrier.frequency / 3 + 1e-9


def test_a_smooth_object_in_a_beam_keeps_the_tone_and_widens_the_radius() -> None:
    y, x = np.mgrid[:300, :320]
    beam = np.exp(-((y - 150) ** 2 + (x - 160) ** 2) / 8e3)
    cell = 3 * np.exp(-((y - 130) ** 2 + (x - 160) ** 2) / 400)
    light = 500 * beam * (1 + 0.5 * np.cos(2 * np.pi * (0.123 * y + 0.2 * x) + cell))
    carrier = found(np.random.default_rng(0).poisson(light))
    assert carrier.kind == "fringes"
    assert carrier.fy == pytest.approx(0.123, abs=3e-4)
    assert carrier.fx == pytest.approx(0.2, abs=3e-4)
    plain = found(np.random.default_rng(0).poisson(fringes((300, 320), 0.123, 0.2)))
    assert plain.radius < carrier.radius <= carrier.frequency / 3
    assert carrier.visibility == pytest.approx(0.5, abs=0.05)


@pytest.mark.parametrize(("visibility", "full_well"), [(0.8, 1e4), (0.2, 1e3), (0.6, 5e4)])
@pytest.mark.parametrize("shortest", [40.0, 24.0, 12.0])
def test_the_disc_of_dense_speckle_is_found(
    speckle: Callable[..., Any], visibility: float, full_well: float, shortest: float
) -> None:
    scene = speckle(
        (256, 300),
        count=3000,
        shortest_px=shortest,
        visibility=visibility,
        full_well=full_well,
    )
    carrier = found(scene.hologram)
    assert carrier.kind == "speckle"
    # One frame of a statistic whose rms over frames is near 0.07 bin and 0.3 %.
    assert abs(carrier.fy - 0.2013) < 0.35 / 256
    assert abs(carrier.fx - 0.1801) < 0.35 / 300
    assert carrier.radius == pytest.approx(1 / shortest, rel=0.025)
    assert carrier.visibility == pytest.approx(visibility, rel=0.15)


def test_centre_and_radius_over_frames_are_as_good_as_their_errors(
    speckle: Callable[..., Any],
) -> None:
    errors, sigmas = [], []
    for seed in range(10):
        scene = speckle((256, 256), count=2000, seed=seed)
        carrier = found(scene.hologram)
        errors.append([carrier.fy - 0.2013, carrier.fx - 0.1801, carrier.radius - 1 / 24])
        sigmas.append([carrier.sigma_fy, carrier.sigma_fx, carrier.sigma_radius])
    rms = np.sqrt(np.mean(np.square(errors), axis=0))
    # 0.1 bin and 1 %, with the spread of ten frames; errors told within a factor of two.
    assert (rms[:2] * 256 < 0.14).all()
    assert rms[2] * 24 < 0.012
    ratio = np.sqrt(np.mean(np.square(errors) / np.square(sigmas), axis=0))
    assert ((ratio > 0.5) & (ratio < 2)).all()


@pytest.mark.parametrize(
    ("carrier", "conjugate"),
    [((0.2, 0.05), False), ((-0.25, 0.01), True), ((0.0, 0.28), False), ((0.28, 0.0), False)],
)
def test_the_sideband_with_fx_plus_half_fy_positive_is_taken(
    speckle: Callable[..., Any], carrier: tuple[float, float], conjugate: bool
) -> None:
    result = found(speckle((192, 200), carrier=carrier).hologram, conjugate=conjugate)
    assert result.fy == pytest.approx(carrier[0], abs=3e-3)
    assert result.fx == pytest.approx(carrier[1], abs=3e-3)
    other = found(speckle((192, 200), carrier=carrier).hologram, conjugate=not conjugate)
    assert (other.fy, other.fx) == (-result.fy, -result.fx)


def test_a_radius_that_is_given_is_kept(speckle: Callable[..., Any]) -> None:
    assert found(speckle().hologram, radius=0.05).radius == 0.05


@pytest.mark.parametrize("name", ["camera", "coins", "moon", "cell", "clock"])
def test_pictures_without_fringes_have_no_carrier(name: str) -> None:
    result = find_carrier(getattr(skimage.data, name)())
    assert isinstance(result, NoFringes)
    assert not result
    assert "there are no fringes" in result.reason


@pytest.mark.parametrize("shape", [(32, 32), (64, 71), (128, 128), (512, 300)])
@pytest.mark.parametrize("seed", range(5))
def test_noise_has_no_carrier(shape: tuple[int, int], seed: int) -> None:
    rng = np.random.default_rng(seed)
    assert not find_carrier(rng.normal(size=shape))
    assert not find_carrier(rng.poisson(3, shape))


def test_ramps_edges_and_blobs_have_no_carrier() -> None:
    y, x = np.mgrid[:200, :230]
    noise = np.random.default_rng(0).normal(size=x.shape)
    for frame in (x + 2 * y, 100 * (x > 90) + noise, 1e3 * (np.hypot(y - 90, x - 99) < 50) + noise):
        assert not find_carrier(frame)


@pytest.mark.parametrize(
    ("frame", "reason"),
    [
        (np.full((64, 64), 7), "the frame is constant, every pixel is 7"),
        (np.minimum(fringes((64, 64), 0.2, 0.2), 300), "of the pixels are saturated: shorten"),
        (fringes((128, 128), 0.0, 0.5) + np.arange(128) % 2, "the fringes lie at Nyquist"),
    ],
)
def test_unusable_frames_say_why(frame: np.ndarray, reason: str) -> None:
    result = find_carrier(frame)
    assert isinstance(result, NoFringes)
    assert reason in result.reason


@pytest.mark.parametrize(
    ("options", "note"),
    [
        ({"carrier": (0.08, 0.06)}, "overlaps the zero order"),
        ({"carrier": (0.05, 0.47)}, "clipped at Nyquist"),
        ({"visibility": 0.1}, "the fringes are weak"),
        ({"carrier": (0.1, 0.458), "shortest_px": 60.0}, "barely sampled, 2.1 px each"),
    ],
)
def test_notes_say_what_to_do(
    speckle: Callable[..., Any], options: dict[str, Any], note: str
) -> None:
    carrier = found(speckle((256, 256), **options).hologram)
    assert any(note in line for line in carrier.notes), carrier.notes


def test_good_fringes_have_no_notes(speckle: Callable[..., Any]) -> None:
    assert found(speckle(bits=12).hologram).notes == ()


def test_saturation_is_noted(speckle: Callable[..., Any]) -> None:
    hologram = np.minimum(speckle().hologram, 140)
    assert any("pixels are saturated" in note for note in found(hologram).notes)


def test_multiplexed_sidebands_are_ranked_by_power() -> None:
    strong = fringes((256, 256), 0.2, 0.15, visibility=0.5)
    weak = fringes((256, 256), -0.1, 0.3, visibility=0.2)
    hologram = np.random.default_rng(0).poisson(strong + weak)
    first, second = rank_candidates(hologram)[:2]
    assert (first.fy, first.fx) == pytest.approx((0.2, 0.15), abs=2e-3)
    assert (second.fy, second.fx) == pytest.approx((-0.1, 0.3), abs=2e-3)
    assert first.visibility > second.visibility


def test_a_drifting_carrier_is_followed(speckle: Callable[..., Any]) -> None:
    first = found(speckle().hologram)
    moved = follow_carrier(speckle(carrier=(0.2063, 0.1781), seed=3).hologram, first)
    assert isinstance(moved, Carrier)
    assert moved.radius == first.radius
    assert (moved.fy, moved.fx) == pytest.approx((0.2063, 0.1781), abs=2e-3)
    tone = found(np.random.default_rng(1).poisson(fringes((128, 128), 0.2, 0.1)))
    shifted = np.random.default_rng(2).poisson(fringes((128, 128), 0.215, 0.1))
    again = follow_carrier(shifted, tone)
    assert isinstance(again, Carrier)
    assert again.fy == pytest.approx(0.215, abs=1e-4)


def test_fringes_that_vanish_are_lost(speckle: Callable[..., Any]) -> None:
    carrier = found(speckle().hologram)
    blank = np.random.default_rng(0).poisson(500, (256, 288))
    assert isinstance(follow_carrier(blank, carrier), NoFringes)


@pytest.mark.parametrize(
    ("frame", "message"),
    [
        (np.full((64, 64), np.nan), "hologram: 4096 of 4096 pixels are NaN or infinite"),
        (np.zeros((3, 64, 64)), "expected a real .* array, got float64 of shape"),
        (np.zeros((64, 64), complex), "expected a real .* array, got complex128"),
        (np.zeros((16, 64)), "expected at least 32 x 32 pixels"),
    ],
)
def test_frames_of_a_wrong_kind_are_refused(frame: np.ndarray, message: str) -> None:
    with pytest.raises(ValueError, match=message):
        find_carrier(frame)


def test_a_carrier_must_lie_below_nyquist() -> None:
    carrier = Carrier(0.2, 0.1, 0.05)
    with pytest.raises(ValueError, match=r"expected .* <= 0\.5 cycles/px"):
        replace(carrier, fy=0.7)
    with pytest.raises(ValueError, match="radius: expected above 0"):
        replace(carrier, radius=0.0)
    with pytest.raises(ValueError, match="radius: expected above 0"):
        find_carrier(np.zeros((64, 64)), radius=0.7)
    assert carrier.conjugate.conjugate == carrier
