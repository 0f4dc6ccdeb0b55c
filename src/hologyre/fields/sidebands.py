"""Sidebands in a hologram's spectrum: those that stand apart from the zero order."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.fft
import scipy.ndimage
from numpy.typing import NDArray
from skimage.morphology import reconstruction

_CELLS = 160
_SMOOTHING = 1.5
_PROMINENT = np.log(10.0)
"""Least rise of a sideband above the valley that parts it from the zero order.

Pure noise, smoothed as here, rises less than threefold.
"""


_NEAREST = 5
"""Bins from the zero order under which a hill is its own shoulder."""


@dataclass(frozen=True)
class Sideband:
    """A hill of the power spectrum, roughly.

    Parameters
    ----------
    fy, fx : float
        Its centre of mass, cycles/px.
    radius : float
        Radius of a disc of the same second moment, cycles/px.
    power : float
        Sum of the power spectrum above the floor.
    floor : float
        Power per bin of what lies around.
    prominence : float
        Factor by which it rises above the valley towards the zero order.
    """

    fy: float
    fx: float
    radius: float
    power: float
    floor: float
    prominence: float


@dataclass(frozen=True, eq=False)
class Spectrum:
    """Power spectrum of a frame less its mean, under a Hann window.

    Parameters
    ----------
    power : (y, x) float array
        Power per bin, zero frequency in the middle; its mean over white noise is the
        variance of a pixel, and over everything the mean square under the window.
    fy, fx : float arrays
        Frequencies of rows and columns, cycles/px.
    """

    power: NDArray[np.float64]
    fy: NDArray[np.float64]
    fx: NDArray[np.float64]
    mean: float
    """Mean of the frame under the squared window, counts."""

    @classmethod
    def of(cls, frame: NDArray[np.float64]) -> Spectrum:
        """Transform a frame."""
        ny, nx = frame.shape
        along_y, along_x = (np.hanning(n + 2)[1:-1] for n in frame.shape)
        fade = np.outer(along_y, along_x)
        flat = (frame - (frame * fade).sum() / fade.sum()) * fade
        half = np.abs(scipy.fft.rfft2(flat)) ** 2 / (fade**2).sum()
        power = np.empty(frame.shape)
        power[:, : half.shape[1]] = half
        # The other half of a real frame's spectrum is the mirror image.
        mirrored = half[(-np.arange(ny)) % ny][:, 1 : nx - half.shape[1] + 1]
        power[:, half.shape[1] :] = mirrored[:, ::-1]
        return cls(
            scipy.fft.fftshift(power),
            scipy.fft.fftshift(scipy.fft.fftfreq(ny)),
            scipy.fft.fftshift(scipy.fft.fftfreq(nx)),
            float((frame * fade**2).sum() / (fade**2).sum()),
        )

    def visibility(self, power: float) -> float:
        """Return the visibility of fringes whose sideband sums to a power.

        Twice the field's rms over that of the light without fringes, under the window, so
        that light that fills a part of the frame does not matter.
        """
        field = max(power, 0.0) / self.power.size
        light = self.mean**2 + float(self.power.mean()) - 2 * field
        return float(np.clip(2 * np.sqrt(field / light), 0, 1)) if light > 0 else 1.0

    def distance(self, fy: float, fx: float) -> NDArray[np.float64]:
        """Return every bin's distance from a frequency, across Nyquist too."""
        away = [np.abs((f - at + 0.5) % 1 - 0.5) for f, at in ((self.fy, fy), (self.fx, fx))]
        distance: NDArray[np.float64] = np.hypot(away[0][:, None], away[1][None, :])
        return distance


def find_sidebands(spectrum: Spectrum, most: int = 6) -> list[Sideband]:
    """Find the sidebands with ``fx + fy / 2 > 0``, the most powerful first.

    The spectrum is taken as a landscape. A sideband is a hill from which every way to the
    zero order goes through a deep valley; the slopes of a picture without fringes have none.
    """
    ny, nx = spectrum.power.shape
    smooth = scipy.ndimage.gaussian_filter(spectrum.power, _SMOOTHING, mode="wrap")
    cell = [max(n // _CELLS, 1) for n in (ny, nx)]
    rows, columns = np.arange(0, ny, cell[0]), np.arange(0, nx, cell[1])
    sums = np.add.reduceat(np.add.reduceat(smooth, rows, axis=0), columns, axis=1)
    counts = np.outer(np.diff([*rows, ny]), np.diff([*columns, nx]))
    height = np.log(sums / counts + 1e-300)
    fy = np.add.reduceat(spectrum.fy, rows) / np.diff([*rows, ny])
    fx = np.add.reduceat(spectrum.fx, columns) / np.diff([*columns, nx])
    own_half = fx[None, :] + fy[:, None] / 2 > 0

    found: list[Sideband] = []
    centre = (int(np.argmin(np.abs(fy))), int(np.argmin(np.abs(fx))))
    flooded = np.full(height.shape, height.min())
    near = tuple(slice(max(c - 1, 0), c + 2) for c in centre)
    flooded[near] = height[near]
    for _ in range(most):
        reached = reconstruction(flooded, height)
        rise = np.where(own_half, height - reached, 0)
        peak = np.unravel_index(int(np.argmax(rise)), rise.shape)
        if rise[peak] < _PROMINENT:
            break
        hill, _ = scipy.ndimage.label(rise > min(_PROMINENT / 2, rise[peak] / 2))
        inside = hill == hill[peak]
        band = _measure(spectrum, float(fy[peak[0]]), float(fx[peak[1]]), float(rise[peak]))
        length = float(np.hypot(band.fy, band.fx))
        known = any(np.hypot(band.fy - b.fy, band.fx - b.fx) < b.radius for b in found)
        if length > max(1.2 * band.radius, _NEAREST / min(ny, nx)) and not known:
            found.append(band)
        # Flood this hill and its mirror image, and look for the next.
        flooded = np.where(inside | inside[::-1, ::-1], height, flooded)
    return sorted(found, key=lambda band: -band.power)


def half_way(fy: float, fx: float) -> float:
    """Return half the distance to the zero order, or to the conjugate beyond Nyquist."""
    apart = np.hypot((2 * fy + 0.5) % 1 - 0.5, (2 * fx + 0.5) % 1 - 0.5)
    return float(min(np.hypot(fy, fx), apart)) / 2


def _measure(spectrum: Spectrum, fy: float, fx: float, rise: float) -> Sideband:
    """Take centre and radius by the moments of the power, in a circle that closes in."""
    ny, nx = spectrum.power.shape
    least = 3 / min(ny, nx)
    reach = max(half_way(fy, fx), 2 * least)
    radius, power, floor = reach, 0.0, 0.0
    for _ in range(12):
        distance = spectrum.distance(fy, fx)
        around = spectrum.power[(distance > reach) & (distance < 1.4 * reach + least)]
        # The median of exponentially spread powers is log 2 of their mean.
        floor = float(np.median(around)) / np.log(2) if around.size else floor
        rows, columns = np.nonzero(distance < reach)
        weight = spectrum.power[rows, columns] - floor
        power = float(weight.sum())
        if power <= 0:
            break
        dy = (spectrum.fy[rows] - fy + 0.5) % 1 - 0.5
        dx = (spectrum.fx[columns] - fx + 0.5) % 1 - 0.5
        step_y, step_x = float(weight @ dy) / power, float(weight @ dx) / power
        spread = float(weight @ ((dy - step_y) ** 2 + (dx - step_x) ** 2)) / power
        radius = float(np.sqrt(2 * max(spread, 0)))
        fy, fx = fy + step_y, fx + step_x
        closer = max(min(reach, 1.5 * radius + least), least)
        if closer == reach and abs(step_y) + abs(step_x) < 1e-6:
            break
        reach = closer
    radius = max(radius, 1 / max(ny, nx))
    return Sideband(fy, fx, radius, max(power, 0.0), floor, float(np.exp(rise)))
