"""Does it add up? Charge against the border, and numbers against events, frame by frame."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

import numpy as np
import pandas as pd
from numpy.typing import NDArray

_INNER = ("pair_birth", "pair_death", "split", "merge")


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
    by_track = trajectories.groupby("track")
    charge, first = by_track["charge"].first(), by_track["frame"].min()
    inner = events.loc[events["kind"].isin(_INNER), ["kind", "frame_after", "tracks"]]
    named = inner["tracks"].str.split(";")
    # one row for each track that an event names
    event = np.repeat(np.arange(len(inner)), named.str.len())
    track = named.explode().astype(np.int64)
    began = first.loc[track].to_numpy() >= inner["frame_after"].to_numpy()[event]
    change = np.zeros(len(inner), dtype=np.int64)
    np.add.at(change, event, np.where(began, 1, -1) * charge.loc[track].to_numpy())
    wrong = inner.assign(change=change)[change != 0]
    return [
        (
            row.frame_after,
            f"{row.kind.replace('_', ' ')} that changes the charge by {row.change:+d}",
        )
        for row in wrong.itertuples()
    ]


def _unaccounted(
    trajectories: pd.DataFrame, events: pd.DataFrame, searched: NDArray[np.int64]
) -> list[tuple[int, int, str]]:
    """Return (frame, number, what) of ends, starts and absences that no event explains."""
    if trajectories.empty:
        return []
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
