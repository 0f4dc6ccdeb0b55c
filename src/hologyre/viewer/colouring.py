"""Colours of trajectories by the numbers of their columns."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib import colormaps
from numpy.typing import ArrayLike, NDArray

_UNKNOWN = (0.5, 0.5, 0.5, 1.0)
_MAP, _CYCLIC = "viridis", "twilight_shifted"
_OF_THEIR_OWN = ("charge", "track_id")


class Spread:
    """Maps a column's values to colours: the middle 96 % of them over the whole map.

    Values that are not known are grey. napari itself would spread the map from the least to the
    largest value, and lose all colours to one that is not a number.
    """

    def __init__(self, values: ArrayLike, *, name: str = _MAP) -> None:
        known = np.asarray(values, dtype=np.float64)
        known = known[np.isfinite(known)]
        low, high = np.percentile(known, [2, 98]) if known.size else (0.0, 1.0)
        self.low, self.high = float(low), float(high)
        self.name = name

    def map(self, values: ArrayLike) -> NDArray[np.float32]:
        """Return the (n, 4) colours of values."""
        values = np.asarray(values, dtype=np.float64)
        share = (values - self.low) / max(self.high - self.low, 1e-12)
        colours = np.asarray(colormaps[self.name](np.clip(share, 0, 1)), dtype=np.float32)
        colours[~np.isfinite(values)] = _UNKNOWN
        return colours


def columns_of(layer: Any) -> list[str]:
    """Return the columns of a tracks layer that hold any numbers."""
    features = layer.features.select_dtypes("number")
    known = [str(name) for name in features if np.isfinite(features[name].to_numpy(float)).any()]
    first = [name for name in _OF_THEIR_OWN if name in known]
    return [*first, *(name for name in known if name not in first)]


def colour_by(layer: Any, column: str) -> None:
    """Colour a tracks layer by a column."""
    if column not in _OF_THEIR_OWN:
        name = _CYCLIC if column == "orientation_rad" else _MAP
        spread = Spread(layer.features[column].to_numpy(dtype=np.float64), name=name)
        layer.colormaps_dict = {**layer.colormaps_dict, column: spread}
    layer.color_by = column
