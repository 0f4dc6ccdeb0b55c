"""How tracks begin and end: pairs, crossings of the border, splits, merges, unexplained."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.motion.tracks import Happening


class Side:
    """Ends, or starts, of tracks; one entry a row.

    `before` and `after` are the frames around it (-1 where there is none), `partner` the row
    it happened together with (-1: none), `crossed` whether it was at the border, and
    `moment` its (y_px, x_px, frame) where these are known better than from the rows.
    """

    def __init__(self, rows: int) -> None:
        self.before = np.full(rows, -1, dtype=np.int64)
        self.after = np.full(rows, -1, dtype=np.int64)
        self.partner = np.full(rows, -1, dtype=np.int64)
        self.crossed = np.zeros(rows, dtype=np.bool_)
        self.moment = np.full((rows, 3), np.nan)

    def between(self, rows: NDArray[np.int64], last: int, now: int) -> None:
        """Note the frames around the ends (or starts) of these rows."""
        self.before[rows], self.after[rows] = last, now


class Ledger:
    """Who follows whom, and how the others began or ended; rows are those of the table."""

    def __init__(self, rows: int) -> None:
        self.previous = np.full(rows, -1, dtype=np.int64)
        self.following = np.full(rows, -1, dtype=np.int64)
        self.ends = Side(rows)
        self.starts = Side(rows)

    def record(
        self,
        a: NDArray[np.int64],
        b: NDArray[np.int64],
        a_new: NDArray[np.bool_],
        b_new: NDArray[np.bool_],
    ) -> None:
        """Enter matched rows a and b, told for each whether it is of the new frame."""
        link = a_new != b_new
        old, new = np.where(a_new, b, a)[link], np.where(a_new, a, b)[link]
        self.previous[new] = old
        self.following[old] = new
        for side, pair in ((self.ends, ~a_new & ~b_new), (self.starts, a_new & b_new)):
            side.partner[a[pair]] = b[pair]
            side.partner[b[pair]] = a[pair]

    def close(self, tips: NDArray[np.int64], rows: NDArray[np.int64], last: int, now: int) -> None:
        """Note which tips of the frame `last` ended and which rows of `now` began."""
        self.ends.between(tips[self.following[tips] < 0], last, now)
        self.starts.between(rows[self.previous[rows] < 0], last, now)

    def happenings(self, table: pd.DataFrame, reach: float) -> list[Happening]:
        """Return all events; parts of a split or a merger lie within `reach`, px."""
        position = table[["y_px", "x_px"]].to_numpy()
        charge = table["charge"].to_numpy()
        found: list[Happening] = []
        left: list[list[int]] = []
        for side, joined, kinds in (
            (self.ends, self.following, ("pair_death", "exit")),
            (self.starts, self.previous, ("pair_birth", "entry")),
        ):
            lonely = (side.after >= 0) & (joined < 0)
            rest = []
            for row in np.flatnonzero(lonely).tolist():
                partner = int(side.partner[row])
                if partner >= 0 and lonely[partner]:
                    if row < partner:
                        found.append(_happening(kinds[0], side, (row, partner), position))
                elif side.crossed[row]:
                    found.append(_happening(kinds[1], side, (row,), position))
                else:
                    rest.append(row)
            left.append(rest)
        ends, starts = left
        found += _parted("split", self.ends, ends, starts, self.starts, position, charge, reach)
        found += _parted("merge", self.starts, starts, ends, self.ends, position, charge, reach)
        told = {row for happening in found for row in happening.rows}
        for side, rest in ((self.ends, ends), (self.starts, starts)):
            found += [
                _happening("unexplained", side, (row,), position) for row in rest if row not in told
            ]
        return found


def _happening(
    kind: str, side: Side, rows: tuple[int, ...], position: NDArray[np.float64]
) -> Happening:
    y = sum(position[row, 0] for row in rows) / len(rows)
    x = sum(position[row, 1] for row in rows) / len(rows)
    before, after = int(side.before[rows[0]]), int(side.after[rows[0]])
    known_y, known_x, at_frame = side.moment[rows[0]]
    if not math.isnan(at_frame):
        y, x = known_y, known_x
    return Happening(kind, before, after, float(y), float(x), rows, float(at_frame))


def _parted(
    kind: str,
    whole_side: Side,
    wholes: list[int],
    parts: list[int],
    part_side: Side,
    position: NDArray[np.float64],
    charge: NDArray[np.int64],
    reach: float,
) -> list[Happening]:
    """Find zeros of several turns with nearby parts whose charges add up to theirs."""
    found = []
    free = set(parts)
    for whole in wholes:
        turns = int(abs(charge[whole]))
        if turns < 2:
            continue
        near = sorted(
            (float(np.linalg.norm(position[p] - position[whole])), p)
            for p in free
            if charge[p] * charge[whole] > 0 and part_side.after[p] == whole_side.after[whole]
        )
        taken = [p for d, p in near if d <= reach][:turns]
        if sum(int(abs(charge[p])) for p in taken) == turns and len(taken) > 1:
            free -= set(taken)
            found.append(_happening(kind, whole_side, (whole, *taken), position))
    return found
