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

_DEGREE = 9
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
def _weights(table, u, w):  # type: ignore[no-untyped-def]
    """Fill the taps' weights and half their derivatives, per sample."""
    s = 2.0 * u - 1.0
    for k in range(TAPS):
        w[0, k] = table[0, k]
        w[1, k] = 0.0
    for d in range(1, table.shape[0]):
        for k in range(TAPS):
            w[1, k] = w[1, k] * s + w[0, k]
            w[0, k] = w[0, k] * s + table[d, k]


@numba.njit(cache=True, nogil=True)
def _cell_of(v, count):  # type: ignore[no-untyped-def]
    """Split a coordinate into its cell, kept within the lattice, and the rest."""
    cell = min(max(int(np.floor(v)), 0), count - 2 * HALO - 2)
    return cell, v - cell


@numba.njit(cache=True, nogil=True)
def scratch():  # type: ignore[no-untyped-def]
    """Return the room the evaluations below work in."""
    return np.empty((4, 2, TAPS))


@numba.njit(cache=True, nogil=True)
def value_and_slopes(planes, table, y, x, work):  # type: ignore[no-untyped-def]
    """Return E, dE/dy and dE/dx at node coordinates (y, x), derivatives per step.

    `planes` holds the real and the imaginary part of the samples, HALO rows and columns more
    than the nodes on every side.
    """
    j, v = _cell_of(y, planes.shape[1])
    i, u = _cell_of(x, planes.shape[2])
    wy, wx, along, slope = work[0], work[1], work[2], work[3]
    _weights(table, v, wy)
    _weights(table, u, wx)
    along[:] = 0.0
    slope[:] = 0.0
    # Rows are summed side by side, which compiles to vector instructions.
    for r in range(TAPS):
        a, b = wy[0, r], wy[1, r]
        for k in range(TAPS):
            re, im = planes[0, j + 1 + r, i + 1 + k], planes[1, j + 1 + r, i + 1 + k]
            along[0, k] += a * re
            along[1, k] += a * im
            slope[0, k] += b * re
            slope[1, k] += b * im
    e_re = e_im = y_re = y_im = x_re = x_im = 0.0
    for k in range(TAPS):
        a, b = wx[0, k], wx[1, k]
        e_re += a * along[0, k]
        e_im += a * along[1, k]
        x_re += b * along[0, k]
        x_im += b * along[1, k]
        y_re += a * slope[0, k]
        y_im += a * slope[1, k]
    return (
        complex(e_re, e_im),
        complex(2.0 * y_re, 2.0 * y_im),
        complex(2.0 * x_re, 2.0 * x_im),
    )


@numba.njit(cache=True, nogil=True)
def value_at(planes, table, y, x, work):  # type: ignore[no-untyped-def]
    """Return E at node coordinates (y, x); on a lattice line from that line alone.

    The value is a function of the place and not of the cell it is asked from, so that a
    winding counted along an edge is the same from both of its sides.
    """
    j, v = _cell_of(y, planes.shape[1])
    i, u = _cell_of(x, planes.shape[2])
    wy, wx = work[0], work[1]
    re = im = 0.0
    if v == 0.0 or v == 1.0:
        row = j + int(v) + HALO
        if u == 0.0 or u == 1.0:
            column = i + int(u) + HALO
            return complex(planes[0, row, column], planes[1, row, column])
        _weights(table, u, wx)
        for k in range(TAPS):
            re += wx[0, k] * planes[0, row, i + 1 + k]
            im += wx[0, k] * planes[1, row, i + 1 + k]
        return complex(re, im)
    _weights(table, v, wy)
    if u == 0.0 or u == 1.0:
        column = i + int(u) + HALO
        for r in range(TAPS):
            re += wy[0, r] * planes[0, j + 1 + r, column]
            im += wy[0, r] * planes[1, j + 1 + r, column]
        return complex(re, im)
    _weights(table, u, wx)
    for r in range(TAPS):
        row_re = row_im = 0.0
        for k in range(TAPS):
            row_re += wx[0, k] * planes[0, j + 1 + r, i + 1 + k]
            row_im += wx[0, k] * planes[1, j + 1 + r, i + 1 + k]
        re += wy[0, r] * row_re
        im += wy[0, r] * row_im
    return complex(re, im)
