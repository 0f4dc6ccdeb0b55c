"""The variance of a camera's counts, as a line in the counts."""

from __future__ import annotations

from typing import Any

import numpy as np
import scipy.fft
import scipy.optimize
from numpy.typing import NDArray

from hologyre.fields.carrier import Carrier

_BLOCK = 16
_MIN_OUTSIDE = 0.02


def pixel_variance(
    frame: NDArray[np.float64], carrier: Carrier, usable: NDArray[np.bool_] | None = None
) -> tuple[float, float]:
    """Return offset and gain of the line ``variance = offset + gain * counts``.

    Blocks of pixels that hold an unusable one are left out.
    """
    ny, nx = frame.shape
    fy, fx = scipy.fft.fftfreq(ny)[:, None], scipy.fft.rfftfreq(nx)[None, :]
    outside = _outside(fy, fx, carrier)
    share = _full_mean(outside, nx)
    if share < _MIN_OUTSIDE:
        msg = (
            "carrier: zero order and sidebands take the whole spectrum, no part is left to "
            "measure the noise in"
        )
        raise ValueError(msg)
    fade = np.outer(np.hanning(ny + 2)[1:-1], np.hanning(nx + 2)[1:-1])
    spectrum = scipy.fft.rfft2((frame - frame.mean()) * fade)
    residual = scipy.fft.irfft2(spectrum * outside, s=frame.shape) ** 2
    response = scipy.fft.rfft2(scipy.fft.irfft2(outside.astype(np.float64), s=frame.shape) ** 2)
    parts = [
        scipy.fft.irfft2(scipy.fft.rfft2(fade**2 * counts) * response, s=frame.shape)
        for counts in (np.ones_like(frame), frame)
    ]
    observed = _blocks(residual)
    design = np.stack([_blocks(part) for part in parts], axis=1)
    # The spread of a block's sum is as its mean; faint blocks are ruled by leakage.
    expected = design @ np.array([1e-3 * abs(frame.mean()) + 1e-12, 1.0])
    weight = np.where(design[:, 0] > 0.02 * design[:, 0].max(), 1 / expected, 0)
    if usable is not None:
        weight *= _blocks((~usable).astype(np.float64)) == 0
    (offset, gain), _ = scipy.optimize.nnls(design * weight[:, None], observed * weight)
    return float(offset), float(gain)


def _outside(
    fy: NDArray[np.float64], fx: NDArray[np.float64], carrier: Carrier
) -> NDArray[np.bool_]:
    """Return the frequencies that no order reaches."""
    reach = 1.15 * carrier.radius + 2 / min(fy.size, 2 * fx.size - 2)
    free = np.hypot(fy, fx) > 2 * reach
    for order in (-2, -1, 1, 2):
        # Aliases of harmonics fold back into the spectrum.
        away_y = np.abs((fy - order * carrier.fy + 0.5) % 1 - 0.5)
        away_x = np.abs((fx - order * carrier.fx + 0.5) % 1 - 0.5)
        free &= np.hypot(away_y, away_x) > reach
    return free


def _full_mean(mask: NDArray[np.bool_], nx: int) -> float:
    weight = np.full(mask.shape[1], 2.0)
    weight[0] = 1
    if nx % 2 == 0:
        weight[-1] = 1
    return float((mask * weight).sum() / (mask.shape[0] * nx))


def _blocks(image: NDArray[np.float64]) -> NDArray[np.float64]:
    rows, columns = (np.arange(0, n, _BLOCK) for n in image.shape)
    summed = np.add.reduceat(np.add.reduceat(image, rows, axis=0), columns, axis=1)
    return summed.ravel()


def repeat_variance(
    frames: NDArray[Any], usable: NDArray[np.bool_] | None = None
) -> tuple[float, float]:
    """Return the same line from frames of one unmoving scene, by their differences.

    Differences of neighbouring frames, less what a change of the lamp alone would make.

    Parameters
    ----------
    frames : (t, y, x) real array
        At least two frames.
    usable : (y, x) bool array, optional
        Pixels to take.
    """
    if frames.ndim != 3 or frames.shape[0] < 2:
        raise ValueError(f"frames: expected at least two (t, y, x), got shape {frames.shape}")
    counts = frames.astype(np.float64)
    steps = np.diff(counts, axis=0)
    mean = counts.mean(axis=0)
    brighter = np.tensordot(steps, mean, axes=2) / (mean**2).sum()
    steps -= brighter[:, None, None] * mean
    variance = (steps**2).mean(axis=0) / 2
    if usable is not None:
        variance, mean = variance[usable], mean[usable]
    order = np.argsort(mean, axis=None)
    groups = np.array_split(order, min(64, order.size))
    observed = np.array([variance.ravel()[group].mean() for group in groups])
    design = np.array([[1.0, mean.ravel()[group].mean()] for group in groups])
    weight = 1 / np.maximum(observed, 1e-12)
    (offset, gain), _ = scipy.optimize.nnls(design * weight[:, None], observed * weight)
    return float(offset), float(gain)
