from __future__ import annotations

import numpy as np
import pytest

from hologyre.fields.bands import Band
from hologyre.fields.interpolate import coefficients, evaluate, interpolant, on_pixels, resample
from hologyre.grid import Field, Grid

SHAPE = (60, 75)
CARRIER = (0.2013, 0.1801)


@pytest.fixture
def band() -> Band:
    return Band(SHAPE, SHAPE, CARRIER, 0.09)


@pytest.fixture
def spectrum(band: Band) -> np.ndarray:
    rng = np.random.default_rng(3)
    shape = band.weights().shape
    return (rng.normal(size=shape) + 1j * rng.normal(size=shape)) * band.weights()


def series(band: Band, spectrum: np.ndarray, y: np.ndarray, x: np.ndarray) -> np.ndarray:
    """The sum itself, straight from the definition of the coefficients."""
    total = np.zeros(np.shape(y), dtype=complex)
    for j, fy in enumerate(band.offsets(0)):
        for i, fx in enumerate(band.offsets(1)):
            total += spectrum[j, i] * np.exp(2j * np.pi * (fy * y + fx * x))
    return total


def test_band_and_full_sampling_are_one_field(band: Band, spectrum: np.ndarray) -> None:
    y, x = np.mgrid[: SHAPE[0], : SHAPE[1]].astype(float)
    truth = series(band, spectrum, y, x)
    scale = np.abs(truth).max()
    for sampling in ("band", "full"):
        # Rounding of transforms of some 5000 terms.
        assert np.abs(on_pixels(band.field(spectrum, sampling)) - truth).max() < 1e-13 * scale


def test_band_samples_are_far_fewer_than_pixels(band: Band, spectrum: np.ndarray) -> None:
    field = band.field(spectrum, "band")
    assert np.prod(field.shape) < 0.1 * np.prod(SHAPE)


@pytest.mark.parametrize("step", [0.7, 1.0, 2.5, 40.0])
def test_resampling_leaves_the_field_as_it_is(
    band: Band, spectrum: np.ndarray, step: float
) -> None:
    field = band.field(spectrum, "band")
    other = resample(field, step)
    assert other.period_px == pytest.approx(field.period_px)
    assert max(other.grid.step_px) <= max(step, 5.7)
    assert np.allclose(on_pixels(other), on_pixels(field), rtol=0, atol=1e-12)


@pytest.mark.parametrize("count", [3, 4000])
def test_value_and_gradient_at_any_point_are_those_of_the_series(
    band: Band, spectrum: np.ndarray, count: int
) -> None:
    rng = np.random.default_rng(1)
    y, x = rng.uniform(-20, 90, count), rng.uniform(-20, 90, count)
    value, along_y, along_x = evaluate(band.field(spectrum, "band"), y, x)
    fy, fx = band.offsets(0)[:, None], band.offsets(1)[None, :]
    for found, factor in ((value, 1), (along_y, 2j * np.pi * fy), (along_x, 2j * np.pi * fx)):
        truth = series(band, spectrum * factor, y, x)
        # The kernel's aliasing error by design; the direct sum has rounding only.
        assert np.abs(found - truth).max() < 1e-10 * np.abs(truth).max()


def test_points_keep_their_shape(band: Band, spectrum: np.ndarray) -> None:
    values = interpolant(band.field(spectrum, "band"))(np.zeros((2, 3)), 1.5)
    assert all(part.shape == (2, 3) for part in values)


def test_nyquist_is_shared_so_that_conjugation_commutes() -> None:
    rng = np.random.default_rng(0)
    values = rng.normal(size=(8, 6)) + 1j * rng.normal(size=(8, 6))
    grid = Grid.pixels((8, 6))
    spectrum = coefficients(Field(values, grid))
    assert spectrum.shape == (9, 7)
    mirrored = coefficients(Field(values.conj(), grid))
    assert np.allclose(mirrored, spectrum[::-1, ::-1].conj(), atol=1e-15)


def test_samples_on_a_longer_torus_are_returned_even_at_nyquist() -> None:
    rng = np.random.default_rng(0)
    values = rng.normal(size=(8, 6)) + 1j * rng.normal(size=(8, 6))
    grid = Grid.pixels((5, 4))
    assert np.allclose(on_pixels(Field(values, grid)), values[:5, :4], atol=1e-14)


def test_a_field_on_the_pixels_is_returned_as_it_is() -> None:
    field = Field(np.ones((5, 4), dtype=np.complex64), Grid.pixels((5, 4)))
    assert on_pixels(field) is field.values


def test_a_stack_is_resampled_frame_by_frame(band: Band, spectrum: np.ndarray) -> None:
    stack = band.field(np.stack([spectrum, 2 * spectrum]), "band")
    pixels = on_pixels(stack)
    assert pixels.shape == (2, *SHAPE)
    assert np.allclose(pixels[1], 2 * pixels[0], rtol=0, atol=1e-12)


def test_a_stack_is_not_evaluated_at_points(band: Band, spectrum: np.ndarray) -> None:
    stack = band.field(spectrum[None], "band")
    with pytest.raises(
        ValueError, match=r"field: expected one frame \(y, x\), got values of shape"
    ):
        evaluate(stack, 0.0, 0.0)


def test_a_step_must_be_positive(band: Band, spectrum: np.ndarray) -> None:
    with pytest.raises(ValueError, match="step_px: expected a positive number, got 0"):
        resample(band.field(spectrum, "band"), 0)


def test_slopes_are_exact_at_a_sample_of_the_oversampled_copy_too(
    band: Band, spectrum: np.ndarray
) -> None:
    field = band.field(spectrum, "band")
    ready = interpolant(field)
    y = ready.origin_px[0] + ready.step_px[0] * np.arange(4.0)
    x = ready.origin_px[1] + ready.step_px[1] * np.arange(4.0)
    found, exact = ready(y, x), evaluate(field, y, x)
    for one, other in zip(found, exact, strict=True):
        assert np.abs(one - other).max() < 1e-9 * np.abs(spectrum).sum()
