"""Fields made ready for following their zeros: oversampled slices of one window."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from hologyre.fields.interpolate import coefficients
from hologyre.grid import Field, Window
from hologyre.motion.trace import BETA, WIDTH

_OVERSAMPLING = 2.2


@dataclass(frozen=True, eq=False)
class Slice:
    """One frame (or plane), ready for interpolation anywhere in its window.

    Parameters
    ----------
    samples : (y, x) complex128 array
        The field on a fine grid that covers the window and a rim of ``WIDTH`` samples, the
        tracing kernel's transform divided out.
    origin_px, step_px : (float, float)
        Position of sample (0, 0) and distance between samples, hologram pixels.
    window : Window
        Where zeros are followed, hologram pixels.
    reach_px : float
        Inverse of the root mean square of the transverse wavevector, px: the length over
        which the field changes.
    """

    samples: NDArray[np.complex128]
    origin_px: tuple[float, float]
    step_px: tuple[float, float]
    window: Window
    reach_px: float
    inside: NDArray[np.complex128]

    @property
    def bounds(self) -> NDArray[np.float64]:
        """The window's borders y_min, y_max, x_min, x_max in samples."""
        (oy, ox), (sy, sx), w = self.origin_px, self.step_px, self.window
        return np.array(
            [(w.y_min - oy) / sy, (w.y_max - oy) / sy, (w.x_min - ox) / sx, (w.x_max - ox) / sx]
        )

    @property
    def power(self) -> float:
        """Mean of |E|^2 in the window."""
        return float(np.mean(np.abs(self.inside) ** 2))

    def to_samples(self, position_px: NDArray[np.float64]) -> NDArray[np.float64]:
        """Turn (n, 2) positions (y, x) in px into samples."""
        return (position_px - self.origin_px) / self.step_px

    def to_px(self, place: NDArray[np.float64]) -> NDArray[np.float64]:
        """Turn (n, 2) places (y, x) in samples into px."""
        return place * self.step_px + self.origin_px

    def turned(self, phase_rad: float) -> Slice:
        """Return the slice with a common phase taken out."""
        factor = np.exp(-1j * phase_rad)
        return replace(self, samples=self.samples * factor, inside=self.inside * factor)


def slice_of(
    field: Field, *, window: Window | None = None, tilt_per_px: tuple[float, float] = (0.0, 0.0)
) -> Slice:
    """Oversample one frame for interpolation with the tracing kernel.

    Parameters
    ----------
    field : Field, values (y, x)
        One frame.
    window : Window, optional
        Where zeros are followed; the field's valid part without it.
    tilt_per_px : (float, float)
        Linear phase (y, x) to take out, cycles per px; it moves no zero.

    Raises
    ------
    ValueError
        If the field has a time axis or values that are not finite.
    """
    if field.values.ndim != 2:
        msg = f"fields: expected one frame (y, x) each, got values of shape {field.values.shape}"
        raise ValueError(msg)
    if not np.isfinite(field.values).all():
        raise ValueError("fields: expected finite values, got some that are infinite or NaN")
    window = field.grid.valid if window is None else window
    spectrum = coefficients(replace(field, values=field.values.astype(np.complex128)))
    reach = _reach(spectrum, field.period_px)
    plain = spectrum
    shape, step, index, place, slope = [], [], [], [], []
    for axis, (low, high) in enumerate(
        ((window.y_min, window.y_max), (window.x_min, window.x_max))
    ):
        half = spectrum.shape[axis] // 2
        period = field.period_px[axis]
        count = scipy.fft.next_fast_len(int(np.ceil(2 * _OVERSAMPLING * half)) + 2 * WIDTH)
        bins = np.arange(-half, half + 1)
        origin = field.grid.origin_px[axis]
        tilt = field.tilt_per_px[axis] - tilt_per_px[axis]
        transform = _kernel_transform(bins / count + tilt * period / count)
        spectrum = spectrum / (transform[:, None] if axis == 0 else transform)
        first = int(np.floor((low - origin) * count / period)) - WIDTH
        last = int(np.ceil((high - origin) * count / period)) + WIDTH
        shape.append(count)
        step.append(period / count)
        place.append(bins % count)
        index.append(np.arange(first, last + 1))
        slope.append(np.exp(2j * np.pi * tilt * (origin + index[axis] * step[axis])))
    cuts = []
    for part in (spectrum, plain):
        placed = np.zeros(shape, dtype=np.complex128)
        placed[place[0][:, None], place[1]] = part
        samples = scipy.fft.ifft2(placed, norm="forward", overwrite_x=True)
        cut = samples[(index[0] % shape[0])[:, None], index[1] % shape[1]]
        cuts.append(cut * (slope[0][:, None] * slope[1]))
    oy, ox = (field.grid.origin_px[axis] + step[axis] * float(index[axis][0]) for axis in (0, 1))
    inside = np.ascontiguousarray(cuts[1][WIDTH:-WIDTH, WIDTH:-WIDTH])
    return Slice(cuts[0], (oy, ox), (step[0], step[1]), window, reach, inside)


def common_phase(before: Slice, after: Slice) -> float:
    """Return the phase by which `after` is ahead of `before` on the whole, rad."""
    return float(np.angle(np.vdot(before.inside, after.inside)))


def _reach(spectrum: NDArray[np.complexfloating], period_px: tuple[float, float]) -> float:
    """Return the inverse spread of the wavevectors, px."""
    power = np.abs(spectrum) ** 2
    spread = 0.0
    for axis in (0, 1):
        along = power.sum(axis=1 - axis)
        half = len(along) // 2
        k = 2.0 * np.pi * np.arange(-half, half + 1) / period_px[axis]
        mean = along @ k / max(along.sum(), 1e-300)
        spread += along @ (k - mean) ** 2 / max(along.sum(), 1e-300)
    return float(1.0 / np.sqrt(max(spread, (2.0 * np.pi / max(period_px)) ** 2)))


def _kernel_transform(frequency: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the transform of the tracing kernel, frequency in cycles per sample."""
    nodes, weights = np.polynomial.legendre.leggauss(8 * WIDTH)
    kernel = np.exp(BETA * (np.sqrt(1.0 - nodes**2) - 1.0))
    waves = np.cos(np.pi * WIDTH * np.outer(frequency, nodes))
    transform: NDArray[np.float64] = 0.5 * WIDTH * (waves @ (weights * kernel))
    return transform
