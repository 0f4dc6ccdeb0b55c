"""Which Fourier coefficients hold a sideband, and how they become a field."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Literal

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from hologyre.grid import Field, Grid, Window

Sampling = Literal["band", "full"]
FilterWindow = Literal["disc", "hann"]


@dataclass(frozen=True)
class Band:
    """A disc of frequencies ``k / period`` around a carrier, in whole bins of a torus.

    Parameters
    ----------
    frame_shape : (int, int)
        Rows and columns of the hologram.
    period : (int, int)
        Period of the torus in pixels: the frame itself, or larger.
    carrier : (float, float)
        Carrier (fy, fx), cycles/px.
    radius : float
        Radius of the disc, cycles/px.
    most : (int, int), optional
        Bins on either side of the centre are at most these.
    """

    frame_shape: tuple[int, int]
    period: tuple[int, int]
    carrier: tuple[float, float]
    radius: float
    most: tuple[int, int] | None = None

    @property
    def centre(self) -> tuple[int, int]:
        """Bin nearest to the carrier."""
        return round(self.carrier[0] * self.period[0]), round(self.carrier[1] * self.period[1])

    @property
    def half(self) -> tuple[int, int]:
        """Number of bins on either side of the centre."""
        most = self.most or self.period
        y, x = (
            min(int(self.radius * n + 0.5), (n - 1) // 2, m)
            for n, m in zip(self.period, most, strict=True)
        )
        return y, x

    @property
    def tilt_per_px(self) -> tuple[float, float]:
        """What is left between the nearest bin and the carrier, cycles/px."""
        (ky, kx), (ny, nx), (fy, fx) = self.centre, self.period, self.carrier
        return ky / ny - fy, kx / nx - fx

    def bins(self, axis: int) -> NDArray[np.intp]:
        """Return the bins held along an axis."""
        return self.centre[axis] + np.arange(-self.half[axis], self.half[axis] + 1)

    def offsets(self, axis: int) -> NDArray[np.float64]:
        """Return the bins' distance from the carrier along an axis, cycles/px."""
        return self.bins(axis) / self.period[axis] - self.carrier[axis]

    def weights(self, window: FilterWindow = "disc") -> NDArray[np.float64]:
        """Return the filter's transmission, zero outside the disc and beyond Nyquist."""
        return _weights(self, window)

    def samples(self, sampling: Sampling) -> tuple[int, int]:
        """Return the number of samples along y and x."""
        if sampling == "full":
            return self.period
        # One bin more than held keeps Nyquist's bin, which has no partner, empty.
        y, x = (
            min(scipy.fft.next_fast_len(2 * half + 2), n)
            for half, n in zip(self.half, self.period, strict=True)
        )
        return y, x

    def field(
        self,
        coefficients: NDArray[np.complexfloating],
        sampling: Sampling,
        valid: Window | None = None,
    ) -> Field:
        """Turn coefficients ``(..., ky, kx)`` of ``exp(2 pi i k r / period)`` into a field."""
        shape = self.samples(sampling)
        spectrum = np.zeros((*coefficients.shape[:-2], *shape), dtype=coefficients.dtype)
        rows, columns = (np.arange(-h, h + 1) % n for h, n in zip(self.half, shape, strict=True))
        spectrum[..., rows[:, None], columns[None, :]] = coefficients
        values = scipy.fft.ifft2(spectrum, norm="forward", overwrite_x=True)
        ny, nx = self.frame_shape
        grid = Grid(
            self.frame_shape,
            (self.period[0] / shape[0], self.period[1] / shape[1]),
            (0.0, 0.0),
            Window(0.0, ny - 1.0, 0.0, nx - 1.0) if valid is None else valid,
        )
        tilt = self.tilt_per_px
        if tilt != (0.0, 0.0):
            values *= np.exp(2j * np.pi * tilt[0] * grid.y_px(shape[0]))[:, None].astype(
                values.dtype
            )
            values *= np.exp(2j * np.pi * tilt[1] * grid.x_px(shape[1])).astype(values.dtype)
        return Field(values, grid, tilt, self.radius)


@lru_cache(maxsize=16)
def _weights(band: Band, window: FilterWindow) -> NDArray[np.float64]:
    distance = np.hypot(band.offsets(0)[:, None], band.offsets(1)[None, :])
    # A bin on the rim belongs to the disc whatever the rounding of its frequency.
    inside = distance <= band.radius * (1 + 1e-9)
    for axis in (0, 1):
        below = 2 * np.abs(band.bins(axis)) <= band.period[axis]
        inside &= below[:, None] if axis == 0 else below[None, :]
    weights = inside.astype(np.float64)
    if window == "hann":
        weights *= 0.5 + 0.5 * np.cos(np.pi * np.minimum(distance / band.radius, 1))
    weights.flags.writeable = False
    return weights
