from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from hologyre.fields.bands import Band
from hologyre.fields.carrier import Carrier
from hologyre.fields.compensate import compensate, without_surface
from hologyre.fields.demodulate import demodulate
from hologyre.fields.interpolate import evaluate, on_pixels
from hologyre.fields.surfaces import Surface
from hologyre.grid import Field

SHAPE = (140, 150)


def speckle_waves(seed: int, shortest_px: float, count: int = 3000) -> np.ndarray:
    rng = np.random.default_rng(seed)
    f = np.sqrt(rng.uniform(size=count)) / shortest_px
    angle = rng.uniform(0, 2 * np.pi, count)
    amplitude = (rng.normal(size=count) + 1j * rng.normal(size=count)) / np.sqrt(2 * count)
    along_y = np.exp(2j * np.pi * np.outer(np.arange(SHAPE[0]), f * np.sin(angle)))
    along_x = np.exp(2j * np.pi * np.outer(f * np.cos(angle), np.arange(SHAPE[1])))
    return (along_y * amplitude) @ along_x


def read(field: np.ndarray, radius: float) -> Field:
    """Record a field in a noisy hologram and read it again."""
    carrier = Carrier(0.26, 0.25, radius)
    y, x = np.mgrid[: SHAPE[0], : SHAPE[1]]
    wave = np.exp(2j * np.pi * (carrier.fy * y + carrier.fx * x))
    light = 2000 * np.abs(1 + 0.5 * field * wave) ** 2
    return demodulate(np.random.default_rng(11).poisson(light).astype(float), carrier)


def quadratic(edge: float) -> tuple[Surface, np.ndarray, np.ndarray]:
    """Defocus and astigmatism of a gradient at the edge, rad/px: terms, coefficients, phase."""
    surface = Surface.over(SHAPE, "polynomial", 2)
    scale = edge * surface.scale_px**2 / SHAPE[1]
    coefficients = np.array([0.0, 0.0, 0.6 * scale, 0.1 * scale, 1.0 * scale])
    y, x = np.mgrid[: SHAPE[0], : SHAPE[1]]
    return surface, coefficients, surface.phase(coefficients, y, x)


def error(found: np.ndarray, truth: np.ndarray) -> float:
    return float(np.std(found - truth))


def test_a_tilt_moves_the_tilt_and_nothing_else() -> None:
    field = read(speckle_waves(0, 20), 0.06)
    surface = Surface.over(SHAPE, "tilt", 1)
    tilted = without_surface(field, surface, np.array([3.0, -2.0]))
    y, x = np.mgrid[: SHAPE[0], : SHAPE[1]]
    expected = on_pixels(field) * np.exp(-1j * surface.phase([3.0, -2.0], y, x))
    assert tilted.shape == field.shape
    # Single precision.
    assert np.abs(on_pixels(tilted) - expected).max() < 1e-5 * np.abs(expected).max()


def test_a_curved_surface_is_taken_out_up_to_the_border() -> None:
    surface, coefficients, phase = quadratic(0.2)
    field = read(speckle_waves(0, 20), 0.06)
    flat = without_surface(field, surface, coefficients)
    expected = on_pixels(field) * np.exp(-1j * phase)
    off = np.abs(on_pixels(flat) - expected)
    assert np.sqrt((off**2).mean()) < 0.01 * np.sqrt((np.abs(expected) ** 2).mean())


def test_zeros_stay_where_they_are() -> None:
    surface, coefficients, _ = quadratic(0.1)
    field = read(speckle_waves(1, 20), 0.06)
    flat = without_surface(field, surface, coefficients)
    rng = np.random.default_rng(0)
    y, x = rng.uniform(20, 120, (2, 50))
    before, after = evaluate(field, y, x)[0], evaluate(flat, y, x)[0]
    assert np.allclose(np.abs(before), np.abs(after), atol=0.01 * np.abs(before).max())


def test_the_background_of_a_smooth_object_becomes_flat() -> None:
    surface, _, phase = quadratic(0.08)
    y, x = np.mgrid[: SHAPE[0], : SHAPE[1]]
    cell = 2.5 * np.exp(-((y - 60) ** 2 + (x - 80) ** 2) / 200)
    field = read(np.exp(1j * (phase + cell + 0.02 * x + 0.7)), 0.1)
    background = cell < 0.02
    for mask in (None, background):
        result = compensate(field, family="polynomial", order=2, mask=mask)
        left = np.angle(on_pixels(result.field))[background]
        assert np.std(left) < (0.1 if mask is None else 0.03)
        assert abs(np.mean(left)) < 0.1
    assert result.tilt_rad_per_px[1] == pytest.approx(
        0.02 + surface.slope(quadratic(0.08)[1], *surface.centre_px)[1], abs=1e-3
    )


def test_zernike_terms_describe_the_same_surface() -> None:
    surface, coefficients, _ = quadratic(0.08)
    y, x = np.mgrid[: SHAPE[0], : SHAPE[1]]
    field = read(np.exp(1j * surface.phase(coefficients, y, x)), 0.06)
    result = compensate(field, family="zernike", order=2)
    difference = result.phase(y, x) - surface.phase(coefficients, y, x)
    assert np.std(difference) < 0.02
    assert result.surface.names[3] == "Z4 (n=2, m=0)"
    # r^2 = 1/2 + Z4 / (2 sqrt 3) over the unit disc.
    curvature = (coefficients[2] + coefficients[4]) / 2
    assert result.coefficients[3] == pytest.approx(curvature / (2 * np.sqrt(3)), rel=0.02)


def test_likelihood_finds_the_aberration_of_speckle_many_times_better() -> None:
    surface, _, phase = quadratic(0.15)
    field = read(speckle_waves(2, 14) * np.exp(1j * phase), 0.12)
    y, x = np.mgrid[: SHAPE[0], : SHAPE[1]]
    rough = compensate(field, family="polynomial", order=2)
    fine = compensate(field, family="polynomial", order=2, method="likelihood")
    spread = surface.values(y, x).std(axis=(1, 2))
    bound = float(np.linalg.norm(fine.sigma * spread))
    assert error(fine.phase(y, x), phase) < min(0.3 * error(rough.phase(y, x), phase), 2 * bound)
    assert fine.radius_per_px == pytest.approx(1 / 14, rel=0.03)


def test_frames_that_share_an_aberration_average() -> None:
    _, _, phase = quadratic(0.1)
    fields = [read(speckle_waves(seed, 14) * np.exp(1j * phase), 0.11) for seed in range(6)]
    stack = fields[0].with_values(np.stack([f.values for f in fields]))
    y, x = np.mgrid[: SHAPE[0], : SHAPE[1]]
    result = compensate(stack, family="polynomial", order=2)
    alone = [error(compensate(f, family="polynomial").phase(y, x), phase) for f in fields]
    assert error(result.phase(y, x), phase) < np.sqrt(np.mean(np.square(alone)))
    assert result.field.values.shape[0] == 6


def test_a_measured_reference_is_taken_out_first() -> None:
    _, _, phase = quadratic(0.1)
    y, x = np.mgrid[: SHAPE[0], : SHAPE[1]]
    bump = np.exp(-((y - 70) ** 2 + (x - 70) ** 2) / 300)
    reference = read(np.exp(1j * phase), 0.08)
    field = read(np.exp(1j * (phase + bump)), 0.08)
    result = compensate(field, reference=reference)
    left = np.angle(on_pixels(result.field) * np.exp(-1j * bump))[8:-8, 8:-8]
    assert np.std(left - np.median(left)) < 0.06


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"method": "magic"}, "method: expected gradient or likelihood, got 'magic'"),
        ({"family": "spline"}, "family: expected tilt, polynomial or zernike"),
        ({"spectrum": "ring"}, "spectrum: expected disc or gauss"),
        ({"family": "polynomial", "order": 5}, "order: expected 1 to 4 for polynomial, got 5"),
        ({"mask": np.zeros((3, 3), bool)}, r"mask: shape \(3, 3\) differs"),
        ({"mask": np.zeros((64, 64), bool)}, "mask: leaves too little of the field"),
    ],
)
def test_wrong_options_are_named(options: dict[str, Any], message: str) -> None:
    band = Band((64, 64), (64, 64), (0.2, 0.2), 0.1)
    values = np.random.default_rng(0).normal(size=band.weights().shape) * band.weights()
    field = band.field(values.astype(complex), "band")
    with pytest.raises(ValueError, match=message):
        compensate(field, **options)
