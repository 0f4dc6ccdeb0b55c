"""Find the phase singularities of a field, with their uncertainty."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.fields.noise import NoiseMap
from hologyre.grid import Field
from hologyre.singularities.cells import doubtful
from hologyre.singularities.lattice import lattice_of
from hologyre.singularities.search import find_zeros
from hologyre.singularities.winding import bends, lattice_turns
from hologyre.tables import SINGULARITIES, conform, empty


def locate_singularities(
    field: Field | NDArray[np.complexfloating],
    *,
    noise: NoiseMap | float | None = None,
    margin_px: float = 0.0,
) -> pd.DataFrame:
    """Find every phase singularity of one frame.

    Cells of an oversampled lattice are cut until each is known to hold one zero or none; the
    zero is then Newton's on the band-limited interpolant.

    Parameters
    ----------
    field : Field or (y, x) complex array
        One frame. A bare array holds the hologram's own pixels; it is interpolated locally, and
        less well within some pixels of its border.
    noise : NoiseMap or float, optional
        E|n|^2 of the field's noise, field units squared; without it the columns that tell
        uncertainty are empty.
    margin_px : float
        Singularities closer than this to the valid part's border are left out.

    Returns
    -------
    DataFrame
        Columns of `hologyre.tables.SINGULARITIES`, one row each, ordered by y_px, then
        x_px; frame 0, times and micrometres empty. Charge is +1 when the phase grows from
        +x to +y. The covariance is ``(E|n|^2 / 2) (J^T J)^-1``, J the field's Jacobian.

    Raises
    ------
    TypeError
        If `field` is neither a Field nor a complex array, or `noise` neither a map nor a number.
    ValueError
        If `field` has a time axis, is smaller than 8 x 8 or holds values that are not finite;
        if `noise` or `margin_px` is negative.
    """
    _check_noise(noise)
    lattice = lattice_of(field, margin_px=margin_px)
    if lattice is None:
        return empty(SINGULARITIES)
    planes, table = lattice.planes, lattice.table
    bend = bends(planes)
    turns_y, turns_x = lattice_turns(planes, table, bend)
    doubt = doubtful(planes, bend)
    zeros, _ = find_zeros(
        planes, table, lattice.coarse, bend, turns_y, turns_x, doubt, lattice.floor
    )
    y_px, x_px = lattice.to_px(zeros[:, 0], zeros[:, 1])
    inside = np.flatnonzero(lattice.window.contains(y_px, x_px))
    inside = inside[np.lexsort((x_px[inside], y_px[inside]))]
    y_px, x_px, zeros = y_px[inside], x_px[inside], zeros[inside]
    charges = zeros[:, 6].astype(np.int64)
    dy = (zeros[:, 2] + 1j * zeros[:, 3]) / lattice.step_px[0]
    dx = (zeros[:, 4] + 1j * zeros[:, 5]) / lattice.step_px[1]
    variance = _variance_at(noise, y_px, x_px)
    yy, xx, yx = np.abs(dy) ** 2, np.abs(dx) ** 2, (dx.conj() * dy).real
    det = dx.real * dy.imag - dy.real * dx.imag
    with np.errstate(divide="ignore", invalid="ignore"):
        scale = variance / 2 / det**2
        spread = np.sqrt((xx - yy) ** 2 + 4 * yx**2)
        ratio = np.abs(det) * 2 / (xx + yy + spread)
    orientation = (np.arctan2(2 * yx, xx - yy) / 2 + np.pi / 2) % np.pi
    found = pd.DataFrame(
        {
            "frame": np.zeros(charges.size, dtype=np.int64),
            "y_px": y_px,
            "x_px": x_px,
            "charge": charges,
            "sigma_y_px": np.sqrt(scale * xx),
            "sigma_x_px": np.sqrt(scale * yy),
            "cov_yx_px2": -scale * yx,
            "axis_ratio": ratio,
            "orientation_rad": orientation,
            "origin": "found",
            "singularity": np.arange(charges.size),
        }
    )
    return conform(found, SINGULARITIES)


def _check_noise(noise: NoiseMap | float | None) -> None:
    if noise is None or isinstance(noise, NoiseMap):
        return
    if isinstance(noise, bool) or not isinstance(noise, (int, float, np.number)):
        got = type(noise).__name__
        raise TypeError(f"noise: expected a NoiseMap, a variance E|n|^2 or None, got {got}")
    if not 0 <= noise < np.inf:
        raise ValueError(f"noise: expected a variance of 0 or more, got {noise!r}")


def _variance_at(
    noise: NoiseMap | float | None, y_px: NDArray[np.float64], x_px: NDArray[np.float64]
) -> NDArray[np.float64]:
    if isinstance(noise, NoiseMap):
        return noise.at(y_px, x_px)
    return np.full(y_px.shape, np.nan if noise is None else float(noise))
