from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from hologyre.fields.blanks import Blanks
from hologyre.fields.carrier import Carrier
from hologyre.fields.demodulate import demodulate, reading_radius
from hologyre.fields.interpolate import on_pixels

N = 512


def round_trip(radius_bins: int, carrier_bins: tuple[int, int], precision: Any = "double") -> float:
    """Relative error of a band-limited random object recovered with a plane reference."""
    rng = np.random.default_rng(5)
    k = np.fft.fftfreq(N, 1 / N)
    disc = np.hypot(k[:, None], k[None, :]) <= radius_bins
    spectrum = (rng.normal(size=(N, N)) + 1j * rng.normal(size=(N, N))) * disc
    truth = np.fft.ifft2(spectrum)
    truth /= np.sqrt((np.abs(truth) ** 2).mean())
    fy, fx = carrier_bins[0] / N, carrier_bins[1] / N
    y, x = np.mgrid[:N, :N]
    hologram = np.abs(1 + truth * np.exp(2j * np.pi * (fy * y + fx * x))) ** 2
    carrier = Carrier(fy, fx, radius_bins / N)
    field = on_pixels(demodulate(hologram, carrier, edges="plain", precision=precision))
    return float(np.linalg.norm(field - truth) / np.linalg.norm(truth))


# Fourier demodulation: Takeda, Ina and Kobayashi, J. Opt. Soc. Am. 72, 156 (1982). No overlap
# iff |f0| > 3 B: Goodman, Introduction to Fourier Optics, off-axis holography (from memory).
@pytest.mark.parametrize(
    ("radius", "carrier"), [(81, (172, 172)), (82, (174, 174)), (60, (192, 0)), (60, (0, -192))]
)
def test_demodulation_is_exact_when_orders_do_not_overlap(
    radius: int, carrier: tuple[int, int]
) -> None:
    # Rounding of double transforms; single keeps 1e-5.
    assert round_trip(radius, carrier) < 1e-11


def test_single_precision_keeps_five_digits() -> None:
    assert round_trip(81, (172, 172), "single") < 1e-5


@pytest.mark.parametrize(
    ("radius", "carrier", "error"),
    [
        (85, (171, 171), 1.9e-2),
        (66, (189, 0), 1.2e-2),
        (81, (120, 120), 0.33),
        (64, (192, 0), 2e-3),  # touching exactly: the inequality is strict
    ],
)
def test_overlapping_orders_spoil_the_field(
    radius: int, carrier: tuple[int, int], error: float
) -> None:
    # The error depends on the random object at the rim: within a factor of two.
    assert error / 2 < round_trip(radius, carrier) < error * 2


def plane_waves(shape: tuple[int, int], count: int = 40) -> np.ndarray:
    rng = np.random.default_rng(8)
    y, x = np.mgrid[: shape[0], : shape[1]]
    field = np.zeros(shape, dtype=complex)
    for _ in range(count):
        k = 2 * np.pi / 24 * np.sqrt(rng.uniform())
        angle = rng.uniform(0, 2 * np.pi)
        amplitude = rng.normal() + 1j * rng.normal()
        field += amplitude * np.exp(1j * k * (np.cos(angle) * x + np.sin(angle) * y))
    return field / np.sqrt(2 * count)


def hologram_of(field: np.ndarray, carrier: Carrier, offset: float = 0.0) -> np.ndarray:
    y, x = np.mgrid[: field.shape[0], : field.shape[1]]
    wave = np.exp(2j * np.pi * (carrier.fy * y + carrier.fx * x))
    return np.abs(1 + 0.4 * field * wave) ** 2 * 100 + offset


CARRIER = Carrier(0.2013, 0.1801, 1 / 18)


@pytest.mark.parametrize(("edges", "error"), [("plain", 0.03), ("taper", 0.02), ("fit", 0.002)])
def test_the_field_is_in_counts_and_has_no_tilt_left(edges: Any, error: float) -> None:
    truth = plane_waves((200, 231))
    field = on_pixels(demodulate(hologram_of(truth, CARRIER), CARRIER, edges=edges))
    inner = (slice(60, -60), slice(60, -60))
    off = field[inner] - 40 * truth[inner]
    # Leakage of the edges, of which the fit has next to none (no noise here).
    assert np.sqrt((np.abs(off) ** 2).mean()) < error * 40


def test_the_fit_is_good_up_to_the_border() -> None:
    truth = plane_waves((200, 231))
    field = on_pixels(demodulate(hologram_of(truth, CARRIER), CARRIER))
    error = np.abs(field - 40 * truth)[4:-4, 4:-4]
    assert np.sqrt((error**2).mean()) < 0.01 * 40


def test_the_fit_tells_the_zero_order_apart_in_the_tightest_geometry() -> None:
    # Carrier just beyond three radii at 45 degrees, so that the bands' rectangles overlap.
    truth = plane_waves((200, 231))
    carrier = Carrier(0.1, 0.1, 1 / 23)
    field = on_pixels(demodulate(hologram_of(truth, carrier), carrier))
    error = np.abs(field - 40 * truth)[24:-24, 24:-24]
    assert np.sqrt((error**2).mean()) < 0.01 * 40


def test_band_and_full_sampling_agree_for_the_fit() -> None:
    hologram = hologram_of(plane_waves((64, 81), 5), CARRIER)
    fields = [
        demodulate(hologram, CARRIER, sampling=s, precision="double") for s in ("band", "full")
    ]
    assert np.allclose(on_pixels(fields[0]), on_pixels(fields[1]), rtol=0, atol=1e-6 * 40)


def test_masked_and_saturated_pixels_do_not_touch_the_fit() -> None:
    truth = plane_waves((150, 160))
    clean = hologram_of(truth, CARRIER)
    rng = np.random.default_rng(4)
    masked = rng.uniform(size=clean.shape) < 0.05
    spoilt = np.where(masked, 1e6, clean)
    field = demodulate(spoilt, CARRIER, valid=~masked)
    error = np.abs(on_pixels(field) - 40 * truth)[8:-8, 8:-8]
    assert np.sqrt((error**2).mean()) < 0.02 * 40
    level = float(np.quantile(clean, 0.998))
    clipped = np.minimum(clean, level)
    field = demodulate(clipped, CARRIER)
    error = np.abs(on_pixels(field) - 40 * truth)[8:-8, 8:-8]
    assert np.sqrt((error**2).mean()) < 0.015 * 40
    taken = demodulate(clipped, CARRIER, saturation=np.inf)
    worse = np.abs(on_pixels(taken) - 40 * truth)[8:-8, 8:-8]
    assert np.sqrt((worse**2).mean()) > 2 * np.sqrt((error**2).mean())


def test_masked_pixels_may_hold_nan() -> None:
    hologram = hologram_of(plane_waves((96, 96), 9), CARRIER)
    valid = np.ones(hologram.shape, dtype=bool)
    valid[40:43, 50] = False
    expected = demodulate(hologram, CARRIER, valid=valid)
    hologram[~valid] = np.nan
    found = demodulate(hologram, CARRIER, valid=valid)
    assert np.array_equal(found.values, expected.values)


def test_a_frame_mostly_saturated_is_refused() -> None:
    frame = np.full((64, 64), 255, dtype=np.uint8)
    frame[:20] = 100
    with pytest.raises(ValueError, match="only 31% of a frame's pixels are usable"):
        demodulate(frame, CARRIER)


def test_plain_reads_wider_only_where_there_is_room() -> None:
    assert reading_radius(Carrier(0.25, 0.2, 0.04), (512, 512)) == pytest.approx(1.7 * 0.04)
    touching = Carrier(0.15, 0.0, 0.05)
    assert reading_radius(touching, (512, 512)) == touching.radius
    assert reading_radius(Carrier(0.2, 0.44, 0.05), (512, 512)) == pytest.approx(0.06)


def test_the_other_sideband_holds_the_conjugate() -> None:
    hologram = hologram_of(plane_waves((128, 140)), CARRIER)
    field = on_pixels(demodulate(hologram, CARRIER, precision="double"))
    mirrored = on_pixels(demodulate(hologram, CARRIER.conjugate, precision="double"))
    assert np.allclose(mirrored, field.conj(), atol=1e-11)


def test_a_stack_is_its_frames() -> None:
    frames = np.stack([hologram_of(plane_waves((64, 80), n), CARRIER) for n in (5, 9)])
    stack = demodulate(frames, CARRIER)
    for values, frame in zip(stack.values, frames, strict=True):
        assert np.array_equal(values, demodulate(frame, CARRIER).values)


def test_dark_and_reference_blanks_do_not_touch_the_sideband_of_a_clean_hologram() -> None:
    truth = plane_waves((128, 128))
    dark = np.full((128, 128), 7.0)
    plain = demodulate(hologram_of(truth, CARRIER), CARRIER, precision="double")
    blanks = Blanks(dark=dark, reference=dark + 100)
    cleaned = demodulate(
        hologram_of(truth, CARRIER, offset=7.0), CARRIER, blanks=blanks, precision="double"
    )
    # A constant sits in the zero order alone.
    assert np.allclose(cleaned.values, plain.values, atol=1e-12)


def test_an_empty_frame_takes_the_aberration_out() -> None:
    y, x = np.mgrid[:256, :256]
    fade = np.exp(-(((y - 128) / 70.0) ** 2) - ((x - 128) / 70.0) ** 2)
    aberration = np.exp(1j * ((y - 128) ** 2 + (x - 110) ** 2) / 4e3)
    truth = fade * np.exp(0.5j * fade)
    empty = hologram_of(fade * aberration, CARRIER)
    hologram = hologram_of(truth * aberration, CARRIER)
    field = on_pixels(demodulate(hologram, CARRIER, edges="plain", blanks=Blanks(empty=empty)))
    inner = (slice(78, 178), slice(78, 178))
    phase = np.angle(field[inner] * np.exp(-0.5j * fade[inner]))
    assert np.ptp(phase) < 2e-3


def test_where_the_empty_frame_is_dark_the_field_stays_finite() -> None:
    flat = np.ones((96, 96), dtype=complex)
    hole = flat.copy()
    hole[30:60, 30:60] = 0
    field = demodulate(
        hologram_of(flat, CARRIER), CARRIER, blanks=Blanks(empty=hologram_of(hole, CARRIER))
    )
    modulus = np.abs(on_pixels(field))
    assert np.isfinite(modulus).all()
    # Divided by no less than 0.05 of the median.
    assert modulus.max() < 25 * np.median(modulus)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"edges": "none"}, "edges: expected one of plain, taper, fit"),
        ({"sampling": "half"}, "sampling: expected one of band, full, got 'half'"),
        ({"window": "box"}, "window: expected one of disc, hann, got 'box'"),
        ({"window": "hann"}, "window: edges='fit' takes 'disc', got 'hann'"),
        ({"precision": "half"}, "precision: expected one of single, double, got 'half'"),
        ({"blanks": Blanks(dark=np.zeros((3, 3)))}, r"blanks.dark: shape \(3, 3\) differs"),
    ],
)
def test_wrong_options_are_named(arguments: dict[str, Any], message: str) -> None:
    with pytest.raises(ValueError, match=message):
        demodulate(np.ones((64, 64)), CARRIER, **arguments)


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_a_frame_with_nan_or_infinity_is_refused(bad: float) -> None:
    hologram = hologram_of(plane_waves((64, 64), 3), CARRIER)
    hologram[3, 4] = bad
    with pytest.raises(ValueError, match="holograms: a frame holds NaN or infinity"):
        demodulate(hologram, CARRIER)


def test_blank_frames_are_checked() -> None:
    with pytest.raises(ValueError, match="dark: holds NaN or infinity"):
        Blanks(dark=np.full((4, 4), np.nan))
    with pytest.raises(ValueError, match="blank frames differ in shape"):
        Blanks(dark=np.zeros((4, 4)), empty=np.zeros((4, 5)))
    with pytest.raises(ValueError, match=r"empty: expected a real \(y, x\) frame"):
        Blanks(empty=np.zeros(4))
