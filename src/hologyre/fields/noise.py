"""How noisy a demodulated field is, as a map."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import scipy.fft
import scipy.ndimage
import scipy.optimize
from numpy.typing import ArrayLike, NDArray

from hologyre.fields.bands import Band, FilterWindow
from hologyre.fields.blanks import Blanks
from hologyre.fields.carrier import Carrier
from hologyre.fields.saturation import usable_pixels
from hologyre.fields.transform import band_spectrum

_BLOCK = 16
_MIN_OUTSIDE = 0.02


@dataclass(frozen=True, eq=False)
class NoiseMap:
    """Variance E|n|^2 of a complex field's noise, on a coarse lattice of pixel positions.

    Parameters
    ----------
    variance : (rows, columns) float array
        E|n|^2 in field units squared; real and imaginary part hold half of it each.
    y_px, x_px : float arrays
        Positions of the rows and columns, hologram pixels.
    gain, offset : float
        The variance of a pixel is ``offset + gain * counts``, counts squared.
    """

    variance: NDArray[np.float64]
    y_px: NDArray[np.float64]
    x_px: NDArray[np.float64]
    gain: float
    offset: float

    @property
    def rms(self) -> float:
        """Root mean square noise of the field over the frame, field units."""
        return float(np.sqrt(self.variance.mean()))

    def at(self, y_px: ArrayLike, x_px: ArrayLike) -> NDArray[np.float64]:
        """Return the variance at any points, linear between the lattice's, hologram pixels."""
        row = np.interp(np.asarray(y_px, dtype=np.float64), self.y_px, np.arange(self.y_px.size))
        column = np.interp(np.asarray(x_px, dtype=np.float64), self.x_px, np.arange(self.x_px.size))
        row, column = np.broadcast_arrays(row, column)
        found: NDArray[np.float64] = scipy.ndimage.map_coordinates(
            self.variance, [row, column], order=1, mode="nearest"
        )
        return found


def field_noise(
    hologram: ArrayLike,
    carrier: Carrier,
    *,
    edges: Literal["plain", "taper"] = "plain",
    window: FilterWindow = "disc",
    blanks: Blanks | None = None,
    valid: NDArray[np.bool_] | None = None,
    saturation: float | None = None,
) -> NoiseMap:
    """Measure the noise of the field that `demodulate` reads from this hologram.

    The variance of a pixel is taken as a line in its counts (shot noise, read noise and
    quantisation). The line is fitted to the part of the spectrum that neither the zero order
    nor the sidebands reach, under a Hann window, without which the frame's edges leak into
    it. The field's variance is the pixels' convolved with the filter's squared response.

    Parameters
    ----------
    hologram : (y, x) real array
        The frame.
    carrier : Carrier
        The sideband that is read.
    edges, window, blanks, valid, saturation
        As given to `demodulate`.

    Returns
    -------
    NoiseMap

    Raises
    ------
    ValueError
        If the frame is not 2-D or holds NaN, or if no part of the spectrum is free.
    """
    frame = np.asarray(hologram)
    if frame.ndim != 2 or np.iscomplexobj(frame) or not np.isfinite(frame).all():
        msg = f"hologram: expected a finite real (y, x) array, got shape {frame.shape}"
        raise ValueError(msg)
    usable = usable_pixels(frame, valid, saturation)
    frame = frame.astype(np.float64)
    shape = (frame.shape[0], frame.shape[1])
    offset, gain = pixel_variance(frame, carrier, usable)
    counts_variance = np.maximum(offset + gain * frame, 0)
    band = Band(shape, shape, (carrier.fy, carrier.fx), carrier.radius)
    lattice, variance = _filtered_variance(counts_variance, band, band.weights(window))
    y_px = np.arange(lattice[0]) * (shape[0] / lattice[0])
    x_px = np.arange(lattice[1]) * (shape[1] / lattice[1])
    return NoiseMap(variance, y_px, x_px, gain, offset)


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


def _filtered_variance(
    counts_variance: NDArray[np.float64], band: Band, weights: NDArray[np.float64]
) -> tuple[tuple[int, int], NDArray[np.float64]]:
    """Convolve pixel variances with the filter's squared response, on the lattice it needs."""
    shape = band.frame_shape
    spread = Band(shape, shape, (0.0, 0.0), min(2 * band.radius + 1 / min(shape), 0.5))
    lines = scipy.fft.fft2(weights, s=[4 * h + 2 for h in band.half])
    overlap = scipy.fft.fftshift(scipy.fft.ifft2(np.abs(lines) ** 2).real)
    middle = [n // 2 for n in overlap.shape]
    half = [min(a, b) for a, b in zip(spread.half, [2 * h for h in band.half], strict=True)]
    spectrum = band_spectrum(counts_variance, spread)
    cut = tuple(slice(h - w, h + w + 1) for h, w in zip(spread.half, half, strict=True))
    kept = tuple(slice(m - w, m + w + 1) for m, w in zip(middle, half, strict=True))
    spectrum = spectrum[cut] * overlap[kept] / counts_variance.size
    lattice = tuple(
        min(scipy.fft.next_fast_len(2 * w + 2), n) for w, n in zip(half, shape, strict=True)
    )
    placed = np.zeros(lattice, dtype=np.complex128)
    rows, columns = (np.arange(-w, w + 1) % n for w, n in zip(half, lattice, strict=True))
    placed[rows[:, None], columns[None, :]] = spectrum
    variance = scipy.fft.ifft2(placed, norm="forward").real
    return (lattice[0], lattice[1]), np.maximum(variance, 0)
