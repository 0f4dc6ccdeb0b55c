from __future__ import annotations

from typing import Any, cast

import numpy as np
import pytest
from scipy.special import jv

from hologyre.fields.bands import Band
from hologyre.fields.interpolate import on_pixels
from hologyre.fields.wavevector import current, local_wavevector, superoscillation
from hologyre.grid import Field


def bessel_vortex(charge: int, period_px: float, size: int) -> tuple[np.ndarray, np.ndarray]:
    """J_m(k r) exp(i m phi) and k r."""
    axis = np.arange(size) - (size - 1) / 2
    x, y = np.meshgrid(axis, axis)
    kr = 2 * np.pi / period_px * np.hypot(y, x)
    return jv(charge, kr) * np.exp(1j * charge * np.arctan2(y, x)), kr


def test_the_wavevector_of_a_bessel_vortex_is_m_over_r() -> None:
    # A plane-symmetric solution of Helmholtz's equation: the phase is m phi exactly.
    period = 64.0
    field, kr = bessel_vortex(3, period, 512)
    ky, kx = local_wavevector(field)
    k = 2 * np.pi / period
    axis = np.arange(512) - 255.5
    x, y = np.meshgrid(axis, axis)
    for wanted, expected in ((0.5, 6), (1, 3), (2, 1.5), (2.9, 1.0345), (3.1, 0.9677), (5, 0.6)):
        near = np.abs(kr - wanted) < 0.01
        azimuthal = (kx * -y + ky * x)[near] / np.hypot(x, y)[near] / k
        # Central differences: relative error (k step)^2 / 6, magnified near the core.
        assert np.allclose(azimuthal * kr[near], 3, rtol=2e-2)
        assert np.mean(azimuthal) == pytest.approx(expected, rel=2e-2)


def random_field(
    seed: int, n: int = 1024, wavelength_px: float = 16.0, ring: bool = False
) -> Field:
    rng = np.random.default_rng(seed)
    band = Band((n, n), (n, n), (0.0, 0.0), 1 / wavelength_px)
    weights: Any = band.weights()
    if ring:
        distance = np.hypot(band.offsets(0)[:, None], band.offsets(1)[None, :])
        weights = weights * (distance > band.radius - 0.7 / n)
    spectrum = (rng.normal(size=weights.shape) + 1j * rng.normal(size=weights.shape)) * weights
    return band.field(spectrum, "band")


# Dennis, Hamilton and Courtial, Opt. Lett. 33, 2976 (2008), doi 10.1364/OL.33.002976.
@pytest.mark.parametrize(("ring", "fraction"), [(True, 1 / 3), (False, 1 / 5)])
def test_random_waves_superoscillate_in_a_third_or_a_fifth_of_the_area(
    ring: bool, fraction: float
) -> None:
    found = []
    for seed in range(3):
        field = random_field(seed, ring=ring)
        found.append(superoscillation(local_wavevector(field), 2 * np.pi * field.radius_per_px)[1])
    # Three frames of 4096 square wavelengths: spread of their mean near 0.002.
    assert np.mean(found) == pytest.approx(fraction, abs=0.006)


def test_the_median_wavevector_of_random_waves_is_that_of_theory() -> None:
    field = random_field(4)
    ky, kx = local_wavevector(field)
    length = np.hypot(ky, kx)
    # P(|k| > K) = W / (K^2 + W), W = <k^2> / 2 = k_max^2 / 4 for a disc; same source.
    assert np.median(length) == pytest.approx(np.pi * field.radius_per_px, rel=0.01)


def test_speckle_has_the_statistics_of_circular_gaussian_fields() -> None:
    # Goodman, Speckle Phenomena in Optics (from memory): contrast 1, P(I > x <I>) = exp(-x).
    intensity = np.concatenate([np.abs(on_pixels(random_field(s))).ravel() ** 2 for s in range(4)])
    intensity /= intensity.mean()
    assert intensity.std() == pytest.approx(1, abs=0.02)
    for x in (1, 3):
        assert (intensity > x).mean() == pytest.approx(np.exp(-x), abs=0.004)


def test_a_plane_wave_has_its_own_wavevector_everywhere() -> None:
    y, x = np.mgrid[:40, :50]
    field = np.exp(2j * np.pi * (0.05 * y - 0.02 * x))
    wavevector: Any = local_wavevector(field)[:, 1:-1, 1:-1]
    ky, kx = wavevector[0], wavevector[1]
    # sin(k) for k of central differences.
    assert np.allclose(ky, np.sin(2 * np.pi * 0.05))
    assert np.allclose(kx, -np.sin(2 * np.pi * 0.02))


def test_tilt_is_part_of_the_wavevector() -> None:
    band = Band((60, 60), (60, 60), (0.2012, 0.15), 0.05)
    spectrum = np.zeros(band.weights().shape, dtype=complex)
    spectrum[band.half] = 1
    ky, kx = local_wavevector(band.field(spectrum, "band"))
    assert np.allclose(ky, 2 * np.pi * (0.2 - 0.2012))
    assert np.allclose(kx, 0, atol=1e-12)


def test_current_is_power_times_wavevector() -> None:
    field = random_field(1, n=128)
    power = np.abs(on_pixels(field)) ** 2
    assert np.allclose(current(field), power * local_wavevector(field), atol=1e-12 * power.max())


def test_the_wavevector_of_a_zero_field_is_not_a_number() -> None:
    assert np.isnan(local_wavevector(np.zeros((8, 8), dtype=complex))).all()


def test_a_real_array_is_refused() -> None:
    with pytest.raises(
        TypeError, match=r"field: expected a Field or a complex \(..., y, x\) array"
    ):
        local_wavevector(cast(Any, np.zeros((8, 8))))
