"""Truth of a simulation: zeros, tracks and events, from the formula of the wave alone."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from hologyre.grid import Window
from hologyre.simulate.threads import Ends, Fate, follow
from hologyre.simulate.wave import FloatArray, Wave
from hologyre.simulate.zeros import TruthError, border_winding, find_zeros
from hologyre.tables import EVENTS, conform

__all__ = ["Truth", "TruthError", "border_winding", "find_zeros", "true_tracks"]

# An end of a line this near a zero, in finest lengths, is that zero.
_SAME = 1e-5
# Times the steps along the lines are halved before giving up.
_RETRIES = 7

TRACK_COLUMNS = ("track", "frame", "time_s", "y_px", "x_px", "y_um", "x_um", "charge")


class Truth(NamedTuple):
    """Tracks and events of a simulated stack.

    Attributes
    ----------
    tracks : DataFrame
        Columns track, frame, time_s, y_px, x_px, y_um, x_um, charge; sorted by track, frame.
    events : DataFrame
        Columns of `hologyre.tables.EVENTS`; kinds pair_birth, pair_death, entry, exit.
    """

    tracks: pd.DataFrame
    events: pd.DataFrame


class _Happening(NamedTuple):
    """An event between two frames; `lines` are rows of the frame it is seen in."""

    kind: str
    y: float
    x: float
    t: float
    lines: tuple[int, ...]


@dataclass(frozen=True)
class _Bridge:
    """How the zeros of one frame go over into those of the next.

    Attributes
    ----------
    links : dict
        Row of the next frame from row of this one.
    losses, gains : lists
        Events that end rows of this frame or begin rows of the next.
    missed_before, missed_after : lists of (y, x)
        Zeros that lines end on, yet the finder had not found.
    """

    links: dict[int, int]
    losses: list[_Happening]
    gains: list[_Happening]
    missed_before: list[tuple[float, float]]
    missed_after: list[tuple[float, float]]


class _Tangled(Exception):
    """Two lines ended on one zero, or one was lost: the steps were too long."""


def true_tracks(
    wave: Wave,
    window: Window,
    n_frames: int,
    *,
    frame_interval_s: float = 1.0,
    pixel_um: float | None = None,
    progress: Callable[[float], None] | None = None,
) -> Truth:
    """Follow every zero of a wave through the frames 0 ... n_frames - 1.

    The zeros of each frame are found afresh (`find_zeros`), then each is followed along its line
    in space-time to the next frame. A line that returns to its own frame is a birth or a death
    of a pair, one that crosses the window's border an entry or an exit. What happens wholly
    between two frames leaves no trace: a line that turns back and forth there is one link, a
    closed loop is nothing.

    Parameters
    ----------
    wave : Wave
        The wave, in frames of time.
    window : Window
        Where zeros count, px.
    n_frames : int
        Number of frames.
    frame_interval_s : float
        Time between frames, s. Events have times between frames.
    pixel_um : float, optional
        Size of a pixel in the object, um; None leaves lengths in um empty.
    progress : callable, optional
        Called with the part done, 0 to 1.

    Returns
    -------
    Truth
        Tracks and events.

    Raises
    ------
    ValueError
        If `n_frames` is less than 1.
    TruthError
        If charges and events do not add up, or a zero of higher order has to be followed.
    """
    if n_frames < 1:
        raise ValueError(f"n_frames: expected 1 or more, got {n_frames!r}")
    zeros = [find_zeros(wave, window, 0.0)]
    windings = [zeros[0]["charge"].sum()]
    bridges: list[_Bridge] = []
    while len(bridges) < n_frames - 1:
        frame = len(bridges)
        if len(zeros) == frame + 1:
            zeros.append(find_zeros(wave, window, frame + 1.0))
            windings.append(zeros[-1]["charge"].sum())
        bridge = _bridge(wave, window, zeros[frame], zeros[frame + 1], frame)
        if bridge.missed_before:
            zeros[frame] = _with_missed(wave, window, zeros[frame], bridge.missed_before, frame)
            # The zero was missing from the link before too.
            bridges = bridges[: max(0, frame - 1)]
        elif bridge.missed_after:
            zeros[frame + 1] = _with_missed(
                wave, window, zeros[frame + 1], bridge.missed_after, frame + 1
            )
        else:
            bridges.append(bridge)
        if progress is not None:
            progress((len(bridges) + 1) / n_frames)
    for frame, table in enumerate(zeros):
        # The finder made sure of the winding; what was added later must come in pairs.
        if table["charge"].sum() != windings[frame]:
            raise TruthError(f"frame {frame}: zeros found late do not come in pairs")
    truth = _assemble(zeros, bridges)
    check_conservation(truth, zeros)
    return Truth(
        _in_units(truth.tracks, truth.tracks["frame"], frame_interval_s, pixel_um)[
            list(TRACK_COLUMNS)
        ],
        conform(
            _in_units(truth.events, truth.events["time_s"], frame_interval_s, pixel_um), EVENTS
        ),
    )


def _in_units(
    table: pd.DataFrame, frames: pd.Series, interval_s: float, pixel_um: float | None
) -> pd.DataFrame:
    size = np.nan if pixel_um is None else pixel_um
    return table.assign(
        time_s=frames * interval_s, y_um=table["y_px"] * size, x_um=table["x_px"] * size
    )


def _bridge(
    wave: Wave, window: Window, before: pd.DataFrame, after: pd.DataFrame, frame: int
) -> _Bridge:
    for table in (before, after):
        if (table["charge"].abs() != 1).any():
            raise TruthError(f"frame {frame}: a zero of higher order cannot be followed")
    for refine in range(_RETRIES):
        try:
            return _try_bridge(wave, window, before, after, frame, refine)
        except _Tangled as reason:
            last = reason
    raise TruthError(f"between frames {frame} and {frame + 1}: {last}")


def _try_bridge(
    wave: Wave,
    window: Window,
    before: pd.DataFrame,
    after: pd.DataFrame,
    frame: int,
    refine: int,
) -> _Bridge:
    old, new = _spots(before), _spots(after)
    turn, new_turn = before["charge"].to_numpy(), after["charge"].to_numpy()
    close = _SAME * wave.finest_px
    ends = follow(wave, window, old[:, 0], old[:, 1], frame, frame + 1.0, refine=refine)
    links, losses, missed_before, missed_after = _sort_ends(
        ends, window, old, new, close, ("pair_death", "exit")
    )
    if len(set(links.values())) != len(links):
        raise _Tangled("two lines of zeros ended on one zero")
    if any(turn[i] != new_turn[j] for i, j in links.items()):
        raise _Tangled("a line of zeros ended on one of the other charge")
    rest = np.setdiff1d(np.arange(len(new)), list(links.values()))
    back = follow(wave, window, new[rest, 0], new[rest, 1], frame + 1.0, frame, refine=refine)
    wrong, gains, more_after, more_before = _sort_ends(
        back, window, new[rest], old, close, ("pair_birth", "entry")
    )
    if wrong:
        raise _Tangled("a line of zeros goes over in one direction of time only")
    gains = [g._replace(lines=tuple(int(rest[i]) for i in g.lines)) for g in gains]
    for happenings, charge in ((losses, turn), (gains, new_turn)):
        if any(len(h.lines) == 2 and charge[list(h.lines)].sum() for h in happenings):
            raise _Tangled("two lines of zeros of one charge ended in each other")
    return _Bridge(links, losses, gains, missed_before + more_before, missed_after + more_after)


def _sort_ends(
    ends: Ends,
    window: Window,
    own: FloatArray,
    other: FloatArray,
    close: float,
    kinds: tuple[str, str],
) -> tuple[dict[int, int], list[_Happening], list[tuple[float, float]], list[tuple[float, float]]]:
    """Return links, events, and zeros missed in the lines' own frame and in the other one."""
    links: dict[int, int] = {}
    happenings: list[_Happening] = []
    missed_own: list[tuple[float, float]] = []
    missed_other: list[tuple[float, float]] = []
    if (ends.fate == Fate.LOST).any():
        raise _Tangled("a line of zeros was lost")
    inside = window.contains(ends.y, ends.x)
    partner: dict[int, int] = {}
    for i, fate in enumerate(ends.fate):
        here = (float(ends.y[i]), float(ends.x[i]))
        if fate == Fate.AWAY or not inside[i]:
            if np.isnan(ends.crossing[i, 0]):
                raise _Tangled("a line of zeros left without crossing the border")
            y, x, t = (float(v) for v in ends.crossing[i])
            happenings.append(_Happening(kinds[1], y, x, t, (i,)))
            continue
        found = _at(other if fate == Fate.ARRIVED else own, here, close)
        if fate == Fate.ARRIVED and found is None:
            missed_other.append(here)
        elif fate == Fate.ARRIVED and found is not None:
            links[i] = found
        elif found is None:
            missed_own.append(here)
        else:
            partner[i] = found
    for i, j in partner.items():
        if i == j or partner.get(j) != i:
            raise _Tangled("two lines of zeros returned to one zero")
        if i < j:
            y, x, t = (float(v) for v in ends.turn[i])
            happenings.append(_Happening(kinds[0], y, x, t, (i, j)))
    return links, happenings, missed_own, missed_other


def _spots(table: pd.DataFrame) -> FloatArray:
    return table[["y_px", "x_px"]].to_numpy(dtype=np.float64)


def _at(spots: FloatArray, here: tuple[float, float], close: float) -> int | None:
    """Return the row of the zero at a place; None if there is none."""
    if len(spots) == 0:
        return None
    distance = np.hypot(spots[:, 0] - here[0], spots[:, 1] - here[1])
    nearest = int(np.argmin(distance))
    return nearest if distance[nearest] < close else None


def _with_missed(
    wave: Wave, window: Window, zeros: pd.DataFrame, missed: list[tuple[float, float]], frame: int
) -> pd.DataFrame:
    """Return the zeros with those the finder had missed."""
    spots = np.array(missed)
    if len(spots) > 1:
        pairs = cKDTree(spots).query_pairs(_SAME * wave.finest_px, output_type="ndarray")
        spots = np.delete(spots, pairs.max(axis=1), axis=0) if len(pairs) else spots
    jet = wave.jet(spots[:, 0], spots[:, 1], float(frame))
    charge = np.sign(jet.dx.real * jet.dy.imag - jet.dy.real * jet.dx.imag).astype(np.int64)
    more = pd.DataFrame({"y_px": spots[:, 0], "x_px": spots[:, 1], "charge": charge})
    return pd.concat([zeros, more]).sort_values(["y_px", "x_px"], ignore_index=True)


def _assemble(zeros: list[pd.DataFrame], bridges: list[_Bridge]) -> Truth:
    """Return tracks and events, positions in px and times in frames."""
    track_of: list[NDArray[np.int64]] = []
    used = 0
    events: list[dict[str, object]] = []
    for frame, table in enumerate(zeros):
        tracks = np.full(len(table), -1)
        if frame:
            for row, next_row in bridges[frame - 1].links.items():
                tracks[next_row] = track_of[-1][row]
        fresh = np.flatnonzero(tracks < 0)
        tracks[fresh] = used + np.arange(fresh.size)
        used += fresh.size
        track_of.append(tracks)
        if frame:
            bridge = bridges[frame - 1]
            happened = [(h, track_of[frame - 1]) for h in bridge.losses]
            happened += [(h, tracks) for h in bridge.gains]
            for h, owners in sorted(happened, key=lambda pair: pair[0].t):
                ids = sorted(int(owners[i]) for i in h.lines)
                events.append(
                    {
                        "event": len(events),
                        "kind": h.kind,
                        "frame_before": frame - 1,
                        "frame_after": frame,
                        "time_s": h.t,
                        "y_px": h.y,
                        "x_px": h.x,
                        "tracks": ";".join(map(str, ids)),
                    }
                )
    tracks_table = pd.concat(
        [
            table.assign(track=tracks, frame=frame)
            for frame, (table, tracks) in enumerate(zip(zeros, track_of, strict=True))
        ]
    ).sort_values(["track", "frame"], ignore_index=True)
    columns = [c.name for c in EVENTS if c.name not in ("y_um", "x_um")]
    return Truth(tracks_table, pd.DataFrame(events, columns=columns))


def check_conservation(truth: Truth, zeros: list[pd.DataFrame]) -> None:
    """Raise TruthError unless events account for every change of count, charge by charge."""
    charge_of = truth.tracks.groupby("track")["charge"].first()
    gain = {"pair_birth": 1, "entry": 1, "pair_death": -1, "exit": -1}
    for frame in range(len(zeros) - 1):
        change = {-1: 0, 1: 0}
        for event in truth.events[truth.events["frame_before"] == frame].itertuples():
            for track in event.tracks.split(";"):
                change[int(charge_of[int(track)])] += gain[event.kind]
        for q, expected in change.items():
            counts = [int((zeros[f]["charge"] == q).sum()) for f in (frame, frame + 1)]
            if counts[1] - counts[0] != expected:
                raise TruthError(
                    f"between frames {frame} and {frame + 1} the zeros of charge {q:+d} go from "
                    f"{counts[0]} to {counts[1]}, the events account for {expected:+d}"
                )
