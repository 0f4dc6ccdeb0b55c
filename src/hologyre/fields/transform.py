"""The few Fourier coefficients of a real frame that a band holds."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from hologyre.fields.bands import Band


def band_spectrum(frame: NDArray[np.floating], band: Band) -> NDArray[np.complexfloating]:
    """Return the coefficients of a frame at the bins of a band; see `band_spectra`."""
    return band_spectra(frame, [band])[0]


def band_spectra(
    frame: NDArray[np.floating], bands: Sequence[Band]
) -> list[NDArray[np.complexfloating]]:
    """Return the coefficients of a frame at the bins of bands of one torus.

    The transform is pruned: along x it is real, and along y only the columns in a band
    are transformed. Columns of negative frequency are the conjugate of their mirror image.

    Parameters
    ----------
    frame : (y, x) real array
        The frame; its precision is kept. It is zero on the torus beyond its edges.
    bands : sequence of Band
        The bins wanted; the bands' periods must agree.

    Returns
    -------
    list of (ky, kx) complex array
        Coefficients of ``exp(2 pi i k r / period)``; zero beyond Nyquist.
    """
    ny, nx = bands[0].period
    needed = [np.minimum(np.abs(band.bins(1)), nx // 2) for band in bands]
    columns = np.unique(np.concatenate(needed))
    half = scipy.fft.rfft(frame, n=nx, axis=1)
    # Transforming contiguous rows of the transpose is quicker than strided columns.
    lines = np.ascontiguousarray(half.T[_slice_or_index(columns)])
    spectrum = scipy.fft.fft(lines, n=ny, axis=1, overwrite_x=True)
    spectrum *= spectrum.dtype.type(1 / (ny * nx))
    picked = []
    for band, wanted in zip(bands, needed, strict=True):
        bins_y, bins_x = band.bins(0), band.bins(1)
        sign = np.where(bins_x < 0, -1, 1)
        place = np.searchsorted(columns, wanted)
        part = spectrum[place[None, :], (bins_y[:, None] * sign) % ny]
        if bins_x[0] < 0:
            part[:, bins_x < 0] = part[:, bins_x < 0].conj()
        part[2 * np.abs(bins_y) > ny] = 0
        part[:, 2 * np.abs(bins_x) > nx] = 0
        picked.append(part)
    return picked


def _slice_or_index(columns: NDArray[np.intp]) -> slice | NDArray[np.intp]:
    """Return a slice, which is read quicker, where the columns are consecutive."""
    first, last = int(columns[0]), int(columns[-1])
    return slice(first, last + 1) if last - first + 1 == columns.size else columns


def band_frame(
    bands: Sequence[Band], coefficients: Sequence[NDArray[np.complexfloating]]
) -> NDArray[np.floating]:
    """Return the real frame ``2 Re sum c exp(2 pi i k r / period)`` of bands' coefficients.

    The way back from `band_spectra`, pruned alike.

    Returns
    -------
    (y, x) real array of the bands' frame shape
    """
    ny, nx = bands[0].period
    rows, width = bands[0].frame_shape
    dtype = coefficients[0].dtype
    lines = np.zeros((nx // 2 + 1, ny), dtype=dtype)
    for band, part in zip(bands, coefficients, strict=True):
        bins_y, bins_x = band.bins(0), band.bins(1)
        for sign in (1, -1):
            # Columns of negative frequency enter as the conjugate of their mirror image.
            kept = (sign * bins_x >= 0) & (2 * np.abs(bins_x) < nx)
            added = part[:, kept] if sign == 1 else part[:, kept].conj()
            lines[(sign * bins_x[kept])[:, None], (sign * bins_y[None, :]) % ny] += added.T
    used = np.flatnonzero(lines.any(axis=1))
    half = np.zeros((rows, nx // 2 + 1), dtype=dtype)
    half[:, used] = scipy.fft.ifft(lines[used], axis=1, norm="forward")[:, :rows].T
    return scipy.fft.irfft(half, n=nx, axis=1, norm="forward")[:, :width]
