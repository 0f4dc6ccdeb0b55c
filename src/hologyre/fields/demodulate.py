"""From holograms to complex fields."""

from __future__ import annotations

from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hologyre.fields.bands import Band, FilterWindow, Sampling
from hologyre.fields.blanks import Blanks
from hologyre.fields.carrier import Carrier
from hologyre.fields.interpolate import on_pixels
from hologyre.fields.transform import band_spectrum
from hologyre.grid import Field, Window

Edges = Literal["plain", "taper"]
Precision = Literal["single", "double"]

_EMPTY_FLOOR = 0.05
"""An empty frame's field under this part of its median modulus is not divided by."""


def demodulate(
    holograms: ArrayLike,
    carrier: Carrier,
    *,
    edges: Edges = "plain",
    sampling: Sampling = "band",
    window: FilterWindow = "disc",
    blanks: Blanks | None = None,
    precision: Precision = "single",
) -> Field:
    """Read the complex field from the sideband of off-axis holograms.

    The field E is in the hologram's counts: a hologram is ``|R|^2 + |O|^2 + E w + conj(E w)``
    with ``w = exp(2 pi i (fy y + fx x))``, so that E = O conj(R).

    Parameters
    ----------
    holograms : (y, x) or (t, y, x) real array
        Frames; a frame that holds NaN or infinity is refused.
    carrier : Carrier
        Sideband to read. It need not fall on a whole bin; what is over is kept as the
        field's tilt, so that zeros do not depend on it.
    edges : "plain" or "taper"
        How the frame's edges are met. "plain": the Fourier transform of the frame as it is,
        quickest, exact when the fringes are periodic in the frame, otherwise the edges leak
        into the picture. "taper": the frame's borders are faded out first, which confines
        the leak to them; `valid` in the grid leaves them out.
    sampling : "band" or "full"
        Keep the samples the band needs, about 2 per shortest wavelength, or one per pixel.
    window : "disc" or "hann"
        Filter of the sideband: everything within the radius alike, or fading to its rim.
    blanks : Blanks, optional
        Dark and reference frames are subtracted. The field of the empty frame is divided
        out, its mean modulus kept, so that counts stay counts.
    precision : "single" or "double"
        complex64 or complex128 values.

    Returns
    -------
    Field
        Values (y, x) or (t, y, x).

    Raises
    ------
    ValueError
        If a frame holds NaN or infinity, shapes do not fit, or an option is unknown.

    References
    ----------
    Takeda, Ina and Kobayashi, J. Opt. Soc. Am. 72, 156 (1982).
    """
    frames = _checked(holograms)
    _one_of("edges", edges, ("plain", "taper"))
    _one_of("sampling", sampling, ("band", "full"))
    _one_of("window", window, ("disc", "hann"))
    _one_of("precision", precision, ("single", "double"))
    real = np.float32 if precision == "single" else np.float64
    shape = (frames.shape[-2], frames.shape[-1])
    subtrahend, empty = None, None
    if blanks is not None:
        blanks.check_shape(shape)
        offset = blanks.subtrahend()
        subtrahend = None if offset is None else offset.astype(real)
        empty = blanks.empty
    band = Band(shape, shape, (carrier.fy, carrier.fx), carrier.radius)
    passed: NDArray[Any] = band.weights(window).astype(real)
    taper = _taper(shape, carrier.radius, real) if edges == "taper" else None

    def read(frame: NDArray[Any]) -> NDArray[np.complexfloating]:
        counts: NDArray[Any] = frame.astype(real)
        if frame.dtype.kind == "f" and not np.isfinite(counts).all():
            raise ValueError("holograms: a frame holds NaN or infinity")
        if subtrahend is not None:
            counts -= subtrahend
        if taper is not None:
            counts = (counts - counts.mean()) * taper[0][:, None] * taper[1]
        return band_spectrum(counts, band) * passed

    if frames.ndim == 2:
        spectrum = read(frames)
    else:
        spectrum = np.stack([read(frame) for frame in frames])
    valid = None
    if taper is not None:
        margins = [float(np.argmax(fade >= 0.5)) for fade in taper]
        ny, nx = shape
        valid = Window(margins[0], ny - 1 - margins[0], margins[1], nx - 1 - margins[1])
    if empty is None:
        return band.field(spectrum, sampling, valid)
    field = band.field(spectrum, "full", valid)
    dark = 0.0 if blanks is None or blanks.dark is None else blanks.dark
    blank = on_pixels(
        demodulate(empty - dark, carrier, edges=edges, sampling="full", precision=precision)
    )
    return field.with_values(field.values * _inverse(blank))


def _inverse(blank: NDArray[np.complexfloating]) -> NDArray[np.complexfloating]:
    """Return what divides a blank field out, its phase alone where it is too dark."""
    modulus = np.abs(blank)
    typical = float(np.median(modulus))
    if typical == 0:
        raise ValueError("blanks.empty: there are no fringes in it at this carrier")
    phase = np.conj(blank) / np.where(modulus > 0, modulus, 1)
    inverse: NDArray[np.complexfloating] = phase * np.where(
        modulus > _EMPTY_FLOOR * typical, typical / np.maximum(modulus, 1e-30), 1
    )
    return inverse.astype(blank.dtype)


def _taper(
    shape: tuple[int, int], radius: float, real: type[np.floating]
) -> tuple[NDArray[np.floating], NDArray[np.floating]]:
    """Fade a frame's borders out over one shortest wavelength, by cosines."""
    fades = []
    for n in shape:
        width = min(1 / radius, n / 4)
        depth = (np.minimum(np.arange(n), np.arange(n)[::-1]) + 0.5) / width
        fades.append((0.5 - 0.5 * np.cos(np.pi * np.minimum(depth, 1))).astype(real))
    return fades[0], fades[1]


def _checked(holograms: ArrayLike) -> NDArray[Any]:
    frames = np.asarray(holograms)
    if frames.ndim not in (2, 3) or np.iscomplexobj(frames):
        msg = (
            "holograms: expected a real (y, x) or (t, y, x) array, got "
            f"{frames.dtype} of shape {frames.shape}"
        )
        raise ValueError(msg)
    return frames


def _one_of(name: str, value: str, known: tuple[str, ...]) -> None:
    if value not in known:
        raise ValueError(f"{name}: expected one of {', '.join(known)}, got {value!r}")
