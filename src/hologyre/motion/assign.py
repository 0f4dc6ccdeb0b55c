"""Linking by positions alone: one cheapest assignment per frame."""

from __future__ import annotations

import itertools
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal, Self

import numba
import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from hologyre.grid import Window
from hologyre.motion.endings import Ledger
from hologyre.motion.matching import cheapest_matching, match_edges
from hologyre.motion.neighbours import near, near_pairs
from hologyre.motion.steps import StepLaw, crossing_price, link_price, pair_price
from hologyre.motion.tracks import Links, Motion, build, checked

_PAIRS_SAMPLED = 16


def link_singularities(
    table: pd.DataFrame,
    *,
    max_step_px: float | Literal["auto"] = "auto",
    max_gap: int = 2,
    frame_shape: tuple[int, int] | None = None,
    margin_px: float = 0.0,
    frames: ArrayLike | None = None,
) -> Motion:
    """Link singularities from frame to frame by their positions and charges.

    Parameters
    ----------
    table : DataFrame
        Singularities, columns `hologyre.tables.SINGULARITIES`; at least frame, y_px, x_px
        and charge. Not changed. Frame numbers may begin anywhere and have holes.
    max_step_px : float or "auto"
        Longest step between two frames, px; over a gap it grows with the frames spanned.
        "auto" takes it from the table: half the mean spacing of zeros of one charge, or twenty
        median steps if that is more, but no more than the spacing.
    max_gap : int
        Most frames a singularity may go undetected in before its track ends.
    frame_shape : (int, int), optional
        Rows and columns of the hologram, whose border zeros may cross. Without it the
        smallest rectangle around all positions is taken.
    margin_px : float
        Width of the rim along the border that was not searched.
    frames : (frame,) int array, optional
        All frames that were searched, those without singularities included. Frames left
        out count as gaps. Without it: the frames in the table.

    Returns
    -------
    Motion
        Every singularity has a track, if only of one row.

    Raises
    ------
    ValueError
        If the table lacks a column, or an option is out of its range.

    Notes
    -----
    Charge is a flux along time: a positive zero carries it forward, a negative one back. So
    what ends or begins it on one side - a positive zero of the old frame, a negative one of
    the new - is matched with what takes it up on the other, and the four kinds of match are
    the four things that can happen: a positive zero moves on, a negative zero moves on, a
    pair dies, a pair is born. One assignment over all of them, with the prices of `StepLaw`,
    is the most likely account of the frame; it is found exactly, by shortest augmenting
    paths. The charge of a track never changes. Zeros left over crossed the border, split,
    merged, or are reported as unexplained.

    Examples
    --------
    >>> import pandas as pd
    >>> table = pd.DataFrame(
    ...     {"frame": [0, 1], "y_px": [10.0, 10.5], "x_px": [20.0, 20.2], "charge": [1, 1]}
    ... )
    >>> link_singularities(table, max_step_px=3.0).trajectories["track"].tolist()
    [0, 0]
    """
    table = checked(table)
    if max_step_px != "auto" and not (np.isfinite(max_step_px) and max_step_px > 0):
        raise ValueError(f'max_step_px: expected "auto" or a positive number, got {max_step_px!r}')
    if max_gap < 0:
        raise ValueError(f"max_gap: expected 0 or more frames, got {max_gap!r}")
    if not margin_px >= 0:
        raise ValueError(f"margin_px: expected 0 or more pixels, got {margin_px!r}")
    searched = searched_frames(table, frames)
    border = border_of(table, frame_shape, margin_px)
    law, reach = step_law(table, border, max_step_px)
    return build(table, assign(table, law, reach, max_gap, border, searched))


def searched_frames(table: pd.DataFrame, frames: ArrayLike | None) -> NDArray[np.int64]:
    """Return the frames searched, sorted, each once."""
    present = np.unique(table["frame"].to_numpy())
    if frames is None:
        return present
    searched = np.unique(np.asarray(frames, dtype=np.int64))
    strange = np.setdiff1d(present, searched)
    if len(strange):
        raise ValueError(f"frames: the table has frame {strange[0]}, which is not among them")
    return searched


def border_of(table: pd.DataFrame, frame_shape: tuple[int, int] | None, margin_px: float) -> Window:
    """Return the rectangle that was searched."""
    if frame_shape is not None:
        ny, nx = frame_shape
        if ny < 1 or nx < 1:
            raise ValueError(f"frame_shape: expected two positive numbers, got {frame_shape!r}")
        return Window(margin_px, ny - 1.0 - margin_px, margin_px, nx - 1.0 - margin_px)
    if len(table) == 0:
        return Window(0.0, 0.0, 0.0, 0.0)
    y, x = table["y_px"], table["x_px"]
    return Window(float(y.min()), float(y.max()), float(x.min()), float(x.max()))


def step_law(
    table: pd.DataFrame,
    border: Window,
    max_step_px: float | Literal["auto"],
) -> tuple[StepLaw, float]:
    """Return the law of steps and the longest step, both from the table itself.

    The median step and the links it rests on are found together, by repeated assignment
    over a sample of neighbouring frames.
    """
    frame = table["frame"].to_numpy()
    n_frames = max(len(np.unique(frame)), 1)
    area = max((border.y_max - border.y_min) * (border.x_max - border.x_min), 1.0)
    density = max(len(table) / 2.0, 1.0) / n_frames / area
    spacing = 1.0 / np.sqrt(density)
    reach = spacing if max_step_px == "auto" else float(max_step_px)
    scale = 0.1 * min(spacing, reach)
    candidates = list(_candidates(table, reach))
    for _ in range(8):
        law = StepLaw(scale, density)
        steps = [c.steps(law) for c in candidates]
        step = np.concatenate(steps) if steps else np.empty(0)
        if len(step) < 8:
            break
        # zeros at rest keep a scale: positions are never known better than this
        new = max(float(np.median(step)), 1e-3)
        settled = abs(new - scale) < 0.05 * scale
        scale = new
        if settled:
            break
    if max_step_px == "auto":
        reach = min(spacing, max(20.0 * scale, spacing / 2.0))
    return StepLaw(scale, density), reach


@dataclass(frozen=True, eq=False)
class _Candidates:
    """Zeros of one charge in two frames, and which of them may follow which."""

    before: int
    after: int
    i: NDArray[np.int64]
    j: NDArray[np.int64]
    distance: NDArray[np.float64]
    frames: int

    def steps(self, law: StepLaw) -> NDArray[np.float64]:
        """Return the lengths of the cheapest links, per frame."""
        alone = -np.log(law.missed)
        partner = cheapest_matching(
            self.i,
            self.j,
            law.link(self.distance, self.frames),
            left_alone=np.full(self.before, alone),
            right_alone=np.full(self.after, alone),
        )
        linked = partner[self.i] == self.j
        return self.distance[linked] / self.frames


def _candidates(table: pd.DataFrame, reach: float) -> Iterator[_Candidates]:
    """Yield the candidates between neighbouring frames, evenly sampled."""
    frame = table["frame"].to_numpy()
    position = table[["y_px", "x_px"]].to_numpy()
    charge = table["charge"].to_numpy()
    groups = np.split(np.arange(len(frame)), np.flatnonzero(np.diff(frame)) + 1)
    pairs = list(itertools.pairwise(groups))
    for before, after in pairs[:: max(1, len(pairs) // _PAIRS_SAMPLED)]:
        for sign in (1, -1):
            a, b = before[charge[before] == sign], after[charge[after] == sign]
            span = int(frame[after[0]] - frame[before[0]])
            yield _Candidates(len(a), len(b), *near(position[a], position[b], reach), span)


@dataclass(frozen=True)
class Zeros:
    """The columns an assignment needs, one entry a row."""

    frame: NDArray[np.int64]
    position: NDArray[np.float64]
    charge: NDArray[np.int64]
    to_border: NDArray[np.float64]
    vanishing: NDArray[np.float64]

    @classmethod
    def of(cls, table: pd.DataFrame, law: StepLaw, border: Window) -> Self:
        """Take them from a `checked` table."""
        position = table[["y_px", "x_px"]].to_numpy()
        y, x = position.T
        return cls(
            frame=table["frame"].to_numpy(),
            position=position,
            charge=table["charge"].to_numpy(),
            to_border=np.minimum.reduce(
                [y - border.y_min, border.y_max - y, x - border.x_min, border.x_max - x]
            ),
            vanishing=law.vanishing(table["robustness_snr"].to_numpy()),
        )


def assign(
    table: pd.DataFrame,
    law: StepLaw,
    reach: float,
    max_gap: int,
    border: Window,
    searched: NDArray[np.int64],
) -> Links:
    """Link all rows of a `checked` table, frame by frame."""
    zeros = Zeros.of(table, law, border)
    ledger = Ledger(len(table))
    begin = np.searchsorted(zeros.frame, searched)
    end = np.searchsorted(zeros.frame, searched, side="right")
    tips = np.arange(begin[0], end[0]) if len(searched) else np.empty(0, dtype=np.int64)
    for k in range(1, len(searched)):
        last, now = int(searched[k - 1]), int(searched[k])
        rows = np.arange(begin[k], end[k])
        if now - last > max_gap + 1:
            # nothing is known of what happened in a hole this long: no ends, no starts
            tips = rows
            continue
        tips = tips[now - zeros.frame[tips] <= max_gap + 1]
        a, b = match(zeros, tips, rows, law, reach, last, now)
        ledger.record(a, b, zeros.frame[a] == now, zeros.frame[b] == now)
        ledger.close(tips[zeros.frame[tips] == last], rows, last, now)
        tips = np.concatenate([tips[ledger.following[tips] < 0], rows])
    how = np.full(len(table), "", dtype=object)
    later = np.flatnonzero(ledger.previous >= 0)
    step = zeros.frame[later] - zeros.frame[ledger.previous[later]]
    how[later] = np.where(step > 1, "bridged", "assigned")
    crossed = law.crossing(zeros.to_border, 1.0) < zeros.vanishing
    ledger.ends.crossed |= crossed
    ledger.starts.crossed |= crossed
    return Links(ledger.previous, how, ledger.happenings(table, reach))


def match(
    zeros: Zeros,
    tips: NDArray[np.int64],
    rows: NDArray[np.int64],
    law: StepLaw,
    reach: float,
    last: int,
    now: int,
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return the matched rows between the ends of tracks and the zeros of a new frame.

    `tips` are the ends, seen in the frame `last` or waiting since before it; `rows` are the
    zeros of the frame `now`.
    """
    a, b = _match(
        zeros.frame,
        zeros.position,
        zeros.charge,
        zeros.to_border,
        zeros.vanishing,
        np.ascontiguousarray(tips),
        np.ascontiguousarray(rows),
        (law.scale_px, law.density_per_px2),
        float(reach),
        (last, now),
    )
    return a, b


@numba.njit(cache=True, nogil=True)
def _chosen(rows, wanted):  # type: ignore[no-untyped-def]
    """Return the rows wanted; quicker than a mask for the few there are in a frame."""
    chosen = np.empty(len(rows), np.int64)
    n = 0
    for k in range(len(rows)):
        if wanted[k]:
            chosen[n] = rows[k]
            n += 1
    return chosen[:n]


@numba.njit(cache=True, nogil=True)
def _match(  # type: ignore[no-untyped-def]
    frame, position, charge, to_border, vanishing, tips, rows, law, reach, frames
):
    last, now = frames
    scale, density = law
    hole = now - last
    seen = frame[tips] == last
    up, rise = charge[tips] > 0, charge[rows] > 0
    # charge flows from those that give it to those that take it; first what may die or be born
    give_new, take_new = _chosen(rows, ~rise), _chosen(rows, rise)
    give_wait, take_wait = _chosen(tips, up & ~seen), _chosen(tips, ~up & ~seen)
    gives = np.concatenate((give_new, _chosen(tips, up & seen), give_wait))
    takes = np.concatenate((take_new, _chosen(tips, ~up & seen), take_wait))
    n_give, n_take = len(gives) - len(give_wait), len(takes) - len(take_wait)
    i, j, d = near_pairs(position[gives[:n_give]], position[takes[:n_take]], reach * hole)
    # the few zeros that wait may have gone farther, and link only
    if len(give_wait) > 0:
        far = reach * (now - frame[give_wait].min())
        p, q, e = near_pairs(position[give_wait], position[take_new], far)
        i, j, d = np.concatenate((i, p + n_give)), np.concatenate((j, q)), np.concatenate((d, e))
    if len(take_wait) > 0:
        far = reach * (now - frame[take_wait].min())
        p, q, e = near_pairs(position[give_new], position[take_wait], far)
        i, j, d = np.concatenate((i, p)), np.concatenate((j, q + n_take)), np.concatenate((d, e))
    price = np.full(len(i), np.inf)
    for k in range(len(i)):
        a, b = gives[i[k]], takes[j[k]]
        if frame[a] == frame[b]:
            if charge[a] == -charge[b]:
                price[k] = pair_price(d[k], float(hole), scale)
        elif charge[a] == charge[b]:
            span = abs(frame[a] - frame[b])
            if d[k] <= reach * span:
                old = a if frame[a] < now else b
                unseen = (span - hole) * vanishing[old]
                price[k] = link_price(d[k], float(span), scale, density) + unseen
    give_alone, take_alone = np.empty(len(gives)), np.empty(len(takes))
    for side, alone in ((gives, give_alone), (takes, take_alone)):
        for k in range(len(side)):
            row = side[k]
            # a zero that waits to be seen again has paid for its end already
            alone[k] = 0.0
            if frame[row] >= last:
                crossing = crossing_price(to_border[row], float(hole), scale)
                alone[k] = min(vanishing[row], crossing)
    partner = match_edges(i, j, price, give_alone, take_alone)
    matched = np.flatnonzero(partner >= 0)
    return gives[matched], takes[partner[matched]]
