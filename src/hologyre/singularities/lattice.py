"""The samples in which zeros are looked for: an oversampled cut-out of one field."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from hologyre.fields.interpolate import resample
from hologyre.grid import Field, Grid, Window
from hologyre.singularities.cells import cut_error
from hologyre.singularities.kernel import HALO, bands, kernel_table, least_squares

SAMPLES_PER_WAVELENGTH = 6.0
"""Lattice nodes per shortest wavelength; interpolation is then good to 1e-8."""

_LEARNT_FROM = 32
"""Samples inside the frame that tell those just outside."""

_RIDGES = (1e-12, 1e-9, 1e-7, 1e-5, 1e-3, 1e-2, 1e-1)


@dataclass(frozen=True, eq=False)
class Lattice:
    """A rectangle of nodes covering a window, with samples enough to interpolate anywhere.

    Parameters
    ----------
    planes : (2, ny + 2 HALO, nx + 2 HALO) array
        Real and imaginary part of the field's periodic part; node (j, i) is sample
        (j + HALO, i + HALO).
    origin_px, step_px : (float, float)
        Position of node (0, 0) and distance between nodes, hologram pixels.
    window : Window
        Where zeros are wanted, hologram pixels; the nodes cover it.
    table : (TAPS / 2, degree + 1) array
        The interpolation kernel.
    coarse : float
        What short stencils err by between the nodes, over the second difference.
    floor : float
        Level below which the field is the arithmetic's own error.
    radius_per_px : float
        Radius of the disc of frequencies that holds the field, cycles/px.
    """

    planes: NDArray[np.float64]
    origin_px: tuple[float, float]
    step_px: tuple[float, float]
    window: Window
    table: NDArray[np.float64]
    coarse: float
    floor: float
    radius_per_px: float

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns of nodes."""
        return self.planes.shape[1] - 2 * HALO, self.planes.shape[2] - 2 * HALO

    def to_px(
        self, y: NDArray[np.float64], x: NDArray[np.float64]
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Turn node coordinates into hologram pixels."""
        return self.origin_px[0] + self.step_px[0] * y, self.origin_px[1] + self.step_px[1] * x

    def to_nodes(self, y_px: float, x_px: float) -> tuple[float, float]:
        """Turn a place in hologram pixels into node coordinates."""
        y = (y_px - self.origin_px[0]) / self.step_px[0]
        x = (x_px - self.origin_px[1]) / self.step_px[1]
        return y, x


def lattice_of(
    field: Field | NDArray[np.complexfloating], *, margin_px: float = 0.0
) -> Lattice | None:
    """Lay a lattice over the valid part of a field, `margin_px` inside its sides.

    Returns
    -------
    Lattice or None
        None when the margin leaves nothing.

    Raises
    ------
    TypeError
        If `field` is neither a Field nor a complex array of two axes.
    ValueError
        If it has a time axis, is smaller than 8 x 8 or holds values that are not finite, or
        if the margin is negative.
    """
    values = field.values if isinstance(field, Field) else field
    if not isinstance(values, np.ndarray) or not np.iscomplexobj(values):
        got = getattr(values, "dtype", type(values).__name__)
        raise TypeError(f"field: expected a Field or a complex array (y, x), got {got}")
    if values.ndim != 2 or min(values.shape) < 8:
        msg = f"field: expected one frame (y, x) of at least 8 x 8, got shape {values.shape}"
        raise ValueError(msg)
    if not np.isfinite(values).all():
        raise ValueError("field: expected finite values, got some that are infinite or NaN")
    if not 0 <= margin_px < np.inf:
        raise ValueError(f"margin_px: expected 0 or more, got {margin_px!r}")
    grid = (
        field.grid if isinstance(field, Field) else Grid.pixels((values.shape[0], values.shape[1]))
    )
    window = Window(
        grid.valid.y_min + margin_px,
        grid.valid.y_max - margin_px,
        grid.valid.x_min + margin_px,
        grid.valid.x_max - margin_px,
    )
    if window.y_min >= window.y_max or window.x_min >= window.x_max:
        return None
    if isinstance(field, Field):
        return _from_periodic(field, window)
    return _from_pixels(values, window)


def _from_periodic(field: Field, window: Window) -> Lattice:
    """Cut the lattice out of the field's torus."""
    band_px = field.radius_per_px + max(abs(t) for t in field.tilt_per_px)
    if field.radius_per_px >= 0.5:
        # Nothing is said about the band: take what the samples turn out to hold.
        held = resample(field, max(field.period_px))
        band_px = max(n / (2 * p) for n, p in zip(held.shape, held.period_px, strict=True))
    band_px += 1 / min(field.period_px)
    fine = resample(field, 1 / (SAMPLES_PER_WAVELENGTH * band_px))
    step = fine.grid.step_px
    ty, tx = fine.tilt_per_px
    values = fine.values.astype(np.complex128, copy=False)
    spans = []
    for axis, (low, high) in enumerate(
        ((window.y_min, window.y_max), (window.x_min, window.x_max))
    ):
        first = int(np.floor((low - fine.grid.origin_px[axis]) / step[axis] + 1e-9))
        last = int(np.ceil((high - fine.grid.origin_px[axis]) / step[axis] - 1e-9))
        spans.append(np.arange(first - HALO, max(last, first + 1) + HALO + 1))
    cut = values[(spans[0] % fine.shape[0])[:, np.newaxis], spans[1] % fine.shape[1]]
    if (ty, tx) != (0.0, 0.0):
        # The periodic part: the tilt moves no zero, and wrapping would break it.
        y = fine.grid.origin_px[0] + step[0] * (spans[0] % fine.shape[0])
        x = fine.grid.origin_px[1] + step[1] * (spans[1] % fine.shape[1])
        cut *= np.exp(-2j * np.pi * ty * y)[:, np.newaxis] * np.exp(-2j * np.pi * tx * x)
    band = min(max(step) * band_px, 0.4)
    table, error = kernel_table(band)
    origin = tuple(
        fine.grid.origin_px[axis] + step[axis] * float(spans[axis][HALO]) for axis in (0, 1)
    )
    return Lattice(
        _planes(cut),
        (origin[0], origin[1]),
        step,
        window,
        table,
        cut_error(band),
        _floor(cut, error, np.finfo(field.values.dtype).eps),
        band_px,
    )


def _from_pixels(values: NDArray[np.complexfloating], window: Window) -> Lattice:
    """Take the pixels as nodes, after the mean tilt; continue them a little over the border."""
    plain = values.astype(np.complex128)
    for axis in (0, 1):
        ahead, behind = np.delete(plain, 0, axis=axis), np.delete(plain, -1, axis=axis)
        turn = float(np.angle(np.vdot(behind, ahead)))
        phase = np.exp(-1j * turn * np.arange(plain.shape[axis]))
        plain *= phase[:, np.newaxis] if axis == 0 else phase
    band = _measured_band(plain)
    table, error = kernel_table(band)
    samples = plain
    for axis in (0, 1):
        samples = _continued(samples, axis, band)
    ends = (
        slice(int(np.floor(window.y_min)), int(np.ceil(window.y_max)) + 1 + 2 * HALO),
        slice(int(np.floor(window.x_min)), int(np.ceil(window.x_max)) + 1 + 2 * HALO),
    )
    cut = samples[ends]
    return Lattice(
        _planes(cut),
        (float(ends[0].start), float(ends[1].start)),
        (1.0, 1.0),
        window,
        table,
        cut_error(band),
        _floor(plain, error, np.finfo(values.dtype).eps),
        band,
    )


def _measured_band(values: NDArray[np.complex128]) -> float:
    """Return the band whose kernel errs least: by its own error, or by what lies outside."""
    away, tapered = [], values
    for axis, n in enumerate(values.shape):
        fall = min(20.0, n / 4)
        taper = np.kaiser(n, fall)
        tapered = tapered * (taper[:, np.newaxis] if axis == 0 else taper)
        # A taper spreads each wave this far; power farther out is from beyond the band.
        spread = np.hypot(1, fall / np.pi) / n
        away.append(np.maximum(np.abs(scipy.fft.fftfreq(n)) - spread, 0))
    power = np.abs(scipy.fft.fft2(tapered)) ** 2
    frequency = np.maximum(away[0][:, np.newaxis], away[1])
    total = power.sum()
    if total == 0:
        return bands()[0]
    outside = np.array([power[frequency > band].sum() / total for band in bands()])
    errors = np.array([kernel_table(band)[1] ** 2 for band in bands()])
    return bands()[int(np.argmin(errors + 2 * outside))]


def _continued(values: NDArray[np.complex128], axis: int, band: float) -> NDArray[np.complex128]:
    """Add HALO samples to both ends of an axis, those a field of this band goes on with."""
    lines = np.moveaxis(values, axis, 0)
    before = _ahead_of(lines[::-1], band)[::-1]
    return np.moveaxis(np.concatenate([before, lines, _ahead_of(lines, band)]), 0, axis)


def _ahead_of(lines: NDArray[np.complex128], band: float) -> NDArray[np.complex128]:
    """Continue each column by HALO samples, with the weights that best foretell its last ones."""
    learnt = min(_LEARNT_FROM, lines.shape[0] // 2)
    ahead = min(HALO, lines.shape[0] - learnt)
    choices = _foretelling(band, learnt)
    past, truth = lines[-learnt - ahead : -ahead], lines[-ahead:]
    missed = [np.abs(np.tensordot(w[:ahead], past, axes=1) - truth).sum() for w in choices]
    best = choices[int(np.argmin(missed))]
    return np.tensordot(best, lines[-learnt:], axes=1)


@lru_cache(maxsize=16)
def _foretelling(band: float, learnt: int) -> tuple[NDArray[np.float64], ...]:
    """Return choices of (HALO, learnt) weights that continue fields of about this band."""
    asked = np.arange(learnt, learnt + HALO, dtype=np.float64)
    return tuple(
        least_squares(wider, np.arange(float(learnt)), asked, ridge)
        for wider in (band, min(1.5 * band, 0.5))
        for ridge in _RIDGES
    )


def _planes(values: NDArray[np.complex128]) -> NDArray[np.float64]:
    """Lay real and imaginary parts one after the other, which compiled sums like better."""
    planes = np.empty((2, *values.shape))
    planes[0], planes[1] = values.real, values.imag
    return planes


def _floor(values: NDArray[np.complex128], error: float, eps: float) -> float:
    """Return what interpolation and rounding may have made of a field that is dark."""
    return float(np.abs(values).max() * max(4 * error, 16 * eps))
