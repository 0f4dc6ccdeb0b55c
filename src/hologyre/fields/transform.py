"""The few Fourier coefficients of a real frame that a band holds."""

from __future__ import annotations

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from hologyre.fields.bands import Band


def band_spectrum(frame: NDArray[np.floating], band: Band) -> NDArray[np.complexfloating]:
    """Return the coefficients of a frame at the bins of a band.

    The transform is pruned: along x it is real, and along y only the columns in the band
    are transformed. Columns of negative frequency are the conjugate of their mirror image.

    Parameters
    ----------
    frame : (y, x) real array
        The frame; its precision is kept. The band's period must be the frame itself.
    band : Band
        The bins wanted.

    Returns
    -------
    (ky, kx) complex array
        Coefficients of ``exp(2 pi i k r / n)``; zero beyond Nyquist.
    """
    ny, nx = frame.shape
    bins_y, bins_x = band.bins(0), band.bins(1)
    below = (2 * np.abs(bins_y) <= ny)[:, None] & (2 * np.abs(bins_x) <= nx)
    columns = np.minimum(np.abs(bins_x), nx // 2)
    first, last = int(columns.min()), int(columns.max())
    half = scipy.fft.rfft(frame, axis=1)[:, first : last + 1]
    # Transforming contiguous rows of the transpose is quicker than strided columns.
    spectrum = scipy.fft.fft(np.ascontiguousarray(half.T), axis=1, overwrite_x=True)
    spectrum *= spectrum.dtype.type(1 / (ny * nx))
    sign = np.where(bins_x < 0, -1, 1)
    picked = spectrum[(columns - first)[None, :], (bins_y[:, None] * sign) % ny]
    if bins_x[0] < 0:
        picked[:, bins_x < 0] = picked[:, bins_x < 0].conj()
    picked[~below] = 0
    return picked
