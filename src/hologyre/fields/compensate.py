"""Tilt, curvature and other aberrations taken out of a field, without unwrapping it."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hologyre.fields.interpolate import interpolant, resample
from hologyre.fields.speckle_likelihood import Patch, SpectrumModel, fit_speckle
from hologyre.fields.surfaces import Family, Surface
from hologyre.grid import Field

Method = Literal["gradient", "likelihood"]

_ROUNDS = 30
_HUBER = 1.345
_PER_WAVELENGTH = 4.5
_FEWEST = 4
_SPARE = 1.3
"""Room left above the highest frequency of a field that was multiplied by a phase."""


@dataclass(frozen=True, eq=False)
class Compensated:
    """A field with a phase surface taken out, and that surface.

    Parameters
    ----------
    field : Field
        The compensated field. Its zeros are where they were.
    piston_rad : float
        Phase offset taken out.
    coefficients : (terms,) float array
        Coefficients of the surface's terms, rad.
    sigma : (terms,) float array
        Their standard errors; NaN for the gradient method.
    surface : Surface
        The terms.
    radius_per_px : float
        Radius of the spectrum once compensated, as likelihood found it; else the field's.
    """

    field: Field
    piston_rad: float
    coefficients: NDArray[np.float64]
    sigma: NDArray[np.float64]
    surface: Surface
    radius_per_px: float

    @property
    def tilt_rad_per_px(self) -> tuple[float, float]:
        """Slope (y, x) of the surface in the middle of the frame."""
        slope = self.surface.slope(self.coefficients, *self.surface.centre_px)
        return float(slope[0]), float(slope[1])

    def phase(self, y_px: ArrayLike, x_px: ArrayLike) -> NDArray[np.float64]:
        """Return the phase that was taken out at points, rad, piston included."""
        return self.piston_rad + self.surface.phase(self.coefficients, y_px, x_px)


def compensate(
    field: Field,
    *,
    family: Family = "tilt",
    order: int = 2,
    method: Method = "gradient",
    mask: NDArray[np.bool_] | None = None,
    reference: Field | None = None,
    spectrum: SpectrumModel = "disc",
    noise: float | None = None,
) -> Compensated:
    """Take a smooth phase surface out of a field.

    Parameters
    ----------
    field : Field, values (y, x) or (t, y, x)
        With a time axis, one surface is fitted to all frames and taken out of all.
    family : "tilt", "polynomial" or "zernike"
        Terms of the surface.
    order : int
        Highest order of the terms; "tilt" is of order 1.
    method : "gradient" or "likelihood"
        "gradient": robust fit of the wrapped phase differences between neighbours, weighted
        by intensity; for smooth objects on a background, and as a start. "likelihood": the
        surface that makes the field likeliest as speckle of a spectrum of the given shape
        about the carrier; many times better on speckle, meaningless on a smooth object. Read
        such a field with room, some 1.5 times as wide as its aberrated sideband is.
    mask : (y, x) bool array, optional
        True on the hologram's pixels to fit to: the background, where an object has a phase
        of its own.
    reference : Field, optional
        A measured reference, an empty frame's field, whose phase is taken out first.
    spectrum : "disc" or "gauss"
        Shape of the speckle's spectrum.
    noise : float, optional
        Variance of the field's noise, field units; found by likelihood where not given.

    Returns
    -------
    Compensated

    Raises
    ------
    ValueError
        If an option is unknown, shapes do not fit, or the mask leaves nothing to fit to.

    Notes
    -----
    Singularities do not mislead either method: both compare the field with itself nearby and
    nothing is unwrapped. A tilt moves the field's `tilt_per_px` and leaves its band as it is.
    A curved surface widens the band, so that the field is sampled more finely first; outside
    the frame, on the torus of a fit, it is faded out, where the surface means nothing.
    """
    if method not in ("gradient", "likelihood"):
        raise ValueError(f"method: expected gradient or likelihood, got {method!r}")
    if family not in ("tilt", "polynomial", "zernike"):
        raise ValueError(f"family: expected tilt, polynomial or zernike, got {family!r}")
    if spectrum not in ("disc", "gauss"):
        raise ValueError(f"spectrum: expected disc or gauss, got {spectrum!r}")
    shape = field.grid.frame_shape
    if mask is not None and np.shape(mask) != shape:
        raise ValueError(f"mask: shape {np.shape(mask)} differs from the hologram's {shape}")
    if reference is not None:
        field = without_reference(field, reference)
    surface = Surface.over(shape, family, order)
    coefficients = _by_gradient(field, surface, mask)
    sigma = np.full(coefficients.shape, np.nan)
    radius = field.radius_per_px
    if method == "likelihood":
        relative = None
        if noise is not None:
            relative = noise / float((np.abs(_samples(field, radius)[0]) ** 2).mean())

        def cut(width: float, side: int) -> list[Patch]:
            return _pieces(field, surface, mask, width, side)

        fit = fit_speckle(cut, coefficients, radius, model=spectrum, noise=relative)
        coefficients, sigma, radius = fit.coefficients, fit.sigma, fit.radius_per_px
    flat = without_surface(field, surface, coefficients)
    piston = _piston(flat, mask)
    flat = flat.with_values(flat.values * np.exp(-1j * piston).astype(flat.values.dtype))
    return Compensated(flat, piston, coefficients, sigma, surface, radius)


def without_surface(field: Field, surface: Surface, coefficients: NDArray[np.float64]) -> Field:
    """Return ``field * exp(-i surface)``, its band widened as the surface needs.

    Tilts become part of the field's own tilt.
    """
    total = np.add.outer(np.arange(surface.powers.shape[1]), np.arange(surface.powers.shape[2]))
    if not surface.powers[:, total > 1].any():
        slope = surface.slope(coefficients, *surface.centre_px) / (2 * np.pi)
        tilt = (field.tilt_per_px[0] - slope[0], field.tilt_per_px[1] - slope[1])
        y, x = (field.grid.y_px(field.shape[0]), field.grid.x_px(field.shape[1]))
        turn = np.exp(-1j * surface.phase(coefficients, y[:, None], x))
        values = field.values * turn.astype(field.values.dtype)
        return replace(field, values=values, tilt_per_px=(float(tilt[0]), float(tilt[1])))
    ny, nx = field.grid.frame_shape
    # On the torus the field fades out half way round, up to where the surface goes on.
    spare = [(p - (n - 1)) / 2 for p, n in zip(field.period_px, (ny, nx), strict=True)]
    ends = [(-s, n - 1 + s) for s, n in zip(spare, (ny, nx), strict=True)]
    edge_y, edge_x = np.meshgrid(np.linspace(*ends[0], 33), np.linspace(*ends[1], 33))
    steepest = float(np.abs(surface.slope(coefficients, edge_y, edge_x)).max()) / (2 * np.pi)
    highest = (field.radius_per_px + steepest) * _SPARE
    fine = resample(field, min(0.5 / highest, *field.grid.step_px))
    y, x = (
        np.where(place > end[1], place - period, place)
        for place, end, period in zip(
            (fine.grid.y_px(fine.shape[0]), fine.grid.x_px(fine.shape[1])),
            ends,
            fine.period_px,
            strict=True,
        )
    )
    turn = np.exp(-1j * surface.phase(coefficients, y[:, None], x))
    turn *= np.outer(_fade(y, ny, spare[0]), _fade(x, nx, spare[1]))
    return fine.with_values(fine.values * turn.astype(fine.values.dtype))


def without_reference(field: Field, reference: Field) -> Field:
    """Return the field with the phase of a measured reference taken out.

    Both are sampled once a pixel or finer, since the product's band is wider.

    Raises
    ------
    ValueError
        If the reference is of another frame shape or period.
    """
    if reference.grid.frame_shape != field.grid.frame_shape or not np.allclose(
        reference.period_px, field.period_px
    ):
        msg = (
            f"reference: frame {reference.grid.frame_shape} of period {reference.period_px} "
            f"differs from the field's {field.grid.frame_shape} of {field.period_px}"
        )
        raise ValueError(msg)
    step = min(1.0, *field.grid.step_px)
    fine, measured = resample(field, step), resample(reference, step)
    modulus = np.abs(measured.values)
    phase = np.conj(measured.values) / np.where(modulus > 0, modulus, 1)
    tilt = tuple(float(a - b) for a, b in zip(fine.tilt_per_px, measured.tilt_per_px, strict=True))
    values = fine.values * phase.astype(fine.values.dtype)
    return replace(fine, values=values, tilt_per_px=(tilt[0], tilt[1]))


def _fade(place: NDArray[np.float64], pixels: int, spare: float) -> NDArray[np.float64]:
    """Return 1 on the frame, falling smoothly to 0 where the spare room ends."""
    beyond = np.maximum(np.maximum(place - (pixels - 1), -place), 0)
    return 0.5 + 0.5 * np.cos(np.pi * np.minimum(beyond / max(spare, 1.0), 1))


def _by_gradient(
    field: Field, surface: Surface, mask: NDArray[np.bool_] | None
) -> NDArray[np.float64]:
    """Fit the wrapped phase differences of neighbouring samples, by weight of intensity."""
    fine = resample(field, 1 / (8 * field.radius_per_px))
    ny, nx = field.grid.frame_shape
    y, x = fine.grid.y_px(fine.shape[0]), fine.grid.x_px(fine.shape[1])
    rows, columns = (y >= 0) & (y <= ny - 1), (x >= 0) & (x <= nx - 1)
    values = fine.values[..., rows, :][..., columns]
    y, x = y[rows], x[columns]
    terms = surface.values(y[:, None], x)
    allowed = np.ones(values.shape[-2:], dtype=bool)
    if mask is not None:
        allowed = mask[np.rint(y).astype(int)[:, None], np.rint(x).astype(int)]
    products, designs = [], []
    for axis in (-2, -1):
        ahead = [slice(None)] * values.ndim
        behind = [slice(None)] * values.ndim
        ahead[axis], behind[axis] = slice(1, None), slice(None, -1)
        product = values[tuple(ahead)] * values[tuple(behind)].conj()
        if values.ndim == 3:
            product = product.sum(axis=0)
        both = allowed[tuple(ahead[-2:])] & allowed[tuple(behind[-2:])]
        products.append(product[both])
        designs.append(np.diff(terms, axis=axis)[:, both])
    product = np.concatenate(products).astype(np.complex128)
    design = np.concatenate(designs, axis=1)
    if product.size < 4 * design.shape[0] or not np.abs(product).any():
        raise ValueError("mask: leaves too little of the field to fit a surface to")
    weight = np.abs(product)
    weight /= weight.mean()
    coefficients = np.zeros(design.shape[0])
    for _ in range(_ROUNDS):
        left = np.angle(product * np.exp(-1j * (coefficients @ design)))
        spread = 1.4826 * float(np.median(np.abs(left))) + 1e-9
        robust = weight * np.minimum(1, _HUBER * spread / np.maximum(np.abs(left), 1e-12))
        weighted = design * robust
        step = np.linalg.lstsq(weighted @ design.T, weighted @ left, rcond=None)[0]
        coefficients = coefficients + step
        if np.abs(step).max() < 1e-7:
            break
    return coefficients


def _piston(field: Field, mask: NDArray[np.bool_] | None) -> float:
    """Return the phase that most of the light has."""
    ny, nx = field.grid.frame_shape
    y, x = field.grid.y_px(field.shape[0]), field.grid.x_px(field.shape[1])
    rows, columns = (y >= 0) & (y <= ny - 1), (x >= 0) & (x <= nx - 1)
    values = field.values[..., rows, :][..., columns]
    if mask is not None:
        there = mask[np.rint(y[rows]).astype(int)[:, None], np.rint(x[columns]).astype(int)]
        values = values[..., there]
    modulus = np.abs(values)
    # By modulus, not by intensity: a bright object should not speak for the background.
    return float(np.angle((values / np.sqrt(np.maximum(modulus, 1e-30))).sum()))


def _samples(
    field: Field, radius: float
) -> tuple[NDArray[np.complex128], NDArray[np.float64], NDArray[np.float64]]:
    """Sample a field's frames on a lattice made for a spectrum of a radius, off the border."""
    step, margin = 1 / (_PER_WAVELENGTH * radius), 0.5 / field.radius_per_px
    y, x = (np.arange(margin, n - 1 - margin, step) for n in field.grid.frame_shape)
    if min(y.size, x.size) < _FEWEST:
        raise ValueError("field: too few speckles in the frame for a likelihood")
    stack = field.values.reshape(-1, *field.shape)
    frames = [interpolant(replace(field, values=values))(y[:, None], x)[0] for values in stack]
    return np.stack(frames), y, x


def _pieces(
    field: Field,
    surface: Surface,
    mask: NDArray[np.bool_] | None,
    radius: float,
    side: int,
) -> list[Patch]:
    """Cut a field's samples into patches for the likelihood."""
    values, y, x = _samples(field, radius)
    values = values / np.sqrt((np.abs(values) ** 2).mean())
    allowed = np.ones((y.size, x.size), dtype=bool)
    if mask is not None:
        allowed = mask[np.rint(y).astype(int)[:, None], np.rint(x).astype(int)]
    patches = []
    for rows in _cuts(y.size, side):
        for columns in _cuts(x.size, side):
            inside = allowed[rows, columns]
            if inside.sum() < _FEWEST**2:
                continue
            there = np.meshgrid(y[rows], x[columns], indexing="ij")
            there_y, there_x = there[0][inside], there[1][inside]
            terms = surface.values(there_y, there_x)
            patches.append(Patch(values[:, rows, columns][:, inside], terms, there_y, there_x))
    if not patches:
        raise ValueError("mask: leaves too little of the field for a likelihood")
    return patches


def _cuts(count: int, side: int) -> list[slice]:
    """Cut a row of samples into equal pieces, of `side` or somewhat fewer; a few are left."""
    pieces = -(-count // side)
    length = count // pieces
    return [slice(i * length, (i + 1) * length) for i in range(pieces)]
