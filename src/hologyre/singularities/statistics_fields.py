"""Statistics of a field as a whole: spectrum, local wavevectors, intensities."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import Literal

import numpy as np
import pandas as pd
import scipy.fft
from numpy.typing import ArrayLike, NDArray

from hologyre.fields.interpolate import on_pixels
from hologyre.fields.wavevector import current, local_wavevector
from hologyre.grid import Field, Grid, Window
from hologyre.singularities.statistics_blocks import (
    BlockKind,
    Blocks,
    Estimate,
    estimate,
    ratios,
    redraw,
)
from hologyre.singularities.theory_spectrum import FloatArray, Spectrum, nonnegative

ComplexArray = NDArray[np.complexfloating]


def measure_spectrum(field: Field | ComplexArray) -> Spectrum:
    """Measure the power over wavenumbers, for the theory lines of this very field.

    Parameters
    ----------
    field : Field or (..., y, x) complex array
        One frame or a stack, at least 8 x 8 px.

    Returns
    -------
    Spectrum
        Centred on the mean wavevector, which moves no zero. Noise in the band counts as
        field: it adds to <k^2>, and makes zeros too.

    Raises
    ------
    TypeError
        If `field` is neither a Field nor a complex array of at least two axes.
    ValueError
        If it is smaller than 8 x 8, dark or not finite.

    Notes
    -----
    From the valid pixels under a Hann window, which widens the spectrum by 4 pi^2 / (3 N^2) of
    <k^2> along an axis of N pixels; this is not taken out. Of a Field's frequencies those beyond
    its radius are left out.
    """
    ny, nx = next(_valid_frames(field)).shape
    taper = np.hanning(ny + 2)[1:-1, np.newaxis] * np.hanning(nx + 2)[1:-1]
    power = np.zeros((ny, nx))
    for values in _valid_frames(field):
        power += np.abs(scipy.fft.fft2(values * taper)) ** 2
    fy, fx = scipy.fft.fftfreq(ny)[:, np.newaxis], scipy.fft.fftfreq(nx)
    if isinstance(field, Field):
        ty, tx = field.tilt_per_px
        # The window spreads each wave over two samples of the transform.
        reach = field.radius_per_px + 2 / min(ny, nx)
        away = [(f - t + 0.5) % 1 - 0.5 for f, t in ((fy, ty), (fx, tx))]
        power[np.hypot(*away) > reach] = 0
    if not (np.isfinite(power).all() and power.any()):
        raise ValueError("field: expected finite values that are not all zero")
    centre = [_mean_frequency(f, power) for f in (fy, fx)]
    ky, kx = (2 * np.pi * ((f - c + 0.5) % 1 - 0.5) for f, c in zip((fy, fx), centre, strict=True))
    squared = ky**2 + kx**2
    width = np.pi / max(ny, nx)
    ring = (np.sqrt(squared) / width).astype(np.int64).ravel()
    held = np.bincount(ring, power.ravel())
    second = np.bincount(ring, (power * squared).ravel())
    lit = held > 0
    return Spectrum.measured(np.sqrt(second[lit] / held[lit]), held[lit])


def measure_wavevectors(
    field: Field | ComplexArray,
    k_per_px: ArrayLike,
    *,
    about: Literal["carrier", "mean"] = "carrier",
    blocks: BlockKind = "tiles",
    rng: np.random.Generator | int = 0,
) -> pd.DataFrame:
    """Measure the share of the area with a local wavevector longer than each given.

    Parameters
    ----------
    field : Field or (..., y, x) complex array
        One frame or a stack.
    k_per_px : (n,) array
        Lengths, rad/px. At the spectrum's largest wavevector the share is the superoscillating
        fraction.
    about : {"carrier", "mean"}
        Where wavevectors are counted from: the carrier (zero of `local_wavevector`), or the
        mean over the power of all frames, for a field with tilt left in it.
    blocks : {"tiles", "frames"}
        What is taken as independent for the error: 25 tiles of the frame, each through all
        frames, or the frames.
    rng : Generator or int
        Draws the blocks anew.

    Returns
    -------
    DataFrame, n rows
        ``k_per_px``, ``exceedance``, ``exceedance_error``. Compare
        `theory_laws.wavevector_exceedance`.

    Raises
    ------
    TypeError
        If `field` is neither a Field nor a complex array of at least two axes.
    ValueError
        If a length is negative, or `about` or `blocks` is unknown.
    """
    if about not in ("carrier", "mean"):
        raise ValueError(f"about: expected one of carrier, mean, got {about!r}")
    limits = np.atleast_1d(nonnegative(k_per_px, "k_per_px"))
    if limits.ndim != 1:
        raise ValueError(f"k_per_px: expected one axis, got shape {limits.shape}")
    corner = (slice(None), *_corner(field))
    centre = np.zeros((2, 1, 1))
    if about == "mean":
        lit = sum(float(np.sum(np.abs(values) ** 2)) for values in _valid_frames(field))
        flows = (current(frame)[corner].sum(axis=(1, 2)) for frame in _frames(field))
        centre = (np.sum(list(flows), axis=0) / lit)[:, np.newaxis, np.newaxis]
    long = (np.hypot(*(local_wavevector(frame)[corner] - centre)) for frame in _frames(field))
    part = _pixel_blocks(field, blocks)
    return _exceedance(long, part, limits, ("k_per_px", "exceedance"), rng)


def measure_intensities(
    field: Field | ComplexArray,
    over_mean: ArrayLike,
    *,
    blocks: BlockKind = "tiles",
    rng: np.random.Generator | int = 0,
) -> pd.DataFrame:
    """Measure the share of the area brighter than so many times the mean intensity.

    Parameters
    ----------
    field, blocks, rng
        As for `measure_wavevectors`.
    over_mean : (n,) array
        Intensities over the mean of all frames.

    Returns
    -------
    DataFrame, n rows
        ``over_mean``, ``exceedance``, ``exceedance_error``; the error is for the mean as
        measured. Compare `theory_laws.intensity_exceedance`.

    Raises
    ------
    TypeError
        If `field` is neither a Field nor a complex array of at least two axes.
    ValueError
        If an intensity is negative, `blocks` is unknown or the field is dark.
    """
    limits = np.atleast_1d(nonnegative(over_mean, "over_mean"))
    if limits.ndim != 1:
        raise ValueError(f"over_mean: expected one axis, got shape {limits.shape}")
    part = _pixel_blocks(field, blocks)
    mean = sum(float(np.mean(np.abs(v) ** 2)) for v in _valid_frames(field)) / part.n_frames
    if not mean > 0:
        raise ValueError("field: expected some light, got zeros or values that are not finite")
    relative = (np.abs(values) ** 2 / mean for values in _valid_frames(field))
    return _exceedance(relative, part, limits, ("over_mean", "exceedance"), rng)


def measure_contrast(
    field: Field | ComplexArray,
    *,
    blocks: BlockKind = "tiles",
    rng: np.random.Generator | int = 0,
) -> Estimate:
    """Measure the contrast of the intensity: standard deviation over mean.

    Parameters
    ----------
    field, blocks, rng
        As for `measure_wavevectors`.

    Returns
    -------
    Estimate
        1 for fully developed speckle (`theory_laws.speckle_contrast`). A frame of few speckles
        gives a little less, its mean being drawn from the same speckles.

    Raises
    ------
    TypeError
        If `field` is neither a Field nor a complex array of at least two axes.
    ValueError
        If `blocks` is unknown.
    """
    part = _pixel_blocks(field, blocks)
    sums = np.zeros((3, part.count))
    for frame, values in enumerate(_valid_frames(field)):
        bright = np.abs(values.ravel()).astype(np.float64) ** 2
        block = _block_of_pixels(part, frame, values.shape)
        for k, weights in enumerate((np.ones_like(bright), bright, bright**2)):
            sums[k] += part.sums(block, weights)
    times = np.vstack([np.ones(part.count), redraw(part.count, rng)])
    number, first, second = (times @ s for s in sums)
    with np.errstate(divide="ignore", invalid="ignore"):
        contrast = np.sqrt(np.maximum(second * number / first**2 - 1, 0))
    return estimate(float(contrast[0]), contrast[1:])


def _exceedance(
    samples: Iterable[NDArray[np.floating]],
    part: Blocks,
    limits: FloatArray,
    names: tuple[str, str],
    rng: np.random.Generator | int,
) -> pd.DataFrame:
    """Return the share of each frame's samples above each limit, those that are NaN left out."""
    order = np.argsort(limits)
    classes = limits.size + 1
    counts = np.zeros(part.count * classes)
    for frame, each in enumerate(samples):
        known = np.isfinite(each).ravel()
        block = _block_of_pixels(part, frame, each.shape)[known]
        # A sample in class n is above the n lowest limits.
        place = np.searchsorted(limits[order], each.ravel()[known])
        counts += np.bincount(block * classes + place, minlength=counts.size)
    table = counts.reshape(part.count, classes)
    above = table[:, ::-1].cumsum(axis=1)[:, ::-1][:, 1:]
    value, error = ratios(above[:, np.argsort(order)], table.sum(axis=1, keepdims=True), rng)
    return pd.DataFrame({names[0]: limits, names[1]: value, f"{names[1]}_error": error})


def _pixel_blocks(field: Field | ComplexArray, kind: BlockKind) -> Blocks:
    """Return the blocks of the field's valid pixels, whose first is taken as (0, 0)."""
    first = next(_valid_frames(field))
    n_frames = int(np.prod((field.values if isinstance(field, Field) else field).shape[:-2]))
    ny, nx = first.shape
    return Blocks(kind, Window(-0.5, ny - 0.5, -0.5, nx - 0.5), n_frames)


def _block_of_pixels(part: Blocks, frame: int, shape: tuple[int, ...]) -> NDArray[np.int64]:
    y, x = np.arange(float(shape[0]))[:, np.newaxis], np.arange(float(shape[1]))
    return np.ravel(part.index(np.full(shape, frame), y, x))


def _frames(field: Field | ComplexArray) -> Iterator[Field | ComplexArray]:
    values = field.values if isinstance(field, Field) else field
    if not isinstance(values, np.ndarray) or not np.iscomplexobj(values) or values.ndim < 2:
        got = getattr(values, "dtype", type(values).__name__)
        raise TypeError(f"field: expected a Field or a complex array (..., y, x), got {got}")
    for frame in values.reshape(-1, *values.shape[-2:]):
        yield field.with_values(frame) if isinstance(field, Field) else frame


def _pixels(frame: Field | ComplexArray) -> ComplexArray:
    return on_pixels(frame) if isinstance(frame, Field) else frame


def _corner(field: Field | ComplexArray) -> tuple[slice, slice]:
    """Return the rows and columns of the pixels that are valid."""
    grid = field.grid if isinstance(field, Field) else Grid.pixels(field.shape[-2:])
    ny, nx = grid.frame_shape
    spans = []
    for low, high, count in (
        (grid.valid.y_min, grid.valid.y_max, ny),
        (grid.valid.x_min, grid.valid.x_max, nx),
    ):
        spans.append(slice(max(int(np.ceil(low)), 0), min(int(np.floor(high)), count - 1) + 1))
    return spans[0], spans[1]


def _valid_frames(field: Field | ComplexArray) -> Iterator[ComplexArray]:
    for frame in _frames(field):
        values = _pixels(frame)[_corner(field)]
        if min(values.shape) < 8:
            raise ValueError(f"field: expected at least 8 x 8 valid pixels, got {values.shape}")
        yield values


def _mean_frequency(f: FloatArray, power: FloatArray) -> float:
    """Return the mean frequency on the circle of frequencies, cycles per px."""
    turn = np.angle(np.sum(power * np.exp(2j * np.pi * f)))
    rough = turn / (2 * np.pi)
    rest = (f - rough + 0.5) % 1 - 0.5
    return float(rough + np.sum(power * rest) / power.sum())
