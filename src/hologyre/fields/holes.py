"""Pixels that say nothing, filled with what the model of a hologram says there."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hologyre.fields.fit import sandwich, separate, transform
from hologyre.fields.fit_plan import ComplexArray, Plan, RealArray
from hologyre.fields.transform import band_frame

_FEW = 600
_STEPS = 12
_ENOUGH = 1e-4
"""Part of the correction's power left at the end: far under the noise of the other pixels."""


def fill_holes(counts: RealArray, plan: Plan, usable: NDArray[np.bool_]) -> RealArray:
    """Replace unusable pixels by the fit to all the others.

    With P the projector on the band-limited terms of a hologram, the values v at the holes
    obey ``v - P v = P h`` there, h being the frame with its holes empty. Few holes are solved
    for directly, with P's diagonal blocks alone (what bands share on the frame is little);
    many by conjugate gradients.

    Parameters
    ----------
    counts : (y, x) real array
        The frame, of the plan's precision.
    plan : Plan
        The fit's.
    usable : (y, x) bool array
        False at the holes.

    Returns
    -------
    (y, x) real array
        A copy, filled.
    """
    rows, columns = np.unravel_index(np.flatnonzero(~usable), usable.shape)
    frame = counts.copy()
    frame[rows, columns] = 0
    mean = frame.dtype.type(frame.sum(dtype=np.float64) / (frame.size - rows.size))
    frame -= mean
    frame[rows, columns] = 0
    solve = _solve_few if rows.size <= _FEW else _solve_many
    frame[rows, columns] = solve(frame, plan, rows, columns)
    return frame + mean


def _solve_few(
    frame: RealArray, plan: Plan, rows: NDArray[np.intp], columns: NDArray[np.intp]
) -> RealArray:
    side = _kernel(plan.y.side_waves[rows]) * _kernel(plan.x.side_waves[columns])
    zero = _kernel(plan.y.zero_waves[rows]) * _kernel(plan.x.zero_waves[columns])
    within = np.eye(rows.size) - (2 * side.real + zero.real).astype(np.float64)
    # Holes close together are told by the model alone, which knows nothing for sure.
    within[np.diag_indices_from(within)] += 1e-6
    side_c, zero_c = _coordinates(frame, plan)
    said = 2 * _at_points(side_c, plan.y.side_waves[rows], plan.x.side_waves[columns])
    said += _at_points(zero_c, plan.y.zero_waves[rows], plan.x.zero_waves[columns])
    values: RealArray = np.linalg.solve(within, said.astype(np.float64)).astype(frame.dtype)
    return values


def _solve_many(
    frame: RealArray, plan: Plan, rows: NDArray[np.intp], columns: NDArray[np.intp]
) -> RealArray:
    real = frame.dtype.type
    blank = np.zeros_like(frame)
    values = np.zeros(rows.size, dtype=frame.dtype)
    left = _modelled(frame, plan)[rows, columns]
    step = left
    power = float(left @ left)
    enough = _ENOUGH * power
    for _ in range(_STEPS):
        if power <= enough:
            break
        blank[rows, columns] = step
        image = step - _modelled(blank, plan)[rows, columns]
        length = real(power / float(step @ image))
        values = values + length * step
        left = left - length * image
        fresh = float(left @ left)
        step = left + real(fresh / power) * step
        power = fresh
    return values


def _coordinates(frame: RealArray, plan: Plan) -> tuple[ComplexArray, ComplexArray]:
    """Fit the model and return its coordinates in the bases of sideband and zero order."""
    y, x = plan.y, plan.x
    side, zero = transform(frame, plan)
    shared = separate(side, zero, plan)
    a = sandwich(y.side, side, x.side)
    a -= sandwich(y.left, shared.zero, x.left)
    a -= sandwich(y.conj_left, shared.conjugate, x.conj_left)
    z = sandwich(y.zero, zero, x.zero)
    common = sandwich(y.right.T, shared.side, x.right.T)
    z -= common + np.outer(y.parity, x.parity) * common.conj()
    return a, z


def _modelled(frame: RealArray, plan: Plan) -> RealArray:
    """Fit the model to a frame and return it on the frame."""
    a, z = _coordinates(frame, plan)
    y, x = plan.y, plan.x
    area = plan.side.period[0] * plan.side.period[1]
    side = sandwich(y.side.T, a, x.side.T) * (plan.side_phase.conj() / area)
    zero = sandwich(y.zero.T, z, x.zero.T) * (plan.zero_phase.conj() / (2 * area))
    return band_frame([plan.side, plan.zero], [side, zero])


def _kernel(waves: ComplexArray) -> ComplexArray:
    return waves @ waves.conj().T


def _at_points(c: ComplexArray, along_y: ComplexArray, along_x: ComplexArray) -> RealArray:
    value: RealArray = np.einsum("pk,pk->p", along_y @ c, along_x).real
    return value
