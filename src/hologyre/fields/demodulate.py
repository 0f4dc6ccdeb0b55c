"""From holograms to complex fields."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hologyre.fields.bands import Band, FilterWindow, Sampling
from hologyre.fields.blanks import Blanks
from hologyre.fields.carrier import Carrier
from hologyre.fields.fit import fit_spectrum
from hologyre.fields.fit_plan import make_plan
from hologyre.fields.holes import fill_holes
from hologyre.fields.saturation import usable_pixels
from hologyre.fields.transform import band_spectrum
from hologyre.grid import Field, Window

Edges = Literal["plain", "taper", "fit"]
Precision = Literal["single", "double"]

_EMPTY_FLOOR = 0.05
"""An empty frame's field under this part of its median modulus is not divided by."""
_FEWEST = 0.5
"""Least fraction of the pixels that must be usable."""
_WIDENING = 0.7
"""How much wider than the sideband plain and taper read, where there is room."""


def demodulate(
    holograms: ArrayLike,
    carrier: Carrier,
    *,
    edges: Edges = "fit",
    sampling: Sampling = "band",
    window: FilterWindow = "disc",
    reach: float | None = None,
    blanks: Blanks | None = None,
    valid: NDArray[np.bool_] | None = None,
    saturation: float | None = None,
    precision: Precision = "single",
) -> Field:
    """Read the complex field from the sideband of off-axis holograms.

    The field E is in the hologram's counts: a hologram is ``|R|^2 + |O|^2 + E w + conj(E w)``
    with ``w = exp(2 pi i (fy y + fx x))``, so that E = O conj(R).

    Parameters
    ----------
    holograms : (y, x) or (t, y, x) real array
        Frames; one that holds NaN or infinity where `valid` is True is refused.
    carrier : Carrier
        Sideband to read. It need not fall on a whole bin; what is over is kept as the
        field's tilt, so that zeros do not depend on it.
    edges : "plain", "taper" or "fit"
        How the frame's edges are met. "plain": the Fourier transform of the frame as it is,
        quickest, exact when the fringes are periodic in the frame, otherwise the edges leak
        into the picture. "taper": the frame's borders are faded out first, which confines
        the leak to them; `valid` in the grid leaves them out. "fit": least squares on the
        frame's own pixels, which leaves no border to throw away.
    sampling : "band" or "full"
        Keep the samples the band needs, about 2 per shortest wavelength, or one per pixel.
        With "fit" the field's period is longer than the frame.
    window : "disc" or "hann"
        Filter of the sideband: everything within the radius alike, or fading to its rim.
        The fit takes a disc.
    reach : float, optional
        Radius that plain and taper read, cycles/px. Edges blur the sideband, so that by
        default it is wider than the carrier's radius by 0.7, where the gap to the zero
        order, its own conjugate and Nyquist leave room; see `reading_radius`.
    blanks : Blanks, optional
        Dark and reference frames are subtracted. The field of the empty frame is divided
        out, its median modulus kept, so that counts stay counts; sampling is then "full".
    valid : (y, x) bool array, optional
        False at dead or masked pixels.
    saturation : float, optional
        Counts at or above it are saturated; by default the level the frame shows; infinity
        for none. Unusable pixels are replaced by what the fit to all others says there.
    precision : "single" or "double"
        complex64 or complex128 values.

    Returns
    -------
    Field
        Values (y, x) or (t, y, x).

    Raises
    ------
    ValueError
        If a frame holds NaN or infinity, if more than half of its pixels are unusable, if
        shapes do not fit, or if an option is unknown.

    References
    ----------
    Takeda, Ina and Kobayashi, J. Opt. Soc. Am. 72, 156 (1982). For the fit's bases, Slepian,
    Bell Syst. Tech. J. 57, 1371 (1978).
    """
    frames = _checked(holograms)
    _one_of("edges", edges, ("plain", "taper", "fit"))
    _one_of("sampling", sampling, ("band", "full"))
    _one_of("window", window, ("disc", "hann"))
    _one_of("precision", precision, ("single", "double"))
    if edges == "fit" and window != "disc":
        raise ValueError(f"window: edges='fit' takes 'disc', got {window!r}")
    shape = (frames.shape[-2], frames.shape[-1])
    if valid is not None and np.shape(valid) != shape:
        raise ValueError(f"valid: shape {np.shape(valid)} differs from the hologram's {shape}")
    if blanks is not None:
        blanks.check_shape(shape)
    real = np.float32 if precision == "single" else np.float64
    offset = None if blanks is None else blanks.subtrahend()
    subtrahend = None if offset is None else offset.astype(real)
    at, inside = (carrier.fy, carrier.fx), None
    read: Callable[[NDArray[Any]], NDArray[np.complexfloating]]
    if edges == "fit":
        plan = make_plan(shape, at, carrier.radius, precision)
        band = plan.side

        def read(counts: NDArray[Any]) -> NDArray[np.complexfloating]:
            return fit_spectrum(counts, plan)

    else:
        band = Band(shape, shape, at, reading_radius(carrier, shape) if reach is None else reach)
        passed: NDArray[Any] = band.weights(window).astype(real)
        fades = border_fades(shape, carrier.radius, real) if edges == "taper" else None
        inside = None if fades is None else _inside(fades, shape)

        def read(counts: NDArray[Any]) -> NDArray[np.complexfloating]:
            if fades is not None:
                counts = (counts - counts.mean()) * fades[0][:, None] * fades[1]
            return band_spectrum(counts, band) * passed

    def prepared(frame: NDArray[Any]) -> NDArray[Any]:
        usable = usable_pixels(frame, valid, saturation)
        counts: NDArray[Any] = frame.astype(real)
        if subtrahend is not None:
            counts -= subtrahend
        seen = counts if usable is None or frame.dtype.kind != "f" else counts[usable]
        if frame.dtype.kind == "f" and not np.isfinite(seen).all():
            raise ValueError("holograms: a frame holds NaN or infinity")
        if usable is None:
            return counts
        share = float(usable.mean())
        if share < _FEWEST:
            msg = (
                f"holograms: only {share:.0%} of a frame's pixels are usable, the rest is "
                "masked or saturated"
            )
            raise ValueError(msg)
        return fill_holes(counts, make_plan(shape, at, carrier.radius, precision), usable)

    if frames.ndim == 2:
        spectrum = read(prepared(frames))
    else:
        spectrum = np.stack([read(prepared(frame)) for frame in frames])
    if blanks is None or blanks.empty is None:
        return _of_radius(band.field(spectrum, sampling, inside), carrier)
    inverse = empty_inverse(
        blanks,
        carrier,
        edges=edges,
        window=window,
        reach=reach,
        valid=valid,
        precision=precision,
    )
    field = _of_radius(band.field(spectrum, "full", inside), carrier)
    return field.with_values(field.values * inverse.values)


def empty_inverse(
    blanks: Blanks,
    carrier: Carrier,
    *,
    edges: Edges = "fit",
    window: FilterWindow = "disc",
    reach: float | None = None,
    valid: NDArray[np.bool_] | None = None,
    precision: Precision = "single",
) -> Field:
    """Return the field that divides the empty frame's out, with full sampling.

    It is the empty frame's median modulus over its field; where the modulus is under 0.05 of
    the median there is nothing to divide by, and only the phase is taken out.

    Raises
    ------
    ValueError
        If there is no empty frame, or no fringes in it at this carrier.
    """
    if blanks.empty is None:
        raise ValueError("blanks.empty: expected a frame, got None")
    blank = demodulate(
        blanks.empty,
        carrier,
        edges=edges,
        sampling="full",
        window=window,
        reach=reach,
        blanks=None if blanks.dark is None else Blanks(dark=blanks.dark),
        valid=valid,
        precision=precision,
    )
    modulus = np.abs(blank.values)
    ny, nx = blank.grid.frame_shape
    typical = float(np.median(modulus[:ny, :nx]))
    if typical == 0:
        raise ValueError("blanks.empty: there are no fringes in it at this carrier")
    phase = np.conj(blank.values) / np.where(modulus > 0, modulus, 1)
    bright = modulus > _EMPTY_FLOOR * typical
    factor = np.where(bright, typical / np.where(bright, modulus, 1), 1)
    values: NDArray[Any] = (phase * factor).astype(blank.values.dtype)
    return Field(values, blank.grid, (-blank.tilt_per_px[0], -blank.tilt_per_px[1]), carrier.radius)


def reading_radius(carrier: Carrier, frame_shape: tuple[int, int]) -> float:
    """Return the radius that plain and tapered demodulation read, cycles/px.

    A frame's edges blur the sideband. It is read up to 0.7 wider than it is, but not into
    the zero order (twice the sideband's radius), the conjugate sideband or beyond Nyquist,
    and never narrower than it is.
    """
    apart = np.array([(2 * f + 0.5) % 1 - 0.5 for f in (carrier.fy, carrier.fx)])
    step = 1 / min(frame_shape)
    room = min(
        carrier.frequency - 2 * carrier.radius - step,
        float(np.hypot(*apart)) / 2,
        0.5 - max(abs(carrier.fy), abs(carrier.fx)),
    )
    return float(max(carrier.radius, min((1 + _WIDENING) * carrier.radius, room)))


def _of_radius(field: Field, carrier: Carrier) -> Field:
    """Return the field with the sideband's radius, which is what its shortest wavelength is."""
    return Field(field.values, field.grid, field.tilt_per_px, carrier.radius)


def border_fades(
    shape: tuple[int, int], radius: float, real: type[np.floating] = np.float64
) -> tuple[NDArray[np.floating], NDArray[np.floating]]:
    """Fade a frame's borders out over one shortest wavelength, by cosines."""
    fades = []
    for n in shape:
        width = min(1 / radius, n / 4)
        depth = (np.minimum(np.arange(n), np.arange(n)[::-1]) + 0.5) / width
        fades.append((0.5 - 0.5 * np.cos(np.pi * np.minimum(depth, 1))).astype(real))
    return fades[0], fades[1]


def _inside(
    fades: tuple[NDArray[np.floating], NDArray[np.floating]], shape: tuple[int, int]
) -> Window:
    """Return the window where a taper takes less than half away."""
    top, left = (float(np.argmax(fade >= 0.5)) for fade in fades)
    return Window(top, shape[0] - 1 - top, left, shape[1] - 1 - left)


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
