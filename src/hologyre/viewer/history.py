"""The life of one track as curves, and the way from event to event; nothing here needs a viewer."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.motion import lifetimes, pair_separation, track_velocity
from hologyre.optics import Optics
from hologyre.viewer.layers import points_from_events
from hologyre.viewer.plots import Curve, Panel
from hologyre.viewer.styles import NEGATIVE, POSITIVE

_BORN, _DYING = "#009E73", "#D55E00"
_ENDS = {
    "pair": "in a pair",
    "split": "at a split",
    "merge": "at a merge",
    "border": "at the border",
    "unexplained": "unexplained",
    "record": "with the record",
}


@dataclass(frozen=True)
class Happened:
    """An event, and the frame and place the viewer goes to for it."""

    event: int
    kind: str
    frame: int
    y_px: float
    x_px: float
    tracks: tuple[int, ...]


def track_panels(
    trajectories: pd.DataFrame, events: pd.DataFrame, track: int, optics: Optics
) -> tuple[Panel, ...]:
    """Return robustness (where known), speed and separation to the partner over the frames.

    Speeds and separations are in micrometres where the optics tell, else in pixels. A track
    has a partner when it is born or dies in a pair, and there is a curve for each.
    """
    rows = trajectories[trajectories["track"] == track]
    if not len(rows):
        return ()
    frame = rows["frame"].to_numpy(dtype=np.float64)
    colour = POSITIVE if rows["charge"].iloc[0] > 0 else NEGATIVE
    panels = []
    for name, title in (
        ("robustness_snr", "robustness (× noise)"),
        ("robustness", "robustness (counts)"),
    ):
        value = rows[name].to_numpy(dtype=np.float64)
        if np.isfinite(value).any():
            panels.append(Panel(title, (Curve(frame, value, colour),)))
            break
    velocity = track_velocity(rows)
    speed = np.hypot(velocity["vy_px_per_frame"], velocity["vx_px_per_frame"]).to_numpy()
    pixel, interval = optics.pixel_um, optics.frame_interval_s
    told = "speed (px/frame)"
    if pixel is not None and interval is not None:
        speed, told = speed * pixel / interval, "speed (µm/s)"
    if np.isfinite(speed).any():
        panels.append(Panel(told, (Curve(frame, speed, colour),)))
    separations = _separations(trajectories, events, track)
    if separations:
        length, unit = (1.0, "px") if pixel is None else (pixel, "µm")
        panels.append(
            Panel(
                f"separation of pair ({unit}): green from birth, red to death",
                tuple(Curve(x, y * length, c) for x, y, c in separations),
            )
        )
    return tuple(panels)


def track_sentence(trajectories: pd.DataFrame, events: pd.DataFrame, track: int) -> str:
    """Say when a track began and ended, how, and with which partner."""
    rows = trajectories[trajectories["track"] == track]
    if not len(rows):
        return ""
    concerned = _events_of(events, track)
    life = lifetimes(rows, concerned).iloc[0]
    partners = {
        kind: next((str(t) for t in _tracks(row.tracks) if t != track), "")
        for kind in ("pair_birth", "pair_death")
        for row in concerned[concerned["kind"] == kind].itertuples()
    }
    began, ended = _ENDS[life["began"]], _ENDS[life["ended"]]
    began += f" with {partners['pair_birth']}" if partners.get("pair_birth") else ""
    ended += f" with {partners['pair_death']}" if partners.get("pair_death") else ""
    return (
        f"Track {track}, charge {int(rows['charge'].iloc[0]):+d}: begins in frame "
        f"{rows['frame'].min()} {began}, ends in frame {rows['frame'].max()} {ended}."
    )


def step_event(
    events: pd.DataFrame,
    frame: int,
    last: int | None,
    towards: Literal["next", "previous"],
    *,
    kind: str = "",
) -> Happened | None:
    """Return the event after, or before, the one seen last.

    Parameters
    ----------
    events : DataFrame
        Events, of which those without a place are passed over.
    frame : int
        Where the viewer stands.
    last : int or None
        Number of the event seen last; it counts only while the viewer stands at its frame.
        Otherwise all events of the frame are still to come.
    towards : "next" or "previous"
    kind : str
        Only events of this kind; all of them if empty.
    """
    data, features = points_from_events(events)
    at = data[:, 0].astype(np.int64)
    order = np.lexsort((features["event"], at))
    # the one seen last is a place in the order even where its kind is not asked for
    wanted = [i for i in order if not kind or features["kind"].iloc[i] == kind]
    here: tuple[int, float] = (frame, -np.inf if towards == "next" else np.inf)
    if last is not None and frame in at[(features["event"] == last).to_numpy()]:
        here = (frame, float(last))
    keys = [(int(at[i]), float(features["event"].iloc[i])) for i in wanted]
    if towards == "next":
        found = next((i for i, key in zip(wanted, keys, strict=True) if key > here), None)
    else:
        backwards = zip(wanted[::-1], keys[::-1], strict=True)
        found = next((i for i, key in backwards if key < here), None)
    if found is None:
        return None
    row = features.iloc[found]
    return Happened(
        int(row["event"]),
        str(row["kind"]),
        int(at[found]),
        float(data[found, 1]),
        float(data[found, 2]),
        _tracks(row["tracks"]),
    )


def nearest_track(
    trajectories: pd.DataFrame, frame: int, y_px: float, x_px: float, *, within_px: float
) -> int | None:
    """Return the track whose singularity of this frame lies nearest, if it is near enough."""
    rows = trajectories[trajectories["frame"] == frame]
    if not len(rows):
        return None
    away = np.hypot(rows["y_px"] - y_px, rows["x_px"] - x_px).to_numpy()
    nearest = int(np.argmin(away))
    return int(rows["track"].iloc[nearest]) if away[nearest] <= within_px else None


def threads(
    trajectories: pd.DataFrame, events: pd.DataFrame, optics: Optics
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return track vertices in (t, y, x) in which pairs are joined where they are born or die.

    Returns
    -------
    vertices : (n, 4) array
        track, frame (a fraction at an event), y_px, x_px, sorted by track and frame.
    charge : (n,) array
    """
    rows = trajectories[["track", "frame", "y_px", "x_px", "charge"]].to_numpy(dtype=np.float64)
    charge = dict(zip(trajectories["track"], trajectories["charge"], strict=True))
    first = trajectories.groupby("track")["frame"].min()
    last = trajectories.groupby("track")["frame"].max()
    interval = optics.frame_interval_s
    joints = []
    pairs = events[events["kind"].isin(["pair_birth", "pair_death"]) & events["y_px"].notna()]
    for event in pairs.itertuples():
        moment = 0.5 * (event.frame_before + event.frame_after)
        if interval is not None and np.isfinite(event.time_s):
            moment = event.time_s / interval
        for track in _tracks(event.tracks):
            if track not in charge:
                continue
            outside = moment < first[track] if event.kind == "pair_birth" else moment > last[track]
            if outside:
                joints.append((track, moment, event.y_px, event.x_px, charge[track]))
    both = np.vstack([rows, np.array(joints, dtype=np.float64).reshape(-1, 5)])
    both = both[np.lexsort((both[:, 1], both[:, 0]))]
    return both[:, :4], both[:, 4]


def _separations(
    trajectories: pd.DataFrame, events: pd.DataFrame, track: int
) -> list[tuple[NDArray[np.float64], NDArray[np.float64], str]]:
    concerned = _events_of(events, track)
    known = set(trajectories["track"].unique())
    both = [len(_tracks(t)) == 2 and known.issuperset(_tracks(t)) for t in concerned["tracks"]]
    pair = concerned["kind"].isin(["pair_birth", "pair_death"]).to_numpy()
    pairs = concerned[pair & np.array(both, dtype=bool)]
    if not len(pairs):
        return []
    involved = {t for told in pairs["tracks"] for t in _tracks(told)}
    rows = trajectories[trajectories["track"].isin(involved)]
    apart = pair_separation(rows, pairs, max_frames=int(np.ptp(rows["frame"])) + 1)
    found = []
    for _, near in apart.groupby("event", sort=True):
        near = near.sort_values("frame")
        colour = _BORN if near["kind"].iloc[0] == "pair_birth" else _DYING
        found.append(
            (near["frame"].to_numpy(dtype=np.float64), near["separation_px"].to_numpy(), colour)
        )
    return found


def _events_of(events: pd.DataFrame, track: int) -> pd.DataFrame:
    concerns = [track in _tracks(told) for told in events["tracks"]]
    return events[np.array(concerns, dtype=bool)]


def _tracks(told: object) -> tuple[int, ...]:
    return tuple(int(t) for t in str(told).split(";") if t)
