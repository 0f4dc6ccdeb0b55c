"""How fast singularities move: from the field, exactly, and from their tracks."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.grid import Field
from hologyre.motion.noise import noise_told
from hologyre.motion.slabs import Slab, slabs
from hologyre.motion.trace import jet
from hologyre.motion.tracks import checked

_COLUMNS = (
    "vy_px_per_frame",
    "vx_px_per_frame",
    "sigma_vy_px_per_frame",
    "sigma_vx_px_per_frame",
)


def field_velocity(
    fields: Iterable[Field], table: pd.DataFrame, *, frames: Iterable[int] | None = None
) -> pd.DataFrame:
    """Return the velocity of every singularity from the field and its rate of change.

    Parameters
    ----------
    fields : iterable of Field
        The field of every frame, at least two of them, on one grid.
    table : DataFrame
        Singularities of these fields, columns `hologyre.tables.SINGULARITIES`.
    frames : iterable of int, optional
        The fields' frame numbers, increasing; 0, 1, 2, ... without it.

    Returns
    -------
    DataFrame
        One row a singularity, sorted as ``frame, singularity``: these two,
        vy_px_per_frame, vx_px_per_frame and their standard errors. NaN in frames without a
        field.

    Notes
    -----
    A zero stays a zero: dE/dt + (v . grad) E = 0, so v = -J^-1 dE/dt with the 2 x 2 Jacobian J
    of Re E and Im E. The rate is the least-squares estimate from ten frames at hand after
    their common phase is taken out (which moves no zero); its error s, with the noise that the
    table's standard errors tell, gives the covariance (s^2 / 2) (J^T J)^-1. The speeds of an
    isotropic random field have the density 2 v w^2 / (v^2 + w^2)^2: their median is w, their
    variance infinite.
    """
    table = checked(table)
    velocity = np.full((len(table), 4), np.nan)
    frame = table["frame"].to_numpy()
    position = table[["y_px", "x_px"]].to_numpy()
    slab: Slab | None = None
    for slab in slabs(fields, frames, noise=noise_told(table)):
        rows = np.arange(*np.searchsorted(frame, [slab.before, slab.before + 1]))
        velocity[rows] = _at(slab, 0, position[rows])
    if slab is not None:
        rows = np.arange(*np.searchsorted(frame, [slab.after, slab.after + 1]))
        velocity[rows] = _at(slab, 1, position[rows])
    found = pd.DataFrame(velocity, columns=list(_COLUMNS))
    return pd.concat([table[["frame", "singularity"]], found], axis=1)


def _at(slab: Slab, end: int, position: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return velocities and their errors at places of one of the slab's slices."""
    place = slab.frame.to_samples(position)
    # a constant series turns the slices' weights into the rate itself
    rate = np.zeros((2, slab.slope.shape[1]))
    rate[0] = slab.slope[end]
    velocity = np.empty((len(position), 4))
    sy, sx = slab.frame.step_px
    for k, (y, x) in enumerate(place):
        _, ey, ex, _ = jet(slab.samples, slab.series, y, x, float(end))
        et = jet(slab.samples, rate, y, x, 0.0)[0]
        ey, ex = ey / sy, ex / sx
        det = ex.real * ey.imag - ey.real * ex.imag
        if det == 0.0:
            velocity[k] = np.nan
            continue
        velocity[k, 0] = (et.real * ex.imag - et.imag * ex.real) / det
        velocity[k, 1] = (et.imag * ey.real - et.real * ey.imag) / det
        scale = slab.slope_miss[end] / np.sqrt(2.0) / abs(det)
        velocity[k, 2:] = scale * abs(ex), scale * abs(ey)
    return velocity


def track_velocity(trajectories: pd.DataFrame) -> pd.DataFrame:
    """Return the velocity of every row from its neighbours in the track.

    Parameters
    ----------
    trajectories : DataFrame
        Columns track, frame, y_px, x_px, and sigma_y_px, sigma_x_px where known.

    Returns
    -------
    DataFrame
        The same rows in the same order: track, frame, vy_px_per_frame, vx_px_per_frame and
        their standard errors; central differences inside a track, one-sided ones at its ends,
        NaN for tracks of one row. The errors are those of the positions alone.
    """
    order = np.lexsort((trajectories["frame"], trajectories["track"]))
    rows = trajectories.iloc[order]
    track, frame = rows["track"].to_numpy(), rows["frame"].to_numpy(dtype=np.float64)
    same = track[1:] == track[:-1]
    index = np.arange(len(rows))
    after = index + np.append(same, False)
    before = index - np.append(False, same)
    span = frame[after] - frame[before]
    span[span == 0] = np.nan
    found = pd.DataFrame({"track": track, "frame": rows["frame"].to_numpy()})
    for axis in ("y", "x"):
        place = rows[f"{axis}_px"].to_numpy()
        found[f"v{axis}_px_per_frame"] = (place[after] - place[before]) / span
    for axis in ("y", "x"):
        sigma = rows.get(f"sigma_{axis}_px", pd.Series(np.nan, index=rows.index)).to_numpy()
        found[f"sigma_v{axis}_px_per_frame"] = np.hypot(sigma[after], sigma[before]) / span
    found.index = rows.index
    return found.loc[trajectories.index] if rows.index.is_unique else found
