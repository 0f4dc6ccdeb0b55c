"""Common motion of all singularities: estimated, and taken out."""

from __future__ import annotations

import numpy as np
import pandas as pd

from hologyre.motion.tracks import um_per_px


def estimate_drift(trajectories: pd.DataFrame) -> pd.DataFrame:
    """Return the common motion of all tracks up to each frame.

    Parameters
    ----------
    trajectories : DataFrame
        Columns track, frame, y_px, x_px.

    Returns
    -------
    DataFrame
        frame, drift_y_px, drift_x_px (0 in the first frame) and links, the number of steps the
        last one rests on. Over frames that no track spans the drift stays as it was.

    Notes
    -----
    The step of a frame is the median over its links: zeros have a heavy tail of fast steps near
    births and deaths, which a mean would follow. A step over several frames counts for each of
    them in equal parts.
    """
    rows = trajectories.sort_values(["track", "frame"])
    frames = np.unique(rows["frame"].to_numpy())
    track, frame = rows["track"].to_numpy(), rows["frame"].to_numpy()
    place = rows[["y_px", "x_px"]].to_numpy()
    same = track[1:] == track[:-1]
    span = np.diff(frame)[same]
    step = np.diff(place, axis=0)[same] / span[:, None]
    begin = np.searchsorted(frames, frame[:-1][same])
    end = np.searchsorted(frames, frame[1:][same])
    drift = np.zeros((len(frames), 2))
    links = np.zeros(len(frames), dtype=np.int64)
    parts = end - begin
    which = np.repeat(np.arange(len(parts)), parts)
    to = begin[which] + 1 + np.arange(len(which)) - np.repeat(np.cumsum(parts) - parts, parts)
    order = np.argsort(to, kind="stable")
    bounds = np.searchsorted(to[order], np.arange(len(frames) + 1))
    for k in range(1, len(frames)):
        used = which[order[bounds[k] : bounds[k + 1]]]
        links[k] = len(used)
        if len(used):
            drift[k] = np.median(step[used], axis=0) * (frames[k] - frames[k - 1])
    drift = np.cumsum(drift, axis=0)
    return pd.DataFrame(
        {"frame": frames, "drift_y_px": drift[:, 0], "drift_x_px": drift[:, 1], "links": links}
    )


def remove_drift(trajectories: pd.DataFrame, drift: pd.DataFrame) -> pd.DataFrame:
    """Return the tracks as seen by an observer who moves with the drift.

    Parameters
    ----------
    trajectories : DataFrame
        Columns frame, y_px, x_px, and y_um, x_um where known; not changed.
    drift : DataFrame
        As `estimate_drift` returns it; every frame must be in it.

    Raises
    ------
    ValueError
        If a frame is missing in `drift`.
    """
    known = drift.set_index("frame")
    frame = trajectories["frame"]
    missing = np.setdiff1d(frame, known.index)
    if len(missing):
        raise ValueError(f"drift: frame {missing[0]} is missing")
    moved = trajectories.copy()
    scale = um_per_px(trajectories) if "y_um" in trajectories else float("nan")
    for axis in ("y", "x"):
        shift = known[f"drift_{axis}_px"].loc[frame].to_numpy()
        moved[f"{axis}_px"] = trajectories[f"{axis}_px"].to_numpy() - shift
        if f"{axis}_um" in trajectories:
            moved[f"{axis}_um"] = trajectories[f"{axis}_um"].to_numpy() - scale * shift
    return moved
