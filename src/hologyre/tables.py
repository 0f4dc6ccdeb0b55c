"""Columns, units and types of every table, in one place."""

from __future__ import annotations

from typing import NamedTuple

import pandas as pd


class Column(NamedTuple):
    """One column: its name, its numpy dtype and what it holds."""

    name: str
    dtype: str
    meaning: str


_TIME = Column("time_s", "float64", "time of the frame; empty when the interval is unknown, s")
_POSITION = (
    Column("y_px", "float64", "row position, hologram pixels"),
    Column("x_px", "float64", "column position, hologram pixels"),
    Column("y_um", "float64", "row position in the object; empty when the optics are unknown, um"),
    Column("x_um", "float64", "column position in the object; empty as y_um, um"),
)
_MEASURED = (
    Column("charge", "int64", "topological charge, +1 turning from +x to +y"),
    Column("sigma_y_px", "float64", "standard error of y_px"),
    Column("sigma_x_px", "float64", "standard error of x_px"),
    Column("cov_yx_px2", "float64", "covariance of y_px and x_px, px^2"),
    Column("robustness", "float64", "smallest change of the field able to remove it, field units"),
    Column("robustness_snr", "float64", "robustness over the noise of the field"),
    Column("trust", "float64", "probability that the noise-free field has it, 0 to 1"),
    Column("axis_ratio", "float64", "minor over major axis of the core, 0 to 1"),
    Column("orientation_rad", "float64", "long axis of the core, from +x to +y, in [0, pi)"),
    Column("origin", "str", "found, placed or moved"),
)
_SINGULARITY = Column("singularity", "int64", "id that stays the same through linking and review")

SINGULARITIES = (
    Column("frame", "int64", "the stack's own frame number"),
    _TIME,
    *_POSITION,
    *_MEASURED,
    _SINGULARITY,
)

TRAJECTORIES = (
    Column("track", "int64", "track number"),
    Column("frame", "int64", "the stack's own frame number"),
    _TIME,
    *_POSITION,
    *_MEASURED,
    Column("link", "str", "how it was joined to the row before: thread, assigned, bridged, hand"),
    _SINGULARITY,
)

EVENTS = (
    Column("event", "int64", "event number"),
    Column("kind", "str", "pair_birth, pair_death, entry, exit, split, merge or unexplained"),
    Column("frame_before", "int64", "last frame before the event"),
    Column("frame_after", "int64", "first frame after the event"),
    _TIME,
    *_POSITION,
    Column("tracks", "str", "tracks concerned, separated by ;"),
)

FRAMES = (
    Column("frame", "int64", "the stack's own frame number"),
    _TIME,
    Column("status", "str", "done or skipped"),
    Column("reason", "str", "why the frame was skipped"),
    Column("fy_per_px", "float64", "carrier along y, cycles/px"),
    Column("fx_per_px", "float64", "carrier along x, cycles/px"),
    Column("visibility", "float64", "fringe visibility, 0 to 1"),
    Column("saturated", "float64", "fraction of saturated pixels"),
    Column("noise", "float64", "root mean square noise of the complex field, field units"),
    Column("piston_rad", "float64", "phase offset taken out"),
    Column("tilt_y_rad_per_px", "float64", "tilt along y taken out"),
    Column("tilt_x_rad_per_px", "float64", "tilt along x taken out"),
    Column("z_um", "float64", "refocusing distance applied"),
    Column("drift_y_px", "float64", "common motion along y up to this frame"),
    Column("drift_x_px", "float64", "common motion along x up to this frame"),
    Column("positive", "Int64", "singularities of positive charge"),
    Column("negative", "Int64", "singularities of negative charge"),
    Column("border_winding", "Int64", "winding of the phase along the border, turns"),
    Column("audit", "str", "ok, or what does not add up"),
)


def empty(columns: tuple[Column, ...]) -> pd.DataFrame:
    """Return a table without rows that has these columns and types."""
    return pd.DataFrame({c.name: pd.Series(dtype=c.dtype) for c in columns})


def conform(table: pd.DataFrame, columns: tuple[Column, ...]) -> pd.DataFrame:
    """Return the columns in their order and types, missing ones empty.

    Raises
    ------
    ValueError
        If the table has a column that is not among `columns`, or lacks an integer one.
    """
    unknown = sorted(set(table.columns) - {c.name for c in columns})
    if unknown:
        raise ValueError(f"table: unknown column {', '.join(unknown)}")
    series = {}
    for column in columns:
        if column.name in table:
            series[column.name] = table[column.name].astype(column.dtype)
        elif column.dtype == "int64":
            raise ValueError(f"table: column {column.name} is missing")
        else:
            blank = {"float64": float("nan"), "str": ""}.get(column.dtype, pd.NA)
            series[column.name] = pd.Series(blank, index=table.index, dtype=column.dtype)
    return pd.DataFrame(series, index=table.index)
