"""From the state under edit to the tables a run writes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.edits.apply import Misfit
from hologyre.edits.kinds import Region
from hologyre.edits.regions import used
from hologyre.edits.state import State
from hologyre.tables import EVENTS, SINGULARITIES, TRAJECTORIES, conform, empty

_UNKNOWN_WHERE_PUT = (
    "sigma_y_px",
    "sigma_x_px",
    "cov_yx_px2",
    "robustness",
    "robustness_snr",
    "trust",
    "axis_ratio",
    "orientation_rad",
)
"""Columns that are empty for singularities put somewhere by hand: nothing was measured there."""


@dataclass(frozen=True, eq=False)
class Corrected:
    """Tables with all edits in them.

    Parameters
    ----------
    singularities, trajectories, events : DataFrame
        Columns as in `hologyre.tables`.
    set_aside : DataFrame
        Singularities in parts that are not to be used; in none of the other tables.
    misfits : tuple of Misfit
        Edits that fit no longer and were passed over.
    contradictions : DataFrame
        Edits that contradict the measured winding: edit, kind, frame, y_px, x_px, contradiction,
        reason, author, time.
    """

    singularities: pd.DataFrame
    trajectories: pd.DataFrame
    events: pd.DataFrame
    set_aside: pd.DataFrame
    misfits: tuple[Misfit, ...]
    contradictions: pd.DataFrame


def tables_of(state: State, misfits: tuple[Misfit, ...] = ()) -> Corrected:
    """Lay out the tables of a state."""
    rows = pd.DataFrame(_laid_out(state, np.arange(len(state.found.table)), sorted(state.rows)))
    regions = [edit for edit in state.drawn.values() if isinstance(edit, Region)]
    inside = used(regions, rows["frame"], rows["y_px"], rows["x_px"])
    events = _events(state)
    if regions:
        within = used(regions, events["frame_after"], events["y_px"], events["x_px"])
        events = pd.concat([events[within], _crossings(state, rows, inside, events)])
    kept = rows[inside]
    linked = kept[kept["track"] >= 0].sort_values(["track", "frame"], kind="stable")
    if regions:
        linked = _relinked(linked)
        events = _named(events, linked["track"].to_numpy())
    extra = ["track", "link", "previous"]
    return Corrected(
        conform(kept.drop(columns=extra), SINGULARITIES).reset_index(drop=True),
        conform(linked.drop(columns="previous"), TRAJECTORIES).reset_index(drop=True),
        conform(events, EVENTS)
        .sort_values(["frame_after", "frame_before", "event"], kind="stable")
        .reset_index(drop=True),
        conform(rows[~inside].drop(columns=extra), SINGULARITIES).reset_index(drop=True),
        misfits,
        _contradictions(state),
    )


def frame_rows(state: State, frame: int) -> pd.DataFrame:
    """Return a frame's singularities as they are now.

    Returns
    -------
    DataFrame
        Columns of `hologyre.tables.SINGULARITIES`, and track (-1 where there is none). Those
        in parts that are not to be used are in it too.
    """
    part = state.found.rows_of(frame)
    values = _laid_out(state, np.arange(part.start, part.stop), state.touched_in(frame))
    return pd.DataFrame(
        {name: values[name] for name in (*(c.name for c in SINGULARITIES), "track")}
    )


def _laid_out(
    state: State, found_rows: NDArray[np.int64], touched: list[int]
) -> dict[str, NDArray[Any]]:
    """Return the rows' columns, `track`, `link` and the id of the `previous` row too, sorted."""
    found, count = state.found, len(state.found.table)
    first = int(found_rows[0]) if len(found_rows) else 0
    rest = np.ones(len(found_rows), np.bool_)
    rest[[row - first for row in touched if row < count]] = False
    index = found_rows[rest]
    before = found.previous[index]
    changed = [row for row in touched if state.rows[row].kept]
    # rows put in have no row among those found: they begin empty
    taken = np.concatenate([index, np.array([min(row, count) for row in changed], np.int64)])
    values = {name: column[taken] for name, column in found.columns.items()}
    values["track"] = np.append(found.track[index], np.zeros(len(changed), np.int64))
    values["link"] = np.append(found.link[index], np.full(len(changed), "", dtype=object))
    ids = np.where(before >= 0, found.columns["singularity"][before], -1)
    values["previous"] = np.append(ids, np.zeros(len(changed), np.int64))
    _put_changed(state, changed, {name: v[len(index) :] for name, v in values.items()})
    order = np.lexsort((values["singularity"], values["frame"]))
    return {name: column[order] for name, column in values.items()}


def _put_changed(state: State, rows: list[int], values: dict[str, NDArray[Any]]) -> None:
    """Write what edits have made of some rows into their part of the columns."""
    found = state.found
    own = [state.rows[row] for row in rows]
    for name in ("y_px", "x_px", "charge", "origin", "track", "link"):
        values[name][:] = [getattr(one, name) for one in own]
    values["previous"][:] = [state.id_of(r.previous) if r.previous >= 0 else -1 for r in own]
    values["frame"][:] = [state.frame_of(row) for row in rows]
    values["singularity"][:] = [state.id_of(row) for row in rows]
    added = np.array([row in state.placed for row in rows], dtype=np.bool_)
    values["time_s"][added] = found.time_s(values["frame"][added].astype(np.float64))
    put = np.array([one.origin != "found" for one in own], dtype=np.bool_)
    for um, px in (("y_um", "y_px"), ("x_um", "x_px")):
        values[um][put] = values[px][put] * found.um_per_px
    for name in _UNKNOWN_WHERE_PUT:
        values[name][put] = np.nan


def _events(state: State) -> pd.DataFrame:
    if not state.events:
        return empty(EVENTS)
    found = state.found
    numbers, happened = list(state.events), list(state.events.values())
    before, after = (
        np.array([getattr(one, name) for one in happened], dtype=np.int64)
        for name in ("frame_before", "frame_after")
    )
    y, x = (np.array([getattr(one, name) for one in happened]) for name in ("y_px", "x_px"))
    scale = found.um_per_px
    table = pd.DataFrame(
        {
            "event": numbers,
            "kind": [one.kind for one in happened],
            "frame_before": before,
            "frame_after": after,
            "time_s": found.time_s(0.5 * (before + after)),
            "y_px": y,
            "x_px": x,
            "y_um": y * scale,
            "x_um": x * scale,
            "tracks": [
                ";".join(str(n) for n in sorted({state[row].track for row, _ in one.tips}))
                for one in happened
            ],
        }
    )
    source = np.array([one.source for one in happened])
    for name in ("time_s", "y_um", "x_um"):
        as_found = found.events[name].to_numpy()
        known = source >= 0
        values = table[name].to_numpy(copy=True)
        values[known] = as_found[source[known]]
        table[name] = values
    return table


def _crossings(
    state: State, rows: pd.DataFrame, inside: NDArray[np.bool_], events: pd.DataFrame
) -> pd.DataFrame:
    """Return the crossings of the borders of regions, numbered after all other events."""
    ids = pd.Index(rows["singularity"])
    before = ids.get_indexer(rows["previous"])
    b = np.flatnonzero((rows["previous"].to_numpy() >= 0) & (inside != inside[before]))
    a = before[b]
    frame, place = rows["frame"].to_numpy(), rows[["y_px", "x_px"]].to_numpy()
    middle = 0.5 * (place[a] + place[b])
    scale = state.found.um_per_px
    first = int(events["event"].max()) + 1 if len(events) else 0
    return pd.DataFrame(
        {
            "event": first + np.arange(len(b)),
            "kind": np.where(inside[b], "entry", "exit"),
            "frame_before": frame[a],
            "frame_after": frame[b],
            "time_s": state.found.time_s(0.5 * (frame[a] + frame[b])),
            "y_px": middle[:, 0],
            "x_px": middle[:, 1],
            "y_um": middle[:, 0] * scale,
            "x_um": middle[:, 1] * scale,
            "tracks": rows["track"].to_numpy()[b].astype(str),
        }
    )


def _relinked(linked: pd.DataFrame) -> pd.DataFrame:
    """Say of rows that come back from a part left out that they are joined over a gap."""
    begins = (linked["track"] != linked["track"].shift()).to_numpy()
    away = (linked["previous"] != linked["singularity"].shift()).to_numpy()
    link = linked["link"].to_numpy(dtype=object).copy()
    link[~begins & away] = "bridged"
    link[begins] = ""
    return linked.assign(link=link)


def _named(events: pd.DataFrame, tracks: NDArray[np.int64]) -> pd.DataFrame:
    """Keep of the tracks each event names those that are left, and the events that name any."""
    left = set(tracks.tolist())
    names = [
        ";".join(name for name in text.split(";") if name and int(name) in left)
        for text in events["tracks"]
    ]
    return events.assign(tracks=names)[np.array([bool(name) for name in names], dtype=np.bool_)]


def _contradictions(state: State) -> pd.DataFrame:
    columns = (
        "edit", "kind", "frame", "y_px", "x_px", "contradiction", "reason", "author", "time",
    )  # fmt: skip
    listed = [
        (
            number, edit.kind, edit.frame, edit.where[0], edit.where[1], told,
            edit.reason, edit.author, edit.time,
        )
        for number, (edit, told) in state.contradictions.items()
    ]  # fmt: skip
    return pd.DataFrame(listed, columns=list(columns))
