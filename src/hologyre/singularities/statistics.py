"""Statistics of singularities in a window: how dense they are and who their neighbours are.

Every function takes one table for a frame or a stack and the window in which all
singularities were found; nothing is taken as periodic. The theory to hold the results
against is in `hologyre.singularities.theory`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike
from scipy.spatial import cKDTree
from scipy.stats import chi2

from hologyre.grid import Window
from hologyre.singularities.statistics_blocks import (
    BlockKind,
    Estimate,
    estimate,
    points_of,
    ratio,
    redraw,
    slices_of,
)

_FEW = 25
"""Counts below which redrawn blocks say little and independent singularities are assumed."""


def measure_density(
    table: pd.DataFrame,
    window: Window,
    *,
    frames: ArrayLike | None = None,
    blocks: BlockKind = "tiles",
    rng: np.random.Generator | int = 0,
) -> Estimate:
    """Measure the number of singularities per px^2.

    Parameters
    ----------
    table : DataFrame
        Singularities of one or more frames: frame, y_px, x_px, charge.
    window : Window
        Rectangle, hologram pixels, in which all were found; others are left out.
    frames : array of int, optional
        Frames looked at, with or without singularities; those in the table if left out.
    blocks : {"tiles", "frames"}
        What is taken as independent for the error: 25 tiles of the window, each through all
        frames, or the frames.
    rng : Generator or int
        Draws the blocks anew.

    Returns
    -------
    Estimate
        per px^2; compare `theory.zero_density`. From fewer than 25 singularities the interval
        is that of a Poisson count (Garwood, Biometrika 28, 437, 1936), wider than random waves
        need, whose counts vary less.

    Raises
    ------
    ValueError
        If a column is missing, there is no frame or the window has no area.
    """
    points = points_of(table, window, frames, blocks)
    area, count = points.blocks.area_px2, points.count
    if count < _FEW:
        low = chi2.ppf(0.025, 2 * count) / 2 if count else 0.0
        high = chi2.ppf(0.975, 2 * count + 2) / 2
        error = float(np.sqrt(max(count, 1)))
        return Estimate(count / area, error / area, float(low) / area, float(high) / area)
    counts = points.blocks.sums(points.block, np.ones(count))
    replicates = redraw(points.blocks.count, rng) @ counts / area
    return estimate(count / area, replicates)


@dataclass(frozen=True, eq=False)
class Neighbours:
    """What the nearest neighbours of singularities are.

    Parameters
    ----------
    opposite : Estimate
        Fraction of nearest neighbours of opposite charge.
    mean_distance_px : Estimate
        Mean distance of the nearest neighbour.
    distances : DataFrame
        One row for each singularity nearer to its neighbour than to the border: frame, y_px,
        x_px, distance_px, opposite, weight (sum 1). The weighted distribution of the distances
        is free of the border's influence.
    """

    opposite: Estimate
    mean_distance_px: Estimate
    distances: pd.DataFrame


def measure_neighbours(
    table: pd.DataFrame,
    window: Window,
    *,
    frames: ArrayLike | None = None,
    blocks: BlockKind = "tiles",
    rng: np.random.Generator | int = 0,
) -> Neighbours:
    """Measure the distance and charge of nearest neighbours.

    Parameters
    ----------
    table, window, frames, blocks, rng
        As for `measure_density`.

    Returns
    -------
    Neighbours
        With weights that undo the border (see Notes). Estimates are NaN when no
        singularity is nearer to its neighbour than to the border.

    Raises
    ------
    ValueError
        As `measure_density`.

    Notes
    -----
    A neighbour at distance r is certain only for singularities at least r from the border;
    each counts with the inverse of the area that lies so deep (Hanisch, Math. Operationsforsch.
    Statist. Ser. Statist. 15, 409, 1984). In a window only a few distances wide the tiles differ
    by their depth, and the errors come out too large. Published for random waves: "90 %
    anticorrelated" (Shvartsman and Freund, Phys. Rev. Lett. 72, 1008, 1994); there is no
    closed form.
    """
    points = points_of(table, window, frames, blocks)
    distance = np.full(points.count, np.inf)
    opposite = np.zeros(points.count, dtype=bool)
    for rows in slices_of(points):
        if rows.stop - rows.start < 2:
            continue
        places = np.column_stack([points.y_px[rows], points.x_px[rows]])
        found, other = cKDTree(places).query(places, k=2)
        # Of two singularities in the very same place either may come first.
        near = np.where(other[:, 0] == np.arange(places.shape[0]), other[:, 1], other[:, 0])
        distance[rows] = found[:, 1]
        charge = np.sign(points.charge[rows])
        opposite[rows] = charge * charge[near] < 0
    edge = points.blocks.window
    depth = np.minimum(
        np.minimum(points.y_px - edge.y_min, edge.y_max - points.y_px),
        np.minimum(points.x_px - edge.x_min, edge.x_max - points.x_px),
    )
    # At depth = distance = half the window the area is nil.
    deep = (points.blocks.height_px - 2 * distance) * (points.blocks.width_px - 2 * distance)
    kept = (distance <= depth) & (deep > 0)
    weight = 1 / deep[kept]
    block, sums = points.block[kept], points.blocks.sums
    total = sums(block, weight)
    frame = np.unique(table["frame"]) if frames is None else np.unique(np.asarray(frames))
    rows = pd.DataFrame(
        {
            "frame": frame[points.frame[kept]],
            "y_px": points.y_px[kept],
            "x_px": points.x_px[kept],
            "distance_px": distance[kept],
            "opposite": opposite[kept],
            "weight": weight / max(weight.sum(), np.finfo(float).tiny),
        }
    )
    return Neighbours(
        ratio(sums(block, weight * opposite[kept]), total, rng),
        ratio(sums(block, weight * distance[kept]), total, rng),
        rows,
    )
