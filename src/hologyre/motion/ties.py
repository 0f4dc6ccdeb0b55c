"""What the lines of zeros in a slab join: zeros of its two slices, or the border."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from hologyre.motion.slabs import Slab
from hologyre.motion.trace import FAR, LOST, NEAR, OUT, follow_all, polish_all

NOWHERE, BORDER, UNLISTED = -1, -2, -3
"""Mates that are no zero of the lists: lost, through the border, a zero that is not listed."""

_LONGEST_STEPS = (0.3, 0.06, 0.012)
# ends of traces and listed zeros come from one interpolant and agree far better than this
_SAME = 1e-2


@dataclass(frozen=True, eq=False)
class Nodes:
    """Zeros of one slice: places (n, 2) in samples and charges (n,)."""

    place: NDArray[np.float64]
    charge: NDArray[np.int64]

    def __len__(self) -> int:
        """Return how many they are."""
        return len(self.charge)


@dataclass(frozen=True, eq=False)
class Ties:
    """The mate of every zero of a slab; those of the near slice come first.

    Parameters
    ----------
    mate : (near + far,) int array
        Index of the zero at the other end of the line, or NOWHERE, BORDER, UNLISTED.
    moment : (near + far, 3) array
        Place and share of the slab (y, x, u) where the line turns back or leaves, NaN for
        lines from slice to slice; for UNLISTED where it arrives.
    """

    mate: NDArray[np.int64]
    moment: NDArray[np.float64]


def on_zeros(
    slab: Slab,
    u: float,
    position_px: NDArray[np.float64],
    charge: NDArray[np.int64],
    reach: float = 0.1,
) -> tuple[Nodes, NDArray[np.bool_]]:
    """Move listed singularities onto the zeros of the field at one end of a slab.

    Parameters
    ----------
    slab : Slab
    u : float
        0 for the near slice, 1 for the far one.
    position_px, charge : (n, 2), (n,) arrays
        The singularities.
    reach : float
        How far a zero may lie away, in lengths over which the field changes.

    Returns
    -------
    nodes : Nodes
        All of them, those that are on no zero at their old place.
    found : (n,) bool array
        Whether there is a zero of this charge near by, listed once.
    """
    start = slab.frame.to_samples(position_px)
    found, place, sign = polish_all(
        slab.samples, slab.series, start[:, 0], start[:, 1], u, reach * slab.unit[0]
    )
    found = found & (sign == charge)
    place = np.where(found[:, None], place, start)
    if len(place) > 1:
        # of two that are the same zero, the one farther away is on none
        pairs = cKDTree(place).query_pairs(1e-4, output_type="ndarray")
        away = np.linalg.norm(place - start, axis=1)
        farther = np.where(away[pairs[:, 0]] > away[pairs[:, 1]], pairs[:, 0], pairs[:, 1])
        found[farther] = False
    return Nodes(place, charge), found


def tie(slab: Slab, near: Nodes, far: Nodes) -> Ties:
    """Follow every line of zeros in a slab from one end to the other.

    Lines are followed from all zeros of the near slice and from those of the far slice that
    were not reached. Where two ends do not agree on each other, both are followed again with
    shorter steps; ends that never agree are NOWHERE.
    """
    total = len(near) + len(far)
    mate = np.full(total, NOWHERE, dtype=np.int64)
    moment = np.full((total, 3), np.nan)
    lists = _Lists(near, far)
    doubtful = np.arange(len(near))
    for longest in _LONGEST_STEPS:
        _follow(slab, lists, doubtful, longest, mate, moment)
        reached = np.zeros(total, dtype=np.bool_)
        reached[mate[mate >= 0]] = True
        fresh = np.flatnonzero(~reached & (mate == NOWHERE))
        fresh = fresh[fresh >= len(near)]
        _follow(slab, lists, fresh, longest, mate, moment)
        _adopt(mate, moment, len(near))
        doubtful = _disagreeing(mate)
        if len(doubtful) == 0:
            break
    mate[doubtful] = NOWHERE
    moment[doubtful] = np.nan
    return Ties(mate, moment)


class _Lists:
    """Both slices' zeros by one numbering, and which of them lies at a place."""

    def __init__(self, near: Nodes, far: Nodes) -> None:
        self.near = len(near)
        self.place = np.concatenate([near.place, far.place])
        self.charge = np.concatenate([near.charge, far.charge])
        self._trees = [cKDTree(n.place) if len(n) else None for n in (near, far)]

    def at(
        self, place: NDArray[np.float64], charge: NDArray[np.int64], far: bool
    ) -> NDArray[np.int64]:
        """Return the zeros of these charges at these places of one slice, or UNLISTED."""
        tree = self._trees[far]
        if tree is None or len(place) == 0:
            return np.full(len(place), UNLISTED, dtype=np.int64)
        _, index = tree.query(place, k=2, distance_upper_bound=_SAME)
        offset = self.near if far else 0
        answer = np.full(len(place), UNLISTED, dtype=np.int64)
        # nearest first wins: it is written last
        for column in (1, 0):
            there = index[:, column] < tree.n
            number = np.where(there, index[:, column] + offset, 0)
            right = there & (self.charge[number] == charge)
            answer[right] = number[right]
        return answer


def _follow(
    slab: Slab,
    lists: _Lists,
    which: NDArray[np.int64],
    longest: float,
    mate: NDArray[np.int64],
    moment: NDArray[np.float64],
) -> None:
    """Follow the lines from these zeros and enter where they end."""
    for far in (False, True):
        chosen = which[(which >= lists.near) == far]
        if len(chosen) == 0:
            continue
        code, end, turn = follow_all(
            slab.samples,
            slab.series,
            lists.place[chosen, 0],
            lists.place[chosen, 1],
            far,
            slab.unit,
            slab.frame.bounds,
            longest,
        )
        mate[chosen[code == LOST]] = NOWHERE
        mate[chosen[code == OUT]] = BORDER
        for ending, back in ((FAR, False), (NEAR, True)):
            there = code == ending
            own = lists.charge[chosen[there]]
            mate[chosen[there]] = lists.at(
                end[there, :2], -own if back else own, far if back else not far
            )
        moment[chosen] = np.where((code == NEAR)[:, None], turn, np.nan)
        open_end = (mate[chosen] == BORDER) | ((mate[chosen] == UNLISTED) & (code == FAR))
        moment[chosen[open_end]] = end[open_end]


def _adopt(mate: NDArray[np.int64], moment: NDArray[np.float64], near: int) -> None:
    """Let zeros of the far slice that were not followed answer to the one that reached them."""
    source = np.flatnonzero(mate[:near] >= near)
    target = mate[source]
    once = np.bincount(target, minlength=len(mate))[target] == 1
    open_ = mate[target] == NOWHERE
    mate[target[once & open_]] = source[once & open_]
    moment[target[once & open_]] = np.nan


def _disagreeing(mate: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the zeros whose mate has another mate, those mates, and the lost ones."""
    number = np.arange(len(mate))
    has = mate >= 0
    wrong = np.zeros(len(mate), dtype=np.bool_)
    wrong[has] = mate[mate[has]] != number[has]
    wrong[mate[wrong & has]] = True
    wrong |= mate == NOWHERE
    # whoever points at a doubtful one is doubtful too
    wrong[has] |= wrong[mate[has]]
    return np.flatnonzero(wrong)
