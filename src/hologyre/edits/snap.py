"""From a click to the zero of the field beside it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray

from hologyre.grid import Field, Grid
from hologyre.singularities.locate import locate_singularities

_OVERSAMPLED = 0.2
"""Cycles per sample up to which a field's own samples are fine enough to be searched."""

_AROUND = 24
"""Samples taken beyond the place asked for, so that it is interpolated well."""

_FINE = 20
"""Points per shortest wavelength at which turns are counted."""

_NEWTON_STEPS = 5

_STARTS = 4
"""Cells, and weak places, nearest to the click from which zeros are gone to."""


@dataclass(frozen=True)
class Snap:
    """A zero of the field beside a click.

    Parameters
    ----------
    y_px, x_px : float
        Where it is, hologram pixels.
    charge : int
        Its winding, +1 when the phase grows from +x to +y.
    distance_px : float
        How far it is from the click.
    """

    y_px: float
    x_px: float
    charge: int
    distance_px: float


@dataclass(frozen=True)
class NoZero:
    """No zero beside the click; falsy, and says why."""

    reason: str

    def __bool__(self) -> Literal[False]:
        return False


def snap(
    field: Field | NDArray[np.complexfloating],
    y_px: float,
    x_px: float,
    *,
    within_px: float | None = None,
) -> Snap | NoZero:
    """Find the zero of a field's interpolant nearest to a point, with its charge.

    Only the neighbourhood of the point is looked at.

    Parameters
    ----------
    field : Field or (y, x) complex array
        One frame. A bare array holds the hologram's own pixels.
    y_px, x_px : float
        The point, hologram pixels.
    within_px : float, optional
        Farthest the zero may be. Half the shortest wavelength without it, 5 px for a bare
        array.

    Returns
    -------
    Snap or NoZero
        NoZero is falsy and says why.

    Raises
    ------
    ValueError
        If the field has a time axis, or an option is out of its range.
    """
    values = field.values if isinstance(field, Field) else field
    if not np.iscomplexobj(values) or np.ndim(values) != 2:
        raise ValueError(f"field: expected one complex frame (y, x), got shape {np.shape(values)}")
    if not (np.isfinite(y_px) and np.isfinite(x_px)):
        raise ValueError(f"y_px, x_px: expected finite numbers, got {y_px!r}, {x_px!r}")
    if within_px is None:
        within_px = 0.5 / field.radius_per_px if isinstance(field, Field) else 5.0
    if not 0 < within_px < np.inf:
        raise ValueError(f"within_px: expected a positive number, got {within_px!r}")
    grid = (
        field.grid if isinstance(field, Field) else Grid.pixels((values.shape[0], values.shape[1]))
    )
    if not grid.valid.contains(np.array(y_px), np.array(x_px)):
        return NoZero(f"(y={y_px:.1f}, x={x_px:.1f}) px lies outside the frame.")
    if not isinstance(field, Field):
        zeros = _in_pixels(field, y_px, x_px, (within_px, within_px))
    elif max(grid.step_px) * field.radius_per_px <= _OVERSAMPLED:
        zeros = _in_samples(field, y_px, x_px, within_px)
    else:
        zeros = _in_series(field, y_px, x_px, within_px)
    distance = np.hypot(zeros.y_px - y_px, zeros.x_px - x_px)
    usable = grid.valid.contains(zeros.y_px, zeros.x_px) & (distance <= within_px)
    usable &= zeros.charge != 0
    if not usable.any():
        return NoZero(
            f"The field has no zero within {within_px:.1f} px of (y={y_px:.1f}, x={x_px:.1f})."
        )
    k = int(np.argmin(np.where(usable, distance, np.inf)))
    return Snap(
        float(zeros.y_px[k]), float(zeros.x_px[k]), int(zeros.charge[k]), float(distance[k])
    )


class _Zeros(NamedTuple):
    y_px: NDArray[np.float64]
    x_px: NDArray[np.float64]
    charge: NDArray[np.int64]


def _in_pixels(
    values: NDArray[np.complexfloating], y: float, x: float, within: tuple[float, float]
) -> _Zeros:
    """Look through the samples around a place, all told in samples."""
    ny, nx = values.shape
    top, left = (max(int(v - w) - _AROUND, 0) for v, w in zip((y, x), within, strict=True))
    bottom, right = (
        min(int(v + w) + _AROUND + 2, n) for v, w, n in zip((y, x), within, (ny, nx), strict=True)
    )
    found = locate_singularities(np.ascontiguousarray(values[top:bottom, left:right]))
    return _Zeros(
        found["y_px"].to_numpy() + top, found["x_px"].to_numpy() + left, found["charge"].to_numpy()
    )


def _in_samples(field: Field, y_px: float, x_px: float, within_px: float) -> _Zeros:
    """Look through the samples of a field that are fine enough for it."""
    (oy, ox), (sy, sx) = field.grid.origin_px, field.grid.step_px
    row, column = (y_px - oy) / sy, (x_px - ox) / sx
    reach = (within_px / sy, within_px / sx)
    rows, columns = (
        np.arange(int(at - r) - _AROUND, int(at + r) + _AROUND + 2)
        for at, r in zip((row, column), reach, strict=True)
    )
    ny, nx = field.shape
    # the tilt moves no zero, and wrapping would break it
    cut = field.values[(rows % ny)[:, np.newaxis], columns % nx]
    cut = cut * _tilt(field, 0, rows % ny)[:, np.newaxis] * _tilt(field, 1, columns % nx)
    found = _in_pixels(cut, row - rows[0], column - columns[0], reach)
    return _Zeros(
        oy + sy * (found.y_px + rows[0]), ox + sx * (found.x_px + columns[0]), found.charge
    )


def _in_series(field: Field, y_px: float, x_px: float, within_px: float) -> _Zeros:
    """Sum the field's series on a fine patch, count its turns, and go to the zeros by Newton."""
    cells = max(int(np.ceil(2 * within_px * _FINE * field.radius_per_px)), 8)
    y, x = (at + np.linspace(-within_px, within_px, cells + 1) for at in (y_px, x_px))
    weights_y, weights_x = _weights(field, 0, y)[0], _weights(field, 1, x)[0]
    patch = weights_y @ field.values @ weights_x.T
    along_y = np.angle(patch[1:] * patch[:-1].conj())
    along_x = np.angle(patch[:, 1:] * patch[:, :-1].conj())
    side = y[1] - y[0]
    turn = along_x[:-1] + along_y[:, 1:] - along_x[1:] - along_y[:, :-1]
    turns = np.rint(turn / (2 * np.pi)).astype(np.int64)
    j, i = _nearest(y - y_px + side / 2, x - x_px + side / 2, *np.nonzero(turns))
    # two zeros within a cell turn nothing around it, but the field is weak there
    weak_j, weak_i = _nearest(y - y_px, x - x_px, *_local_minima(np.abs(patch)))
    start_y = np.concatenate([y[j] + side / 2, y[weak_j]])
    start_x = np.concatenate([x[i] + side / 2, x[weak_i]])
    known = np.concatenate([turns[j, i], np.zeros_like(weak_j)])
    at_y, at_x, sign, arrived = _newton(field, start_y, start_x, side)
    charge = np.where(arrived & (np.abs(known) <= 1), sign, known)
    return _Zeros(at_y, at_x, charge)


def _nearest(
    y: NDArray[np.float64], x: NDArray[np.float64], j: NDArray[np.int64], i: NDArray[np.int64]
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return the few nodes (j, i) nearest to the origin of y and x."""
    order = np.argsort(np.hypot(y[j], x[i]))[:_STARTS]
    return j[order], i[order]


def _local_minima(size: NDArray[np.floating]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return the inner points that none of their four neighbours is below."""
    inner = size[1:-1, 1:-1]
    least = np.minimum.reduce([size[:-2, 1:-1], size[2:, 1:-1], size[1:-1, :-2], size[1:-1, 2:]])
    j, i = np.nonzero(inner <= least)
    return j + 1, i + 1


def _newton(
    field: Field, y_px: NDArray[np.float64], x_px: NDArray[np.float64], side_px: float
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.int64], NDArray[np.bool_]]:
    """Go to the zeros near some points; return them, the sign of det J, and who arrived."""
    y, x = y_px.copy(), x_px.copy()
    count = len(y)
    det = length = np.ones(count)
    for _ in range(_NEWTON_STEPS):
        (wy, dy), (wx, dx) = _weights(field, 0, y), _weights(field, 1, x)
        rows = np.concatenate([wy, dy]) @ field.values
        value = np.einsum("pk,pk->p", rows[:count], wx)
        along_x = np.einsum("pk,pk->p", rows[:count], dx)
        along_y = np.einsum("pk,pk->p", rows[count:], wx)
        det = (along_x.conj() * along_y).imag
        with np.errstate(divide="ignore", invalid="ignore"):
            step_y = -(along_x.conj() * value).imag / det
            step_x = (along_y.conj() * value).imag / det
        length = np.hypot(step_y, step_x)
        # a step out of the neighbourhood of the start is not to be trusted
        sane = np.hypot(y + step_y - y_px, x + step_x - x_px) < 2 * side_px
        y, x = y + np.where(sane, step_y, 0.0), x + np.where(sane, step_x, 0.0)
    return y, x, np.sign(det).astype(np.int64), length < 1e-2 * side_px


def _weights(
    field: Field, axis: int, at_px: NDArray[np.float64]
) -> tuple[NDArray[np.complexfloating], NDArray[np.complexfloating]]:
    """Return weights of the samples along an axis: value of the periodic part, and its slope.

    For an even count the coefficient at Nyquist is shared between both of its signs.
    """
    count, step = field.shape[axis], field.grid.step_px[axis]
    index = np.arange(count)
    u = (at_px[:, np.newaxis] - field.grid.origin_px[axis]) / step - index
    angle = np.pi * u / count
    near = np.abs(np.sin(angle)) < 1e-7
    angle = np.where(near, 0.5, angle)
    sine, cosine = np.sin(np.pi * u), np.cos(np.pi * u)
    if count % 2:
        below, turn = np.sin(angle), np.cos(angle)
        value = sine / (count * below)
        slope = np.pi / count * (cosine / below - sine * turn / (count * below**2))
    else:
        below = np.tan(angle)
        value = sine / (count * below)
        slope = np.pi / count * (cosine / below - sine / (count * np.sin(angle) ** 2))
    tilt = _tilt(field, axis, index)
    kind = field.values.dtype
    return (
        (np.where(near, 1.0, value) * tilt).astype(kind),
        (np.where(near, 0.0, slope) / step * tilt).astype(kind),
    )


def _tilt(field: Field, axis: int, index: NDArray[np.int64]) -> NDArray[np.complex128]:
    """Return what takes a field's tilt off its samples along an axis."""
    at = field.grid.origin_px[axis] + field.grid.step_px[axis] * index
    out: NDArray[np.complex128] = np.exp(-2j * np.pi * field.tilt_per_px[axis] * at)
    return out
