"""What a run found, laid out for editing; it never changes."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from hologyre.grid import Window
from hologyre.motion.assign import border_of, searched_frames
from hologyre.motion.steps import StepLaw
from hologyre.motion.tracks import Motion, checked
from hologyre.tables import SINGULARITIES

_FEWEST_LINKS = 8


@dataclass(frozen=True, eq=False, repr=False)
class Found:
    """Singularities and motion as a run left them, and the scales that follow from them.

    Parameters
    ----------
    table : DataFrame
        Singularities sorted by frame and id, rows numbered from 0.
    events : DataFrame
    frame, y_px, x_px, charge, singularity : (row,) arrays
        Columns of the table.
    previous, following : (row,) int arrays
        Neighbouring rows in the same track, -1 at its ends.
    track : (row,) int array
        Track numbers, -1 where nothing is linked.
    link : (row,) str array
    searched : (frame,) int array
        All frames that were searched.
    border : Window
        The part of the frame that was searched.
    law : StepLaw
        How far singularities move in a frame.
    reach_px : float
        Longest step in a frame.
    spacing_px : float
        Mean distance of singularities of one charge.
    max_gap : int
        Most frames a singularity may go unseen in.
    um_per_px : float
        Object-space size of a pixel, NaN where it is unknown.
    times : (frame,) arrays
        Frames whose time is known, and their times in seconds.
    columns : dict of (row + 1,) arrays
        All columns of the table, with an empty entry after the last row.
    """

    table: pd.DataFrame
    events: pd.DataFrame
    frame: NDArray[np.int64]
    y_px: NDArray[np.float64]
    x_px: NDArray[np.float64]
    charge: NDArray[np.int64]
    singularity: NDArray[np.int64]
    previous: NDArray[np.int64]
    following: NDArray[np.int64]
    track: NDArray[np.int64]
    link: NDArray[np.object_]
    searched: NDArray[np.int64]
    border: Window
    law: StepLaw
    reach_px: float
    spacing_px: float
    max_gap: int
    um_per_px: float
    times: tuple[NDArray[np.float64], NDArray[np.float64]]
    columns: dict[str, NDArray[Any]]

    @property
    def price_alone(self) -> float:
        """What it costs to leave an end of a track unexplained."""
        return -math.log(self.law.missed)

    @property
    def linked(self) -> bool:
        """Whether there are tracks at all."""
        return bool(len(self.track)) and bool(self.track[0] >= 0)

    def rows_of(self, frame: int) -> slice:
        """Return the rows of a frame."""
        first, end = np.searchsorted(self.frame, [frame, frame + 1])
        return slice(int(first), int(end))

    def time_s(self, moment: NDArray[np.floating]) -> NDArray[np.float64]:
        """Return the time of fractional frames, NaN where it is not known."""
        frame, time = self.times
        if len(frame) == 0:
            return np.full(len(moment), np.nan)
        return np.interp(moment, frame, time, left=np.nan, right=np.nan)

    def gate_px(self, row: int) -> float:
        """Return how far a place may be from a row to be told for it.

        Six standard errors, but no less than a tenth and no more than half of the spacing.
        """
        sigma = 0.0
        if row < len(self.table):
            both = self.columns["sigma_y_px"][row], self.columns["sigma_x_px"][row]
            sigma = float(np.nan_to_num(np.hypot(*both)))
        return float(np.clip(6.0 * sigma, 0.1 * self.spacing_px, 0.5 * self.spacing_px))


def found_of(
    singularities: pd.DataFrame,
    motion: Motion,
    *,
    frames: ArrayLike | None = None,
    frame_shape: tuple[int, int] | None = None,
    region: tuple[int, int, int, int] | None = None,
    margin_px: float = 0.0,
    max_step_px: float | Literal["auto"] = "auto",
    max_gap: int = 2,
) -> Found:
    """Lay out what a run found; options as `link_singularities` takes them.

    Parameters
    ----------
    singularities : DataFrame
        Columns `hologyre.tables.SINGULARITIES`, as found, without any edits. Not changed.
    motion : Motion
        What linking them gave; empty tables if they are not linked.
    frames, frame_shape, margin_px, max_step_px, max_gap
        As they were linked with.
    region : (int, int, int, int), optional
        y_first, y_end, x_first, x_end, ends not included, if only this part was searched.

    Raises
    ------
    ValueError
        If a table lacks a column, a trajectory names a singularity that is not in the table, or
        singularities share an id.
    """
    if max_gap < 0:
        raise ValueError(f"max_gap: expected 0 or more frames, got {max_gap!r}")
    if max_step_px != "auto" and not (np.isfinite(max_step_px) and max_step_px > 0):
        raise ValueError(f'max_step_px: expected "auto" or a positive number, got {max_step_px!r}')
    table = checked(singularities)
    by_hand = table["origin"].isin(("placed", "moved"))
    if by_hand.any() or (motion.trajectories["link"] == "hand").any():
        raise ValueError(
            "singularities, motion: expected them as found, got tables with edits by hand in them"
        )
    if table["singularity"].duplicated().any():
        raise ValueError("singularities: the ids in column singularity must differ")
    count = len(table)
    previous, following, track = (np.full(count, -1, dtype=np.int64) for _ in range(3))
    link = np.full(count, "", dtype=object)
    chain = motion.trajectories.sort_values(["track", "frame"], kind="stable")
    if len(chain):
        row = pd.Index(table["singularity"]).get_indexer(chain["singularity"])
        if (row < 0).any() or len(np.unique(row)) != count:
            raise ValueError(
                "motion: expected every singularity in one track, got "
                f"{len(np.unique(row[row >= 0]))} of {count}"
            )
        number = chain["track"].to_numpy()
        track[row], link[row] = number, chain["link"].to_numpy(dtype=object)
        same = np.flatnonzero(number[1:] == number[:-1])
        previous[row[same + 1]], following[row[same]] = row[same], row[same + 1]
    border = border_of(table, frame_shape, margin_px)
    if region is not None:
        top, bottom, left, right = region
        m = margin_px
        border = Window(top + m, bottom - 1.0 - m, left + m, right - 1.0 - m)
    searched = searched_frames(table, frames)
    law, reach, spacing = _scales(table, previous, border, len(searched), max_step_px)
    return Found(
        table,
        motion.events.reset_index(drop=True),
        table["frame"].to_numpy(),
        table["y_px"].to_numpy(),
        table["x_px"].to_numpy(),
        table["charge"].to_numpy(),
        table["singularity"].to_numpy(),
        previous,
        following,
        track,
        link,
        searched,
        border,
        law,
        reach,
        spacing,
        max_gap,
        _um_per_px(table),
        _times(table),
        _columns(table),
    )


def _columns(table: pd.DataFrame) -> dict[str, NDArray[Any]]:
    blanks: dict[str, Any] = {"float64": np.nan, "int64": 0, "str": ""}
    return {
        c.name: np.append(
            table[c.name].to_numpy(dtype=object if c.dtype == "str" else c.dtype), blanks[c.dtype]
        )
        for c in SINGULARITIES
    }


def _times(table: pd.DataFrame) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    known = table[["frame", "time_s"]].dropna().drop_duplicates("frame")
    return known["frame"].to_numpy(dtype=np.float64), known["time_s"].to_numpy()


def _um_per_px(table: pd.DataFrame) -> float:
    """Return the object-space size of a pixel that the table's own columns imply."""
    px, um = table[["y_px", "x_px"]].to_numpy(), table[["y_um", "x_um"]].to_numpy()
    usable = np.isfinite(um) & (np.abs(px) > 1.0)
    return float(np.median(um[usable] / px[usable])) if usable.any() else float("nan")


def _scales(
    table: pd.DataFrame,
    previous: NDArray[np.int64],
    border: Window,
    n_frames: int,
    max_step_px: float | Literal["auto"],
) -> tuple[StepLaw, float, float]:
    """Return the law of steps, the longest step and the spacing, as linking takes them."""
    area = max((border.y_max - border.y_min) * (border.x_max - border.x_min), 1.0)
    density = max(len(table) / 2.0, 1.0) / max(n_frames, 1) / area
    spacing = float(1.0 / np.sqrt(density))
    reach = spacing if max_step_px == "auto" else float(max_step_px)
    scale = 0.1 * min(spacing, reach)
    later = np.flatnonzero(previous >= 0)
    if len(later) >= _FEWEST_LINKS:
        place, frame = table[["y_px", "x_px"]].to_numpy(), table["frame"].to_numpy()
        before = previous[later]
        step = np.linalg.norm(place[later] - place[before], axis=1) / (frame[later] - frame[before])
        # zeros at rest keep a scale: positions are never known better than this
        scale = max(float(np.median(step)), 1e-3)
        if max_step_px == "auto":
            reach = min(reach, max(30.0 * scale, 1.0))
    law = StepLaw(scale, density)
    # kernels are made ready here, so that the first edit need not wait for them
    one = np.ones(())
    for price in (law.link, law.pair, law.crossing):
        price(one, 1.0)
    return law, reach, spacing
