"""Numerical refocusing by the band-limited angular spectrum."""

from __future__ import annotations

from dataclasses import replace
from typing import Literal

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from hologyre.fields.interpolate import coefficients, from_coefficients, resample
from hologyre.grid import Field, Window
from hologyre.optics import Optics

Edges = Literal["padded", "periodic"]

_SPARE = 1.3
"""Room above the field's highest frequency for what fading its borders adds."""
_MOST = 2.0
"""Periods of the frame at most that are added around it."""


def refocus(field: Field, distance_um: float, *, optics: Optics, edges: Edges = "padded") -> Field:
    """Propagate a field by a distance in object space.

    Parameters
    ----------
    field : Field, values (y, x) or (t, y, x)
        The field. The optical axis is the sideband's centre: frequency zero.
    distance_um : float
        Distance in object space, um, in the medium; positive along the light. Imaging is
        taken as telecentric.
    optics : Optics
        Wavelength, camera pixel, magnification and index of the medium.
    edges : "padded" or "periodic"
        "padded": the field is put on a torus large enough that what leaves the frame does not
        come back in on the other side, and fades out beyond its border. "periodic": the
        field's own torus, exact for periodic fields.

    Returns
    -------
    Field
        The field there. Its `valid` window leaves out how far light of the steepest angle
        travels sideways, up to a quarter of the frame at each border.

    Raises
    ------
    ValueError
        If the optics lack the wavelength or the pixel size, or the distance is not finite.

    Notes
    -----
    The spectrum is multiplied by ``exp(+i 2 pi z sqrt((n / lambda)^2 - f^2))``, cut where that
    phase would turn faster than a padded torus can hold: ``|f| < (n / lambda) / sqrt((2 z df)^2 +
    1)`` along each axis, df the torus's frequency step (Matsushima and Shimobaba, Opt. Express
    17, 19662, 2009). Evanescent waves are left out.
    """
    pixel_of(optics), highest_frequency(optics)
    if not np.isfinite(distance_um):
        raise ValueError(f"distance_um: expected a finite number, got {distance_um!r}")
    if edges not in ("padded", "periodic"):
        raise ValueError(f"edges: expected padded or periodic, got {edges!r}")
    if distance_um == 0:
        return field
    ready = field
    if edges == "padded":
        ready = padded(field, sideways_px(field, distance_um, optics))
    spectrum = coefficients(ready)
    transfer = transfer_function(ready, spectrum.shape[-2:], distance_um, optics, edges=edges)
    moved = from_coefficients(spectrum * transfer.astype(spectrum.dtype), ready)
    grid = replace(moved.grid, valid=_shrunk(field, distance_um, optics))
    return replace(moved, grid=grid)


def transfer_function(
    field: Field,
    shape: tuple[int, ...],
    distance_um: float,
    optics: Optics,
    *,
    edges: Edges = "padded",
) -> NDArray[np.complex128]:
    """Return what a field's centred coefficients are multiplied by to propagate it.

    A periodic field's is not cut: light that leaves its torus is to come back.
    """
    pixel, highest = pixel_of(optics), highest_frequency(optics)
    frequencies, inside = [], np.ones(shape, dtype=bool)
    for axis, (count, period, tilt) in enumerate(
        zip(shape, field.period_px, field.tilt_per_px, strict=True)
    ):
        f = ((np.arange(count) - count // 2) / period + tilt) / pixel
        limit = highest / np.sqrt((2 * distance_um / (period * pixel)) ** 2 + 1)
        kept = np.abs(f) <= (limit if edges == "padded" else highest)
        inside &= kept[:, None] if axis == 0 else kept[None, :]
        frequencies.append(f)
    along = highest**2 - frequencies[0][:, None] ** 2 - frequencies[1][None, :] ** 2
    inside &= along > 0
    phase = 2 * np.pi * distance_um * np.sqrt(np.maximum(along, 0))
    return np.where(inside, np.exp(1j * phase), 0)


def sideways_px(field: Field, distance_um: float, optics: Optics) -> float:
    """Return how far light of the field's steepest angle travels sideways, px."""
    pixel, highest = pixel_of(optics), highest_frequency(optics)
    f = min(field.radius_per_px / pixel, 0.98 * highest)
    return float(abs(distance_um) * f / np.sqrt(highest**2 - f**2) / pixel)


def padded(field: Field, spare_px: float) -> Field:
    """Put a field on a larger torus, on which it fades into its background.

    The background is the mean along the border: a plane wave goes on, speckle ends. Where the
    torus is the frame itself, the field fades within it, over half a shortest wavelength;
    otherwise over the room there is already.
    """
    fine = resample(field, min(0.5 / (_SPARE * field.radius_per_px), *field.grid.step_px))
    width = 0.5 / field.radius_per_px
    orders, firsts, counts, fades, depths = [], [], [], [], []
    for axis, (n, period, step) in enumerate(
        zip(field.grid.frame_shape, fine.period_px, fine.grid.step_px, strict=True)
    ):
        room = (period - n) / 2
        place = fine.grid.origin_px[axis] + step * np.arange(fine.shape[axis], dtype=np.float64)
        place = np.where(place > n - 1 + room, place - period, place)
        order = np.argsort(place, kind="stable")
        place = place[order]
        orders.append(order)
        firsts.append(float(place[0]))
        fades.append(_fade(place, n, room, width))
        depths.append(np.minimum(place, n - 1 - place))
        spare = min(spare_px, _MOST * n)
        counts.append(scipy.fft.next_fast_len(int(np.ceil((period + spare) / step))))
    values = fine.values[..., orders[0][:, None], orders[1][None, :]]
    depth = np.minimum(depths[0][:, None], depths[1][None, :])
    border = (depth >= 0) & (depth <= width)
    background = values[..., border].mean(axis=-1)[..., None, None]
    fade = np.outer(fades[0], fades[1])
    larger = np.empty((*values.shape[:-2], counts[0], counts[1]), dtype=field.values.dtype)
    larger[...] = background
    larger[..., : fade.shape[0], : fade.shape[1]] += (values - background) * fade
    grid = replace(fine.grid, origin_px=(firsts[0], firsts[1]))
    # All that is left at the seam is the background, of frequency zero.
    return replace(fine, values=larger, grid=grid, tilt_per_px=(0.0, 0.0))


def pixel_of(optics: Optics) -> float:
    """Return the pixel's size in object space, um, or say what is missing."""
    if optics.pixel_um is None:
        raise ValueError("optics: refocusing takes camera_pixel_um and magnification")
    return optics.pixel_um


def highest_frequency(optics: Optics) -> float:
    """Return n / lambda, cycles/um, or say what is missing."""
    if optics.wavelength_nm is None:
        raise ValueError("optics: refocusing takes wavelength_nm")
    return optics.medium_index / (optics.wavelength_nm * 1e-3)


def _fade(
    place: NDArray[np.float64], pixels: int, room: float, width: float
) -> NDArray[np.float64]:
    beyond = np.maximum(np.maximum(place - (pixels - 1), -place), 0)
    if room > width:
        return 0.5 + 0.5 * np.cos(np.pi * np.minimum(beyond / room, 1))
    depth = np.minimum(place, pixels - 1 - place) + 0.5
    fade: NDArray[np.float64] = 0.5 - 0.5 * np.cos(np.pi * np.clip(depth / width, 0, 1))
    return fade


def _shrunk(field: Field, distance_um: float, optics: Optics) -> Window:
    margin = sideways_px(field, distance_um, optics)
    valid = field.grid.valid
    my, mx = (
        min(margin, (high - low) / 4)
        for low, high in ((valid.y_min, valid.y_max), (valid.x_min, valid.x_max))
    )
    return Window(valid.y_min + my, valid.y_max - my, valid.x_min + mx, valid.x_max - mx)
