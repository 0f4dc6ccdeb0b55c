"""A phase with vortices as a smooth part, without cuts, and a singular part."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numba import njit
from numpy.typing import NDArray
from scipy.signal import fftconvolve

from hologyre.phase.components import gather_holes
from hologyre.phase.cuts import Cuts
from hologyre.phase.residues import edge_turns, plaquette_charges
from hologyre.phase.unwrap import pose, solve


@dataclass(frozen=True, eq=False)
class SmoothAndSingular:
    """A phase as the sum of a smooth part and of the angles around its vortices.

    Parameters
    ----------
    smooth : (y, x) float64 array
        Regular part, in radians; NaN where left out.
    singular : (y, x) float64 array
        Sum over the vortices of charge times ``arctan2(y - y_v, x - x_v)``.
    vortices : DataFrame
        Columns y_px, x_px, charge.
    cuts : Cuts
        Jumps left in the smooth part: none unless vortices were given that do not account
        for all residues.

    Notes
    -----
    ``smooth + singular`` is congruent to the phase modulo 2 pi.
    """

    smooth: NDArray[np.float64]
    singular: NDArray[np.float64]
    vortices: pd.DataFrame
    cuts: Cuts


def split_vortices(
    phase: NDArray[np.floating],
    *,
    vortices: pd.DataFrame | None = None,
    weight: NDArray[np.floating] | None = None,
    valid: NDArray[np.bool_] | None = None,
) -> SmoothAndSingular:
    """Split a phase into a smooth part and the angles around its vortices.

    Parameters
    ----------
    phase : (y, x) float array
        Phase in radians, taken modulo 2 pi.
    vortices : DataFrame, optional
        Columns y_px, x_px and charge, as `hologyre.locate_singularities` gives them: where
        the vortices are between the pixels, or which of them to take out. Left out: every
        residue is one, at the centre of its plaquette; regions left out that the phase
        winds around hold one too.
    weight : (y, x) float array, optional
        As for `hologyre.unwrap`: where residues that no vortex accounts for are cut.
    valid : (y, x) bool array, optional
        True for the pixels to use.

    Returns
    -------
    SmoothAndSingular

    Raises
    ------
    TypeError, ValueError
        As `hologyre.unwrap`, or if `vortices` lacks a column or a position is not finite.

    Notes
    -----
    The angle around a vortex turns once; taking its differences off those of the phase
    leaves differences without curl, which add up to the smooth part with no cut at all.

    Examples
    --------
    >>> import numpy as np
    >>> y, x = np.mgrid[-4.5:5, -4.5:5]
    >>> parts = split_vortices(np.arctan2(y, x) + 0.3 * x)
    >>> bool(np.allclose(np.diff(parts.smooth, axis=1), 0.3)), len(parts.cuts)
    (True, 0)
    """
    problem = pose(phase, weight, valid, None, None, 255)
    wrapped, mask = problem.wrapped, problem.mask
    shape = (wrapped.shape[0], wrapped.shape[1])
    turn_y, turn_x = edge_turns(wrapped)
    if vortices is None:
        charge = plaquette_charges(turn_y, turn_x).astype(np.int32)
        if mask is not None:
            charge, earth = gather_holes(charge, mask)
            charge[earth] = 0
        j, i = np.nonzero(charge)
        table = pd.DataFrame({"y_px": j + 0.5, "x_px": i + 0.5, "charge": charge[j, i]})
        singular = _angles_around_centres(charge)
    else:
        table = _checked_vortices(vortices)
        charge = _charges_by_plaquette(table, shape)
        singular = _angles_around(
            table["y_px"].to_numpy(), table["x_px"].to_numpy(), table["charge"].to_numpy(), shape
        )
    # Each arctan2 falls by a turn below the row of its vortex, on the left of it.
    below = np.zeros(turn_y.shape, np.int32)
    below[:, :-1] = charge[:, ::-1].cumsum(axis=1)[:, ::-1]
    _add_outside(below, table, shape)
    start = wrapped.astype(np.float64) - singular
    result = solve(start, turn_y - below, turn_x.astype(np.int32), problem)
    return SmoothAndSingular(result.phase.astype(np.float64), singular, table, result.cuts)


def _checked_vortices(vortices: pd.DataFrame) -> pd.DataFrame:
    missing = [c for c in ("y_px", "x_px", "charge") if c not in vortices]
    if missing:
        raise ValueError(f"vortices: expected columns y_px, x_px, charge; {missing} missing")
    table = vortices[["y_px", "x_px", "charge"]].reset_index(drop=True)
    if not np.isfinite(table.to_numpy(dtype=np.float64)).all():
        raise ValueError("vortices: expected finite positions and charges")
    return table


def _charges_by_plaquette(table: pd.DataFrame, shape: tuple[int, int]) -> NDArray[np.int32]:
    charge = np.zeros((shape[0] - 1, shape[1] - 1), np.int32)
    # A pixel on the vortex's own row counts as below it: arctan2(0, -1) is pi, not -pi.
    j, i = (np.ceil(table[c].to_numpy()).astype(int) - 1 for c in ("y_px", "x_px"))
    inside = (j >= 0) & (j < charge.shape[0]) & (i >= 0) & (i < charge.shape[1])
    np.add.at(charge, (j[inside], i[inside]), table["charge"].to_numpy()[inside])
    return charge


def _add_outside(below: NDArray[np.int32], table: pd.DataFrame, shape: tuple[int, int]) -> None:
    """Add the turns of vortices right of the frame, whose angles turn over inside it."""
    row = np.ceil(table["y_px"].to_numpy()).astype(int) - 1
    beside = (row >= 0) & (row < shape[0] - 1) & (table["x_px"].to_numpy() > shape[1] - 1)
    np.add.at(below, row[beside], table["charge"].to_numpy()[beside, None])


def _angles_around_centres(charge: NDArray[np.int32]) -> NDArray[np.float64]:
    """Sum the angles around charges at plaquette centres: a convolution."""
    ny, nx = charge.shape[0] + 1, charge.shape[1] + 1
    if not charge.any():
        return np.zeros((ny, nx))
    y, x = np.arange(1 - ny, ny - 1) + 0.5, np.arange(1 - nx, nx - 1) + 0.5
    angle = np.arctan2(y[:, None], x[None, :])
    return np.asarray(
        fftconvolve(charge.astype(np.float64), angle)[ny - 2 : 2 * ny - 2, nx - 2 : 2 * nx - 2]
    )


@njit(cache=True, nogil=True)
def _angles_around(
    y_px: NDArray[np.floating],
    x_px: NDArray[np.floating],
    charge: NDArray[np.integer],
    shape: tuple[int, int],
) -> NDArray[np.float64]:
    total = np.zeros(shape)
    for v in range(y_px.size):
        for j in range(shape[0]):
            for i in range(shape[1]):
                total[j, i] += charge[v] * np.arctan2(j - y_px[v], i - x_px[v])
    return total
