"""Laws of one point of an isotropic random wave: cores, speeds, wavevectors, intensity, noise."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from hologyre.singularities.theory import zero_density
from hologyre.singularities.theory_spectrum import FloatArray, Spectrum, nonnegative


def core_axis_ratio_pdf(axis_ratio: ArrayLike) -> FloatArray:
    """Return the probability density of a core's minor over major axis, 0 to 1.

    Notes
    -----
    ``8 t (1 - t^2) / (1 + t^2)^3`` for any isotropic spectrum: ``2 t / (1 + t^2)`` has the
    density ``2 u`` (Berry and Dennis, Proc. R. Soc. Lond. A 456, 2059, 2000).
    """
    t = _ratio(axis_ratio)
    return 8 * t * (1 - t**2) / (1 + t**2) ** 3


def core_axis_ratio_cdf(axis_ratio: ArrayLike) -> FloatArray:
    """Return the share of cores with a smaller axis ratio; median sqrt(2) - 1."""
    t = _ratio(axis_ratio)
    return 4 * t**2 / (1 + t**2) ** 2


def core_eccentricity_pdf(eccentricity: ArrayLike) -> FloatArray:
    """Return the probability density of a core's eccentricity sqrt(1 - t^2), 0 to 1."""
    e = _ratio(eccentricity, "eccentricity")
    return 8 * e**3 / (2 - e**2) ** 3


def core_phase(
    azimuth_rad: ArrayLike, axis_ratio: ArrayLike, orientation_rad: ArrayLike, charge: ArrayLike
) -> FloatArray:
    """Return how the phase turns around a core of unit charge.

    Parameters
    ----------
    azimuth_rad : array
        Direction from the core, from +x to +y.
    axis_ratio, orientation_rad, charge : arrays
        As in the table of singularities: minor over major axis of the ellipses of equal
        intensity, direction of the major one, +1 or -1.

    Returns
    -------
    array
        Phase in (-pi, pi] less that along the major axis: ``tan(phase) = charge tan(psi) / t``,
        psi the azimuth from the major axis. It turns fastest, by 1 / t, where the azimuth
        passes the major axis.

    Notes
    -----
    Exact close to the core, where the field is linear.
    """
    t = _ratio(axis_ratio)
    psi = np.asarray(azimuth_rad, dtype=np.float64) - np.asarray(orientation_rad)
    phase = np.arctan2(np.sign(charge) * np.sin(psi), t * np.cos(psi))
    return np.where(phase <= -np.pi, np.pi, phase)


def speed_scale(spectrum: Spectrum, frequency_variance: float) -> float:
    """Return the median speed of zeros, px per unit of time.

    Parameters
    ----------
    spectrum : Spectrum
        Of the waves.
    frequency_variance : float
        ``<omega^2> - <omega>^2`` over the power, (rad per unit of time)^2, the frequencies
        being independent of the wavevectors' directions. A field of one frequency stands still.

    Raises
    ------
    ValueError
        If the variance is negative or not finite.
    """
    if not 0 <= frequency_variance < np.inf:
        msg = f"frequency_variance: expected 0 or more, got {frequency_variance!r}"
        raise ValueError(msg)
    return float(np.sqrt(2 * frequency_variance / spectrum.mean_square_k))


def speed_pdf(speed: ArrayLike, scale: float) -> FloatArray:
    """Return the probability density of the speed of zeros with this median.

    Notes
    -----
    ``2 v w^2 / (v^2 + w^2)^2``: mean ``pi w / 2``, no variance (after Berry and Dennis, Proc. R.
    Soc. Lond. A 456, 2059, 2000, for a time derivative independent of the gradient).
    """
    v, w = nonnegative(speed, "speed"), _median(scale)
    return 2 * v * w**2 / (v**2 + w**2) ** 2


def speed_exceedance(speed: ArrayLike, scale: float) -> FloatArray:
    """Return the share of zeros faster than `speed`: what a gate of that step loses."""
    v, w = nonnegative(speed, "speed"), _median(scale)
    return w**2 / (v**2 + w**2)


class CriticalPoints(NamedTuple):
    """Densities of the critical points of phase, per px^2; singularities + extrema = saddles."""

    singularities: float
    saddles: float
    extrema: float


def critical_point_densities(spectrum: Spectrum) -> CriticalPoints:
    """Return the densities of singularities, saddles and extrema of the phase.

    Notes
    -----
    Saddles over singularities ``kappa^1.5 / sqrt(3 kappa - 2)``, kappa the spectrum's kurtosis
    (Dennis, J. Phys. A 34, L297, 2001): 1 for a ring, which has no extrema; 1.0887 for a disc;
    sqrt(2) for a Gaussian spectrum.
    """
    kappa, density = spectrum.kurtosis, zero_density(spectrum)
    saddles = density * kappa**1.5 / np.sqrt(3 * kappa - 2)
    # kappa >= 1 gives saddles >= density; rounding must not make a ring's extrema negative.
    return CriticalPoints(density, float(saddles), float(max(saddles - density, 0.0)))


def wavevector_exceedance(spectrum: Spectrum, k_per_px: ArrayLike) -> FloatArray:
    """Return the share of the area whose local wavevector is longer than `k_per_px`, rad/px.

    Notes
    -----
    ``W / (k^2 + W)`` with ``W = <k^2> / 2`` (Dennis, Hamilton and Courtial, Opt. Lett. 33, 2976,
    2008); the median is sqrt(W).
    """
    half = spectrum.mean_square_k / 2
    return half / (nonnegative(k_per_px, "k_per_px") ** 2 + half)


def superoscillating_fraction(spectrum: Spectrum) -> float:
    """Return the share of the area with a local wavevector beyond the spectrum's largest.

    Notes
    -----
    1/3 for a ring, 1/5 for a disc (Opt. Lett. 33, 2976, 2008); 0 for a Gaussian spectrum,
    which has no largest wavevector.
    """
    if spectrum.kind == "gauss":
        return 0.0
    return float(wavevector_exceedance(spectrum, spectrum.wavenumber_per_px))


def intensity_exceedance(over_mean: ArrayLike) -> FloatArray:
    """Return the share of the area brighter than this many times the mean, exp(-x).

    Notes
    -----
    Goodman, Speckle Phenomena in Optics (2007), fully developed polarised speckle.
    """
    return np.exp(-nonnegative(over_mean, "over_mean"))


def speckle_contrast(*, background_ratio: float = 0.0, patterns: int = 1) -> float:
    """Return the contrast, standard deviation over mean, of the intensity of speckle.

    Parameters
    ----------
    background_ratio : float
        Intensity of a steady coherent background over the speckle's mean.
    patterns : int
        Independent patterns of the same mean added in intensity.

    Notes
    -----
    ``sqrt((1 + 2 r) / M) / (1 + r)``, Goodman, Speckle Phenomena in Optics (2007): 1 for speckle
    alone.

    Raises
    ------
    ValueError
        If the ratio is negative or there is no pattern.
    """
    if not 0 <= background_ratio < np.inf:
        raise ValueError(f"background_ratio: expected 0 or more, got {background_ratio!r}")
    if patterns < 1:
        raise ValueError(f"patterns: expected 1 or more, got {patterns!r}")
    return float(np.sqrt((1 + 2 * background_ratio) / patterns) / (1 + background_ratio))


def false_zero_density(noise_spectrum: Spectrum, amplitude: ArrayLike, noise: float) -> FloatArray:
    """Return the density of zeros that noise makes in coherent light, per px^2.

    Parameters
    ----------
    noise_spectrum : Spectrum
        Of the noise, centred on the light's own wavevector; for white noise behind a disc
        filter of radius rho cycles/px, ``Spectrum.disc(2 pi rho)``.
    amplitude : array
        |E| of the light where there is no noise, field units.
    noise : float
        Root of E|n|^2, field units, after the filter.

    Notes
    -----
    ``<k^2> / (4 pi) exp(-A^2 / s^2)``, derived here from the Kac-Rice formula: gradients and
    value are independent, and the value must be -A. Zeros come in pairs, so that their number
    varies by up to twice what independent ones would.

    Raises
    ------
    ValueError
        If the noise is not positive.
    """
    if not 0 < noise < np.inf:
        raise ValueError(f"noise: expected a positive number, got {noise!r}")
    ratio = nonnegative(amplitude, "amplitude") / noise
    return zero_density(noise_spectrum) * np.exp(-(ratio**2))


def _ratio(values: ArrayLike, name: str = "axis_ratio") -> FloatArray:
    t = np.asarray(values, dtype=np.float64)
    if not ((t >= 0) & (t <= 1)).all():
        raise ValueError(f"{name}: expected values from 0 to 1")
    return t


def _median(scale: float) -> float:
    if not 0 < scale < np.inf:
        raise ValueError(f"scale: expected a positive median speed, got {scale!r}")
    return scale
