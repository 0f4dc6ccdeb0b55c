"""How well tracks agree with a truth: the measures of the tracking literature."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.motion.matching import cheapest_matching
from hologyre.motion.neighbours import near


@dataclass(frozen=True)
class TrackScores:
    """Agreement of tracks with true tracks; 1 is perfect, except for `rmse_px`.

    Parameters
    ----------
    links : float
        Right links over true links and wrong ones together; links of undetected zeros count
        as missed, one that bridges them rightly as neither right nor wrong.
    alpha, beta : float
        Closeness of the tracks without and with a penalty for spurious ones.
    jsc, jsc_theta : float
        Jaccard index of positions and of tracks.
    rmse_px : float
        Root mean square distance of matched positions, px; NaN if there are none.
    mota : float
        Multiple object tracking accuracy; may be negative.
    hota : float
        Higher order tracking accuracy.
    """

    links: float
    alpha: float
    beta: float
    jsc: float
    jsc_theta: float
    rmse_px: float
    mota: float
    hota: float


def score_tracks(found: pd.DataFrame, truth: pd.DataFrame, *, gate_px: float = 5.0) -> TrackScores:
    """Score tracks against true ones.

    Parameters
    ----------
    found, truth : DataFrame
        Columns track, frame, y_px, x_px and charge. Positions of different charge never match.
    gate_px : float
        Distance from which two positions have nothing to do with each other, px.

    Notes
    -----
    alpha, beta and the Jaccard indices rest on the pairing of whole tracks with the least sum
    of distances, each gated, a missing position counting as the gate (N. Chenouard et al.,
    Nature Methods 11, 281, 2014). MOTA and HOTA rest on matching positions frame by frame, the
    matches of the frame before being kept while they hold (K. Bernardin and R. Stiefelhagen,
    EURASIP J. Image Video Process. 2008, 246309; J. Luiten et al., Int. J. Comput. Vis. 129,
    548, 2021), for HOTA at the one threshold `gate_px`.

    Raises
    ------
    ValueError
        If the truth is empty or the gate is not positive.
    """
    if not gate_px > 0:
        raise ValueError(f"gate_px: expected a positive number, got {gate_px!r}")
    if len(truth) == 0:
        raise ValueError("truth: expected at least one position, got none")
    x, y = _Tracks.of(truth), _Tracks.of(found)
    pairs = _close_pairs(x, y, gate_px)
    alpha, beta, jsc, theta, rmse = _whole_tracks(x, y, pairs, gate_px)
    matched = _by_frame(x, y, pairs)
    return TrackScores(
        _links(x, y, matched),
        alpha,
        beta,
        jsc,
        theta,
        rmse,
        _mota(x, y, matched),
        _hota(x, y, matched),
    )


def score_events(
    found: pd.DataFrame,
    truth: pd.DataFrame,
    *,
    kinds: tuple[str, ...] = ("pair_birth", "pair_death"),
    frames: int = 1,
    gate_px: float = 5.0,
) -> tuple[float, float]:
    """Return precision and recall of events of one kind at one place and about one time.

    Parameters
    ----------
    found, truth : DataFrame
        Tables of events.
    kinds : tuple of str
        The kinds scored; an event matches one of its own kind only.
    frames : int
        Most frames apart.
    gate_px : float
        Most px apart.
    """
    right = total = true = 0
    for kind in kinds:
        a, b = found[found["kind"] == kind], truth[truth["kind"] == kind]
        i, j, d = near(a[["y_px", "x_px"]].to_numpy(), b[["y_px", "x_px"]].to_numpy(), gate_px)
        late = np.abs(a["frame_before"].to_numpy()[i] - b["frame_before"].to_numpy()[j])
        i, j, d, late = (v[late <= frames] for v in (i, j, d, late))
        partner = cheapest_matching(
            i,
            j,
            d + gate_px * late,
            left_alone=np.full(len(a), gate_px * (frames + 1)),
            right_alone=np.full(len(b), gate_px * (frames + 1)),
        )
        right += int(np.count_nonzero(partner >= 0))
        total += len(a)
        true += len(b)
    return (right / total if total else 1.0), (right / true if true else 1.0)


@dataclass(frozen=True, eq=False)
class _Tracks:
    """A table of tracks as arrays, sorted by frame; tracks numbered from 0."""

    track: NDArray[np.int64]
    frame: NDArray[np.int64]
    position: NDArray[np.float64]
    charge: NDArray[np.int64]
    length: NDArray[np.int64]

    @classmethod
    def of(cls, table: pd.DataFrame) -> _Tracks:
        table = table.sort_values(["frame", "track"], kind="stable")
        _, track = np.unique(table["track"].to_numpy(), return_inverse=True)
        return cls(
            track,
            table["frame"].to_numpy(),
            table[["y_px", "x_px"]].to_numpy(),
            table["charge"].to_numpy(),
            np.bincount(track) if len(track) else np.empty(0, dtype=np.int64),
        )


_Pairs = tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.float64]]


def _close_pairs(x: _Tracks, y: _Tracks, gate: float) -> _Pairs:
    """Return all pairs of rows of one frame and charge nearer than the gate."""
    found: list[_Pairs] = []
    for frame in np.intersect1d(x.frame, y.frame):
        a = np.arange(*np.searchsorted(x.frame, [frame, frame + 1]))
        b = np.arange(*np.searchsorted(y.frame, [frame, frame + 1]))
        i, j, d = near(x.position[a], y.position[b], gate)
        same = x.charge[a[i]] == y.charge[b[j]]
        found.append((a[i[same]], b[j[same]], d[same]))
    if not found:
        nothing = np.empty(0, dtype=np.int64)
        return nothing, nothing, np.empty(0)
    i, j, d = (np.concatenate(part) for part in zip(*found, strict=True))
    return i, j, d


def _whole_tracks(
    x: _Tracks, y: _Tracks, pairs: _Pairs, gate: float
) -> tuple[float, float, float, float, float]:
    i, j, d = pairs
    key = x.track[i] * len(y.length) + y.track[j]
    unique, index = np.unique(key, return_inverse=True)
    a, b = np.divmod(unique, max(len(y.length), 1))
    gain = np.bincount(index, weights=gate - d, minlength=len(unique))
    hits = np.bincount(index, minlength=len(unique))
    squares = np.bincount(index, weights=d**2, minlength=len(unique))
    frames_of = [_frames_by_track(t) for t in (x, y)]
    both = np.array(
        [len(frames_of[0][p] & frames_of[1][q]) for p, q in zip(a, b, strict=True)],
        dtype=np.int64,
    )
    union = x.length[a] + y.length[b] - both
    cost = gate * union - gain
    partner = cheapest_matching(
        a, b, cost, left_alone=gate * x.length, right_alone=np.zeros(len(y.length))
    )
    paired = np.flatnonzero(partner >= 0)
    entry = np.searchsorted(unique, paired * len(y.length) + partner[paired])
    spurious = np.ones(len(y.length), dtype=np.bool_)
    spurious[partner[paired]] = False
    nothing = gate * x.length.sum()
    distance = nothing - gate * x.length[paired].sum() + cost[entry].sum()
    alpha = 1.0 - distance / nothing
    beta = (nothing - distance) / (nothing + gate * y.length[spurious].sum())
    true = int(hits[entry].sum())
    jsc = true / (len(x.track) + len(y.track) - true)
    theta = len(paired) / (len(x.length) + len(y.length) - len(paired))
    rmse = float(np.sqrt(squares[entry].sum() / true)) if true else float("nan")
    return float(alpha), float(beta), jsc, theta, rmse


def _frames_by_track(tracks: _Tracks) -> list[set[int]]:
    frames: list[set[int]] = [set() for _ in tracks.length]
    for track, frame in zip(tracks.track.tolist(), tracks.frame.tolist(), strict=True):
        frames[track].add(frame)
    return frames


def _by_frame(x: _Tracks, y: _Tracks, pairs: _Pairs) -> NDArray[np.int64]:
    """Return for every true row the found row it is matched with, or -1."""
    i, j, d = pairs
    matched = np.full(len(x.track), -1, dtype=np.int64)
    last: dict[int, int] = {}
    begin = np.searchsorted(x.frame[i], np.unique(x.frame))
    for rows in np.split(np.arange(len(i)), begin[1:]):
        a, b, cost = i[rows], j[rows], d[rows]
        stay = np.array(
            [last.get(int(p)) == int(q) for p, q in zip(x.track[a], y.track[b], strict=True)],
            dtype=np.bool_,
        )
        # a match of the frame before is worth more than any distance
        left, a_index = np.unique(a, return_inverse=True)
        right, b_index = np.unique(b, return_inverse=True)
        big = 10.0 * (cost.max(initial=1.0) + 1.0)
        partner = cheapest_matching(
            a_index,
            b_index,
            cost - big * stay,
            left_alone=np.full(len(left), 2.0 * big),
            right_alone=np.full(len(right), 2.0 * big),
        )
        hit = partner >= 0
        matched[left[hit]] = right[partner[hit]]
        last |= dict(
            zip(x.track[left[hit]].tolist(), y.track[right[partner[hit]]].tolist(), strict=True)
        )
    return matched


def _links(x: _Tracks, y: _Tracks, matched: NDArray[np.int64]) -> float:
    """Return right links over true and wrong ones."""
    (xa, xb), (ya, yb) = _links_of(x), _links_of(y)
    detected = matched >= 0
    true = np.full(len(y.track), -1, dtype=np.int64)
    true[matched[detected]] = np.flatnonzero(detected)
    # the next detected row of each true track: what a link should lead to
    order = np.lexsort((x.frame, x.track))
    order = order[detected[order]]
    following = np.full(len(x.track), -2, dtype=np.int64)
    same = x.track[order][1:] == x.track[order][:-1]
    following[order[:-1][same]] = order[1:][same]
    along = (true[ya] >= 0) & (following[true[ya]] == true[yb])
    made = set(zip(true[ya[along]].tolist(), true[yb[along]].tolist(), strict=True))
    right = sum(pair in made for pair in zip(xa.tolist(), xb.tolist(), strict=True))
    every = len(xa) + np.count_nonzero(~along)
    return right / every if every else 1.0


def _links_of(tracks: _Tracks) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    order = np.lexsort((tracks.frame, tracks.track))
    same = tracks.track[order][1:] == tracks.track[order][:-1]
    return order[:-1][same], order[1:][same]


def _mota(x: _Tracks, y: _Tracks, matched: NDArray[np.int64]) -> float:
    hit = matched >= 0
    true = np.count_nonzero(hit)
    order = np.lexsort((x.frame[hit], x.track[hit]))
    track = x.track[hit][order]
    identity = y.track[matched[hit]][order]
    switches = np.count_nonzero((track[1:] == track[:-1]) & (identity[1:] != identity[:-1]))
    missed, spurious = len(x.track) - true, len(y.track) - true
    return float(1.0 - (missed + spurious + switches) / len(x.track))


def _hota(x: _Tracks, y: _Tracks, matched: NDArray[np.int64]) -> float:
    hit = matched >= 0
    true = int(np.count_nonzero(hit))
    if true == 0:
        return 0.0
    a, b = x.track[hit], y.track[matched[hit]]
    _, index, together = np.unique(a * len(y.length) + b, return_inverse=True, return_counts=True)
    both = together[index]
    association = float(np.mean(both / (x.length[a] + y.length[b] - both)))
    detection = true / (len(x.track) + len(y.track) - true)
    return float(np.sqrt(detection * association))
