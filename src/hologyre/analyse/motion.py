"""Frames together: from the singularities of all frames to tracks, events and frame totals."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import pandas as pd

from hologyre.analyse.planning import Plan
from hologyre.grid import Field
from hologyre.motion import Motion, audit, estimate_drift, follow_threads, link_singularities
from hologyre.tables import EVENTS, FRAMES, SINGULARITIES, TRAJECTORIES, conform, empty


def join_singularities(tables: Iterable[pd.DataFrame]) -> pd.DataFrame:
    """Put the tables of frames together, singularities numbered through."""
    kept = [table for table in tables if len(table)]
    if not kept:
        return empty(SINGULARITIES)
    joined = pd.concat(kept, ignore_index=True)
    joined["singularity"] = range(len(joined))
    return conform(joined, SINGULARITIES)


def link(
    plan: Plan, singularities: pd.DataFrame, fields: Iterable[Field], measured: Sequence[int]
) -> Motion:
    """Link the singularities of the frames that were measured.

    Parameters
    ----------
    plan : Plan
        What was asked for.
    singularities : DataFrame
        Of all frames.
    fields : iterable of Field
        The measured frames' fields, taken one after another.
    measured : sequence of int
        Their frame numbers, increasing.
    """
    if len(measured) < 2:
        return Motion(empty(TRAJECTORIES), empty(EVENTS))
    settings = plan.recipe.motion
    margin_px = plan.recipe.singularities.margin_px
    whole = plan.recipe.stack.region is None and not plan.recipe.refocus.distance_um
    if settings.method == "assignment" and whole:
        motion = link_singularities(
            singularities,
            max_step_px=settings.max_step_px,
            max_gap=settings.max_gap,
            frame_shape=plan.frame_shape,
            margin_px=margin_px,
            frames=measured,
        )
    else:
        motion = follow_threads(
            fields,
            singularities,
            frames=measured,
            method="auto" if settings.method == "mixed" else settings.method,
            max_step_px=settings.max_step_px,
            max_gap=settings.max_gap,
            margin_px=margin_px,
        )
    return Motion(motion.trajectories, _located(plan, motion.events))


def frame_table(rows: Iterable[Mapping[str, Any]], motion: Motion) -> pd.DataFrame:
    """Return the table of frames: what was measured, the common drift and the audit."""
    table = conform(pd.DataFrame(list(rows)), FRAMES)
    done = table["status"] == "done"
    measured = table[done]
    if motion.trajectories.empty:
        net = measured["positive"] - measured["negative"]
        odd = net != measured["border_winding"]
        told = pd.Series("ok", index=measured.index, dtype="str")
        told[odd] = [
            f"charge {charge:+d} but {turns:+d} turns along the border"
            for charge, turns in zip(net[odd], measured["border_winding"][odd], strict=True)
        ]
        return table.assign(audit=told.reindex(table.index, fill_value=""))
    winding = dict(zip(measured["frame"], measured["border_winding"], strict=True))
    audited = audit(
        motion.trajectories, motion.events, winding, frames=measured["frame"]
    ).set_index("frame")
    drift = estimate_drift(motion.trajectories).set_index("frame")
    # a frame without singularities tells nothing of drift: it stays as it was
    known = drift.reindex(measured["frame"]).ffill().fillna(0.0)
    return table.assign(
        audit=table["frame"].map(audited["audit"]).fillna(""),
        drift_y_px=table["frame"].map(known["drift_y_px"]),
        drift_x_px=table["frame"].map(known["drift_x_px"]),
    )


def _located(plan: Plan, events: pd.DataFrame) -> pd.DataFrame:
    """Fill in micrometres and, where the moment is not known better, the middle in time."""
    pixel = plan.optics.pixel_um or float("nan")
    interval = plan.optics.frame_interval_s or float("nan")
    middle = (events["frame_before"] + events["frame_after"]) / 2 * interval
    return events.assign(
        time_s=events["time_s"].fillna(middle),
        y_um=events["y_px"] * pixel,
        x_um=events["x_px"] * pixel,
    )
