"""The noise of the fields, as the singularities' own standard errors tell it."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pandas as pd

from hologyre.motion.slices import Slice
from hologyre.motion.trace import jet

_STILL = np.vstack([np.ones((1, 1)), np.zeros((2, 1))])


def noise_told(table: pd.DataFrame) -> Callable[[int, Slice], float]:
    """Return a function that tells E|n|^2 of a frame from its singularities' standard errors.

    Parameters
    ----------
    table : DataFrame
        Singularities sorted by frame; sigma_y_px and sigma_x_px come from the covariance
        ``(E|n|^2 / 2) (J^T J)^-1`` with the field's Jacobian J.

    Returns
    -------
    callable
        Takes a frame's number and its slice; returns the median over the singularities, NaN
        where no error is told.
    """
    frame = table["frame"].to_numpy()
    position = table[["y_px", "x_px"]].to_numpy()
    square = table["sigma_y_px"].to_numpy() ** 2 + table["sigma_x_px"].to_numpy() ** 2

    def told(number: int, sheet: Slice) -> float:
        rows = np.arange(*np.searchsorted(frame, [number, number + 1]))
        rows = rows[np.isfinite(square[rows])]
        if len(rows) == 0:
            return float("nan")
        step_y, step_x = sheet.step_px
        samples = sheet.samples[:, :, None]
        found = []
        for (y, x), size in zip(sheet.to_samples(position[rows]), square[rows], strict=True):
            _, ey, ex, _ = jet(samples, _STILL, y, x, 0.0)
            ey, ex = ey / step_y, ex / step_x
            det = ex.real * ey.imag - ey.real * ex.imag
            found.append(2.0 * size * det**2 / (abs(ex) ** 2 + abs(ey) ** 2))
        return float(np.median(found))

    return told
