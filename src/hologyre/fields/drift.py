"""Drift of phase and tilt from one frame to the next."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from hologyre.fields.interpolate import resample
from hologyre.grid import Field

_ROUNDS = 5


@dataclass(frozen=True)
class Drift:
    """How a frame's phase has moved against another's.

    Parameters
    ----------
    piston_rad : float
        Phase at the middle of the frame.
    tilt_y_rad_per_px, tilt_x_rad_per_px : float
        Slope.
    coherence : float
        Modulus of the correlation once both are taken out, 0 to 1; near 0 the frames share
        nothing and the drift has no meaning.
    """

    piston_rad: float
    tilt_y_rad_per_px: float
    tilt_x_rad_per_px: float
    coherence: float


def measure_drift(field: Field, before: Field) -> Drift:
    """Measure the common phase and tilt by which a field differs from the one before.

    From the product of the field with the other's conjugate, whose phase is a plane where
    the object stays the same: weighted by intensity, so that singularities do not count.

    Parameters
    ----------
    field, before : Field, values (y, x)
        Two frames on the same torus.

    Returns
    -------
    Drift

    Raises
    ------
    ValueError
        If the fields are not single frames of one shape and period.
    """
    if field.values.ndim != 2 or before.values.ndim != 2:
        raise ValueError("field, before: expected single frames (y, x)")
    if field.grid.frame_shape != before.grid.frame_shape or not np.allclose(
        field.period_px, before.period_px
    ):
        msg = (
            f"before: frame {before.grid.frame_shape} of period {before.period_px} differs "
            f"from the field's {field.grid.frame_shape} of {field.period_px}"
        )
        raise ValueError(msg)
    step = min(0.25 / max(field.radius_per_px, before.radius_per_px), *field.grid.step_px)
    now, then = resample(field, step), resample(before, step)
    ny, nx = field.grid.frame_shape
    y, x = now.grid.y_px(now.shape[0]), now.grid.x_px(now.shape[1])
    rows, columns = (y >= 0) & (y <= ny - 1), (x >= 0) & (x <= nx - 1)
    product = (now.values * then.values.conj())[np.ix_(rows, columns)].astype(np.complex128)
    y, x = y[rows] - (ny - 1) / 2, x[columns] - (nx - 1) / 2
    total = float(
        np.sqrt((np.abs(now.values[np.ix_(rows, columns)]) ** 2).sum(dtype=np.float64))
        * np.sqrt((np.abs(then.values[np.ix_(rows, columns)]) ** 2).sum(dtype=np.float64))
    )
    if total == 0:
        return Drift(0.0, 0.0, 0.0, 0.0)
    tilt_y = float(np.angle((product[1:] * product[:-1].conj()).sum())) / float(y[1] - y[0])
    tilt_x = float(np.angle((product[:, 1:] * product[:, :-1].conj()).sum())) / float(x[1] - x[0])
    piston = 0.0
    for _ in range(_ROUNDS):
        # Newton towards the largest correlation, which is the likeliest plane.
        turn = np.exp(-1j * tilt_y * y)[:, None] * np.exp(-1j * tilt_x * x)
        flat = product * turn
        piston = float(np.angle(flat.sum()))
        flat *= np.exp(-1j * piston)
        terms = (np.ones_like(flat.real), y[:, None] + 0 * x, x + 0 * y[:, None])
        slope = np.array([(flat.imag * t).sum() for t in terms])
        bend = np.array([[(flat.real * t * u).sum() for u in terms] for t in terms])
        step_by = np.linalg.lstsq(bend, slope, rcond=None)[0]
        if not float(flat.real.sum()) > 0.05 * total:
            break
        tilt_y, tilt_x = tilt_y + float(step_by[1]), tilt_x + float(step_by[2])
        piston += float(step_by[0])
    turn = np.exp(-1j * tilt_y * y)[:, None] * np.exp(-1j * tilt_x * x)
    coherence = min(float(np.abs((product * turn).sum())) / total, 1.0)
    return Drift(float(np.angle(np.exp(1j * piston))), tilt_y, tilt_x, coherence)


def without_drift(field: Field, drift: Drift) -> Field:
    """Return the field with a drift's phase and tilt taken out; the tilt goes to its own."""
    ny, nx = field.grid.frame_shape
    y = field.grid.y_px(field.shape[0]) - (ny - 1) / 2
    x = field.grid.x_px(field.shape[1]) - (nx - 1) / 2
    turn = np.exp(-1j * (drift.piston_rad + drift.tilt_y_rad_per_px * y))[:, None]
    turn = turn * np.exp(-1j * drift.tilt_x_rad_per_px * x)
    tilt = (
        field.tilt_per_px[0] - drift.tilt_y_rad_per_px / (2 * np.pi),
        field.tilt_per_px[1] - drift.tilt_x_rad_per_px / (2 * np.pi),
    )
    return replace(field, values=field.values * turn.astype(field.values.dtype), tilt_per_px=tilt)
