"""A band-limited field between its samples: other samplings, the pixels, any point."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import scipy.fft
from numpy.typing import ArrayLike, NDArray

from hologyre.fields.scattered import WIDTH, gather, kernel_transform
from hologyre.grid import Field, Grid

_DIRECT_BUDGET = 1e6
"""Complex products up to which direct sums beat making the oversampled grid."""


def resample(field: Field, step_px: float) -> Field:
    """Sample the same field on a finer or coarser grid, exactly.

    Parameters
    ----------
    field : Field, values (..., y, x)
        The field; its period is kept.
    step_px : float
        Wanted distance between samples, hologram pixels. The period must hold a whole number
        of samples, of a length quick to transform, so the step made is at most the one asked
        for; it is in the result's grid.

    Returns
    -------
    Field
        The field on the new grid. Never coarser than what holds its coefficients.

    Raises
    ------
    ValueError
        If `step_px` is not positive.
    """
    if not step_px > 0:
        raise ValueError(f"step_px: expected a positive number, got {step_px!r}")
    spectrum = coefficients(field)
    held = _held(spectrum)
    spectrum = _crop(spectrum, held)
    shape = tuple(
        scipy.fft.next_fast_len(max(int(np.ceil(period / step_px - 1e-9)), 2 * half + 1))
        for period, half in zip(field.period_px, held, strict=True)
    )
    values = scipy.fft.ifft2(_place(spectrum, (shape[0], shape[1])), norm="forward")
    step = (field.period_px[0] / shape[0], field.period_px[1] / shape[1])
    grid = replace(field.grid, step_px=step)
    return replace(field, values=_tilt(values, grid, field.tilt_per_px), grid=grid)


def on_pixels(field: Field) -> NDArray[np.complexfloating]:
    """Return the field on the hologram's own pixels, exactly.

    Parameters
    ----------
    field : Field, values (..., y, x)
        The field.

    Returns
    -------
    (..., ny, nx) complex array
        Its values at the pixels' centres, of the same precision.
    """
    grid = Grid.pixels(field.grid.frame_shape)
    ny, nx = field.grid.frame_shape
    if field.grid == grid and field.shape == (ny, nx):
        return field.values
    return series_on_pixels(coefficients(field), field)


def series_on_pixels(
    spectrum: NDArray[np.complexfloating], field: Field
) -> NDArray[np.complexfloating]:
    """Sum centred coefficients, with a field's grid and tilt, on the hologram's pixels."""
    spectrum = _crop(spectrum, _held(spectrum))
    ny, nx = field.grid.frame_shape
    values = _along(spectrum, -2, field.period_px[0], field.grid.origin_px[0], ny)
    values = _along(values, -1, field.period_px[1], field.grid.origin_px[1], nx)
    return _tilt(values, Grid.pixels((ny, nx)), field.tilt_per_px)


def evaluate(
    field: Field, y_px: ArrayLike, x_px: ArrayLike
) -> tuple[NDArray[np.complex128], NDArray[np.complex128], NDArray[np.complex128]]:
    """Evaluate a field and its gradient anywhere.

    Parameters
    ----------
    field : Field, values (y, x)
        The field.
    y_px, x_px : arrays of one shape
        Points, hologram pixels.

    Returns
    -------
    E, dE_dy, dE_dx : complex128 arrays
        Value and derivatives per pixel at the points, to 1e-9 of the field's largest.
        For many calls on one field keep ``interpolant(field)`` and call that.

    Raises
    ------
    ValueError
        If the field has a time axis.
    """
    y, x = np.broadcast_arrays(
        np.asarray(y_px, dtype=np.float64), np.asarray(x_px, dtype=np.float64)
    )
    if y.size * field.values.size <= _DIRECT_BUDGET:
        return _direct(field, y, x)
    return interpolant(field)(y, x)


@dataclass(frozen=True, eq=False)
class Interpolant:
    """A field made ready for evaluation at many scattered points; call it with (y_px, x_px).

    An oversampled copy of the field, divided beforehand by the transform of a short smooth
    kernel, is summed over the kernel's support around each point (Dutt and Rokhlin, SIAM J.
    Sci. Comput. 14, 1368, 1993; Barnett, Magland and af Klinteberg, SIAM J. Sci. Comput. 41,
    C479, 2019, for the kernel).
    """

    samples: NDArray[np.complex128]
    origin_px: tuple[float, float]
    step_px: tuple[float, float]
    tilt_per_px: tuple[float, float]

    def __call__(
        self, y_px: ArrayLike, x_px: ArrayLike
    ) -> tuple[NDArray[np.complex128], NDArray[np.complex128], NDArray[np.complex128]]:
        """Return value, derivative along y and derivative along x at the points."""
        y, x = np.broadcast_arrays(
            np.asarray(y_px, dtype=np.float64), np.asarray(x_px, dtype=np.float64)
        )
        row = (y.ravel() - self.origin_px[0]) / self.step_px[0]
        column = (x.ravel() - self.origin_px[1]) / self.step_px[1]
        found = gather(self.samples, row, column)
        value, dy, dx = (found[i].reshape(y.shape) for i in range(3))
        return _with_tilt(value, dy / self.step_px[0], dx / self.step_px[1], self.tilt_per_px, y, x)


def interpolant(field: Field) -> Interpolant:
    """Make a 2-D field ready for evaluation at many points.

    Raises
    ------
    ValueError
        If the field has a time axis.
    """
    _check_single(field)
    spectrum = coefficients(replace(field, values=field.values.astype(np.complex128)))
    spectrum = _crop(spectrum, _held(spectrum))
    half = (spectrum.shape[0] // 2, spectrum.shape[1] // 2)
    shape = tuple(scipy.fft.next_fast_len(max(4 * h + 4, 2 * WIDTH)) for h in half)
    for axis in (0, 1):
        correction = 1 / kernel_transform(np.arange(-half[axis], half[axis] + 1) / shape[axis])
        spectrum = spectrum * (correction[:, None] if axis == 0 else correction[None, :])
    samples = scipy.fft.ifft2(_place(spectrum, (shape[0], shape[1])), norm="forward")
    period = field.period_px
    step = (period[0] / shape[0], period[1] / shape[1])
    return Interpolant(samples, field.grid.origin_px, step, field.tilt_per_px)


def coefficients(field: Field) -> NDArray[np.complexfloating]:
    """Return the coefficients of a field's periodic part, bins -h to h on both axes.

    A coefficient belongs to ``exp(2 pi i k (r - origin) / period)``. The bin at Nyquist of an
    even length is shared between both of its signs, so that conjugation commutes.

    Returns
    -------
    (..., 2 hy + 1, 2 hx + 1) complex array
    """
    spectrum = scipy.fft.fft2(
        _tilt(field.values, field.grid, field.tilt_per_px, -1), norm="forward"
    )
    spectrum = scipy.fft.fftshift(spectrum, axes=(-2, -1))
    for axis in (-2, -1):
        if spectrum.shape[axis] % 2 == 0:
            first = np.take(spectrum, [0], axis=axis) / 2
            rest = np.delete(spectrum, 0, axis=axis)
            spectrum = np.concatenate([first, rest, first], axis=axis)
    return spectrum


def from_coefficients(spectrum: NDArray[np.complexfloating], field: Field) -> Field:
    """Return a field from centred coefficients, with another's grid origin, period and tilt.

    Sampled as densely as that field, or more where the coefficients need it.
    """
    spectrum = _crop(spectrum, _held(spectrum))
    shape = tuple(
        s if s >= n else scipy.fft.next_fast_len(n)
        for n, s in zip(spectrum.shape[-2:], field.shape, strict=True)
    )
    values = scipy.fft.ifft2(_place(spectrum, (shape[0], shape[1])), norm="forward")
    period = field.period_px
    grid = replace(field.grid, step_px=(period[0] / shape[0], period[1] / shape[1]))
    return replace(field, values=_tilt(values, grid, field.tilt_per_px), grid=grid)


def _held(spectrum: NDArray[np.complexfloating]) -> tuple[int, int]:
    """Return the number of bins on either side that are not all rounding error."""
    power = np.abs(spectrum).reshape(-1, *spectrum.shape[-2:]).max(axis=0)
    level = 8 * np.finfo(spectrum.dtype).eps * power.max() / np.sqrt(power.size)
    halves = []
    for axis in (0, 1):
        filled = np.flatnonzero(power.max(axis=1 - axis) > level)
        middle = power.shape[axis] // 2
        halves.append(int(np.abs(filled - middle).max()) if filled.size else 0)
    return halves[0], halves[1]


def _crop(
    spectrum: NDArray[np.complexfloating], half: tuple[int, int]
) -> NDArray[np.complexfloating]:
    cy, cx = spectrum.shape[-2] // 2, spectrum.shape[-1] // 2
    return spectrum[..., cy - half[0] : cy + half[0] + 1, cx - half[1] : cx + half[1] + 1]


def _place(
    spectrum: NDArray[np.complexfloating], shape: tuple[int, int]
) -> NDArray[np.complexfloating]:
    """Put centred coefficients where an inverse transform of `shape` takes them."""
    placed = np.zeros((*spectrum.shape[:-2], *shape), dtype=spectrum.dtype)
    rows, columns = (
        np.arange(-(n // 2), n // 2 + 1) % m
        for n, m in zip(spectrum.shape[-2:], shape, strict=True)
    )
    placed[..., rows[:, None], columns[None, :]] = spectrum
    return placed


def _along(
    spectrum: NDArray[np.complexfloating], axis: int, period: float, origin: float, count: int
) -> NDArray[np.complexfloating]:
    """Sum a trigonometric series at the pixels 0 to count - 1 of one axis."""
    half = spectrum.shape[axis] // 2
    bins = np.arange(-half, half + 1)
    whole = round(period)
    if abs(period - whole) < 1e-9 * period and whole >= count:
        shape = [1] * spectrum.ndim
        shape[axis] = -1
        shift = np.exp(-2j * np.pi * bins * origin / period).astype(spectrum.dtype)
        shifted = np.moveaxis(spectrum * shift.reshape(shape), axis, 0)
        padded = np.zeros((whole, *shifted.shape[1:]), dtype=spectrum.dtype)
        padded[bins[:-1] % whole] = shifted[:-1]
        # Both halves of Nyquist's coefficient meet in one bin.
        padded[bins[-1] % whole] += shifted[-1]
        padded = np.moveaxis(padded, 0, axis)
        values = scipy.fft.ifft(padded, axis=axis, norm="forward")
        return values.take(range(count), axis=axis) if count < whole else values
    waves = np.exp(2j * np.pi * np.outer(np.arange(count) - origin, bins) / period)
    summed = np.tensordot(spectrum, waves.astype(spectrum.dtype), axes=(axis, 1))
    return np.moveaxis(summed, -1, axis)


def _tilt(
    values: NDArray[np.complexfloating], grid: Grid, tilt: tuple[float, float], sign: int = 1
) -> NDArray[np.complexfloating]:
    """Multiply by the tilt's phase, or by its inverse."""
    if tilt == (0.0, 0.0):
        return values
    y, x = grid.y_px(values.shape[-2]), grid.x_px(values.shape[-1])
    along_y = np.exp(2j * np.pi * sign * tilt[0] * y).astype(values.dtype)
    along_x = np.exp(2j * np.pi * sign * tilt[1] * x).astype(values.dtype)
    return values * along_y[:, None] * along_x


def _with_tilt(
    value: NDArray[np.complex128],
    dy: NDArray[np.complex128],
    dx: NDArray[np.complex128],
    tilt: tuple[float, float],
    y: NDArray[np.float64],
    x: NDArray[np.float64],
) -> tuple[NDArray[np.complex128], NDArray[np.complex128], NDArray[np.complex128]]:
    phase = np.exp(2j * np.pi * (tilt[0] * y + tilt[1] * x))
    dy = phase * (dy + 2j * np.pi * tilt[0] * value)
    dx = phase * (dx + 2j * np.pi * tilt[1] * value)
    return phase * value, dy, dx


def _direct(
    field: Field, y: NDArray[np.float64], x: NDArray[np.float64]
) -> tuple[NDArray[np.complex128], NDArray[np.complex128], NDArray[np.complex128]]:
    """Sum the series itself, axis by axis."""
    _check_single(field)
    spectrum = coefficients(replace(field, values=field.values.astype(np.complex128)))
    spectrum = _crop(spectrum, _held(spectrum))
    waves, slopes = [], []
    for axis, points in ((0, y), (1, x)):
        half = spectrum.shape[axis] // 2
        rate = 2j * np.pi * np.arange(-half, half + 1) / field.period_px[axis]
        waves.append(np.exp((points.ravel() - field.grid.origin_px[axis])[:, None] * rate))
        slopes.append(rate)
    rows = waves[0] @ spectrum
    value = np.einsum("pk,pk->p", rows, waves[1])
    dx = np.einsum("pk,pk->p", rows, waves[1] * slopes[1])
    dy = np.einsum("pk,pk->p", (waves[0] * slopes[0]) @ spectrum, waves[1])
    shape = y.shape
    return _with_tilt(
        value.reshape(shape), dy.reshape(shape), dx.reshape(shape), field.tilt_per_px, y, x
    )


def _check_single(field: Field) -> None:
    if field.values.ndim != 2:
        msg = f"field: expected one frame (y, x), got values of shape {field.values.shape}"
        raise ValueError(msg)
