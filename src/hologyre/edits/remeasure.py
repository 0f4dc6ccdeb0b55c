"""What the fields say of singularities that hands have put in."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.edits.snap import snap
from hologyre.grid import Field


def remeasure(
    singularities: pd.DataFrame,
    field_of: Callable[[int], Field | NDArray[np.complexfloating]],
    *,
    within_px: float | None = None,
) -> pd.DataFrame:
    """Measure the winding again where singularities were placed or moved by hand.

    Edits keep the winding that was measured when they were made; with another recipe the field
    may say otherwise.

    Parameters
    ----------
    singularities : DataFrame
        Columns `hologyre.tables.SINGULARITIES`, with edits in them.
    field_of : callable
        From a frame number to its field; called once for each frame concerned.
    within_px : float, optional
        As for `snap`.

    Returns
    -------
    DataFrame
        One row for each that was placed or moved: frame, singularity, y_px, x_px, charge,
        winding (0 where there is no zero) and distance_px to the zero, NaN without one.
    """
    put = singularities[singularities["origin"].isin(["placed", "moved"])]
    names = ["frame", "singularity", "y_px", "x_px", "charge"]
    winding, distance = np.zeros(len(put), dtype=np.int64), np.full(len(put), np.nan)
    for frame, rows in put.groupby("frame").indices.items():
        field = field_of(int(frame))
        for row in rows.tolist():
            found = snap(field, *put[["y_px", "x_px"]].iloc[row], within_px=within_px)
            if found:
                winding[row], distance[row] = found.charge, found.distance_px
    return put[names].assign(winding=winding, distance_px=distance).reset_index(drop=True)
