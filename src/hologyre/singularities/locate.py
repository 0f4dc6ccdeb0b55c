"""Find the phase singularities of a field, with their uncertainty."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.fields.noise import NoiseMap
from hologyre.grid import Field
from hologyre.singularities.charges import UNRESOLVED, centred, joined
from hologyre.singularities.core import cores
from hologyre.singularities.lattice import lattice_of
from hologyre.singularities.robustness import robustness
from hologyre.singularities.search import find_zeros
from hologyre.singularities.trust import noise_share, trust, trust_of_higher
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
    zeros, turns, bend = find_zeros(lattice)
    if zeros.shape[0] == 0:
        return empty(SINGULARITIES)
    variance = _variance_at(noise, *lattice.to_px(zeros[:, 0], zeros[:, 1]))
    sigma = np.fmax(np.sqrt(variance), lattice.floor)
    tree = robustness(lattice, turns, zeros, UNRESOLVED * sigma)
    # What a change of the arithmetic's own size removes is the arithmetic's.
    kept = tree.level > 2 * lattice.floor
    vortices = joined(lattice, zeros, tree.alike, tree.level, sigma)
    y_px, x_px = lattice.to_px(vortices.y, vortices.x)
    chosen = np.flatnonzero(kept[vortices.first] & lattice.window.contains(y_px, x_px))
    chosen = chosen[np.lexsort((x_px[chosen], y_px[chosen]))]
    first, charge = vortices.first[chosen], vortices.charge[chosen]
    slopes, level, variance = zeros[first, 2:6].copy(), tree.level[first], variance[first]
    slopes_px = slopes.view(np.complex128) / lattice.step_px
    core = cores(slopes_px[:, 0], slopes_px[:, 1])
    var_y, var_x, cov = core.covariance(variance)
    sure = trust(
        level, core.steep, core.flat, variance, noise_share(lattice, bend), lattice.radius_per_px
    )
    ratio, orientation = core.axis_ratio, core.orientation_rad
    for row in np.flatnonzero(np.abs(charge) > 1):
        vortex = chosen[row]
        y, x, error = centred(
            lattice,
            float(vortices.y[vortex]),
            float(vortices.x[vortex]),
            int(charge[row]),
            float(variance[row]),
        )
        y_px[vortex] = lattice.origin_px[0] + lattice.step_px[0] * y
        x_px[vortex] = lattice.origin_px[1] + lattice.step_px[1] * x
        var_y[row] = var_x[row] = error**2
        cov[row] = 0.0
        ratio[row] = orientation[row] = np.nan
        sure[row] = trust_of_higher(float(level[row]), error, float(variance[row]))
    with np.errstate(divide="ignore"):
        over_noise = level / np.sqrt(variance)
    found = pd.DataFrame(
        {
            "frame": np.zeros(charge.size, dtype=np.int64),
            "y_px": y_px[chosen],
            "x_px": x_px[chosen],
            "charge": charge,
            "sigma_y_px": np.sqrt(var_y),
            "sigma_x_px": np.sqrt(var_x),
            "cov_yx_px2": cov,
            "robustness": level,
            "robustness_snr": over_noise,
            "trust": sure,
            "axis_ratio": ratio,
            "orientation_rad": orientation,
            "origin": "found",
            "singularity": np.arange(charge.size),
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
