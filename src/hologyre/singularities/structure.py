"""Critical points of the phase: its saddles, maxima and minima between the vortices."""

from __future__ import annotations

from dataclasses import replace
from typing import NamedTuple

import numpy as np
import pandas as pd
import scipy.fft
from numpy.typing import NDArray

from hologyre.fields.interpolate import evaluate, resample
from hologyre.grid import Field
from hologyre.singularities.kernel import jets_at
from hologyre.singularities.lattice import Lattice, lattice_of
from hologyre.singularities.search import find_zeros
from hologyre.singularities.winding import BEND_SLACK, path_turns

_AT_ZERO = 1e-3
"""Amplitude over slope, in wavelengths / 2 pi, below which a point of no current is a vortex."""


class IndexBalance(NamedTuple):
    """How the indices of a frame's critical points add up.

    Attributes
    ----------
    vortices, extrema, saddles : int
        Numbers of each, or rather the sizes of their indices' sums.
    net_index : int
        Vortices and extrema count +1 whatever their sign, saddles -1.
    border_winding : int
        Turns of the current's direction along the border, which the net index has to equal.
    consistent : bool
        True when it does.
    """

    vortices: int
    extrema: int
    saddles: int
    net_index: int
    border_winding: int
    consistent: bool


def phase_critical_points(
    field: Field | NDArray[np.complexfloating], *, margin_px: float = 0.0
) -> tuple[pd.DataFrame, IndexBalance]:
    """Find where the phase of one frame does not change to first order, and its vortices.

    Both are zeros of the current Im(conj(E) grad E), which is band-limited to twice the field's
    band, so that they are found as the field's own zeros are. The current's index is +1 at a
    vortex of either charge and at an extremum, -1 at a saddle.

    Parameters
    ----------
    field : Field or (y, x) complex array
        One frame; the tilt left in it counts. A bare array needs twice the samples that finding
        its vortices takes.
    margin_px : float
        Points closer than this to the valid part's border are left out.

    Returns
    -------
    points : DataFrame
        Columns y_px, x_px, kind (vortex, maximum, minimum or saddle) and index, which is beyond
        one only where points too close to be told apart are one row; ordered by y_px, then x_px.
    balance : IndexBalance

    Raises
    ------
    TypeError, ValueError
        As `locate_singularities`.

    Notes
    -----
    Freund, Phys. Rev. E 52, 2348 (1995); Dennis, J. Phys. A 34, L297 (2001): only monochromatic
    waves, which obey Helmholtz' equation, have no extrema of phase.
    """
    plain = lattice_of(field, margin_px=margin_px)
    lattice = None if plain is None else lattice_of(_current(field), margin_px=margin_px)
    if plain is None or lattice is None:
        nothing = _table(np.empty((0, 2)), np.empty(0, dtype=np.str_), np.empty(0))
        return nothing, IndexBalance(0, 0, 0, 0, 0, True)
    found = find_zeros(lattice)
    zeros = found.zeros
    y_px, x_px = lattice.to_px(zeros[:, 0], zeros[:, 1])
    inside = np.flatnonzero(lattice.window.contains(y_px, x_px))
    inside = inside[np.lexsort((x_px[inside], y_px[inside]))]
    places, zeros = np.stack([y_px[inside], x_px[inside]], axis=1), zeros[inside]
    value, dy, dx = evaluate(field, *places.T) if isinstance(field, Field) else _jets(plain, places)
    slope = np.sqrt(np.abs(dy) ** 2 + np.abs(dx) ** 2)
    vortex = np.abs(value) * 2 * np.pi * plain.radius_per_px < _AT_ZERO * slope
    # The trace of the phase's Hessian, which is that of the current over the intensity.
    bowl = zeros[:, 4] / lattice.step_px[1] + zeros[:, 3] / lattice.step_px[0]
    kind = np.where(
        zeros[:, 6] < 0,
        "saddle",
        np.where(vortex, "vortex", np.where(bowl > 0, "minimum", "maximum")),
    )
    points = _table(places, kind, zeros[:, 6])
    low = lattice.to_nodes(lattice.window.y_min, lattice.window.x_min)
    high = lattice.to_nodes(lattice.window.y_max, lattice.window.x_max)
    corners = np.array([low, (low[0], high[1]), high, (high[0], low[1])])
    bend = BEND_SLACK * float(found.bend[:2].max())
    winding = int(path_turns(lattice.planes, lattice.table, corners, bend)[0])
    total = points.groupby("kind")["index"].sum()
    net = int(points["index"].sum())
    return points, IndexBalance(
        int(total.get("vortex", 0)),
        int(total.get("maximum", 0) + total.get("minimum", 0)),
        -int(total.get("saddle", 0)),
        net,
        winding,
        net == winding,
    )


def _table(
    places: NDArray[np.float64], kind: NDArray[np.str_], index: NDArray[np.float64]
) -> pd.DataFrame:
    return pd.DataFrame(
        {
            "y_px": places[:, 0],
            "x_px": places[:, 1],
            "kind": pd.Series(kind, dtype="str"),
            "index": np.rint(index).astype(np.int64),
        }
    )


def _current(field: Field | NDArray[np.complexfloating]) -> Field | NDArray[np.complexfloating]:
    """Return the current as a complex field, its x component real and its y component imaginary."""
    if not isinstance(field, Field):
        lattice = lattice_of(field)
        if lattice is None:
            return field
        ny, nx = field.shape
        nodes = np.stack(np.meshgrid(np.arange(ny), np.arange(nx), indexing="ij"), axis=-1)
        value, dy, dx = jets_at(
            lattice.planes, lattice.table, nodes.reshape(-1, 2).astype(np.float64)
        ).T
        flow = (value.conj() * dx).imag + 1j * (value.conj() * dy).imag
        return flow.reshape(ny, nx)
    band = min(field.radius_per_px, 0.5 / max(field.grid.step_px)) + 1 / min(field.period_px)
    fine = resample(field, 1 / (5 * band))
    ty, tx = fine.tilt_per_px
    y, x = fine.grid.y_px(fine.shape[0]), fine.grid.x_px(fine.shape[1])
    turned = np.exp(-2j * np.pi * ty * y)[:, np.newaxis] * np.exp(-2j * np.pi * tx * x)
    values = fine.values * turned
    spectrum = scipy.fft.fft2(values)
    flow = np.zeros(values.shape, dtype=np.complex128)
    for axis, tilt, unit in ((0, ty, 1j), (1, tx, 1.0)):
        k = 2j * np.pi * scipy.fft.fftfreq(values.shape[axis], fine.grid.step_px[axis])
        slope = scipy.fft.ifft2(spectrum * (k[:, np.newaxis] if axis == 0 else k))
        along = (values.conj() * slope).imag + 2 * np.pi * tilt * np.abs(values) ** 2
        flow += unit * along
    return replace(fine, values=flow, tilt_per_px=(0.0, 0.0), radius_per_px=min(2 * band, 0.5))


def _jets(
    lattice: Lattice, places: NDArray[np.float64]
) -> tuple[NDArray[np.complex128], NDArray[np.complex128], NDArray[np.complex128]]:
    """Return E, dE/dy and dE/dx at places in pixels."""
    nodes = (places - lattice.origin_px) / lattice.step_px
    value, dy, dx = jets_at(lattice.planes, lattice.table, nodes).T
    return value, dy / lattice.step_px[0], dx / lattice.step_px[1]
