from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from hologyre.fields.bands import Band
from hologyre.fields.interpolate import evaluate, on_pixels
from hologyre.fields.refocus import refocus, transfer_function
from hologyre.grid import Field, Grid
from hologyre.optics import Optics


def optics(wavelength_um: float, pixel_um: float, index: float = 1.0) -> Optics:
    return Optics(
        wavelength_nm=1e3 * wavelength_um,
        camera_pixel_um=pixel_um,
        magnification=1.0,
        medium_index=index,
    )


def on_grid(values: np.ndarray, radius: float = 0.5) -> Field:
    return Field(values.astype(complex), Grid.pixels(values.shape), radius_per_px=radius)


# Talbot, Phil. Mag. 11, 196 (1881) (from memory). Orders 0 and +-1 repeat exactly at
# lambda / (1 - sqrt(1 - lambda^2 / a^2)).
@pytest.mark.parametrize(
    ("period", "wavelength", "distance"),
    [
        (10, 0.5, 399.749844),
        (5, 0.532, 93.718205),
        (2, 0.6328, 12.317483),
        (1, 0.5, 3.732051),
    ],
)
def test_a_grating_images_itself_at_the_exact_talbot_distance(
    period: float, wavelength: float, distance: float
) -> None:
    exact = wavelength / (1 - np.sqrt(1 - wavelength**2 / period**2))
    assert exact == pytest.approx(distance, abs=1e-6)
    x = np.arange(32) / 32
    grating = on_grid(np.tile(1 + 0.6 * np.cos(2 * np.pi * x), (8, 1)))
    light = optics(wavelength, period / 32)
    image = refocus(grating, exact, optics=light, edges="periodic")
    assert np.allclose(np.abs(image.values) ** 2, np.abs(grating.values) ** 2, atol=1e-10)
    half = refocus(grating, exact / 2, optics=light, edges="periodic")
    # Half way the image is shifted by half a period.
    assert np.allclose(np.abs(half.values) ** 2, (1 - 0.6 * np.cos(2 * np.pi * x)) ** 2, atol=1e-10)


def random_periodic(seed: int = 0) -> Field:
    band = Band((96, 80), (96, 80), (0.21, 0.13), 0.1)
    rng = np.random.default_rng(seed)
    shape = band.weights().shape
    spectrum = (rng.normal(size=shape) + 1j * rng.normal(size=shape)) * band.weights()
    return band.field(np.asarray(spectrum, dtype=complex), "band")


def test_forth_and_back_returns_the_field_and_energy_is_kept() -> None:
    light = optics(0.5, 0.3)
    field = random_periodic()
    there = refocus(field, 57.3, optics=light, edges="periodic")
    back = refocus(there, -57.3, optics=light, edges="periodic")
    scale = np.abs(field.values).max()
    assert np.abs(on_pixels(back) - on_pixels(field)).max() < 1e-12 * scale
    energy = [np.sum(np.abs(on_pixels(f)) ** 2) for f in (field, there)]
    assert energy[1] == pytest.approx(energy[0], rel=1e-12)


def test_distances_add_up() -> None:
    light = optics(0.5, 0.3)
    field = random_periodic()
    twice = refocus(
        refocus(field, 20, optics=light, edges="periodic"), 31, optics=light, edges="periodic"
    )
    once = refocus(field, 51, optics=light, edges="periodic")
    assert np.allclose(twice.values, once.values, atol=1e-12 * np.abs(once.values).max())


def test_a_medium_shortens_the_wave() -> None:
    field = random_periodic()
    dense = refocus(field, 10, optics=optics(0.665, 0.3, 1.33), edges="periodic")
    same = refocus(field, 10, optics=optics(0.5, 0.3), edges="periodic")
    assert np.allclose(dense.values, same.values, atol=1e-11 * np.abs(same.values).max())


def test_the_band_limit_is_that_of_the_window() -> None:
    # Matsushima and Shimobaba, Opt. Express 17, 19662 (2009): with a window S padded to 2 S,
    # NA is kept up to z = S sqrt(1 - NA^2) / NA; 177.36 um for 1024 x 0.1 um and NA 0.5.
    n, wavelength, pixel = 2048, 0.5, 0.1
    field = on_grid(np.zeros((4, n)))
    kept = transfer_function(field, (1, n), 177.36, optics(wavelength, pixel))[0] != 0
    highest = np.abs(np.arange(n) - n // 2)[kept].max() / (n * pixel) * wavelength
    assert highest == pytest.approx(0.5, abs=wavelength / (n * pixel))


# Laguerre-Gauss beams: Siegman, Lasers (from memory).
@pytest.mark.parametrize("charge", [0, 1, 2])
def test_a_vortex_beam_spreads_and_turns_as_laguerre_and_gauss_say(charge: int) -> None:
    waist, wavelength, pixel, n = 100.0, 0.633, 4.0, 512
    axis = (np.arange(n) - n / 2) * pixel
    x, y = np.meshgrid(axis, axis)
    beam = (x + 1j * y) ** charge * np.exp(-(x**2 + y**2) / waist**2)
    rayleigh = np.pi * waist**2 / wavelength
    light = optics(wavelength, pixel)
    moved = refocus(on_grid(beam, 0.05), rayleigh, optics=light)
    r = np.linspace(2, 250, 400)
    line = evaluate(moved, n / 2, n / 2 + r / pixel)[0]
    intensity = np.abs(line) ** 2
    if charge:
        top = r[np.argmax(intensity)]
        # w sqrt(l / 2) with w = sqrt 2 waist; step of the radii.
        assert top == pytest.approx(np.sqrt(2) * waist * np.sqrt(charge / 2), abs=0.7)
    else:
        centre = evaluate(moved, n / 2, n / 2)[0]
        assert np.abs(centre) ** 2 == pytest.approx(0.5, abs=5e-4)
    # Gouy's phase -(l + 1) atan(z / zR), the curvature's k r^2 / 2R taken out.
    curved = np.pi * r**2 / (wavelength * 2 * rayleigh)
    phase = np.angle(line * np.exp(-2j * np.pi * rayleigh / wavelength - 1j * curved))
    turned = np.exp(1j * phase[intensity > 0.1 * intensity.max()])
    expected = np.exp(-1j * (charge + 1) * np.pi / 4)
    # Exact waves against the paraxial formula.
    assert np.abs(turned - expected).max() < 2e-3


def test_light_on_the_axis_of_an_aperture_is_that_of_rayleigh_and_sommerfeld() -> None:
    # U = e^{ikz} - (z / R) e^{ikR}, R^2 = z^2 + a^2; JOSA 51, 1050 (1961) (from memory). With
    # a = 5, z = 3, lambda = 0.5 um: 1.805635 behind an aperture, 0.264706 behind a disc.
    wavelength, pixel, a, z, n = 0.5, 0.08, 5.0, 3.0, 256
    axis = (np.arange(n) - n / 2) * pixel
    r = np.hypot(axis[:, None], axis[None, :])
    aperture = np.clip((a - r) / pixel + 0.5, 0, 1)
    moved = refocus(on_grid(aperture, 0.49), z, optics=optics(wavelength, pixel))
    through = complex(evaluate(moved, n / 2, n / 2)[0])
    assert abs(through) ** 2 == pytest.approx(1.805635, rel=0.02)
    spot = np.exp(2j * np.pi * z / wavelength) - through
    # Pixels of the rim: two hundredths of the incident wave.
    assert abs(spot) == pytest.approx(np.sqrt(0.264706), abs=0.02)


def test_a_straight_edge_makes_fresnels_fringes() -> None:
    # Born and Wolf, Principles of Optics, section 8.7 (from memory).
    wavelength, pixel, z, n = 0.5, 0.5, 200.0, 4096
    x = (np.arange(n) - n / 4) * pixel
    edge = np.clip(x / pixel + 0.5, 0, 1) * np.exp(-((np.maximum(x - 600, 0) / 200) ** 2))
    moved = refocus(
        on_grid(np.tile(edge, (4, 1))), z, optics=optics(wavelength, pixel), edges="periodic"
    )
    w = np.array([0, 1.217198, 1.872519, 2.344485, 2.739008])
    found = np.abs(evaluate(moved, 0.0, n / 4 + w * np.sqrt(wavelength * z / 2) / pixel)[0]) ** 2
    assert found == pytest.approx([0.25, 1.370443, 0.778251, 1.199271, 0.843162], rel=0.01)


def test_a_circular_pupil_makes_airys_rings() -> None:
    # Zeros of J1: 3.831706, 7.015587 over 2 pi NA / lambda.
    band = Band((512, 512), (512, 512), (0.0, 0.0), 0.05)
    field = band.field(band.weights().astype(complex), "band")
    r = np.linspace(8, 30, 2000)
    value = evaluate(field, 0.0, r)[0].real
    zeros = r[:-1][np.diff(np.sign(value)) != 0]
    # A pupil of whole bins.
    assert zeros[:2] == pytest.approx(np.array([3.831706, 7.015587]) / (2 * np.pi * 0.05), rel=0.01)


def test_a_zone_plate_focuses_at_its_length() -> None:
    # r_n^2 = n lambda f + n^2 lambda^2 / 4: 79.54936, 112.50067, 137.78571 um for n = 1 to 3,
    # f = 10 mm, lambda = 0.6328 um.
    wavelength, focus = 0.6328, 1e4
    zone = np.arange(1, 11)
    radii = np.sqrt(zone * wavelength * focus + zone**2 * wavelength**2 / 4)
    assert radii[:3] == pytest.approx([79.54936, 112.50067, 137.78571], abs=1e-5)
    n, pixel = 256, 4.0
    axis = (np.arange(n) - n / 2) * pixel
    r = np.hypot(axis[:, None], axis[None, :])
    plate = ((np.searchsorted(radii, r) % 2 == 0) & (r < radii[-1])).astype(float)
    light = optics(wavelength, pixel)
    distances = np.linspace(0.9, 1.1, 9) * focus
    axial = [
        np.abs(evaluate(refocus(on_grid(plate, 0.3), z, optics=light), n / 2, n / 2)[0]) ** 2
        for z in distances
    ]
    assert np.argmax(axial) == 4
    # Five open zones, each adding an amplitude of two.
    assert axial[4] == pytest.approx(100, rel=0.05)


def test_light_that_leaves_the_frame_does_not_come_back() -> None:
    axis = np.arange(128)
    spot = np.exp(-((axis[:, None] - 64) ** 2 + (axis - 110) ** 2) / 50)
    tilted = spot * np.exp(2j * np.pi * 0.15 * axis)
    light = optics(0.5, 0.5)
    far = on_pixels(refocus(on_grid(tilted, 0.3), 250, optics=light))
    wrapped = on_pixels(refocus(on_grid(tilted, 0.3), 250, optics=light, edges="periodic"))
    before = np.sum(np.abs(tilted) ** 2)
    assert np.sum(np.abs(far[:, :100]) ** 2) < 1e-3 * before
    assert np.sum(np.abs(wrapped[:, :100]) ** 2) > 0.5 * before


def test_the_valid_window_shrinks_by_the_way_sideways() -> None:
    light = optics(0.5, 0.5)
    field = on_grid(np.ones((128, 128)), 0.2)
    valid = refocus(field, 20.0, optics=light).grid.valid
    f = 0.2 / 0.5
    assert valid.y_min == pytest.approx(20 * f / np.sqrt(4 - f**2) / 0.5)
    assert refocus(field, 1e4, optics=light).grid.valid.x_max == pytest.approx(0.75 * 127)


def test_no_distance_is_no_change() -> None:
    field = random_periodic()
    assert refocus(field, 0.0, optics=optics(0.5, 0.3)) is field


@pytest.mark.parametrize(
    ("light", "distance", "options", "message"),
    [
        (Optics(wavelength_nm=500), 1.0, {}, "camera_pixel_um and magnification"),
        (Optics(camera_pixel_um=5, magnification=10), 1.0, {}, "takes wavelength_nm"),
        (optics(0.5, 0.3), np.nan, {}, "distance_um: expected a finite number"),
        (optics(0.5, 0.3), 1.0, {"edges": "open"}, "edges: expected padded or periodic"),
    ],
)
def test_what_is_missing_is_named(
    light: Optics, distance: float, options: dict[str, Any], message: str
) -> None:
    with pytest.raises(ValueError, match=message):
        refocus(random_periodic(), distance, optics=light, **options)
