"""Net charge inside a window against the winding along its border."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.grid import Field
from hologyre.singularities.lattice import lattice_of
from hologyre.singularities.winding import BEND_SLACK, bends, path_turns


class ChargeBalance(NamedTuple):
    """How the charges found add up.

    Attributes
    ----------
    positive, negative : int
        Number of singularities of either sign, each counted once whatever its charge.
    net_charge : int
        Sum of the charges.
    border_winding : int
        Turns of the phase along the window's border, from +x towards +y.
    consistent : bool
        True when both agree, as the field's continuity demands. False as well where the border
        runs through darkness, so that its phase is the arithmetic's.
    """

    positive: int
    negative: int
    net_charge: int
    border_winding: int
    consistent: bool


def charge_balance(
    field: Field | NDArray[np.complexfloating], table: pd.DataFrame, *, margin_px: float = 0.0
) -> ChargeBalance:
    """Compare the net charge of a frame's singularities with the winding along the border.

    The winding is followed on the interpolant along the valid part's border, `margin_px` inside
    it, apart from the search for the singularities.

    Parameters
    ----------
    field : Field or (y, x) complex array
        The frame.
    table : DataFrame
        Its singularities, columns y_px, x_px, charge at least; those nearer to the border than
        `margin_px` are not counted.
    margin_px : float
        Distance of the path from the border, hologram pixels.

    Returns
    -------
    ChargeBalance

    Raises
    ------
    TypeError, ValueError
        As `locate_singularities`; ValueError too if `table` lacks a column.
    """
    missing = sorted({"y_px", "x_px", "charge"} - set(table.columns))
    if missing:
        raise ValueError(f"table: column {', '.join(missing)} is missing")
    lattice = lattice_of(field, margin_px=margin_px)
    if lattice is None:
        return ChargeBalance(0, 0, 0, 0, True)
    window = lattice.window
    inside = window.contains(table["y_px"].to_numpy(), table["x_px"].to_numpy())
    charge = table["charge"].to_numpy()[inside]
    low = lattice.to_nodes(window.y_min, window.x_min)
    high = lattice.to_nodes(window.y_max, window.x_max)
    corners = np.array([low, (low[0], high[1]), high, (high[0], low[1])])
    bend = BEND_SLACK * float(bends(lattice.planes)[:2].max())
    winding, least = path_turns(lattice.planes, lattice.table, corners, bend)
    net = int(charge.sum())
    return ChargeBalance(
        int((charge > 0).sum()),
        int((charge < 0).sum()),
        net,
        int(winding),
        net == winding and least > lattice.floor,
    )
