"""Tables to napari layers and back: the one place that knows the column order of layers.

Nothing here needs a viewer. Layer data are always frame numbers and hologram pixels; what turns
them into seconds and micrometres is the layer's scale, so that changed optics move no data.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.optics import Optics
from hologyre.tables import EVENTS, SINGULARITIES, TRAJECTORIES, conform

_POINT = ["frame", "y_px", "x_px"]
_TRACK = ["track", *_POINT]


@dataclass(frozen=True)
class Placement:
    """How layers over (t, y, x) lie in the world.

    Parameters
    ----------
    scale : (float, float, float)
        Seconds a frame and micrometres a pixel; 1 where the optics do not tell.
    units : (str, str, str)
        Their units; `pixel` stands for a frame or a pixel of unknown size.
    """

    scale: tuple[float, float, float]
    units: tuple[str, str, str]

    def of(self, ndim: int) -> dict[str, Any]:
        """Return the layer arguments for the last `ndim` of the axes t, y, x."""
        return {
            "scale": self.scale[-ndim:],
            "translate": (0.0,) * ndim,
            "units": self.units[-ndim:],
            "axis_labels": ("t", "y", "x")[-ndim:],
        }


def placement(optics: Optics) -> Placement:
    """Return the scale and units of every layer that goes with a stack of these optics."""
    interval, pixel = optics.frame_interval_s, optics.pixel_um
    space = "pixel" if pixel is None else "um"
    return Placement(
        (1.0 if interval is None else interval, *(1.0 if pixel is None else pixel,) * 2),
        ("pixel" if interval is None else "s", space, space),
    )


def points_from_singularities(table: pd.DataFrame) -> tuple[NDArray[np.float64], pd.DataFrame]:
    """Return the (n, 3) points (frame, y_px, x_px) of a table and its other columns."""
    return _split(table, _POINT)


def singularities_from_points(data: NDArray[Any], features: pd.DataFrame) -> pd.DataFrame:
    """Return the table of singularities that points and their features stand for."""
    return conform(_join(data, features, _POINT), SINGULARITIES)


def tracks_from_trajectories(
    table: pd.DataFrame, events: pd.DataFrame
) -> tuple[NDArray[np.float64], pd.DataFrame, dict[int, list[int]]]:
    """Return track vertices, their features and the graph that joins tracks.

    Parameters
    ----------
    table : DataFrame
        Trajectories, in any order.
    events : DataFrame
        Events; splits and merges become links between tracks. In a pair birth no track comes
        from another, so it is no link.

    Returns
    -------
    data : (n, 4) array
        track, frame, y_px, x_px, sorted by track and frame as napari keeps them.
    features : DataFrame
        The other columns, row by row.
    graph : dict
        From a track to the tracks it comes from.
    """
    ordered = table.sort_values(["track", "frame"], kind="stable", ignore_index=True)
    data, features = _split(ordered, _TRACK)
    return data, features, _graph(ordered, events)


def trajectories_from_tracks(data: NDArray[Any], features: pd.DataFrame) -> pd.DataFrame:
    """Return the table of trajectories that track vertices and their features stand for."""
    return conform(_join(data, features, _TRACK), TRAJECTORIES)


def points_from_events(events: pd.DataFrame) -> tuple[NDArray[np.float64], pd.DataFrame]:
    """Return a point on the first frame after each event that has a place, and the other columns.

    An event lies between two frames; it is shown where its outcome is first seen, or where what
    ended was last seen.
    """
    known = conform(events, EVENTS).reset_index(drop=True)
    ends = known["kind"].isin(["pair_death", "exit"])
    known["frame"] = known["frame_after"].where(~ends, known["frame_before"])
    placed = known["y_px"].notna() & known["x_px"].notna()
    return _split(known[placed], _POINT)


def vectors_from_wavevector(
    wavevector: NDArray[np.floating], *, along_side: int = 24
) -> NDArray[np.float64]:
    """Return arrows of the local wavevector on a coarse grid.

    Parameters
    ----------
    wavevector : (2, y, x) array
        (ky, kx) in rad/px on the hologram's pixels.
    along_side : int
        Number of arrows along the longer side. Half of the arrows are shorter than half their
        distance; none is drawn longer than the distance, since next to a singularity the
        wavevector has no bound.

    Returns
    -------
    (n, 2, 2) array
        Origin and direction of each arrow, (y, x) in pixels. Points without a finite wavevector
        are left out.
    """
    _, ny, nx = wavevector.shape
    spacing = max(4, round(max(ny, nx) / along_side))
    rows, columns = np.arange(spacing // 2, ny, spacing), np.arange(spacing // 2, nx, spacing)
    arrows = np.moveaxis(wavevector[:, rows[:, None], columns], 0, -1).reshape(-1, 2)
    origins = np.stack(np.meshgrid(rows, columns, indexing="ij"), -1).reshape(-1, 2)
    finite = np.isfinite(arrows).all(axis=1)
    arrows, origins = arrows[finite].astype(np.float64), origins[finite].astype(np.float64)
    length = np.hypot(arrows[:, 0], arrows[:, 1])
    middle = np.median(length) if len(length) else 0.0
    if middle > 0:
        drawn = np.minimum(length / middle * spacing / 2, spacing)
        arrows *= (drawn / np.maximum(length, np.finfo(float).tiny))[:, None]
    return np.stack([origins, arrows], axis=1)


def _split(table: pd.DataFrame, position: list[str]) -> tuple[NDArray[np.float64], pd.DataFrame]:
    data = table[position].to_numpy(dtype=np.float64)
    return data, table.drop(columns=position).reset_index(drop=True)


def _join(data: NDArray[Any], features: pd.DataFrame, position: list[str]) -> pd.DataFrame:
    table = features.reset_index(drop=True)
    for name, values in zip(position, np.asarray(data, dtype=np.float64).T, strict=True):
        table[name] = values if name.endswith("_px") else np.rint(values).astype(np.int64)
    return table


def _graph(table: pd.DataFrame, events: pd.DataFrame) -> dict[int, list[int]]:
    """Read parents and children of splits and merges off the frames the tracks live in."""
    first, last = table.groupby("track")["frame"].min(), table.groupby("track")["frame"].max()
    graph: dict[int, list[int]] = {}
    joins = events[events["kind"].isin(["split", "merge"])] if len(events) else events
    for row in joins.itertuples():
        tracks = [int(t) for t in str(row.tracks).split(";") if t and int(t) in first.index]
        parents = [t for t in tracks if last[t] <= row.frame_before]
        for child in (t for t in tracks if first[t] >= row.frame_after):
            graph.setdefault(child, []).extend(parents)
    return {child: parents for child, parents in graph.items() if parents}
