"""Linking with the fields: zeros are followed along their lines through space and time."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal, Self, get_args

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.grid import Field
from hologyre.motion.assign import Zeros, match, step_law
from hologyre.motion.endings import Ledger
from hologyre.motion.noise import noise_told
from hologyre.motion.slabs import Slab, slabs
from hologyre.motion.ties import BORDER, NOWHERE, UNLISTED, Nodes, Ties, on_zeros, tie
from hologyre.motion.tracks import Links, Motion, build, checked

Method = Literal["auto", "threads", "assignment"]

# a slab in which so many lines have no second end does not conserve charge
_MOST_LOST = 0.1
# up to this error of the field between frames threads were right more often than assignment
_MOST_MISSED = 0.6
# how far noise may move a zero, in lengths over which the field changes
_NEAR = 0.5


def follow_threads(
    fields: Iterable[Field],
    table: pd.DataFrame,
    *,
    frames: Iterable[int] | None = None,
    method: Method = "auto",
    max_step_px: float | Literal["auto"] = "auto",
    max_gap: int = 2,
    margin_px: float = 0.0,
) -> Motion:
    """Link singularities by following the zeros of the field from frame to frame.

    Parameters
    ----------
    fields : iterable of Field
        The field of every frame that was searched, 2-D, on one grid; taken one after another,
        no more than ten are held.
    table : DataFrame
        Singularities of these fields, columns `hologyre.tables.SINGULARITIES`. Not changed.
    frames : iterable of int, optional
        The fields' frame numbers, increasing; 0, 1, 2, ... without it.
    method : {"auto", "threads", "assignment"}
        "threads": follow lines of zeros; assignment only for zeros whose line was lost or
        that lie on no zero of the field (placed by hand). "assignment": positions alone, as
        `link_singularities`. "auto": threads between frames where the fields determine what
        lies between them, assignment elsewhere.
    max_step_px, max_gap
        As for `link_singularities`, for what is assigned; `max_gap` also bounds how long a
        line is followed through zeros that the table does not list.
    margin_px : float
        Width of the rim along the border that was not searched.

    Returns
    -------
    Motion
        Every singularity has a track, if only of one row. `link` tells how each row was
        joined to the one before: thread, assigned or bridged. Births, deaths and crossings
        found on threads have their time between the frames.

    Raises
    ------
    ValueError
        If the table lacks a column, an option is out of its range, the fields differ in
        size, there are more of them than `frames`, or the table has a frame without a field.

    Notes
    -----
    In (y, x, t) a zero is a line, oriented along grad Re E x grad Im E; its charge is the sign
    of the line's component along time, so that a line which turns back in time is a pair that
    dies or is born (M. V. Berry and M. R. Dennis, Proc. R. Soc. Lond. A 456, 2059, 2000). The
    field between frames is the best linear prediction from ten of them, after the common phase
    of each is taken out. Where the table tells the noise (by its standard errors), the field in
    the frames is predicted from its neighbours too, and singularities are taken to be the zeros
    of that, half a length of the field away at most: so noise that wipes out a pair in one
    frame, or makes one, does not break the thread. There is no search radius, and charge is
    conserved by construction: every line has two ends.
    """
    if method not in get_args(Method):
        raise ValueError(f"method: expected one of {', '.join(get_args(Method))}, got {method!r}")
    if max_gap < 0:
        raise ValueError(f"max_gap: expected 0 or more frames, got {max_gap!r}")
    if not margin_px >= 0:
        raise ValueError(f"margin_px: expected 0 or more pixels, got {margin_px!r}")
    table = checked(table)
    weaver: _Weaver | None = None
    searched: set[int] = set()
    for slab in slabs(fields, frames, noise=noise_told(table), margin_px=margin_px):
        if weaver is None:
            weaver = _Weaver(table, slab, method, max_step_px, max_gap)
        weaver.weave(slab)
        searched |= {int(slab.before), int(slab.after)}
    if weaver is None:
        how = np.full(len(table), "", dtype=object)
        return build(table, Links(np.full(len(table), -1, dtype=np.int64), how))
    strange = sorted(set(table["frame"]) - searched)
    if strange:
        raise ValueError(f"frames: the table has frame {strange[0]}, of which there is no field")
    return build(table, weaver.links())


@dataclass(frozen=True, eq=False)
class _Front:
    """Zeros of one frame, and the rows of the table they carry on.

    A row's own zero has age 0. A zero that is not listed carries on the row its line came
    from, its age being the number of frames since.
    """

    nodes: Nodes
    row: NDArray[np.int64]
    age: NDArray[np.int64]

    @classmethod
    def empty(cls) -> Self:
        """Return a front without zeros."""
        nothing = np.empty(0, dtype=np.int64)
        return cls(Nodes(np.empty((0, 2)), nothing), nothing, nothing)

    def only(self, chosen: NDArray[np.bool_]) -> _Front:
        """Return the chosen zeros."""
        nodes = Nodes(self.nodes.place[chosen], self.nodes.charge[chosen])
        return _Front(nodes, self.row[chosen], self.age[chosen])

    def and_those(self, other: _Front) -> _Front:
        """Return both fronts' zeros."""
        nodes = Nodes(
            np.concatenate([self.nodes.place, other.nodes.place]),
            np.concatenate([self.nodes.charge, other.nodes.charge]),
        )
        return _Front(
            nodes, np.concatenate([self.row, other.row]), np.concatenate([self.age, other.age])
        )


class _Weaver:
    """The state of linking between one slab and the next."""

    def __init__(
        self,
        table: pd.DataFrame,
        slab: Slab,
        method: Method,
        max_step_px: float | Literal["auto"],
        max_gap: int,
    ) -> None:
        window = slab.frame.window
        self._table = table
        self._method = method
        self._max_gap = max_gap
        self._law, self._reach = step_law(table, window, max_step_px)
        self._zeros = Zeros.of(table, self._law, window)
        self._ledger = Ledger(len(table))
        self._by_thread = np.zeros(len(table), dtype=np.bool_)
        self._front, self._astray = self._listed(slab, 0.0)
        self._waiting = np.empty(0, dtype=np.int64)

    def weave(self, slab: Slab) -> None:
        """Link the frames on both sides of a slab."""
        last, now = int(slab.before), int(slab.after)
        near, tips = self._front, self._astray
        far, astray = self._listed(slab, 1.0)
        rows = astray
        if now - last > self._max_gap + 1:
            # nothing is known of what happened in a hole this long: no ends, no starts
            self._front, self._astray, self._waiting = far, astray, np.empty(0, dtype=np.int64)
            return
        ties = self._ties(slab, near, far)
        if ties is None:
            tips = np.concatenate([tips, near.row])
            rows = np.concatenate([rows, far.row])
            unlisted = _Front.empty()
        else:
            unlisted = self._tied(slab, near, far, ties)
            ended, begun = ties.mate[: len(near.row)], ties.mate[len(near.row) :]
            # where a line goes on unlisted, a singularity moved by hand may stand for it
            open_end = (ended == NOWHERE) | ((ended == UNLISTED) & (near.age == 0))
            tips = np.concatenate([tips, near.row[open_end]])
            rows = np.concatenate([rows, far.row[(begun == NOWHERE) | (begun == UNLISTED)]])
        self._assign(tips, rows, last, now)
        unlisted = unlisted.only(self._ledger.following[unlisted.row] < 0)
        self._waiting = np.setdiff1d(self._waiting, unlisted.row)
        self._front, self._astray = far.and_those(unlisted), astray

    def links(self) -> Links:
        """Return the links made and the events."""
        ledger, frame = self._ledger, self._zeros.frame
        how = np.full(len(self._table), "", dtype=object)
        later = np.flatnonzero(ledger.previous >= 0)
        gap = frame[later] - frame[ledger.previous[later]] > 1
        how[later] = np.where(
            gap, "bridged", np.where(self._by_thread[later], "thread", "assigned")
        )
        return Links(ledger.previous, how, ledger.happenings(self._table, self._reach))

    def _listed(self, slab: Slab, u: float) -> tuple[_Front, NDArray[np.int64]]:
        """Return the zeros of a frame that the table lists, and the rows that are on none."""
        frame = int(slab.after if u else slab.before)
        rows = np.arange(*np.searchsorted(self._zeros.frame, [frame, frame + 1]))
        nodes, found = on_zeros(
            slab, u, self._zeros.position[rows], self._zeros.charge[rows], _NEAR
        )
        front = _Front(nodes, rows, np.zeros(len(rows), dtype=np.int64))
        return front.only(found), rows[~found]

    def _ties(self, slab: Slab, near: _Front, far: _Front) -> Ties | None:
        """Follow the lines of a slab; None where assignment is to be trusted more."""
        if self._method == "assignment":
            return None
        if self._method == "auto" and slab.miss > _MOST_MISSED:
            return None
        ties = tie(slab, near.nodes, far.nodes)
        lost = np.count_nonzero(ties.mate == NOWHERE)
        if self._method == "auto" and lost > _MOST_LOST * len(ties.mate):
            return None
        return ties

    def _tied(self, slab: Slab, near: _Front, far: _Front, ties: Ties) -> _Front:
        """Enter what the lines say; return the zeros they reached that are not listed."""
        ledger, n = self._ledger, len(near.row)
        last, now = int(slab.before), int(slab.after)
        place = slab.frame.to_px(ties.moment[:, :2])
        moment = np.column_stack([place, last + (now - last) * ties.moment[:, 2]])
        row = np.concatenate([near.row, far.row])
        mate = ties.mate

        linked = np.flatnonzero(mate[:n] >= n)
        a, b = row[linked], row[mate[linked]]
        ledger.record(a, b, np.zeros(len(a), np.bool_), np.ones(len(b), np.bool_))
        self._by_thread[b] = True
        for side, part in ((ledger.ends, slice(None, n)), (ledger.starts, slice(n, None))):
            own = np.arange(len(mate))[part]
            paired = own[(mate[own] >= 0) & ((mate[own] < n) == (own < n))]
            side.partner[row[paired]] = row[mate[paired]]
            crossed = own[mate[own] == BORDER]
            side.crossed[row[crossed]] = True
            known = np.concatenate([paired, crossed])
            side.between(row[known], last, now)
            side.moment[row[known]] = moment[known]

        hidden = np.flatnonzero(mate[:n] == UNLISTED)
        age = near.age[hidden] + now - last
        ledger.ends.between(near.row[hidden[near.age[hidden] == 0]], last, now)
        nodes = Nodes(ties.moment[hidden, :2], near.nodes.charge[hidden])
        return _Front(nodes, near.row[hidden], age).only(age <= self._max_gap)

    def _assign(
        self, tips: NDArray[np.int64], rows: NDArray[np.int64], last: int, now: int
    ) -> None:
        """Assign what no line has joined, together with what waits to be seen again."""
        zeros, ledger = self._zeros, self._ledger
        tips = np.unique(np.concatenate([self._waiting, tips]))
        tips = tips[(now - zeros.frame[tips] <= self._max_gap + 1) & (ledger.following[tips] < 0)]
        a, b = match(zeros, tips, rows, self._law, self._reach, last, now)
        ledger.record(a, b, zeros.frame[a] == now, zeros.frame[b] == now)
        seen = tips[zeros.frame[tips] == last]
        ledger.close(seen, rows, last, now)
        for side, lonely in ((ledger.ends, seen), (ledger.starts, rows)):
            price = self._law.crossing(zeros.to_border[lonely], float(now - last))
            side.crossed[lonely] = price < zeros.vanishing[lonely]
        self._waiting = tips[ledger.following[tips] < 0]
