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
    side: NDArray[np.float64] = np.cos(np.pi * (np.arange(64) + 0.5) / 64)
    weights = least_squares(band, known, 0.5 + 0.5 * side, 1e-12)
    # The taps mirror each other about the middle, to rounding; make it exact.
    weights = (weights + weights[::-1, ::-1]) / 2
    series = np.polynomial.chebyshev.chebfit(side, weights[:, : TAPS // 2], _DEGREE)
    table = np.stack([np.polynomial.chebyshev.cheb2poly(c)[::-1] for c in series.T])
    frequency = np.linspace(-band, band, 101)
    half = np.stack([np.polyval(row, side) for row in table], axis=1)
    mirrored = np.stack([np.polyval(row, -side) for row in table[::-1]], axis=1)
    waves = np.exp(2j * np.pi * np.outer(known, frequency))
    wanted = np.exp(2j * np.pi * np.outer(0.5 + 0.5 * side, frequency))
    error = np.abs(np.hstack([half, mirrored]) @ waves - wanted)
    return np.ascontiguousarray(table), float(error.max())


def kernel_table(band: float) -> tuple[NDArray[np.float64], float]:
    """Return the kernel for fields below `band` and its largest error.

    Parameters
    ----------
    band : float
        Highest frequency along an axis, cycles per sample; at most 0.4.

    Returns
    -------
    table : (TAPS / 2, degree + 1) array
        Coefficients of the weights of the first half of the taps, highest power of ``2 u - 1``
        first, u in [0, 1] being the place between the two samples in the middle. The other
        half mirrors them.
    error : float
        Largest error of a wave of unit amplitude, along one axis.
    """
    return _designed(min(b for b in (*_BANDS, max(band, _BANDS[-1])) if b >= band - 1e-12))


def bands() -> tuple[float, ...]:
    """Return the bands kernels are designed for, cycles per sample."""
    return _BANDS


@numba.njit(cache=True, nogil=True)
def _weights(table, u, w):  # type: ignore[no-untyped-def]
    """Fill the taps' weights and half their derivatives, per sample.

    Even and odd powers apart serve a tap and its mirror image at once.
    """
    s = 2.0 * u - 1.0
    square = s * s
    for k in range(TAPS // 2):
        row = table[k]
        odd, even = row[0], row[1]
        odd_slope = even_slope = 0.0
        for d in range(2, _DEGREE + 1, 2):
            odd_slope = odd_slope * square + odd
            even_slope = even_slope * square + even
            odd = odd * square + row[d]
            even = even * square + row[d + 1]
        value, slope = s * odd, 2.0 * s * even_slope
        other = odd + 2.0 * square * odd_slope
        w[0, k], w[0, TAPS - 1 - k] = even + value, even - value
        w[1, k], w[1, TAPS - 1 - k] = slope + other, slope - other


@numba.njit(cache=True, nogil=True)
def _cell_of(v, count):  # type: ignore[no-untyped-def]
    """Split a coordinate into its cell, kept within the lattice, and the rest."""
    cell = min(max(int(np.floor(v)), 0), count - 2 * HALO - 2)
    return cell, v - cell


@numba.njit(cache=True, nogil=True)
def scratch():  # type: ignore[no-untyped-def]
    """Return the room the evaluations below work in."""
    return np.empty((2, 2, TAPS))


@numba.njit(cache=True, nogil=True)
def value_and_slopes(planes, table, y, x, work):  # type: ignore[no-untyped-def]
    """Return E, dE/dy and dE/dx at node coordinates (y, x), derivatives per step.

    `planes` holds the real and the imaginary part of the samples, HALO rows and columns more
    than the nodes on every side.
    """
    j, v = _cell_of(y, planes.shape[1])
    i, u = _cell_of(x, planes.shape[2])
    wy, wx = work[0], work[1]
    _weights(table, v, wy)
    _weights(table, u, wx)
    e_re = e_im = y_re = y_im = x_re = x_im = 0.0
    for r in range(TAPS):
        re, im = planes[0, j + 1 + r], planes[1, j + 1 + r]
        # Two sums at a time do not wait for each other.
        a_re = a_im = b_re = b_im = c_re = c_im = d_re = d_im = 0.0
        for k in range(0, TAPS, 2):
            p, q = re[i + 1 + k], im[i + 1 + k]
            a_re += wx[0, k] * p
            a_im += wx[0, k] * q
            b_re += wx[1, k] * p
            b_im += wx[1, k] * q
            p, q = re[i + 2 + k], im[i + 2 + k]
            c_re += wx[0, k + 1] * p
            c_im += wx[0, k + 1] * q
            d_re += wx[1, k + 1] * p
            d_im += wx[1, k + 1] * q
        a_re, a_im, b_re, b_im = a_re + c_re, a_im + c_im, b_re + d_re, b_im + d_im
        e_re += wy[0, r] * a_re
        e_im += wy[0, r] * a_im
        x_re += wy[0, r] * b_re
        x_im += wy[0, r] * b_im
        y_re += wy[1, r] * a_re
        y_im += wy[1, r] * a_im
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


@numba.njit(cache=True, nogil=True)
def values_at(planes, table, places):  # type: ignore[no-untyped-def]
    """Return E at places (n, 2) in node coordinates."""
    out = np.empty(places.shape[0], dtype=np.complex128)
    work = scratch()
    for n in range(places.shape[0]):
        out[n] = value_at(planes, table, places[n, 0], places[n, 1], work)
    return out


@numba.njit(cache=True, nogil=True)
def jets_at(planes, table, places):  # type: ignore[no-untyped-def]
    """Return E, dE/dy and dE/dx, (n, 3) and per step, at places (n, 2) in node coordinates."""
    out = np.empty((places.shape[0], 3), dtype=np.complex128)
    work = scratch()
    for n in range(places.shape[0]):
        e, ey, ex = value_and_slopes(planes, table, places[n, 0], places[n, 1], work)
        out[n, 0], out[n, 1], out[n, 2] = e, ey, ex
    return out
