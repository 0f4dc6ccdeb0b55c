"""The carrier of a hologram, found by itself."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
import scipy.fft
import scipy.ndimage
from numpy.typing import ArrayLike, NDArray


@dataclass(frozen=True)
class Carrier:
    """Where a sideband lies in the spectrum, and how wide it is.

    Parameters
    ----------
    fy, fx : float
        Carrier frequency, cycles/px. The field is what multiplies
        ``exp(+2 pi i (fy y + fx x))`` in the hologram.
    radius : float
        Radius of the sideband, cycles/px.
    sigma_fy, sigma_fx, sigma_radius : float
        Standard errors; NaN where not known.
    visibility : float
        Visibility of the fringes, twice the field's rms over the mean, 0 to 1.
    kind : "fringes" or "speckle"
        A plain tone with little around it, or a filled disc.
    notes : tuple of str
        What a microscopist should know about these fringes.
    """

    fy: float
    fx: float
    radius: float
    sigma_fy: float = float("nan")
    sigma_fx: float = float("nan")
    sigma_radius: float = float("nan")
    visibility: float = float("nan")
    kind: Literal["fringes", "speckle"] = "speckle"
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        if not (abs(self.fy) <= 0.5 and abs(self.fx) <= 0.5):
            msg = f"carrier: expected |fy|, |fx| <= 0.5 cycles/px, got ({self.fy}, {self.fx})"
            raise ValueError(msg)
        if not 0 < self.radius <= 0.5:
            msg = f"radius: expected above 0 and at most 0.5 cycles/px, got {self.radius}"
            raise ValueError(msg)

    @property
    def frequency(self) -> float:
        """Length of the carrier, cycles/px."""
        return float(np.hypot(self.fy, self.fx))

    @property
    def conjugate(self) -> Carrier:
        """The other sideband, which holds the conjugate field."""
        return replace(self, fy=-self.fy, fx=-self.fx)


@dataclass(frozen=True)
class NoFringes:
    """No usable sideband; false, and says why."""

    reason: str

    def __bool__(self) -> bool:
        return False


def find_carrier(
    hologram: ArrayLike, *, radius: float | None = None, conjugate: bool = False
) -> Carrier | NoFringes:
    """Find the carrier of an off-axis hologram.

    Parameters
    ----------
    hologram : (y, x) real array
        One frame.
    radius : float, optional
        Radius of the sideband in cycles/px, where it is known from NA and pixel.
    conjugate : bool
        Take the sideband with ``fx + fy / 2 < 0``, which holds the conjugate field.

    Returns
    -------
    Carrier or NoFringes
        The sideband's centre and radius, or a false value with the reason.

    Raises
    ------
    ValueError
        If the frame is not 2-D and real, is under 32 pixels wide, or holds NaN or infinity.
    """
    frame = _checked(hologram)
    mean = float(frame.mean())
    if np.ptp(frame) == 0:
        return NoFringes("the frame is constant: there are no fringes")
    ny, nx = frame.shape
    window = np.outer(np.hanning(ny + 2)[1:-1], np.hanning(nx + 2)[1:-1])
    power = np.abs(scipy.fft.fftshift(scipy.fft.fft2((frame - mean) * window))) ** 2
    fy = scipy.fft.fftshift(scipy.fft.fftfreq(ny))[:, None]
    fx = scipy.fft.fftshift(scipy.fft.fftfreq(nx))[None, :]
    smooth = scipy.ndimage.gaussian_filter(power, 2, mode="wrap")
    ring = np.hypot(fy, fx)
    candidate = np.where((ring > 0.06) & (fx + fy / 2 > 0), smooth, 0)
    j, i = np.unravel_index(np.argmax(candidate), candidate.shape)
    if smooth[j, i] < 20 * np.median(smooth):
        return NoFringes("no sideband stands out of the spectrum")
    centre = np.array([fy[j, 0], fx[0, i]])
    reach = float(np.hypot(*centre)) / 2
    floor = float(np.median(power))
    excess = np.clip(power - 3 * floor, 0, None)
    for _ in range(8):
        near = excess * (np.hypot(fy - centre[0], fx - centre[1]) < reach)
        total = near.sum()
        centre = np.array([(near * fy).sum(), (near * fx).sum()]) / total
        spread = np.sqrt((near * ((fy - centre[0]) ** 2 + (fx - centre[1]) ** 2)).sum() / total)
        reach = max(min(reach, 2.2 * spread), 6 / min(ny, nx))
    if radius is None:
        radius = float(min(max(spread * np.sqrt(2) * 1.1, 4 / min(ny, nx)), np.hypot(*centre) / 3))
    peak = near.max()
    kind: Literal["fringes", "speckle"] = "fringes" if 4 * peak > total else "speckle"
    rms = np.sqrt(total / window.size / (window**2).sum())
    sign = -1 if conjugate else 1
    return Carrier(
        float(sign * centre[0]),
        float(sign * centre[1]),
        radius,
        visibility=float(min(2 * rms / mean, 1.0)) if mean > 0 else float("nan"),
        kind=kind,
    )


def _checked(hologram: ArrayLike) -> NDArray[np.float64]:
    frame = np.asarray(hologram)
    if frame.ndim != 2 or np.iscomplexobj(frame):
        msg = f"hologram: expected a real (y, x) array, got {frame.dtype} of shape {frame.shape}"
        raise ValueError(msg)
    if min(frame.shape) < 32:
        raise ValueError(f"hologram: expected at least 32 x 32 pixels, got {frame.shape}")
    if not np.isfinite(frame).all():
        bad = int((~np.isfinite(frame)).sum())
        raise ValueError(f"hologram: {bad} of {frame.size} pixels are NaN or infinite")
    return frame.astype(np.float64)
