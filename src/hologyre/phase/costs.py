"""What it costs to cut each edge between pixels."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hologyre.phase.edges import PixelEdges
from hologyre.phase.flow import FORBIDDEN


def edge_costs(
    shape: tuple[int, int],
    weight: NDArray[np.floating] | None,
    mask: NDArray[np.bool_] | None,
    barriers: PixelEdges | None,
    bridges: PixelEdges | None,
    levels: int,
) -> tuple[NDArray[np.int16], NDArray[np.int16]]:
    """Return the whole-numbered cost of cutting each edge, along y and along x."""
    ny, nx = shape
    if weight is None:
        cost_y = np.full((ny - 1, nx), np.int16(levels))
        cost_x = np.full((ny, nx - 1), np.int16(levels))
    else:
        # Only a weight of zero is free to cut.
        level = np.maximum(np.rint(weight * levels), weight > 0).astype(np.int16)
        cost_y = np.minimum(level[1:], level[:-1])
        cost_x = np.minimum(level[:, 1:], level[:, :-1])
    if barriers is not None:
        cost_y[barriers.y] = 0
        cost_x[barriers.x] = 0
    if bridges is not None:
        cost_y[bridges.y] = FORBIDDEN
        cost_x[bridges.x] = FORBIDDEN
    if mask is not None:
        cost_y[~(mask[1:] & mask[:-1])] = 0
        cost_x[~(mask[:, 1:] & mask[:, :-1])] = 0
    return cost_y, cost_x


def checked_weight(
    weight: NDArray[np.floating] | None,
    shape: tuple[int, int],
    mask: NDArray[np.bool_] | None,
) -> NDArray[np.floating] | None:
    """Return the weights, 0 where left out.

    Raises
    ------
    TypeError
        If they are not real.
    ValueError
        If their shape is not that of the phase, or a valid pixel's is outside [0, 1].
    """
    if weight is None:
        return None
    weight = np.asarray(weight)
    if weight.dtype.kind not in "fiub":
        raise TypeError(f"weight: expected a real array, got dtype {weight.dtype}")
    if weight.shape != shape:
        raise ValueError(f"weight: expected the shape of phase, {shape}, got {weight.shape}")
    if mask is not None:
        weight = np.where(mask, weight, 0)
    low, high = weight.min(), weight.max()
    if not (low >= 0 and high <= 1):
        raise ValueError(f"weight: expected values from 0 to 1, got {low} to {high}")
    return weight
