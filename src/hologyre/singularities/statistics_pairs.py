"""Statistics of pairs of singularities: correlations by distance, and how charge is screened."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike
from scipy.spatial import cKDTree

from hologyre.grid import Window
from hologyre.singularities.statistics_blocks import (
    BlockKind,
    Points,
    points_of,
    ratios,
    redraw,
    slices_of,
    spread,
)
from hologyre.singularities.theory import bin_edges
from hologyre.singularities.theory_spectrum import FloatArray, nonnegative


def measure_pairs(
    table: pd.DataFrame,
    window: Window,
    edges_px: ArrayLike,
    *,
    frames: ArrayLike | None = None,
    blocks: BlockKind = "tiles",
    rng: np.random.Generator | int = 0,
) -> pd.DataFrame:
    """Measure pair and charge correlation by distance.

    Parameters
    ----------
    table : DataFrame
        Singularities of one or more frames: frame, y_px, x_px, charge.
    window : Window
        Rectangle, hologram pixels, in which all were found; others are left out.
    edges_px : (n + 1,) array
        Edges of the distance bins, px, increasing, below the window's shorter side.
    frames : array of int, optional
        Frames looked at, with or without singularities; those in the table if left out.
    blocks : {"tiles", "frames"}
        What is taken as independent for the error.
    rng : Generator or int
        Draws the blocks anew.

    Returns
    -------
    DataFrame, n rows
        ``r_low_px``, ``r_high_px``, ``pairs`` (number of pairs), ``g``, ``g_charge`` (weighed
        by the product of charges), ``g_like`` and ``g_opposite`` (of the same or the other
        sign, 1 far away), each with ``_error``. Compare `theory.pair_line`.

    Raises
    ------
    ValueError
        If the edges do not increase or reach the window's side, or as `measure_density`.

    Notes
    -----
    A pair counts with the inverse of the area in which its first end could lie with both in the
    window (translation correction; Ohser and Stoyan, Biometrical J. 23, 523, 1981). Errors: each
    singularity's own pairs are drawn again with it (Loh, Astrophys. J. 681, 726, 2008), but
    they are never less than those of as many independent pairs, nor of one. In simulated frames
    of random waves they are right within a third up to the first peak, and up to three times
    too large beyond it, where the waves are more orderly than what is drawn.
    """
    edges = bin_edges(edges_px)
    points = points_of(table, window, frames, blocks)
    part = points.blocks
    side = min(part.height_px, part.width_px)
    if edges[-1] >= side:
        raise ValueError(f"edges_px: expected less than the window's side {side}, got {edges[-1]}")
    bins = edges.size - 1
    size = part.count * bins
    sums = np.zeros((5, size))
    for rows in slices_of(points):
        if rows.stop - rows.start < 2:
            continue
        cell, weight, product = _pairs(points, rows, edges)
        signs = np.sign(product)
        each_sum = (weight, weight * product, weight * signs, np.ones_like(weight), signs)
        for k, each in enumerate(each_sum):
            sums[k] += np.bincount(cell, weights=each, minlength=size)
    total, charged, signed, number, balance = sums.reshape(5, part.count, bins)
    kinds = {
        "g": total,
        "g_charge": charged,
        # Each sign makes half of the density, so that half of all distant pairs are alike.
        "g_like": total + signed,
        "g_opposite": total - signed,
    }
    counts = part.sums(points.block, np.ones(points.count))
    times = redraw(part.count, rng)
    # Where singularities are denser each has more neighbours: redrawn are the neighbours a
    # singularity has, against the density of them all. N (N - 1) tells its square best.
    drawn = np.concatenate([[counts.sum()], times @ counts])[:, np.newaxis]
    ring = np.pi * np.diff(edges**2) * (counts.sum() - 1)
    with np.errstate(divide="ignore", invalid="ignore"):
        scale = part.area_px2**2 / part.n_frames / drawn / ring
    pairs, alike = number.sum(axis=0) / 2, (number + balance).sum(axis=0) / 4
    # What one pair makes; like or opposite ones weigh double.
    one = 2 / (part.height_px * part.width_px) * scale[0]
    least = {
        "g": one * np.sqrt(np.maximum(pairs, 1)),
        "g_charge": one * np.sqrt(np.maximum(pairs, 1)),
        "g_like": 2 * one * np.sqrt(np.maximum(alike, 1)),
        "g_opposite": 2 * one * np.sqrt(np.maximum(pairs - alike, 1)),
    }
    columns: dict[str, FloatArray] = {
        "r_low_px": edges[:-1],
        "r_high_px": edges[1:],
        "pairs": pairs.astype(np.int64),
    }
    for name, values in kinds.items():
        columns[name] = values.sum(axis=0) * scale[0]
        columns[f"{name}_error"] = np.maximum(spread((times @ values) * scale[1:]), least[name])
    return pd.DataFrame(columns)


def measure_charge_variance(
    table: pd.DataFrame,
    window: Window,
    radii_px: ArrayLike,
    *,
    frames: ArrayLike | None = None,
    blocks: BlockKind = "tiles",
    rng: np.random.Generator | int = 0,
) -> pd.DataFrame:
    """Measure the variance of the net charge in discs laid within the window.

    Parameters
    ----------
    table, window, frames, blocks, rng
        As for `measure_pairs`.
    radii_px : (n,) array
        Radii of the discs, px, above 0; at most a tenth of the window's shorter side, beyond
        which the error of one frame would be told too small, by half and more.

    Returns
    -------
    DataFrame, n rows
        ``radius_px``, ``discs`` (number laid, a radius apart), ``mean_count`` (singularities in
        a disc, which is the variance charges placed at random would have), ``variance`` (mean
        square of the net charge) and its ``variance_error``. Compare `theory.charge_variance`.

    Raises
    ------
    ValueError
        If a radius is out of range, or as `measure_density`.
    """
    radii = np.atleast_1d(nonnegative(radii_px, "radii_px"))
    points = points_of(table, window, frames, blocks)
    side = min(points.blocks.height_px, points.blocks.width_px)
    if radii.ndim != 1 or not ((radii > 0) & (radii <= side / 10)).all():
        msg = f"radii_px: expected radii above 0, at most a tenth of the window's side {side}"
        raise ValueError(msg)
    rows = [_discs(points, float(radius), rng) for radius in radii]
    columns = ["radius_px", "discs", "mean_count", "variance", "variance_error"]
    return pd.DataFrame(rows, columns=columns)


def _pairs(
    points: Points, rows: slice, edges: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return block and bin, weight and product of charges of a frame's pairs, both ways round."""
    y, x = points.y_px[rows], points.x_px[rows]
    charge, block = points.charge[rows], points.block[rows]
    # A pair exactly at the last edge would fall beyond it.
    first, second = cKDTree(np.column_stack([y, x])).query_pairs(edges[-1], output_type="ndarray").T
    dy, dx = np.abs(y[first] - y[second]), np.abs(x[first] - x[second])
    place = np.searchsorted(edges, np.hypot(dy, dx), side="right") - 1
    kept = (place >= 0) & (place < edges.size - 1)
    first, second, place = first[kept], second[kept], place[kept]
    shared = (points.blocks.height_px - dy[kept]) * (points.blocks.width_px - dx[kept])
    product = (charge[first] * charge[second]).astype(np.float64)
    cell = np.concatenate([block[first], block[second]]) * (edges.size - 1) + np.tile(place, 2)
    return cell, np.tile(1 / shared, 2), np.tile(product, 2)


def _discs(
    points: Points, radius: float, rng: np.random.Generator | int
) -> tuple[float, int, float, float, float]:
    """Lay discs a radius apart, symmetric in the window; return a row of the table."""
    part, edge = points.blocks, points.blocks.window
    axes = []
    for low, high in ((edge.y_min, edge.y_max), (edge.x_min, edge.x_max)):
        count = int((high - low) / radius - 2) + 1
        axes.append((low + high) / 2 + radius * (np.arange(count) - (count - 1) / 2))
    centre_y, centre_x = (v.ravel() for v in np.meshgrid(*axes, indexing="ij"))
    centres = cKDTree(np.column_stack([centre_y, centre_x]))
    sums = np.zeros((part.count, 3))
    for frame, rows in enumerate(slices_of(points)):
        net, held = np.zeros(centre_y.size), np.zeros(centre_y.size)
        if rows.stop > rows.start:
            places = cKDTree(np.column_stack([points.y_px[rows], points.x_px[rows]]))
            pairs = centres.sparse_distance_matrix(places, radius, output_type="coo_matrix")
            net = np.bincount(pairs.row, points.charge[rows][pairs.col], centre_y.size)
            held = np.bincount(pairs.row, minlength=centre_y.size).astype(np.float64)
        block = part.index(np.full(centre_y.size, frame), centre_y, centre_x)
        for k, each in enumerate((np.ones_like(held), held, net**2)):
            sums[:, k] += part.sums(block, each)
    value, error = ratios(sums[:, 1:], sums[:, :1], rng)
    discs = int(sums[:, 0].sum())
    return radius, discs, float(value[0]), float(value[1]), float(error[1])
