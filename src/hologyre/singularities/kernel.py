"""Interpolation between the samples of an oversampled field, by least-squares kernels.

A field whose frequencies stay below `band` cycles per sample is summed over the nearest
`TAPS` samples of each axis. The weights are those of least squares over the band, so that
they serve a lattice cut out of a plane as well as a periodic one; they are kept as
polynomials in the place between two samples.
"""

from __future__ import annotations

from functools import lru_cache

import numba
import numpy as np
from numpy.typing import NDArray

TAPS = 16
"""Samples summed along each axis."""

HALO = TAPS // 2
"""Samples needed beyond the outermost node that is interpolated next to."""

_DEGREE = 17
_BANDS = (1 / 24, 1 / 16, 1 / 12, 1 / 10, 1 / 8, 1 / 7, 1 / 6, 1 / 5, 0.225, 1 / 4, 0.3, 0.35, 0.4)


def least_squares(
    band: float, known: NDArray[np.float64], wanted: NDArray[np.float64], ridge: float
) -> NDArray[np.float64]:
    """Return the weights that give waves below `band` at `wanted` from those at `known`.

    Parameters
    ----------
    band : float
        Highest frequency, cycles per sample.
    known, wanted : (n,), (m,) arrays
        Places along the axis, in samples.
    ridge : float
        Singular values below `ridge` of the largest are left out, so that noise of this
        relative size is not blown up.

    Returns
    -------
    (m, n) array
    """
    frequency = band * np.polynomial.legendre.leggauss(96)[0]
    turns = 2 * np.pi * frequency[:, np.newaxis]
    # Waves of both signs have real weights: cosines and sines of positive frequencies do.
    given = np.vstack([np.cos(turns * known), np.sin(turns * known)])
    asked = np.vstack([np.cos(turns * wanted), np.sin(turns * wanted)])
    weights: NDArray[np.float64] = np.linalg.lstsq(given, asked, rcond=ridge)[0].T
    return weights


@lru_cache(maxsize=32)
def _designed(band: float) -> tuple[NDArray[np.float64], float]:
    known = np.arange(TAPS, dtype=np.float64) - (HALO - 1.0)
    place: NDArray[np.float64] = 0.5 + 0.5 * np.cos(np.pi * (np.arange(64) + 0.5) / 64)
    weights = least_squares(band, known, place, 1e-12)
    series = np.polynomial.chebyshev.chebfit(2 * place - 1, weights, _DEGREE)
    table = np.stack([np.polynomial.chebyshev.cheb2poly(c) for c in series.T], axis=1)
    powers = (2 * place - 1)[:, np.newaxis] ** np.arange(_DEGREE + 1)
    frequency = np.linspace(-band, band, 101)
    error = np.abs(
        (powers @ table) @ np.exp(2j * np.pi * np.outer(known, frequency))
        - np.exp(2j * np.pi * np.outer(place, frequency))
    )
    return np.ascontiguousarray(table[::-1]), float(error.max())


def kernel_table(band: float) -> tuple[NDArray[np.float64], float]:
    """Return the kernel for fields below `band` and its largest error.

    Parameters
    ----------
    band : float
        Highest frequency along an axis, cycles per sample; at most 0.4.

    Returns
    -------
    table : (degree + 1, TAPS) array
        Coefficients of each tap's weight, highest power of ``2 u - 1`` first, u in [0, 1]
        being the place between the two samples in the middle.
    error : float
        Largest error of a wave of unit amplitude, along one axis.
    """
    return _designed(min(b for b in (*_BANDS, max(band, _BANDS[-1])) if b >= band - 1e-12))


def bands() -> tuple[float, ...]:
    """Return the bands kernels are designed for, cycles per sample."""
    return _BANDS


@numba.njit(cache=True, nogil=True)
def _weights(table, u, w, dw):  # type: ignore[no-untyped-def]
    """Fill weights and their derivatives along the axis, per sample."""
    s = 2.0 * u - 1.0
    for k in range(TAPS):
        w[k] = table[0, k]
        dw[k] = 0.0
    for d in range(1, table.shape[0]):
        for k in range(TAPS):
            dw[k] = dw[k] * s + w[k]
            w[k] = w[k] * s + table[d, k]
    for k in range(TAPS):
        dw[k] *= 2.0


@numba.njit(cache=True, nogil=True)
def _place(v, count):  # type: ignore[no-untyped-def]
    """Split a coordinate into its cell, kept within the lattice, and the rest."""
    cell = int(np.floor(v))
    cell = min(max(cell, 0), count - 2 * HALO - 2)
    return cell, v - cell


@numba.njit(cache=True, nogil=True)
def value_and_slopes(samples, table, y, x, work):  # type: ignore[no-untyped-def]
    """Return E, dE/dy and dE/dx at node coordinates (y, x), derivatives per sample.

    `samples` has HALO rows and columns more than the nodes on every side; `work` is a
    (4, TAPS) scratch array.
    """
    j, v = _place(y, samples.shape[0])
    i, u = _place(x, samples.shape[1])
    _weights(table, v, work[0], work[1])
    _weights(table, u, work[2], work[3])
    e_re = e_im = y_re = y_im = x_re = x_im = 0.0
    for r in range(TAPS):
        row = samples[j + 1 + r]
        a_re = a_im = b_re = b_im = 0.0
        for k in range(TAPS):
            s = row[i + 1 + k]
            a_re += work[2, k] * s.real
            a_im += work[2, k] * s.imag
            b_re += work[3, k] * s.real
            b_im += work[3, k] * s.imag
        e_re += work[0, r] * a_re
        e_im += work[0, r] * a_im
        y_re += work[1, r] * a_re
        y_im += work[1, r] * a_im
        x_re += work[0, r] * b_re
        x_im += work[0, r] * b_im
    return complex(e_re, e_im), complex(y_re, y_im), complex(x_re, x_im)


@numba.njit(cache=True, nogil=True)
def value_at(samples, table, y, x, work):  # type: ignore[no-untyped-def]
    """Return E at node coordinates (y, x); on a lattice line from that line alone.

    The value is a function of the place and not of the cell it is asked from, so that a
    winding counted along an edge is the same from both of its sides.
    """
    j, v = _place(y, samples.shape[0])
    i, u = _place(x, samples.shape[1])
    re = im = 0.0
    if v == 0.0 or v == 1.0:
        j += int(v)
        if u == 0.0 or u == 1.0:
            return samples[j + HALO, i + int(u) + HALO]
        _weights(table, u, work[2], work[3])
        for k in range(TAPS):
            s = samples[j + HALO, i + 1 + k]
            re += work[2, k] * s.real
            im += work[2, k] * s.imag
        return complex(re, im)
    _weights(table, v, work[0], work[1])
    if u == 0.0 or u == 1.0:
        i += int(u)
        for k in range(TAPS):
            s = samples[j + 1 + k, i + HALO]
            re += work[0, k] * s.real
            im += work[0, k] * s.imag
        return complex(re, im)
    _weights(table, u, work[2], work[3])
    for r in range(TAPS):
        a_re = a_im = 0.0
        for k in range(TAPS):
            s = samples[j + 1 + r, i + 1 + k]
            a_re += work[2, k] * s.real
            a_im += work[2, k] * s.imag
        re += work[0, r] * a_re
        im += work[0, r] * a_im
    return complex(re, im)
