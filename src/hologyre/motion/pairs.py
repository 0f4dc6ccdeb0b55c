"""Pairs before they die and after they are born: how far apart they are."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd


def pair_separation(
    trajectories: pd.DataFrame, events: pd.DataFrame, *, max_frames: int = 20
) -> pd.DataFrame:
    """Return the separation of each pair in the frames next to its birth or death.

    Parameters
    ----------
    trajectories, events : DataFrame
        Tables of a `Motion`.
    max_frames : int
        How many frames to look back from a death, or ahead from a birth.

    Returns
    -------
    DataFrame
        event, kind, frame, frames_away (0 for the frame next to the event), separation_px;
        only frames in which both have a row.
    """
    place = trajectories.set_index(["track", "frame"])[["y_px", "x_px"]].sort_index()
    found = []
    pairs = events[events["kind"].isin(["pair_birth", "pair_death"])]
    for event in pairs.itertuples():
        a, b = (place.loc[int(t)] for t in event.tracks.split(";"))
        both = a.merge(b, left_index=True, right_index=True, suffixes=("_a", "_b"))
        frame = both.index.to_numpy()
        near = event.frame_before if event.kind == "pair_death" else event.frame_after
        away = (near - frame) if event.kind == "pair_death" else (frame - near)
        separation = np.hypot(
            both["y_px_a"] - both["y_px_b"], both["x_px_a"] - both["x_px_b"]
        ).to_numpy()
        used = (away >= 0) & (away <= max_frames)
        found.append(
            pd.DataFrame(
                {
                    "event": event.event,
                    "kind": event.kind,
                    "frame": frame[used],
                    "frames_away": away[used],
                    "separation_px": separation[used],
                }
            )
        )
    columns = {"event": "int64", "kind": "str", "frame": "int64", "frames_away": "int64"}
    types = {**columns, "separation_px": "float64"}
    if not found:
        return pd.DataFrame({name: pd.Series(dtype=kind) for name, kind in types.items()})
    return pd.concat(found, ignore_index=True).astype(types)


@dataclass(frozen=True)
class SquareRootLaw:
    """Separation^2 = rate |t - moment| of one pair near the event.

    Parameters
    ----------
    moment_frame : float
        When the separation vanishes, in frames.
    rate_px2_per_frame : float
        Growth of the squared separation.
    residual_px2 : float
        Root mean square residual of the squared separation.
    """

    moment_frame: float
    rate_px2_per_frame: float
    residual_px2: float


def fit_square_root(separation: pd.DataFrame, *, frames: int = 4) -> SquareRootLaw:
    """Fit the square-root law to the frames next to one event.

    Parameters
    ----------
    separation : DataFrame
        Rows of `pair_separation` of one event.
    frames : int
        How many of the nearest frames to use.

    Notes
    -----
    Two opposite zeros meet where a line of zeros turns back in time; a line that turns is a
    parabola there, so the squared separation is linear in time and the speeds diverge as one
    over the square root of the time left. A constant speed predicts nothing here.

    Raises
    ------
    ValueError
        If there are fewer than two rows, or rows of several events.
    """
    if separation["event"].nunique() > 1:
        raise ValueError("separation: expected rows of one event, got several")
    rows = separation.nsmallest(frames, "frames_away")
    if len(rows) < 2:
        raise ValueError(f"separation: expected at least two rows, got {len(rows)}")
    frame = rows["frame"].to_numpy(dtype=np.float64)
    square = rows["separation_px"].to_numpy() ** 2
    slope, offset = np.polyfit(frame, square, 1)
    residual = np.sqrt(np.mean((square - slope * frame - offset) ** 2))
    return SquareRootLaw(float(-offset / slope), float(abs(slope)), float(residual))
