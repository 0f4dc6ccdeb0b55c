"""What deserves a look, worst first, with the reason in words."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from hologyre.edits.kinds import Confirm, Edit, FlipCharge, JoinTracks, Move, Place

COLUMNS = {
    "what": "str",
    "score": "float64",
    "frame": "int64",
    "y_px": "float64",
    "x_px": "float64",
    "charge": "int64",
    "singularity": "int64",
    "track": "int64",
    "event": "int64",
    "reason": "str",
    "done": "bool",
}

_FAST_STEPS = 8.0
_UNEXPLAINED = 0.9
_LEAST_LINK = 0.5
_MOST_BORDER = 0.3


def review(
    singularities: pd.DataFrame,
    trajectories: pd.DataFrame,
    events: pd.DataFrame,
    frames: pd.DataFrame,
    frame_shape: tuple[int, int],
    *,
    edits: Iterable[Edit] = (),
    trusted: float = 0.9,
    border_px: float = 2.0,
    same_px: float = 0.5,
) -> pd.DataFrame:
    """List what deserves a look, worst first.

    Parameters
    ----------
    singularities, trajectories, events, frames : DataFrame
        Columns as in `hologyre.tables`.
    frame_shape : (int, int)
        Rows and columns of the hologram.
    edits : iterable of Edit
        Those that stand; what they have settled is marked done.
    trusted : float
        Singularities with a trust from here on are not listed for it.
    border_px : float
        Singularities nearer than this to the frame's border are listed.
    same_px : float
        Farthest an edit's place may be from what it settles.

    Returns
    -------
    DataFrame
        what (singularity, link, event or frame), score (1 worst, 0 best), frame, y_px, x_px,
        charge, singularity, track, event (-1 where it is none), reason and done; sorted by score.
        A link is at the singularity it leads to, an event at its own place and in the last
        frame before it.

    Raises
    ------
    ValueError
        If an option is out of its range.

    Notes
    -----
    The score of a singularity is one minus its trust, the probability that the noise-free field
    has it; where that is not known, half the order of the probability exp(-R^2) that noise
    removes one of robustness R, in units of the noise. Other scores only set an order.
    """
    if not 0 <= trusted <= 1:
        raise ValueError(f"trusted: expected a number from 0 to 1, got {trusted!r}")
    if border_px < 0 or same_px < 0:
        raise ValueError("border_px, same_px: expected 0 or more")
    parts = [
        _weak(singularities, frame_shape, trusted, border_px, trajectories),
        _links(trajectories),
        _events(events),
        _frames(frames),
    ]
    kept = [part for part in parts if len(part)]
    table = pd.concat(kept) if kept else pd.DataFrame(columns=list(COLUMNS))
    table = table.assign(done=_done(table, list(edits), same_px)).astype(COLUMNS)
    order = ["score", "frame", "y_px", "x_px", "what"]
    return table.sort_values(
        order, ascending=[False, True, True, True, True], kind="stable", ignore_index=True
    )[list(COLUMNS)]


def _weak(
    table: pd.DataFrame,
    frame_shape: tuple[int, int],
    trusted: float,
    border_px: float,
    trajectories: pd.DataFrame,
) -> pd.DataFrame:
    trust, snr = (table[name].to_numpy() for name in ("trust", "robustness_snr"))
    doubt = np.where(np.isnan(trust), 0.5 * np.exp(-(np.minimum(snr, 30.0) ** 2)), 1.0 - trust)
    doubt = np.nan_to_num(np.where(doubt > 1.0 - trusted, doubt, 0.0))
    y, x = table["y_px"].to_numpy(), table["x_px"].to_numpy()
    away = np.minimum.reduce([y, frame_shape[0] - 1 - y, x, frame_shape[1] - 1 - x])
    near = away < border_px
    closeness = 1.0 - np.maximum(away, 0.0) / max(border_px, 1e-9)
    score = np.maximum(doubt, np.where(near, _MOST_BORDER * closeness, 0.0))
    listed = np.flatnonzero((doubt > 0) | near)
    reasons = []
    for k in listed.tolist():
        words = []
        if doubt[k] > 0 and np.isnan(trust[k]):
            words.append(f"noise may have made it: robustness is {snr[k]:.1f} times the noise")
        elif doubt[k] > 0:
            words.append(f"trust is only {trust[k]:.2f}")
        if near[k]:
            words.append(f"{away[k]:.1f} px from the border of the frame")
        reasons.append("; ".join(words))
    rows = table.iloc[listed]
    track = trajectories.set_index("singularity")["track"].reindex(rows["singularity"])
    return _items(
        "singularity",
        rows,
        score[listed],
        reasons,
        charge=rows["charge"].to_numpy(),
        singularity=rows["singularity"].to_numpy(),
        track=track.fillna(-1).to_numpy(dtype=np.int64),
    )


def _links(chain: pd.DataFrame) -> pd.DataFrame:
    chain = chain.sort_values(["track", "frame"], kind="stable")
    joined = (chain["track"] == chain["track"].shift()).to_numpy()
    span = np.where(joined, chain["frame"].diff().to_numpy(), 1.0)
    step = np.hypot(chain["y_px"].diff(), chain["x_px"].diff()).to_numpy() / span
    usual = float(np.median(step[joined])) if joined.any() else 0.0
    link = chain["link"].to_numpy(dtype=object)
    gap = joined & (span > 1)
    fast = joined & (link != "thread") & (link != "hand") & (step > _FAST_STEPS * usual) & ~gap
    listed = np.flatnonzero(gap | fast)
    reasons = [
        f"joined across {span[k] - 1:.0f} frame{'s' if span[k] > 2 else ''} that do not show it"
        if gap[k]
        else f"joined by a step of {step[k]:.1f} px, {step[k] / usual:.0f} times the usual one"
        for k in listed.tolist()
    ]
    excess = np.where(gap, span - 1, step / max(_FAST_STEPS * usual, 1e-9))
    score = _LEAST_LINK + 0.4 * (1 - 1 / np.maximum(excess, 1.0))
    rows = chain.iloc[listed]
    return _items(
        "link",
        rows,
        score[listed],
        reasons,
        charge=rows["charge"].to_numpy(),
        singularity=rows["singularity"].to_numpy(),
        track=rows["track"].to_numpy(),
    )


def _events(events: pd.DataFrame) -> pd.DataFrame:
    rows = events[events["kind"] == "unexplained"]
    rows = rows.assign(frame=rows["frame_before"])
    reasons = [
        f"track {one.tracks} begins or ends between frames {one.frame_before} and "
        f"{one.frame_after} with no partner and away from the border"
        for one in rows.itertuples()
    ]
    track = [int(text) if text.isdigit() else -1 for text in rows["tracks"]]
    score = np.full(len(rows), _UNEXPLAINED)
    return _items(
        "event", rows, score, reasons, track=np.array(track, np.int64),
        event=rows["event"].to_numpy(),
    )  # fmt: skip


def _frames(frames: pd.DataFrame) -> pd.DataFrame:
    rows = frames[~frames["audit"].isin(["", "ok"])]
    reasons = [f"the frame does not add up: {text}" for text in rows["audit"]]
    return _items("frame", rows.assign(y_px=np.nan, x_px=np.nan), np.ones(len(rows)), reasons)


def _items(
    what: str,
    rows: pd.DataFrame,
    score: NDArray[np.float64],
    reasons: list[str],
    *,
    charge: NDArray[np.int64] | int = 0,
    singularity: NDArray[np.int64] | int = -1,
    track: NDArray[np.int64] | int = -1,
    event: NDArray[np.int64] | int = -1,
) -> pd.DataFrame:
    return pd.DataFrame(
        {
            "what": [what] * len(rows),
            "score": score,
            "frame": rows["frame"].to_numpy(),
            "y_px": rows["y_px"].to_numpy(),
            "x_px": rows["x_px"].to_numpy(),
            "charge": charge,
            "singularity": singularity,
            "track": track,
            "event": event,
            "reason": reasons,
        }
    )


def _done(table: pd.DataFrame, edits: list[Edit], same_px: float) -> NDArray[np.bool_]:
    """Tell which items an edit has settled: one confirmed, or whose place was worked on."""
    done = np.zeros(len(table), dtype=np.bool_)
    what = table["what"].to_numpy(dtype=object)
    frame = table["frame"].to_numpy()
    place = table[["y_px", "x_px"]].to_numpy(dtype=np.float64)
    # a close pair has two zeros at one place: only the charge tells them apart
    charge = np.where(what == "singularity", table["charge"].fillna(0).to_numpy(np.float64), 0.0)
    for kind in ("singularity", "link", "event"):
        settled = np.array([p for e in edits for p in _settles(e, kind)]).reshape(-1, 4)
        rows = np.flatnonzero(what == kind)
        if not len(settled) or not len(rows):
            continue
        # frames and charges lie far apart, so that only places of one kind are near each other
        apart = 1e6 * (same_px + 1.0)
        tree = cKDTree(settled * [apart, apart, 1.0, 1.0])
        asked = np.column_stack([apart * frame[rows], apart * charge[rows], place[rows]])
        distance, _ = tree.query(asked, distance_upper_bound=same_px * (1 + 1e-9) + 1e-9)
        done[rows] = np.isfinite(distance)
    return done


def _settles(edit: Edit, kind: str) -> list[tuple[float, float, float, float]]:
    """Return frame, charge and place of what an edit has settled of a kind.

    Charges tell singularities apart; links and events have 0.
    """
    frame = edit.frame
    if frame is None:
        return []
    if isinstance(edit, Confirm):
        charge = edit.charge if kind == "singularity" else 0
        return [(frame, charge, *edit.where)] if edit.what == kind else []
    if kind == "singularity" and isinstance(edit, Place):
        return [(frame, edit.charge, *edit.where)]
    if kind == "singularity" and isinstance(edit, FlipCharge):
        return [(frame, -edit.charge, *edit.where)]
    if kind == "singularity" and isinstance(edit, Move):
        return [(frame, edit.charge, *edit.to)]
    if kind == "link" and isinstance(edit, JoinTracks):
        return [(edit.later_frame, 0, *edit.where[1])]
    return []
