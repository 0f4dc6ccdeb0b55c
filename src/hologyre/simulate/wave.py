"""What every simulated wave offers: its value and derivatives at any point and time."""

from __future__ import annotations

from abc import abstractmethod
from typing import NamedTuple, Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

ComplexArray = NDArray[np.complex128]
FloatArray = NDArray[np.float64]


class Jet(NamedTuple):
    """Value and first derivatives of a field at points; all of one shape.

    Attributes
    ----------
    value : complex array
        The field.
    dy, dx : complex arrays
        Derivatives along y and x, per hologram pixel.
    dt : complex array
        Derivative in time, per frame.
    """

    value: ComplexArray
    dy: ComplexArray
    dx: ComplexArray
    dt: ComplexArray


class Wave(Protocol):
    """A field known in closed form at every point and time.

    Positions are in hologram pixels (y down, x right), times in frames; both may be any real
    numbers and arrays that broadcast. A subclass gives `jet` and `finest_px`; the rest follows.
    """

    @property
    @abstractmethod
    def finest_px(self) -> float:
        """Shortest length over which the field turns once, px; sets the zero finder's lattice."""
        raise NotImplementedError

    @abstractmethod
    def jet(self, y_px: ArrayLike, x_px: ArrayLike, t: ArrayLike) -> Jet:
        """Return value and derivatives at the points, broadcast together."""
        raise NotImplementedError

    def field(self, y_px: ArrayLike, x_px: ArrayLike, t: ArrayLike) -> ComplexArray:
        """Return the field at the points."""
        return self.jet(y_px, x_px, t).value

    def gradient(
        self, y_px: ArrayLike, x_px: ArrayLike, t: ArrayLike
    ) -> tuple[ComplexArray, ComplexArray]:
        """Return the derivatives along y and x at the points, per px."""
        jet = self.jet(y_px, x_px, t)
        return jet.dy, jet.dx

    def rate(self, y_px: ArrayLike, x_px: ArrayLike, t: ArrayLike) -> ComplexArray:
        """Return the derivative in time at the points, per frame."""
        return self.jet(y_px, x_px, t).dt

    def on_grid(self, y_px: ArrayLike, x_px: ArrayLike, t: float) -> ComplexArray:
        """Return the field on the lattice of all pairs of y and x, shape (len(y), len(x))."""
        y = np.asarray(y_px, dtype=np.float64)
        x = np.asarray(x_px, dtype=np.float64)
        return self.field(y[:, np.newaxis], x[np.newaxis, :], t)

    def on_frame(self, shape: tuple[int, int], t: float) -> ComplexArray:
        """Return the field on the pixels of a frame of `shape` (rows, columns)."""
        return self.on_grid(np.arange(shape[0]), np.arange(shape[1]), t)


def points(
    y_px: ArrayLike, x_px: ArrayLike, t: ArrayLike
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return positions and times as float arrays of one shape."""
    y, x, time = np.broadcast_arrays(
        np.asarray(y_px, dtype=np.float64),
        np.asarray(x_px, dtype=np.float64),
        np.asarray(t, dtype=np.float64),
    )
    return y, x, time


def require_positive(name: str, value: float) -> None:
    """Raise ValueError unless `value` is a positive finite number."""
    if not 0 < value < float("inf"):
        raise ValueError(f"{name}: expected a positive number, got {value!r}")
