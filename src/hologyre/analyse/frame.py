"""One frame: from counts to its field, its singularities and its row of the table."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any, Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.analyse.planning import Plan
from hologyre.fields.carrier import NoFringes, find_carrier
from hologyre.fields.compensate import compensate
from hologyre.fields.demodulate import demodulate
from hologyre.fields.noise import NoiseMap, field_noise
from hologyre.fields.refocus import refocus
from hologyre.grid import Field, Window
from hologyre.singularities.balance import charge_balance
from hologyre.singularities.locate import locate_singularities
from hologyre.stacks import StackError
from hologyre.survey import (
    finite_pixels,
    frame_fault,
    read_counts,
    saturation_of,
    without_gaps,
)
from hologyre.tables import SINGULARITIES, conform, empty

# band power over noise power, and visibility, under which a frame is asked whether it has fringes
_FAINT_POWER = 4.0
_FAINT_VISIBILITY = 0.05


@dataclass(frozen=True, eq=False)
class FrameResult:
    """What one frame gave.

    Parameters
    ----------
    frame : int
        The stack's own frame number.
    status : "done" or "skipped"
        Skipped frames have a `reason` and neither field nor singularities.
    field : Field or None
        The complex field kept on its band, in the coordinates of the whole hologram.
    singularities : DataFrame
        Columns `hologyre.tables.SINGULARITIES`.
    row : dict
        The frame's row of `hologyre.tables.FRAMES`.
    """

    frame: int
    status: Literal["done", "skipped"]
    reason: str
    field: Field | None
    singularities: pd.DataFrame
    row: dict[str, Any]


def measure(plan: Plan, frame: int) -> FrameResult:
    """Analyse one frame."""
    if frame in plan.left_out:
        return _skipped(plan, frame, plan.left_out[frame])
    saturation = saturation_of(plan.recipe)
    try:
        counts = read_counts(plan.stack, frame, plan.recipe)
    except StackError as error:
        return _skipped(plan, frame, str(error))
    known: dict[str, Any] = {}
    if saturation is not None:
        known["saturated"] = float(np.mean(counts >= saturation))
    fault = frame_fault(counts, saturation)
    if fault:
        return _skipped(plan, frame, fault.reason, known)
    field = _field(plan, counts)
    noise = _noise(plan, counts)
    power = mean_power(field)
    known["visibility"] = 2 * power**0.5 / _mean_counts(plan, counts)
    if noise is not None:
        known["noise"] = noise.rms
        if power < _FAINT_POWER * noise.rms**2:
            reason = "no fringes: the sideband is no stronger than noise"
            return _skipped(plan, frame, reason, known)
    if known["visibility"] < _FAINT_VISIBILITY:
        found = find_carrier(without_gaps(counts), radius=plan.carrier.radius)
        if isinstance(found, NoFringes):
            return _skipped(plan, frame, f"no fringes: {found.reason}", known)
    shown, taken_out = _corrected(plan, field)
    # a phase that is taken out moves no zero: they are found in the field as it was read
    searched = shown if plan.recipe.refocus.distance_um else field
    margin_px = plan.recipe.singularities.margin_px
    table = locate_singularities(searched, noise=noise, margin_px=margin_px)
    balance = charge_balance(searched, table, margin_px=margin_px)
    known["border_winding"] = balance.border_winding
    return _done(plan, frame, shown, table, known | taken_out)


def field_of(plan: Plan, frame: int) -> Field:
    """Read one frame's field and nothing else, in the coordinates of the whole hologram.

    Raises
    ------
    ValueError
        If the frame is one that cannot be read or is plainly unusable.
    """
    counts = read_counts(plan.stack, frame, plan.recipe)
    fault = frame_fault(counts, saturation_of(plan.recipe))
    if fault:
        raise ValueError(f"frame: {frame} cannot be used: {fault.reason}")
    return _in_whole(plan, _corrected(plan, _field(plan, counts))[0])


def _field(plan: Plan, counts: NDArray[Any]) -> Field:
    settings = plan.recipe.field
    return demodulate(
        counts,
        plan.carrier,
        edges=settings.edges,
        window=settings.window,
        precision=settings.precision,
        blanks=plan.blanks,
        valid=finite_pixels(counts),
        saturation=_level(plan),
    )


def _corrected(plan: Plan, field: Field) -> tuple[Field, dict[str, float]]:
    """Take out the surface the recipe asks for and refocus; tell what goes into the table."""
    settings, distance_um = plan.recipe.compensation, plan.recipe.refocus.distance_um
    taken_out: dict[str, float] = {}
    if settings.family != "none":
        found = compensate(
            field, family=settings.family, order=settings.order, method=settings.method
        )
        field = found.field
        tilt_y, tilt_x = found.tilt_rad_per_px
        taken_out = {
            "piston_rad": found.piston_rad,
            "tilt_y_rad_per_px": tilt_y,
            "tilt_x_rad_per_px": tilt_x,
        }
    if distance_um:
        field = refocus(field, distance_um, optics=plan.optics)
    return field, taken_out


def _mean_counts(plan: Plan, counts: NDArray[Any]) -> float:
    """Return the mean of the light in a frame, the camera's offset taken off where known."""
    mean = float(np.nanmean(counts, dtype=np.float64))
    dark = None if plan.blanks is None else plan.blanks.dark
    return mean if dark is None else mean - float(np.mean(dark, dtype=np.float64))


def _noise(plan: Plan, counts: NDArray[Any]) -> NoiseMap | None:
    settings = plan.recipe.field
    try:
        return field_noise(
            counts,
            plan.carrier,
            edges=settings.edges,
            window=settings.window,
            blanks=plan.blanks,
            valid=finite_pixels(counts),
            saturation=_level(plan),
        )
    except ValueError:
        # the band takes up the whole spectrum: nowhere is there noise alone
        return None


def _level(plan: Plan) -> float:
    """Return the count at which pixels are saturated, infinite when there is none."""
    level = saturation_of(plan.recipe)
    return math.inf if level is None else level


def mean_power(field: Field) -> float:
    """Return the mean of |E|^2 over the samples that came from pixels."""
    valid, (rows, columns) = field.grid.valid, field.shape
    inside = valid.contains(field.grid.y_px(rows)[:, None], field.grid.x_px(columns))
    return float(np.mean(np.abs(field.values[inside]) ** 2, dtype=np.float64))


def _row(plan: Plan, frame: int, **known: Any) -> dict[str, Any]:
    interval = plan.optics.frame_interval_s
    return {
        "frame": frame,
        "time_s": float("nan") if interval is None else frame * interval,
        "fy_per_px": plan.carrier.fy,
        "fx_per_px": plan.carrier.fx,
        **known,
    }


def _skipped(
    plan: Plan, frame: int, reason: str, known: dict[str, Any] | None = None
) -> FrameResult:
    row = _row(plan, frame, status="skipped", reason=reason, **(known or {}))
    return FrameResult(frame, "skipped", reason, None, empty(SINGULARITIES), row)


def _done(
    plan: Plan, frame: int, field: Field, table: pd.DataFrame, known: dict[str, Any]
) -> FrameResult:
    region = plan.recipe.stack.region or (0, 0, 0, 0)
    y_px, x_px = table["y_px"] + region[0], table["x_px"] + region[2]
    pixel = plan.optics.pixel_um or float("nan")
    row = _row(
        plan,
        frame,
        status="done",
        reason="",
        positive=int((table["charge"] > 0).sum()),
        negative=int((table["charge"] < 0).sum()),
        z_um=plan.recipe.refocus.distance_um,
        **known,
    )
    table = table.assign(
        frame=frame,
        time_s=row["time_s"],
        y_px=y_px,
        x_px=x_px,
        y_um=y_px * pixel,
        x_um=x_px * pixel,
    )
    whole = _in_whole(plan, field)
    return FrameResult(frame, "done", "", whole, conform(table, SINGULARITIES), row)


def _in_whole(plan: Plan, field: Field) -> Field:
    """Give a field read from a region of the hologram its place in the whole."""
    if plan.recipe.stack.region is None:
        return field
    y, _, x, _ = plan.recipe.stack.region
    grid, valid = field.grid, field.grid.valid
    moved = replace(
        grid,
        frame_shape=plan.frame_shape,
        origin_px=(grid.origin_px[0] + y, grid.origin_px[1] + x),
        valid=Window(valid.y_min + y, valid.y_max + y, valid.x_min + x, valid.x_max + x),
    )
    # the carrier's phase is counted from the hologram's first pixel
    turn = np.exp(-2j * np.pi * (plan.carrier.fy * y + plan.carrier.fx * x))
    return replace(field, values=field.values * turn.astype(field.values.dtype), grid=moved)
