"""Local wavevector and current of a field."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hologyre.fields.interpolate import coefficients, on_pixels, series_on_pixels
from hologyre.grid import Field

ComplexArray = NDArray[np.complexfloating]


def local_wavevector(field: Field | ComplexArray) -> NDArray[np.floating]:
    """Return the local wavevector, the gradient of the phase, Im(grad E / E).

    Parameters
    ----------
    field : Field or (..., y, x) complex array
        A Field is differentiated exactly, through its Fourier series. A bare array lies on
        the pixels and is differentiated by central differences of the field.

    Returns
    -------
    (2, ..., y, x) real array
        (ky, kx) in rad/px on the hologram's pixels. Its zero is the carrier; NaN where the
        field is zero.

    Notes
    -----
    From the field, not from differences of wrapped phase: it has no jump at 2 pi and grows
    as 1/r at a singularity (Berry and Dennis, J. Phys. A 42, 022003, 2009).
    """
    value, along_y, along_x = _with_gradient(field)
    power = np.abs(value) ** 2
    with np.errstate(divide="ignore", invalid="ignore"):
        wavevector: NDArray[np.floating] = np.stack(
            [(np.conj(value) * slope).imag / power for slope in (along_y, along_x)]
        )
    wavevector[~np.isfinite(wavevector)] = np.nan
    return wavevector


def current(field: Field | ComplexArray) -> NDArray[np.floating]:
    """Return the current Im(conj(E) grad E), which is smooth through singularities.

    Parameters
    ----------
    field : Field or (..., y, x) complex array
        As for `local_wavevector`.

    Returns
    -------
    (2, ..., y, x) real array
        Components along y and x, field units squared times rad/px, on the pixels.
    """
    value, along_y, along_x = _with_gradient(field)
    return np.stack([(np.conj(value) * slope).imag for slope in (along_y, along_x)])


def superoscillation(
    wavevector: NDArray[np.floating], k_max_per_px: float
) -> tuple[NDArray[np.bool_], float]:
    """Tell where the local wavevector exceeds the largest one in the field's spectrum.

    Parameters
    ----------
    wavevector : (2, ..., y, x) real array
        From `local_wavevector`, rad/px.
    k_max_per_px : float
        Largest wavevector of the spectrum, rad/px; ``2 pi radius`` for a disc.

    Returns
    -------
    (..., y, x) bool array, float
        The places, and the fraction of the area they take: 1/5 for a random field with a
        disc spectrum, 1/3 for a ring (Dennis, Hamilton and Courtial, Opt. Lett. 33, 2976,
        2008).
    """
    length = np.hypot(wavevector[0], wavevector[1])
    beyond = length > k_max_per_px
    known = np.isfinite(length)
    return beyond, float(beyond.sum() / max(int(known.sum()), 1))


def _with_gradient(field: Field | ComplexArray) -> tuple[ComplexArray, ComplexArray, ComplexArray]:
    if not isinstance(field, Field):
        values = np.asarray(field)
        if values.ndim < 2 or not np.iscomplexobj(values):
            msg = (
                "field: expected a Field or a complex (..., y, x) array, got "
                f"{values.dtype} of shape {values.shape}"
            )
            raise TypeError(msg)
        return values, *np.gradient(values, axis=(-2, -1), edge_order=2)
    spectrum = coefficients(field)
    slopes = []
    for axis in (-2, -1):
        half = spectrum.shape[axis] // 2
        rate = 2j * np.pi * np.arange(-half, half + 1) / field.period_px[axis]
        slope = spectrum * (rate[:, None] if axis == -2 else rate).astype(spectrum.dtype)
        slopes.append(series_on_pixels(slope, field))
    value = on_pixels(field)
    for slope, tilt in zip(slopes, field.tilt_per_px, strict=True):
        slope += value.dtype.type(2j * np.pi * tilt) * value
    return value, slopes[0], slopes[1]
