"""Path, displacement and spreading of tracks."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray


def summarise_tracks(trajectories: pd.DataFrame) -> pd.DataFrame:
    """Return one row a track: when it lived, how far it went.

    Parameters
    ----------
    trajectories : DataFrame
        Columns track, frame, y_px, x_px, charge.

    Returns
    -------
    DataFrame
        track, charge, first_frame, last_frame, rows, path_px (sum of the steps, noise
        included), displacement_px (from the first to the last position).
    """
    rows = trajectories.sort_values(["track", "frame"])
    grouped = rows.groupby("track")
    step = np.hypot(grouped["y_px"].diff(), grouped["x_px"].diff())
    ends = grouped[["y_px", "x_px"]].agg(["first", "last"])
    displacement = np.hypot(
        ends["y_px", "last"] - ends["y_px", "first"], ends["x_px", "last"] - ends["x_px", "first"]
    )
    return pd.DataFrame(
        {
            "charge": grouped["charge"].first(),
            "first_frame": grouped["frame"].min(),
            "last_frame": grouped["frame"].max(),
            "rows": grouped.size(),
            "path_px": step.groupby(rows["track"]).sum(),
            "displacement_px": displacement,
        }
    ).reset_index()


def mean_squared_displacement(trajectories: pd.DataFrame, *, max_lag: int = 20) -> pd.DataFrame:
    """Return the mean squared displacement over all tracks against the lag.

    Parameters
    ----------
    trajectories : DataFrame
        Columns track, frame, y_px, x_px.
    max_lag : int
        Longest lag, frames.

    Returns
    -------
    DataFrame
        lag_frames, msd_px2, pairs (displacements averaged, overlapping ones included).

    Raises
    ------
    ValueError
        If `max_lag` is less than 1.
    """
    if max_lag < 1:
        raise ValueError(f"max_lag: expected 1 or more frames, got {max_lag!r}")
    sums, counts = _squares(trajectories, max_lag)
    total = counts.sum(axis=0)
    with np.errstate(invalid="ignore"):
        msd = sums.sum(axis=0) / total
    return pd.DataFrame({"lag_frames": np.arange(1, max_lag + 1), "msd_px2": msd, "pairs": total})


@dataclass(frozen=True)
class Diffusion:
    """Diffusion with localisation error, MSD(tau) = 4 D tau + 4 sigma^2.

    Parameters
    ----------
    d_px2_per_frame, d_error : float
        D and its standard error.
    sigma_px : float
        Localisation error per axis; NaN where the fit leaves nothing for it.
    tracks : int
        How many tracks there were.
    """

    d_px2_per_frame: float
    d_error: float
    sigma_px: float
    tracks: int


def fit_diffusion(trajectories: pd.DataFrame, *, lags: int = 4) -> Diffusion:
    """Fit diffusion and localisation error to the first lags of the MSD.

    Parameters
    ----------
    trajectories : DataFrame
        Columns track, frame, y_px, x_px.
    lags : int
        Lags used, 2 or more.

    Notes
    -----
    Weighted least squares with weights pairs / lag^2: the variance of an MSD grows as the
    square of the lag and, displacements overlapping, falls as their number over the lag (H.
    Qian, M. P. Sheetz and E. L. Elson, Biophys. J. 60, 910, 1991). The error is from the
    jackknife over tracks. Zeros of a random field have steps of infinite variance near births
    and deaths: their MSD is a sum over a heavy tail, and D an effective number.

    Raises
    ------
    ValueError
        If `lags` is less than 2 or there are fewer than two tracks that reach these lags.
    """
    if lags < 2:
        raise ValueError(f"lags: expected 2 or more, got {lags!r}")
    sums, counts = _squares(trajectories, lags)
    kept = counts[:, 1] > 0
    if np.count_nonzero(kept) < 2:
        raise ValueError("trajectories: fewer than two tracks are long enough to fit diffusion")
    slope, offset = _line(sums.sum(axis=0), counts.sum(axis=0))
    without = np.array(
        [
            _line(sums.sum(axis=0) - s, counts.sum(axis=0) - c)[0]
            for s, c in zip(sums[kept], counts[kept], strict=True)
        ]
    )
    n = len(without)
    error = np.sqrt((n - 1) / n * np.sum((without - without.mean()) ** 2))
    sigma = np.sqrt(offset / 4.0) if offset >= 0 else float("nan")
    return Diffusion(float(slope / 4.0), float(error / 4.0), float(sigma), n)


def _line(sums: NDArray[np.float64], counts: NDArray[np.float64]) -> tuple[float, float]:
    """Return slope and offset of the MSD against the lag."""
    used = counts > 0
    lag = np.arange(1.0, len(sums) + 1)[used]
    msd = sums[used] / counts[used]
    slope, offset = np.polyfit(lag, msd, 1, w=np.sqrt(counts[used]) / lag**1.5)
    return float(slope), float(offset)


def _squares(
    trajectories: pd.DataFrame, max_lag: int
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return for each track and lag the sum of squared displacements and their number."""
    rows = trajectories.sort_values(["track", "frame"])
    _, track = np.unique(rows["track"].to_numpy(), return_inverse=True)
    frame = rows["frame"].to_numpy()
    place = rows[["y_px", "x_px"]].to_numpy()
    count = int(track.max()) + 1 if len(track) else 0
    sums, counts = np.zeros((count, max_lag)), np.zeros((count, max_lag))
    # rows of a track lie together: a lag of k frames is at most k rows ahead
    for ahead in range(1, max_lag + 1):
        a, b = slice(None, -ahead), slice(ahead, None)
        lag = frame[b] - frame[a]
        used = (track[a] == track[b]) & (lag <= max_lag)
        square = np.sum((place[b] - place[a]) ** 2, axis=1)
        np.add.at(sums, (track[a][used], lag[used] - 1), square[used])
        np.add.at(counts, (track[a][used], lag[used] - 1), 1.0)
    return sums, counts
