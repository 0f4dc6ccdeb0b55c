"""Closed forms for the zeros of isotropic random waves: density, correlations, charge variance.

Everything here is for a circular complex Gaussian field whose spectrum, centred on the
carrier, is isotropic. Formulas of Berry and Dennis, Proc. R. Soc. Lond. A 456, 2059 (2000),
and of Wilkinson, J. Phys. A 37, 6763 (2004), written so that nothing cancels as R goes to 0.
"""

from __future__ import annotations

from math import factorial
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike
from scipy.special import roots_legendre

from hologyre.singularities.theory_spectrum import FloatArray, Spectrum, nonnegative

_SERIES_BELOW = 1.0
"""K R below which the terms that cancel are taken from their power series."""

_SERIES_TERMS = 24
_ANGLES = 160
_PER_BIN = 12


def zero_density(spectrum: Spectrum) -> float:
    """Return the density of phase singularities, <k^2> / (4 pi), per px^2.

    Notes
    -----
    Berry and Dennis, Proc. R. Soc. Lond. A 456, 2059 (2000): pi / wavelength^2 for a ring.
    """
    return spectrum.mean_square_k / (4 * np.pi)


def charge_correlation(spectrum: Spectrum, r_px: ArrayLike) -> FloatArray:
    """Return the charge correlation g_Q at distances.

    Parameters
    ----------
    spectrum : Spectrum
        Of the waves.
    r_px : array
        Distances, px, 0 or more.

    Returns
    -------
    array
        Mean product of the charges of two singularities at this distance times `pair_correlation`;
        negative where unlike charges prevail.

    Notes
    -----
    ``4 / (<k^2>^2 R) d/dR [C'^2 / (1 - C^2)]``, Berry and Dennis (2000).
    """
    terms = _terms(spectrum, nonnegative(r_px) * spectrum.wavenumber_per_px)
    return -2 * terms.h * terms.w / (terms.f0**2 * terms.a**2)


def pair_correlation(spectrum: Spectrum, r_px: ArrayLike) -> FloatArray:
    """Return the pair correlation g of singularities of any charge at distances.

    Parameters
    ----------
    spectrum : Spectrum
        Of the waves.
    r_px : array
        Distances, px, 0 or more.

    Returns
    -------
    array
        Density at this distance from a singularity over the mean density. Pairs of like charge
        have ``g + g_Q``, of opposite charge ``g - g_Q``.

    Notes
    -----
    Berry and Dennis, Proc. R. Soc. Lond. A 456, 2059 (2000). At R = 0 it is
    ``(3 <k^4>/<k^2>^2 - 2) / 4``.
    """
    z = nonnegative(r_px) * spectrum.wavenumber_per_px
    a, b, p, q, d, w, h, f0 = _terms(spectrum, z)
    y = ((h * w) / (f0 * b)) ** 2
    big = p * q * d * a * z**2 / (f0 * b) ** 2
    # t = tan(angle) makes the integral over [0, inf) one of a smooth function over [0, pi/2].
    nodes, weights = roots_legendre(_ANGLES)
    angle = (nodes + 1) * (np.pi / 4)
    cc, ss = np.cos(angle) ** 2, np.sin(angle) ** 2
    y, big = y[..., np.newaxis], big[..., np.newaxis]
    above = (3 - big + 2 * y) * cc**2 + (3 + big - 2 * y) * ss * cc + 2 * big * ss**2
    below = np.sqrt(cc**2 + (1 + big - y) * ss * cc + big * ss**2)
    integral = (above * cc / below) @ weights * (np.pi / 4)
    correlation: FloatArray = -2 * b / (np.pi * f0 * a**2) * integral
    return correlation


def unscreened_charge(spectrum: Spectrum, r_px: ArrayLike) -> FloatArray:
    """Return the mean charge left within a distance of a singularity of charge +1, itself included.

    Parameters
    ----------
    spectrum : Spectrum
        Of the waves.
    r_px : array
        Distances, px, 0 or more.

    Returns
    -------
    array
        ``1 + d * Integral_0^R g_Q 2 pi r dr = 2 C'^2 / (<k^2> (1 - C^2))``: 1 at 0, and 0 far
        away, where the charge is screened (first Stillinger-Lovett rule).

    Notes
    -----
    Wilkinson, J. Phys. A 37, 6763 (2004). For a ring it falls only as 1/R.
    """
    terms = _terms(spectrum, nonnegative(r_px) * spectrum.wavenumber_per_px)
    return terms.h**2 / (terms.f0 * terms.a)


def charge_variance(spectrum: Spectrum, radius_px: ArrayLike) -> FloatArray:
    """Return the variance of the net charge in a disc.

    Parameters
    ----------
    spectrum : Spectrum
        Of the waves.
    radius_px : array
        Radii of the disc, px, 0 or more.

    Returns
    -------
    array
        Mean square of the sum of charges. Charges placed at random would have the mean count,
        ``d pi R^2``; screened ones have a share that grows as the disc's border only.

    Notes
    -----
    ``d pi R^2 + d^2 Integral g_Q(r) A(r) 2 pi r dr``, A the overlap of two discs at distance r
    (Berry and Dennis, 2000), integrated by parts:
    ``d Integral_0^2R sqrt(4 R^2 - r^2) S(r) dr`` with S the `unscreened_charge`.
    """
    radius = nonnegative(radius_px, "radius_px")
    reach = float(radius.max(initial=0.0)) * spectrum.wavenumber_per_px
    nodes, weights = roots_legendre(64 + 2 * int(np.ceil(reach)))
    angle = (nodes + 1) * (np.pi / 4)
    left = unscreened_charge(spectrum, 2 * radius[..., np.newaxis] * np.sin(angle))
    integral = (left * np.cos(angle) ** 2) @ weights * (np.pi / 4)
    variance: FloatArray = 4 * radius**2 * zero_density(spectrum) * integral
    return variance


def pair_line(spectrum: Spectrum, edges_px: ArrayLike) -> pd.DataFrame:
    """Return the correlations averaged over the rings a histogram of distances has.

    Parameters
    ----------
    spectrum : Spectrum
        Of the waves.
    edges_px : (n + 1,) array
        Edges of the bins, px, increasing from 0 or more.

    Returns
    -------
    DataFrame, n rows
        ``r_low_px``, ``r_high_px``, ``g``, ``g_charge``, ``g_like``, ``g_opposite``: the columns
        of `hologyre.singularities.statistics_pairs.measure_pairs` the theory speaks of.

    Raises
    ------
    ValueError
        If the edges do not increase.
    """
    edges = bin_edges(edges_px)
    nodes, weights = roots_legendre(_PER_BIN)
    low, high = edges[:-1, np.newaxis], edges[1:, np.newaxis]
    r = (low + high) / 2 + (high - low) / 2 * nodes
    share = r * weights
    share /= share.sum(axis=1, keepdims=True)
    g = np.sum(pair_correlation(spectrum, r) * share, axis=1)
    charge = np.sum(charge_correlation(spectrum, r) * share, axis=1)
    return pd.DataFrame(
        {
            "r_low_px": edges[:-1],
            "r_high_px": edges[1:],
            "g": g,
            "g_charge": charge,
            "g_like": g + charge,
            "g_opposite": g - charge,
        }
    )


def bin_edges(edges_px: ArrayLike) -> FloatArray:
    """Return the edges of distance bins as a float array.

    Raises
    ------
    ValueError
        If there are fewer than two, or they do not increase from 0 or more.
    """
    edges = nonnegative(edges_px, "edges_px")
    if edges.ndim != 1 or edges.size < 2 or not (np.diff(edges) > 0).all():
        raise ValueError("edges_px: expected at least two increasing distances")
    return edges


class _Terms(NamedTuple):
    """Parts of the correlations, each over the power of z^2 it vanishes with, at z = K R.

    With E = C', H = -C'/z, F = -C'' and F0 = <k^2> / (2 K^2).
    """

    a: FloatArray  # (1 - C^2) / z^2
    b: FloatArray  # (E^2 - F0 (1 - C^2)) / z^4
    p: FloatArray  # (E^2 - (1 + C) (F0 - F)) / z^2
    q: FloatArray  # (E^2 - (1 - C) (F0 + F)) / z^4
    d: FloatArray  # (F0^2 - H^2) / z^2
    w: FloatArray  # (C E^2 - F (1 - C^2)) / z^4
    h: FloatArray
    f0: FloatArray  # one number


def _terms(spectrum: Spectrum, z: FloatArray) -> _Terms:
    near = z < _SERIES_BELOW
    far = np.where(near, _SERIES_BELOW, z)
    plain = _plain_terms(spectrum, far)
    if not near.any():
        return plain
    series = _series_terms(spectrum, np.where(near, z, 0.0))
    return _Terms(*(np.where(near, s, t) for s, t in zip(series, plain, strict=True)))


def _plain_terms(spectrum: Spectrum, z: FloatArray) -> _Terms:
    c, h, f = spectrum.scaled(z)
    f0 = np.asarray(spectrum.scaled_moments(2)[1] / 2)
    zz = z**2
    a = (1 - c**2) / zz
    return _Terms(
        a=a,
        b=(h**2 - f0 * a) / zz,
        p=h**2 - (1 + c) * (f0 - f) / zz,
        q=(h**2 - (1 - c) * (f0 + f) / zz) / zz,
        d=(f0**2 - h**2) / zz,
        w=(c * h**2 - f * a) / zz,
        h=h,
        f0=f0,
    )


def _series_terms(spectrum: Spectrum, z: FloatArray) -> _Terms:
    """Return the same from the power series of C in z^2, leading terms cancelled exactly."""
    n = _SERIES_TERMS
    order = np.arange(n + 2)
    c = spectrum.scaled_moments(n + 2) / [(-4.0) ** m * factorial(m) ** 2 for m in order]
    h = (-2.0 * order * c)[1:]
    f = (-2.0 * order * (2 * order - 1) * c)[1:]
    f0 = float(f[0])
    one = np.zeros(n + 2)
    one[0] = 1.0

    def times(first: FloatArray, second: FloatArray) -> FloatArray:
        return np.convolve(first, second)[:n]

    def lowered(series: FloatArray) -> FloatArray:
        """Divide by z^2 a series whose first term is known to vanish."""
        return series[1:]

    a = lowered(one[:n] - times(c, c))
    slope = times(h, h)
    rise = lowered(f0 * one[: f.size] - f)
    fall = lowered(one - c)
    polynomials = (
        a,
        lowered(slope[: n - 1] - f0 * a),
        slope - times(one + c, rise),
        lowered(slope - times(fall, f0 * one[: f.size] + f)),
        lowered(f0**2 * one[:n] - slope),
        lowered(times(c, slope)[: n - 1] - times(f, a)[: n - 1]),
        h,
        f[:1],
    )
    zz = z**2
    return _Terms(*(_polyval(s, zz) for s in polynomials))


def _polyval(series: FloatArray, zz: FloatArray) -> FloatArray:
    return np.asarray(np.polynomial.polynomial.polyval(zz, series), dtype=np.float64)
