"""Where a field's samples lie on the hologram's own pixels."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray


class Window(NamedTuple):
    """A rectangle of pixel centres, both ends included, in hologram pixels."""

    y_min: float
    y_max: float
    x_min: float
    x_max: float

    def contains(
        self, y_px: NDArray[np.floating], x_px: NDArray[np.floating], margin_px: float = 0.0
    ) -> NDArray[np.bool_]:
        """Tell which points lie inside, at least `margin_px` from every side."""
        y, x = np.asarray(y_px), np.asarray(x_px)
        inside: NDArray[np.bool_] = (
            (y >= self.y_min + margin_px)
            & (y <= self.y_max - margin_px)
            & (x >= self.x_min + margin_px)
            & (x <= self.x_max - margin_px)
        )
        return inside


@dataclass(frozen=True)
class Grid:
    """The lattice a field is sampled on.

    Sample ``(j, i)`` lies at ``origin_px + step_px * (j, i)`` hologram pixels, where the
    first pixel's centre is ``(0, 0)``.

    Parameters
    ----------
    frame_shape : (int, int)
        Rows and columns of the hologram.
    step_px : (float, float)
        Distance between samples along y and x, in hologram pixels.
    origin_px : (float, float)
        Position of sample (0, 0), in hologram pixels.
    valid : Window
        The part that came from pixels and not from padding.
    """

    frame_shape: tuple[int, int]
    step_px: tuple[float, float]
    origin_px: tuple[float, float]
    valid: Window

    @classmethod
    def pixels(cls, frame_shape: tuple[int, int]) -> Grid:
        """Return the hologram's own grid, one sample a pixel, all of it valid."""
        ny, nx = int(frame_shape[0]), int(frame_shape[1])
        return cls((ny, nx), (1.0, 1.0), (0.0, 0.0), Window(0.0, ny - 1.0, 0.0, nx - 1.0))

    def y_px(self, count: int) -> NDArray[np.float64]:
        """Return the rows' positions in hologram pixels, for `count` rows."""
        return self.origin_px[0] + self.step_px[0] * np.arange(count, dtype=np.float64)

    def x_px(self, count: int) -> NDArray[np.float64]:
        """Return the columns' positions in hologram pixels, for `count` columns."""
        return self.origin_px[1] + self.step_px[1] * np.arange(count, dtype=np.float64)

    def to_px(
        self, row: NDArray[np.floating], column: NDArray[np.floating]
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Turn fractional sample indices into hologram pixels (y, x)."""
        return (
            self.origin_px[0] + self.step_px[0] * np.asarray(row, dtype=np.float64),
            self.origin_px[1] + self.step_px[1] * np.asarray(column, dtype=np.float64),
        )

    def to_samples(
        self, y_px: NDArray[np.floating], x_px: NDArray[np.floating]
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Turn hologram pixels into fractional sample indices (row, column)."""
        return (
            (np.asarray(y_px, dtype=np.float64) - self.origin_px[0]) / self.step_px[0],
            (np.asarray(x_px, dtype=np.float64) - self.origin_px[1]) / self.step_px[1],
        )


@dataclass(frozen=True, eq=False)
class Field:
    """A band-limited complex field and where its samples lie.

    ``values * exp(-2j*pi*(ty*y_px + tx*x_px))`` is one full period of a trigonometric
    polynomial, so that the field is known exactly between its samples; (ty, tx) is
    `tilt_per_px`, which lets a non-integer carrier be taken out without spoiling this.

    Parameters
    ----------
    values : (..., y, x) complex array
        The samples. A time axis may come first.
    grid : Grid
        Where they lie.
    tilt_per_px : (float, float)
        Linear phase the periodic part is multiplied by, in cycles per pixel (y, x).
    radius_per_px : float
        Radius of the disc of frequencies that holds the field, in cycles per pixel.
        The shortest wavelength is its inverse.
    """

    values: NDArray[np.complexfloating]
    grid: Grid
    tilt_per_px: tuple[float, float] = (0.0, 0.0)
    radius_per_px: float = 0.5

    def __post_init__(self) -> None:
        if np.ndim(self.values) < 2 or not np.iscomplexobj(self.values):
            msg = (
                "values: expected a complex array with at least 2 axes (..., y, x), got "
                f"{np.asarray(self.values).dtype} of shape {np.shape(self.values)}"
            )
            raise TypeError(msg)

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns of samples."""
        return self.values.shape[-2], self.values.shape[-1]

    @property
    def period_px(self) -> tuple[float, float]:
        """Period of the interpolant along y and x, in hologram pixels."""
        ny, nx = self.shape
        return ny * self.grid.step_px[0], nx * self.grid.step_px[1]

    def with_values(self, values: NDArray[np.complexfloating]) -> Field:
        """Return the same field with other samples on the same grid."""
        return replace(self, values=values)
