from __future__ import annotations

import numpy as np
import pytest

from hologyre.simulate.camera import Aberration, Camera, Dust, record, set_up
from hologyre.simulate.waves import RandomWaves

PLANE = np.ones((200, 240), dtype=np.complex128)
FLAT = Camera(carrier_per_px=(0.0, 0.0), read_noise_e=0.0, exposure=0.5)


def test_fringes_hold_exactly_the_field_promised() -> None:
    # Size, band and carrier as in the exactness limit |f0| > 3B of M. Takeda, H. Ina and
    # S. Kobayashi, JOSA 72, 156 (1982): integer carrier, periodic object, plane reference.
    n, band, shift = 512, 81, 172
    wave = RandomWaves("disc", n / band, seed=3, box_px=n)
    field = wave.on_frame((n, n), 0.0)
    setup = set_up(Camera(carrier_per_px=(shift / n, shift / n)), field, seed=1)
    spectrum = np.roll(np.fft.fft2(setup.expected(field)), (-shift, -shift), axis=(0, 1))
    m = np.fft.fftfreq(n) * n
    spectrum[np.hypot(m[:, np.newaxis], m) >= band] = 0
    promised = setup.field(field)
    error = np.linalg.norm(np.fft.ifft2(spectrum) - promised) / np.linalg.norm(promised)
    assert error < 1e-11


def test_field_multiplies_the_carrier_with_a_plus_sign() -> None:
    y, x = np.indices(PLANE.shape)
    tilt = np.exp(2j * np.pi * (0.03 * y - 0.02 * x))
    camera = Camera(carrier_per_px=(0.11, 0.19), visibility=1.0)
    setup = set_up(camera, tilt, seed=0)
    fringes = np.cos(2 * np.pi * (0.14 * y + 0.17 * x))
    smooth = setup.counts_per_unit * 2
    np.testing.assert_allclose(setup.expected(tilt), smooth * (1 + fringes), atol=1e-9)


@pytest.mark.parametrize("visibility", [1.0, 0.9428, 0.575, 0.2])
def test_fringe_contrast_is_the_visibility(visibility: float) -> None:
    camera = Camera(carrier_per_px=(0.1, 0.05), visibility=visibility)
    hologram = set_up(camera, 3.0 * PLANE, seed=0).expected(3.0 * PLANE)
    high, low = hologram.max(), hologram.min()
    # The carrier's phase takes twenty values on the pixels, 0 and pi among them.
    assert (high - low) / (high + low) == pytest.approx(visibility, rel=1e-9)


@pytest.mark.parametrize(
    ("ratio", "visibility"), [(1, 1.0), (0.5, 0.9428), (0.1, 0.575), (0.01, 0.198)]
)
def test_visibility_sets_the_ratio_of_the_beams(ratio: float, visibility: float) -> None:
    # V = 2 sqrt(Io Ir) / (Io + Ir).
    setup = set_up(Camera(visibility=visibility), PLANE, seed=0)
    # Table values of V have three or four digits, and dV/dratio is small near 1.
    assert setup.object_gain**2 == pytest.approx(ratio, rel=5e-3)


def test_shot_noise_variance_equals_the_electrons() -> None:
    # 16 bits: rounding adds nothing; the standard error of a variance is sqrt(2/n) = 0.65 %.
    setup = set_up(Camera(**{**vars(FLAT), "bits": 16}), PLANE, seed=1)
    electrons = setup.record(PLANE) * (setup.camera.full_well_e / setup.camera.top)
    assert electrons.mean() == pytest.approx(5000, rel=2e-3)
    assert electrons.var() == pytest.approx(5000, rel=0.03)


def test_read_noise_and_rounding_add_their_variances() -> None:
    # sigma_r^2 + (full well / 2^b)^2 / 12 in the dark: 40^2 + 128 electrons^2 at 8 bits, 1e4 e.
    camera = Camera(read_noise_e=40.0, black_level=20.0)
    dark = set_up(camera, PLANE, seed=1).dark() * (camera.full_well_e / camera.top)
    assert dark.var() == pytest.approx(40**2 + (1e4 / 255) ** 2 / 12, rel=0.03)


@pytest.mark.parametrize(
    ("bits", "dtype", "top"),
    [(8, np.uint8, 255), (10, np.uint16, 1023), (12, np.uint16, 4095), (16, np.uint16, 65535)],
)
def test_pixels_fill_their_bits_and_saturate(bits: int, dtype: type, top: int) -> None:
    camera = Camera(bits=bits, exposure=1.5, full_well_e=1e5)
    bright = set_up(camera, PLANE, seed=0).record(PLANE)
    assert bright.dtype == dtype
    # Read noise acts after the full well, so the brightest pixels are at the top or just below.
    assert bright.max() == top
    assert (bright > 0.99 * top).mean() > 0.2


def test_exposure_keeps_its_share_of_pixels_below_its_part_of_the_full_well() -> None:
    field = RandomWaves("disc", 24.0, seed=1, count=80).on_frame((200, 200), 0.0)
    expected = set_up(Camera(exposure=0.9, black_level=7.0), field, seed=0).expected(field) - 7.0
    assert np.mean(expected < 0.9 * 255) == pytest.approx(0.999, abs=1e-4)


def test_noise_can_be_left_out() -> None:
    camera = Camera(shot_noise=False, read_noise_e=0.0, bits=12)
    setup = set_up(camera, PLANE, seed=0)
    # Rounding alone is left: half a count.
    assert np.abs(setup.record(PLANE) - setup.expected(PLANE)).max() <= 0.5


def test_any_frame_can_be_recorded_again_alone() -> None:
    wave = RandomWaves("disc", 24.0, 0.1, seed=3, count=100)
    fields = np.stack([wave.on_frame((60, 70), t) for t in range(3)])
    camera = Camera(vibration_rad=0.2, vibration_per_px=1e-4, hot_pixels=2)
    stack = record(fields, camera, seed=9)
    assert stack.dtype == np.uint8
    np.testing.assert_array_equal(set_up(camera, fields[0], seed=9).record(fields[2], 2), stack[2])
    assert not np.array_equal(record(fields, camera, seed=10), stack)
    np.testing.assert_array_equal(record(fields[0], camera, seed=9), stack[0])


def test_phase_drifts_and_trembles() -> None:
    camera = Camera(drift_rad_per_frame=0.3, vibration_rad=0.05, vibration_per_px=1e-4)
    setup = set_up(camera, PLANE, seed=2)
    pistons = np.array([setup.phase(f)[0, 0] for f in range(400)])
    jumps = pistons - 0.3 * np.arange(400)
    # 400 draws: the standard deviation errs by 3.5 %.
    assert jumps.std() == pytest.approx(0.05, rel=0.12)
    slopes = np.array([setup.phase(f)[1, 0] - setup.phase(f)[0, 0] for f in range(400)])
    assert slopes.std() == pytest.approx(2 * np.pi * 1e-4, rel=0.12)


def test_aberration_is_the_polynomial_written() -> None:
    aberration = Aberration(0.1, 0.2, 0.3, 0.4, 0.5)
    phase = aberration.phase((101, 201))
    assert phase[50, 100] == 0
    # Y = 0, X = 1 at the middle of the right side; Y = -0.5, X = -1 at the top left corner.
    assert phase[50, 200] == pytest.approx(0.2 + 0.3 + 0.4)
    assert phase[0, 0] == pytest.approx(-0.05 - 0.2 + 0.3 * 1.25 + 0.4 * 0.75 + 0.5 * 2 * 0.5)


def test_dust_dims_both_beams_alike_and_far_away_not_at_all() -> None:
    speck = Dust((100.0, 120.0), radius_px=6.0, depth=0.4, blur=3.0)
    clean, dusty = (
        set_up(Camera(dust=dust, carrier_per_px=(0.1, 0.1)), PLANE, seed=0)
        for dust in ((), (speck,))
    )
    ratio = dusty.expected(PLANE) / clean.expected(PLANE)
    np.testing.assert_allclose(ratio / ratio[0, 0], dusty.dust**2, rtol=1e-6)
    rings = dusty.dust[100]
    assert rings.max() > 1.01
    assert rings.min() < 0.99


def test_blanks_show_dark_reference_and_both_beams() -> None:
    camera = Camera(carrier_per_px=(0.0, 0.25), envelope_px=200.0, hot_pixels=3, black_level=4.0)
    setup = set_up(camera, PLANE, seed=5)
    dark, reference = setup.dark().astype(float), setup.reference_alone().astype(float)
    assert np.median(dark) == 4
    assert np.sum(dark > 50) == 3
    # Full well 1e4 on 255 counts: shot noise of 100 counts is 1.6 counts; mean of 48 000 pixels.
    expected = setup.counts_per_unit * np.mean(setup.reference**2)
    assert reference.mean() - dark.mean() == pytest.approx(expected, rel=2e-3)
    assert reference[100, 120] > 1.2 * reference[0, 0]
    empty = setup.empty().astype(float)
    columns = empty.mean(axis=0)
    assert columns[120] - columns[122] > 0.5 * columns[120]


def test_empty_frame_is_as_bright_as_the_object() -> None:
    camera = Camera(visibility=0.6)
    dim, bright = (
        set_up(camera, level * PLANE, seed=0).empty().astype(float) for level in (0.1, 30.0)
    )
    np.testing.assert_array_equal(dim, bright)


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"visibility": 0.0}, "visibility: expected more than 0 and at most 1, got 0.0"),
        ({"coherence": 1.1}, "coherence: expected more than 0 and at most 1, got 1.1"),
        ({"full_well_e": -1.0}, "full_well_e: expected a positive number, got -1.0"),
        ({"exposure": 0.0}, "exposure: expected a positive number, got 0.0"),
        ({"envelope_px": 0.0}, "envelope_px: expected a positive number, got 0.0"),
        ({"read_noise_e": -2.0}, "read_noise_e: expected 0 or more, got -2.0"),
        ({"bits": 7}, "bits: expected 8 to 16, got 7"),
        ({"hot_pixels": -1}, "hot_pixels: expected 0 or more, got -1"),
    ],
)
def test_wrong_settings_are_named(settings: dict, message: str) -> None:
    with pytest.raises(ValueError, match=message):
        Camera(**settings)


def test_wrong_fields_are_named() -> None:
    with pytest.raises(ValueError, match=r"object_field: expected a 2-D array, got shape \(3,\)"):
        set_up(Camera(), np.ones(3), seed=0)
    with pytest.raises(ValueError, match=r"expected finite light, got a mean intensity of 0\.0"):
        set_up(Camera(), np.zeros((4, 4)), seed=0)
    with pytest.raises(ValueError, match=r"expected shape \(200, 240\), got \(4, 4\)"):
        set_up(Camera(), PLANE, seed=0).record(np.ones((4, 4)))
    with pytest.raises(ValueError, match=r"\(y, x\) or \(t, y, x\) with frames, got shape"):
        record(np.ones((0, 4, 4)), Camera(), seed=0)
