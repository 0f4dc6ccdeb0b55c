"""How far two people's annotations of one stack agree, and where they do not."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from hologyre.edits.corrected import Corrected
from hologyre.edits.kinds import Confirm, Delete, Edit, FlipCharge, Move, Place, Reject
from hologyre.motion.matching import cheapest_matching

_DIFFERENCES = {
    "what": "str",
    "frame": "int64",
    "y_px": "float64",
    "x_px": "float64",
    "first": "str",
    "second": "str",
}


@dataclass(frozen=True, eq=False)
class Agreement:
    """How two sets of corrected tables agree.

    Parameters
    ----------
    both, only_first, only_second : int
        Singularities in both tables, matched by frame, charge and place, or in one alone.
    dice : float
        Twice `both` over the sum of both counts.
    looked_at : int
        Singularities that either of the two worked on or confirmed, whether they kept it or not.
    kappa : float
        Cohen's kappa of "is one" against "is none" over those looked at (J. Cohen, Educ.
        Psychol. Meas. 20, 37, 1960); NaN where chance alone would agree fully.
    median_px, largest_px : float
        Distances of the matched singularities; NaN where there is none.
    links_both, links_only_first, links_only_second : int
        Steps of tracks between singularities that both have.
    differences : DataFrame
        what (singularity, charge or link), frame, y_px, x_px, and what the first and the
        second have there; sorted by frame.
    """

    both: int
    only_first: int
    only_second: int
    dice: float
    looked_at: int
    kappa: float
    median_px: float
    largest_px: float
    links_both: int
    links_only_first: int
    links_only_second: int
    differences: pd.DataFrame


def compare(
    first: Corrected,
    second: Corrected,
    *,
    first_edits: Sequence[Edit] = (),
    second_edits: Sequence[Edit] = (),
    within_px: float = 1.0,
) -> Agreement:
    """Compare two people's annotations of one stack.

    Parameters
    ----------
    first, second : Corrected
        What `replay` makes of their logs, on what the same run found or on different runs.
    first_edits, second_edits : sequence of Edit
        The edits that stand in their logs, for what was looked at.
    within_px : float
        Farthest two singularities may be apart to be taken for one.

    Returns
    -------
    Agreement

    Raises
    ------
    ValueError
        If `within_px` is not positive.
    """
    if not within_px > 0:
        raise ValueError(f"within_px: expected a positive number, got {within_px!r}")
    a, b = first.singularities, second.singularities
    i, j, distance = _matched(a, b, within_px)
    only_a = np.setdiff1d(np.arange(len(a)), i)
    only_b = np.setdiff1d(np.arange(len(b)), j)
    links = _links(first, second, i, j)
    places = _looked_at([*first_edits, *second_edits], within_px)
    votes = [_charge_at(table, places, within_px) for table in (a, b)]
    total = len(a) + len(b)
    return Agreement(
        both=len(i),
        only_first=len(only_a),
        only_second=len(only_b),
        dice=2 * len(i) / total if total else float("nan"),
        looked_at=len(places),
        kappa=_kappa(*votes),
        median_px=float(np.median(distance)) if len(distance) else float("nan"),
        largest_px=float(distance.max()) if len(distance) else float("nan"),
        links_both=links[0],
        links_only_first=len(links[1]),
        links_only_second=len(links[2]),
        differences=_differences(a.iloc[only_a], b.iloc[only_b], links[1], links[2], within_px),
    )


def _matched(
    a: pd.DataFrame, b: pd.DataFrame, within_px: float
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.float64]]:
    """Match rows of one frame and charge, as many as can be, at the least total distance."""
    i, j, distance = _near(_points(a, within_px), _points(b, within_px), within_px)
    # leaving one alone costs more than any way of matching it
    alone = 1e3 * within_px
    partner = cheapest_matching(
        i, j, distance, left_alone=np.full(len(a), alone), right_alone=np.full(len(b), alone)
    )
    left = np.flatnonzero(partner >= 0)
    right = partner[left]
    gap = _points(a, within_px)[left] - _points(b, within_px)[right]
    return left, right, np.linalg.norm(gap, axis=1)


def _near(
    a: NDArray[np.float64], b: NDArray[np.float64], reach: float
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.float64]]:
    """Return the pairs (i, j) of points no farther apart than `reach`, and their distances."""
    if len(a) == 0 or len(b) == 0:
        nothing = np.empty(0, dtype=np.int64)
        return nothing, nothing, np.empty(0)
    found = cKDTree(a).sparse_distance_matrix(cKDTree(b), reach, output_type="ndarray")
    return found["i"].astype(np.int64), found["j"].astype(np.int64), found["v"]


def _points(table: pd.DataFrame, within_px: float, *, charged: bool = True) -> NDArray[np.float64]:
    """Return places as points of which those of other frames and charges lie far apart."""
    apart = 1e3 * within_px
    far = [apart * table["frame"], apart * table["charge"] * charged]
    return np.column_stack([*far, table["y_px"], table["x_px"]]).astype(np.float64)


def _looked_at(edits: Sequence[Edit], within_px: float) -> pd.DataFrame:
    """Return the places of singularities that were worked on or confirmed, each once."""
    places: list[tuple[int, float, float]] = []
    for edit in edits:
        if isinstance(edit, Place | Move | Delete | Reject | FlipCharge):
            places.append((edit.frame or 0, *edit.where))
        if isinstance(edit, Move):
            places.append((edit.frame or 0, *edit.to))
        if isinstance(edit, Confirm) and edit.what == "singularity":
            places.append((edit.frame or 0, *edit.where))
    table = pd.DataFrame(sorted(set(places)), columns=["frame", "y_px", "x_px"]).assign(charge=0)
    points = _points(table, within_px)
    i, j, _ = _near(points, points, within_px)
    # of places within reach of each other the first stands for all
    again = np.zeros(len(table), dtype=np.bool_)
    for one, other in sorted(zip(i.tolist(), j.tolist(), strict=True)):
        if one < other and not again[one]:
            again[other] = True
    return table[~again]


def _charge_at(table: pd.DataFrame, places: pd.DataFrame, within_px: float) -> NDArray[np.int64]:
    """Return the charge a table has at places, 0 where it has no singularity."""
    charge = np.zeros(len(places), dtype=np.int64)
    if len(places) and len(table):
        tree = cKDTree(_points(table, within_px, charged=False))
        distance, index = tree.query(_points(places, within_px, charged=False))
        there = distance <= within_px
        charge[there] = table["charge"].to_numpy()[index[there]]
    return charge


def _kappa(first: NDArray[np.int64], second: NDArray[np.int64]) -> float:
    """Return Cohen's kappa of two votes on the same items."""
    if len(first) == 0:
        return float("nan")
    agreed = float(np.mean(first == second))
    by_chance = sum(
        float(np.mean(first == vote) * np.mean(second == vote))
        for vote in np.union1d(first, second)
    )
    return (agreed - by_chance) / (1 - by_chance) if by_chance < 1 else float("nan")


def _links(
    first: Corrected, second: Corrected, i: NDArray[np.int64], j: NDArray[np.int64]
) -> tuple[int, pd.DataFrame, pd.DataFrame]:
    """Compare the steps between singularities that both have; count and list them."""
    a, b = (_steps(one.trajectories) for one in (first, second))
    of_a = first.singularities["singularity"].to_numpy()[i]
    of_b = second.singularities["singularity"].to_numpy()[j]
    named = dict(zip(of_a.tolist(), of_b.tolist(), strict=True))
    a = a.assign(a=a["a"].map(named), b=a["b"].map(named)).dropna(subset=["a", "b"])
    b = b[b["a"].isin(of_b) & b["b"].isin(of_b)]
    in_a = pd.MultiIndex.from_frame(a[["a", "b"]].astype(np.int64))
    in_b = pd.MultiIndex.from_frame(b[["a", "b"]])
    shared = in_a.isin(in_b)
    return int(shared.sum()), a[~shared], b[~in_b.isin(in_a)]


def _steps(chain: pd.DataFrame) -> pd.DataFrame:
    """Return the ids on both ends of each step, and where it begins."""
    chain = chain.sort_values(["track", "frame"], kind="stable")
    after = chain.shift(-1)
    joined = chain["track"] == after["track"]
    return pd.DataFrame(
        {
            "a": chain["singularity"],
            "b": after["singularity"],
            "frame": chain["frame"],
            "y_px": chain["y_px"],
            "x_px": chain["x_px"],
            "later": after["frame"],
        }
    )[joined].astype({"b": np.int64, "later": np.int64})


def _differences(
    only_a: pd.DataFrame,
    only_b: pd.DataFrame,
    links_a: pd.DataFrame,
    links_b: pd.DataFrame,
    within_px: float,
) -> pd.DataFrame:
    """List singularities, charges and links that differ."""
    i, j, distance = _near(
        _points(only_a, within_px, charged=False),
        _points(only_b, within_px, charged=False),
        within_px,
    )
    partner: dict[int, int] = {}
    for _, one, other in sorted(zip(distance.tolist(), i.tolist(), j.tolist(), strict=True)):
        if one not in partner and other not in partner.values():
            partner[one] = other
    rows: list[tuple[str, int, float, float, str, str]] = []
    second = list(only_b[["frame", "y_px", "x_px", "charge"]].itertuples(index=False))
    for k, (frame, y, x, charge) in enumerate(
        only_a[["frame", "y_px", "x_px", "charge"]].itertuples(index=False)
    ):
        if k in partner:
            other = second[partner[k]]
            rows.append(("charge", frame, y, x, f"{charge:+d}", f"{other.charge:+d}"))
        else:
            rows.append(("singularity", frame, y, x, f"{charge:+d}", "none"))
    rows += [
        ("singularity", one.frame, one.y_px, one.x_px, "none", f"{one.charge:+d}")
        for k, one in enumerate(second)
        if k not in partner.values()
    ]
    for links, told in ((links_a, ("joined", "not joined")), (links_b, ("not joined", "joined"))):
        rows += [
            (
                "link", one.frame, one.y_px, one.x_px,
                f"{told[0]} to frame {one.later}", f"{told[1]} to frame {one.later}",
            )
            for one in links.itertuples()
        ]  # fmt: skip
    table = pd.DataFrame(rows, columns=list(_DIFFERENCES)).astype(_DIFFERENCES)
    return table.sort_values(["frame", "y_px", "x_px", "what"], kind="stable", ignore_index=True)
