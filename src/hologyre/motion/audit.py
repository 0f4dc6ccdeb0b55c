"""Does it add up? Charge against the border, and numbers against events, frame by frame."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

import numpy as np
import pandas as pd
from numpy.typing import NDArray


def audit(
    trajectories: pd.DataFrame,
    events: pd.DataFrame,
    border_winding: Mapping[int, int] | None = None,
    *,
    frames: Iterable[int] | None = None,
) -> pd.DataFrame:
    """Check every frame against the conservation of charge.

    Parameters
    ----------
    trajectories, events : DataFrame
        Tables of a `Motion`.
    border_winding : mapping from frame to int, optional
        Turns of the phase along the border of the searched window, from +x to +y.
    frames : iterable of int, optional
        The frames that were searched; those in `trajectories` without it.

    Returns
    -------
    DataFrame
        Columns frame, positive, negative, border_winding (missing where not known) and audit:
        "ok", or what does not add up, separated by "; ".

    Notes
    -----
    The charge within a closed line is the winding of the phase along it, so positive minus
    negative must equal the winding along the border. From one frame to the next a track may
    end or begin only by a pair of opposite charges, through the border, or by a split or a
    merger that keeps the charge; ends and starts without such an event, events whose charges
    do not add up and singularities that went undetected are listed.
    """
    searched = np.unique(
        trajectories["frame"].to_numpy() if frames is None else np.fromiter(frames, np.int64)
    )
    charge = trajectories["charge"]
    count = {
        name: trajectories.loc[charge * sign > 0].groupby("frame").size().reindex(searched)
        for name, sign in (("positive", 1), ("negative", -1))
    }
    total = trajectories.groupby("frame")["charge"].sum().reindex(searched, fill_value=0)
    winding = pd.Series(border_winding, dtype="Int64").reindex(searched)
    remarks: dict[int, list[str]] = {frame: [] for frame in searched.tolist()}
    for frame, found, turns in zip(searched.tolist(), total, winding, strict=True):
        if turns is not pd.NA and found != turns:
            remarks[frame].append(f"charge {found:+d} but {turns:+d} turns along the border")
    for frame, text in _unbalanced(trajectories, events):
        remarks.setdefault(frame, []).append(text)
    for frame, number, what in _unaccounted(trajectories, events, searched):
        remarks[frame].append(f"{number} {what}")
    return pd.DataFrame(
        {
            "frame": searched,
            "positive": count["positive"].fillna(0).astype("Int64").to_numpy(),
            "negative": count["negative"].fillna(0).astype("Int64").to_numpy(),
            "border_winding": winding.to_numpy(),
            "audit": ["; ".join(remarks[f]) or "ok" for f in searched.tolist()],
        }
    )


def _unbalanced(trajectories: pd.DataFrame, events: pd.DataFrame) -> list[tuple[int, str]]:
    """Return the events within the frame whose charges do not cancel."""
    charge = trajectories.groupby("track")["charge"].first()
    first = trajectories.groupby("track")["frame"].min()
    inner = events[events["kind"].isin(["pair_birth", "pair_death", "split", "merge"])]
    wrong = []
    for row in inner.itertuples():
        tracks = [int(t) for t in row.tracks.split(";")]
        began = first.loc[tracks] >= row.frame_after
        change = int(np.where(began, charge.loc[tracks], -charge.loc[tracks]).sum())
        if change:
            kind = str(row.kind).replace("_", " ")
            wrong.append((int(row.frame_after), f"{kind} that changes the charge by {change:+d}"))
    return wrong


def _unaccounted(
    trajectories: pd.DataFrame, events: pd.DataFrame, searched: NDArray[np.int64]
) -> list[tuple[int, int, str]]:
    """Return (frame, number, what) of ends, starts and absences that no event explains."""
    ordered = trajectories.sort_values(["track", "frame"])
    track = ordered["track"].to_numpy()
    place = np.searchsorted(searched, ordered["frame"].to_numpy())
    new = np.diff(track, prepend=-1) != 0
    first, last = np.flatnonzero(new), np.append(np.flatnonzero(new)[1:], len(track)) - 1
    told = events.loc[events["kind"] != "unexplained", ["tracks", "frame_before", "frame_after"]]
    told = told.assign(track=told["tracks"].str.split(";")).explode("track")
    row = np.searchsorted(track[first], told["track"].to_numpy(dtype=np.int64))
    frame = ordered["frame"].to_numpy()
    ends, starts = np.zeros(len(first), np.bool_), np.zeros(len(first), np.bool_)
    ends[row[told["frame_before"].to_numpy() >= frame[last[row]]]] = True
    starts[row[told["frame_after"].to_numpy() <= frame[first[row]]]] = True
    found = []
    for at, missing, what in (
        (place[last] + 1, ~ends, "ended unexplained"),
        (place[first], ~starts, "began unexplained"),
    ):
        number = np.bincount(at[missing], minlength=len(searched) + 1)
        # tracks may meet the first and the last frame
        found += [
            (int(searched[k]), int(number[k]), what) for k in range(1, len(searched)) if number[k]
        ]
    absent = np.zeros(len(searched) + 1, dtype=np.int64)
    np.add.at(absent, place[:-1][~new[1:]] + 1, 1)
    np.add.at(absent, place[1:][~new[1:]], -1)
    absent = np.cumsum(absent)[:-1]
    found += [(int(searched[k]), int(absent[k]), "undetected") for k in np.flatnonzero(absent)]
    return found
