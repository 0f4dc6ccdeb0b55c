"""Error bars by blocks: the sample is cut in parts, and the parts are drawn again."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import Literal, get_args

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from hologyre.grid import Window

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

BlockKind = Literal["tiles", "frames"]
"""What is taken as independent: 25 tiles of the window, each through all frames, which is right
for frames alike and for frames unlike; or the frames, which must then be independent."""

_TILES = 5
_REPLICATES = 500


@dataclass(frozen=True)
class Estimate:
    """A measured number and how far to trust it.

    Parameters
    ----------
    value : float
        The number; NaN where the sample holds nothing to tell it from.
    standard_error : float
        Its standard error.
    low, high : float
        Ends of the interval of 95 % confidence.
    """

    value: float
    standard_error: float
    low: float
    high: float


@dataclass(frozen=True)
class Blocks:
    """How a sample of frames of one window is cut into parts taken as independent.

    Parameters
    ----------
    kind : {"tiles", "frames"}
        See `BlockKind`.
    window : Window
        What the frames show, hologram pixels.
    n_frames : int
        Number of frames.
    """

    kind: BlockKind
    window: Window
    n_frames: int

    def __post_init__(self) -> None:
        if self.kind not in get_args(BlockKind):
            expected = ", ".join(get_args(BlockKind))
            raise ValueError(f"blocks: expected one of {expected}, got {self.kind!r}")
        if not (
            self.window.y_max > self.window.y_min
            and self.window.x_max > self.window.x_min
            and np.isfinite(self.window).all()
        ):
            raise ValueError(f"window: expected a finite area, got {self.window}")
        if self.kind == "frames" and self.n_frames < 2:
            msg = f"blocks: 'frames' needs at least 2 frames, got {self.n_frames}; take 'tiles'"
            raise ValueError(msg)

    @property
    def count(self) -> int:
        """Number of blocks."""
        return self.n_frames if self.kind == "frames" else _TILES**2

    @property
    def height_px(self) -> float:
        """Height of the window."""
        return self.window.y_max - self.window.y_min

    @property
    def width_px(self) -> float:
        """Width of the window."""
        return self.window.x_max - self.window.x_min

    @property
    def area_px2(self) -> float:
        """Area of the window times the number of frames."""
        return self.height_px * self.width_px * self.n_frames

    def index(self, frame: IntArray, y_px: FloatArray, x_px: FloatArray) -> IntArray:
        """Return the block of each point, `frame` counting from 0."""
        if self.kind == "frames":
            return np.broadcast_to(frame, np.broadcast_shapes(y_px.shape, x_px.shape))
        row = (y_px - self.window.y_min) / self.height_px * _TILES
        column = (x_px - self.window.x_min) / self.width_px * _TILES
        place = [np.clip(v.astype(np.int64), 0, _TILES - 1) for v in (row, column)]
        return place[0] * _TILES + place[1]

    def sums(self, block: IntArray, weights: FloatArray) -> FloatArray:
        """Return the sum of the points' weights in each block."""
        total = np.bincount(block, weights=weights, minlength=self.count)
        return np.asarray(total, dtype=np.float64)


@dataclass(frozen=True, eq=False)
class Points:
    """Singularities of some frames within a window, with the block of each."""

    blocks: Blocks
    frame: IntArray  # counting from 0
    y_px: FloatArray
    x_px: FloatArray
    charge: IntArray
    block: IntArray

    @property
    def count(self) -> int:
        """Number of singularities."""
        return self.charge.size


def points_of(
    table: pd.DataFrame, window: Window, frames: ArrayLike | None, kind: BlockKind
) -> Points:
    """Return the table's singularities that lie in the window.

    Parameters
    ----------
    table : DataFrame
        With the columns frame, y_px, x_px and charge.
    window : Window
        Rectangle in hologram pixels in which every singularity has been found.
    frames : array of int, optional
        Frames looked at, with or without singularities; those in the table if left out.
    kind : {"tiles", "frames"}
        What is taken as independent.

    Raises
    ------
    ValueError
        If a column is missing, there is no frame, the window has no area or `kind` is unknown.
    """
    missing = [c for c in ("frame", "y_px", "x_px", "charge") if c not in table]
    if missing:
        raise ValueError(f"table: column {', '.join(missing)} is missing")
    seen = np.unique(table["frame"] if frames is None else np.asarray(frames, dtype=np.int64))
    if seen.size == 0:
        raise ValueError("frames: expected at least one frame; give them if the table is empty")
    blocks = Blocks(kind, Window(*window), int(seen.size))
    y, x = table["y_px"].to_numpy(np.float64), table["x_px"].to_numpy(np.float64)
    kept = blocks.window.contains(y, x) & np.isin(table["frame"], seen)
    frame = np.searchsorted(seen, table["frame"].to_numpy(np.int64)[kept])
    # In order of frames, so that each is a slice.
    order = np.argsort(frame, kind="stable")
    frame, y, x = frame[order], y[kept][order], x[kept][order]
    charge = table["charge"].to_numpy(np.int64)[kept][order]
    return Points(blocks, frame, y, x, charge, blocks.index(frame, y, x))


def slices_of(points: Points) -> list[slice]:
    """Return the rows of each frame."""
    ends = np.searchsorted(points.frame, np.arange(points.blocks.n_frames + 1))
    return [slice(int(a), int(b)) for a, b in pairwise(ends)]


def redraw(count: int, rng: np.random.Generator | int) -> FloatArray:
    """Return how often each of `count` blocks is drawn in each replicate, (replicates, count)."""
    generator = np.random.default_rng(rng)
    drawn = generator.multinomial(count, np.full(count, 1 / count), size=_REPLICATES)
    return drawn.astype(np.float64)


def estimate(value: float, replicates: FloatArray) -> Estimate:
    """Return a value with the spread of its replicates."""
    known = replicates[np.isfinite(replicates)]
    if not np.isfinite(value) or known.size < 2:
        return Estimate(value, np.nan, np.nan, np.nan)
    low, high = np.quantile(known, (0.025, 0.975))
    return Estimate(float(value), float(known.std(ddof=1)), float(low), float(high))


def ratio(above: FloatArray, below: FloatArray, rng: np.random.Generator | int) -> Estimate:
    """Return the ratio of two sums over blocks, with its error."""
    times = redraw(above.size, rng)
    with np.errstate(divide="ignore", invalid="ignore"):
        value = above.sum() / below.sum()
        replicates = (times @ above) / (times @ below)
    return estimate(float(value), replicates)


def ratios(
    above: FloatArray, below: FloatArray, rng: np.random.Generator | int
) -> tuple[FloatArray, FloatArray]:
    """Return ratios of sums over blocks, (blocks, n) to (blocks, n) or (blocks, 1), and errors."""
    times = redraw(above.shape[0], rng)
    with np.errstate(divide="ignore", invalid="ignore"):
        value: FloatArray = above.sum(axis=0) / below.sum(axis=0)
        replicates = (times @ above) / (times @ below)
    return value, spread(replicates)


def spread(replicates: FloatArray) -> FloatArray:
    """Return the standard deviation of each column of replicates, NaN where one is unknown."""
    error: FloatArray = replicates.std(axis=0, ddof=1)
    return error
