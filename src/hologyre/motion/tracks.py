"""From links between rows to the tables of tracks and events."""

from __future__ import annotations

from dataclasses import dataclass, field

import numba
import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.tables import EVENTS, SINGULARITIES, TRAJECTORIES, conform, empty


@dataclass(frozen=True)
class Motion:
    """Tracks of singularities and what happened to them.

    Parameters
    ----------
    trajectories : DataFrame
        One row an observation, columns `hologyre.tables.TRAJECTORIES`, sorted by track and
        frame.
    events : DataFrame
        Births, deaths and crossings, columns `hologyre.tables.EVENTS`, sorted by frame.
    """

    trajectories: pd.DataFrame
    events: pd.DataFrame


@dataclass(frozen=True)
class Happening:
    """One event, told by the rows of the table it concerns.

    `at_frame` is the moment in frames, fractional, or NaN when only the two frames around
    it are known.
    """

    kind: str
    frame_before: int
    frame_after: int
    y_px: float
    x_px: float
    rows: tuple[int, ...]
    at_frame: float = float("nan")


@dataclass(frozen=True)
class Links:
    """How the rows of a table hang together.

    Parameters
    ----------
    previous : (row,) int array
        The row before in the same track, -1 for the first of a track.
    how : (row,) str array
        How it was joined to it: thread, assigned or bridged; empty for the first of a track.
    happenings : list of Happening
    """

    previous: NDArray[np.int64]
    how: NDArray[np.object_]
    happenings: list[Happening] = field(default_factory=list)


def checked(table: pd.DataFrame) -> pd.DataFrame:
    """Return the table with its columns in order, sorted by frame, rows numbered from 0.

    Raises
    ------
    ValueError
        If a column is missing or unknown, a position is not finite or a charge is 0.
    """
    known = {c.name for c in SINGULARITIES}
    for name in ("frame", "y_px", "x_px", "charge"):
        if name not in table:
            raise ValueError(f"table: column {name} is missing")
    strange = sorted(set(table.columns) - known)
    if strange:
        raise ValueError(f"table: unknown column {', '.join(strange)}")
    if "singularity" not in table:
        table = table.assign(singularity=np.arange(len(table)))
    table = conform(table, SINGULARITIES)
    if not np.isfinite(table[["y_px", "x_px"]].to_numpy()).all():
        raise ValueError("table: y_px and x_px must be finite")
    if (table["charge"] == 0).any():
        raise ValueError("table: charge must not be 0")
    return table.sort_values(["frame", "singularity"], kind="stable", ignore_index=True)


def build(table: pd.DataFrame, links: Links) -> Motion:
    """Number the tracks by their first frame and lay out both tables.

    Parameters
    ----------
    table : DataFrame
        As `checked` returns it.
    """
    track = _track_numbers(links.previous)
    trajectories = table.assign(track=track, link=links.how)
    trajectories = conform(trajectories, TRAJECTORIES).sort_values(
        ["track", "frame"], kind="stable", ignore_index=True
    )
    return Motion(trajectories, _events(table, links.happenings, track))


@numba.njit(cache=True, nogil=True)
def _track_numbers(previous):  # type: ignore[no-untyped-def]
    """Number tracks by their first row; the row before is done already, rows being by frame."""
    track = np.empty(len(previous), np.int64)
    count = 0
    for row in range(len(previous)):
        if previous[row] < 0:
            track[row] = count
            count += 1
        else:
            track[row] = track[previous[row]]
    return track


def _events(
    table: pd.DataFrame, happenings: list[Happening], track: NDArray[np.int64]
) -> pd.DataFrame:
    if not happenings:
        return empty(EVENTS)
    happenings = sorted(happenings, key=lambda h: (h.frame_after, h.frame_before, h.rows))
    before = np.array([h.frame_before for h in happenings], dtype=np.int64)
    after = np.array([h.frame_after for h in happenings], dtype=np.int64)
    moment = np.array([h.at_frame for h in happenings])
    moment = np.where(np.isnan(moment), 0.5 * (before + after), moment)
    y = np.array([h.y_px for h in happenings])
    x = np.array([h.x_px for h in happenings])
    scale = um_per_px(table)
    events = pd.DataFrame(
        {
            "event": np.arange(len(happenings)),
            "kind": [h.kind for h in happenings],
            "frame_before": before,
            "frame_after": after,
            "time_s": _time_s(table, moment),
            "y_px": y,
            "x_px": x,
            "y_um": y * scale,
            "x_um": x * scale,
            "tracks": [
                ";".join(str(n) for n in sorted({int(track[r]) for r in h.rows}))
                for h in happenings
            ],
        }
    )
    return conform(events, EVENTS)


def _time_s(table: pd.DataFrame, moment: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the time of fractional frames, NaN where the table knows no time."""
    known = table[["frame", "time_s"]].dropna().drop_duplicates("frame").sort_values("frame")
    if len(known) < 2:
        return np.full(len(moment), np.nan)
    frame = known["frame"].to_numpy(dtype=np.float64)
    return np.interp(moment, frame, known["time_s"].to_numpy(), left=np.nan, right=np.nan)


def um_per_px(table: pd.DataFrame) -> float:
    """Return the object-space size of a pixel that the table's own columns imply."""
    px = table[["y_px", "x_px"]].to_numpy()
    um = table[["y_um", "x_um"]].to_numpy()
    usable = np.isfinite(um) & (np.abs(px) > 1.0)
    return float(np.median(um[usable] / px[usable])) if usable.any() else float("nan")
