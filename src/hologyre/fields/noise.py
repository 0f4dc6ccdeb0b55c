"""How noisy a demodulated field is, as a map."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import scipy.fft
import scipy.ndimage
from numpy.typing import ArrayLike, NDArray

from hologyre.fields.bands import Band, FilterWindow
from hologyre.fields.blanks import Blanks
from hologyre.fields.carrier import Carrier
from hologyre.fields.demodulate import (
    Edges,
    border_fades,
    empty_inverse,
    reading_radius,
)
from hologyre.fields.fit import fit_spectrum
from hologyre.fields.fit_plan import make_plan
from hologyre.fields.interpolate import on_pixels
from hologyre.fields.pixel_noise import pixel_variance, repeat_variance
from hologyre.fields.saturation import usable_pixels
from hologyre.fields.transform import band_spectrum

_DRAWS = 24
_BORDER = 1.5
"""Wavelengths from the border over which a fit magnifies noise."""


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
        along_y = np.trapezoid(self.variance, self.y_px, axis=0) / np.ptp(self.y_px)
        return float(np.sqrt(np.trapezoid(along_y, self.x_px) / np.ptp(self.x_px)))

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
    edges: Edges = "fit",
    window: FilterWindow = "disc",
    reach: float | None = None,
    blanks: Blanks | None = None,
    valid: NDArray[np.bool_] | None = None,
    saturation: float | None = None,
) -> NoiseMap:
    """Measure the noise of the field that `demodulate` reads from this hologram.

    The variance of a pixel is taken as a line in its counts (shot noise, read noise and
    quantisation). The line is fitted to the part of the spectrum that neither the zero order
    nor the sidebands reach, under a Hann window, without which the frame's edges leak into
    it. The field's variance is the pixels' convolved with the filter's squared response; for the
    fit, of the part of the response within the frame, times what the fit magnifies near the
    borders. An empty frame that is divided out magnifies the noise where it is dark; its own
    noise is not counted.

    Parameters
    ----------
    hologram : (y, x) or (t, y, x) real array
        The frame; or repeats of it, in which nothing moves, whose differences then give the
        line instead of the spectrum.
    carrier : Carrier
        The sideband that is read.
    edges, window, reach, blanks, valid, saturation
        As given to `demodulate`.

    Returns
    -------
    NoiseMap

    Raises
    ------
    ValueError
        If a frame holds NaN or infinity, or if no part of the spectrum is free.
    """
    frames = np.asarray(hologram)
    if frames.ndim not in (2, 3) or np.iscomplexobj(frames):
        msg = (
            "hologram: expected a real (y, x) array, or (t, y, x) repeats of it, got "
            f"{frames.dtype} of shape {frames.shape}"
        )
        raise ValueError(msg)
    shape = (frames.shape[-2], frames.shape[-1])
    usable = usable_pixels(frames.max(axis=0) if frames.ndim == 3 else frames, valid, saturation)
    seen = frames if usable is None else frames[..., usable]
    if not np.isfinite(seen).all():
        raise ValueError("hologram: holds NaN or infinity")
    if usable is not None and frames.dtype.kind == "f":
        frames = np.where(usable, frames, seen.mean())
    if frames.ndim == 3:
        offset, gain = repeat_variance(frames, usable)
        frame = frames.mean(axis=0)
    else:
        frame = frames.astype(np.float64)
        offset, gain = pixel_variance(frame, carrier, usable)
    counts_variance = np.maximum(offset + gain * frame, 0)
    at = (carrier.fy, carrier.fx)
    if edges == "fit":
        band = make_plan(shape, at, carrier.radius).side
        variance = _filtered_variance(counts_variance, band, band.weights())
        within = _filtered_variance(np.ones(shape), band, band.weights())
        response = band.weights().sum() / (band.period[0] * band.period[1])
        variance *= response / np.maximum(within, 1e-3 * response)
    else:
        band = Band(shape, shape, at, reading_radius(carrier, shape) if reach is None else reach)
        if edges == "taper":
            fades = border_fades(shape, carrier.radius)
            counts_variance *= np.outer(fades[0] ** 2, fades[1] ** 2)
        variance = _filtered_variance(counts_variance, band, band.weights(window))
    y_px, x_px = (
        _positions(n, period / count, carrier.radius if edges == "fit" else None)
        for n, period, count in zip(shape, band.period, variance.shape, strict=True)
    )
    rows, columns = np.meshgrid(
        y_px * variance.shape[0] / band.period[0],
        x_px * variance.shape[1] / band.period[1],
        indexing="ij",
    )
    variance = scipy.ndimage.map_coordinates(variance, [rows, columns], order=3, mode="grid-wrap")
    if edges == "fit":
        along_y, along_x = _inflation(shape, at, carrier.radius)
        variance *= np.outer(
            np.interp(y_px, np.arange(shape[0]), along_y),
            np.interp(x_px, np.arange(shape[1]), along_x),
        )
    if blanks is not None and blanks.empty is not None:
        factor = empty_inverse(
            blanks, carrier, edges=edges, window=window, reach=reach, valid=valid
        )
        gain_there = np.abs(on_pixels(factor)) ** 2
        near = np.ix_(
            np.minimum(np.rint(y_px).astype(int), shape[0] - 1),
            np.minimum(np.rint(x_px).astype(int), shape[1] - 1),
        )
        variance *= gain_there[near]
    return NoiseMap(variance, y_px, x_px, gain, offset)


def _filtered_variance(
    counts_variance: NDArray[np.float64], band: Band, weights: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Convolve pixel variances with the filter's squared response, on the lattice it needs.

    The lattice covers the band's torus evenly.
    """
    spread = Band(band.frame_shape, band.period, (0.0, 0.0), min(2.5 * band.radius, 0.5))
    lines = scipy.fft.fft2(weights, s=[4 * h + 2 for h in band.half])
    overlap = scipy.fft.fftshift(scipy.fft.ifft2(np.abs(lines) ** 2).real)
    middle = [n // 2 for n in overlap.shape]
    half = [min(a, 2 * h) for a, h in zip(spread.half, band.half, strict=True)]
    cut = tuple(slice(h - w, h + w + 1) for h, w in zip(spread.half, half, strict=True))
    kept = tuple(slice(m - w, m + w + 1) for m, w in zip(middle, half, strict=True))
    spectrum = band_spectrum(counts_variance, spread)[cut] * overlap[kept]
    spectrum /= band.period[0] * band.period[1]
    lattice = [
        min(scipy.fft.next_fast_len(2 * w + 2), n) for w, n in zip(half, band.period, strict=True)
    ]
    placed = np.zeros(lattice, dtype=np.complex128)
    rows, columns = (np.arange(-w, w + 1) % n for w, n in zip(half, lattice, strict=True))
    placed[rows[:, None], columns[None, :]] = spectrum
    variance: NDArray[np.float64] = scipy.fft.ifft2(placed, norm="forward").real
    return np.maximum(variance, 0)


def _positions(pixels: int, step: float, radius: float | None) -> NDArray[np.float64]:
    """Return positions that cover the frame evenly, every pixel near the border of a fit."""
    even = np.linspace(0, pixels - 1, max(int(np.ceil((pixels - 1) / step)) + 1, 2))
    if radius is None:
        return even
    border = np.arange(min(int(np.ceil(_BORDER / radius)) + 1, pixels // 2), dtype=np.float64)
    inner = even[(even > border[-1] + 1) & (even < pixels - 2 - border[-1])]
    return np.concatenate([border, inner, pixels - 1 - border[::-1]])


@lru_cache(maxsize=8)
def _inflation(
    frame_shape: tuple[int, int], carrier: tuple[float, float], radius: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return how a fit magnifies white noise near the borders, as a factor along each axis.

    The variance of the fit to unit white noise over that of the filter alone, by draws that
    are always the same, averaged over the other axis and both ends.
    """
    plan = make_plan(frame_shape, carrier, radius)
    rng = np.random.default_rng(0)
    power = np.zeros(frame_shape)
    for _ in range(_DRAWS):
        spectrum = fit_spectrum(rng.standard_normal(frame_shape, dtype=np.float32), plan)
        power += np.abs(on_pixels(plan.side.field(spectrum, "band"))) ** 2
    area = plan.side.period[0] * plan.side.period[1]
    power *= area / (_DRAWS * plan.side.weights().sum())
    profiles = []
    for axis in (0, 1):
        other = frame_shape[1 - axis]
        middle = slice(other // 6, other - other // 6)
        profile = (power[:, middle] if axis == 0 else power[middle].T).mean(axis=1)
        profile = scipy.ndimage.gaussian_filter1d((profile + profile[::-1]) / 2, 0.03 / radius)
        # Away from the border there is nothing but the spread of the draws.
        depth = np.minimum(np.arange(profile.size), np.arange(profile.size)[::-1])
        inner = depth > _BORDER / radius
        level = profile[inner].mean() if inner.any() else profile.min()
        profiles.append(np.where(inner, level, profile) / np.sqrt(level))
    return profiles[0], profiles[1]
