"""Regions, barriers and bridges drawn by hand, as unwrapping and tables take them."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hologyre.edits.kinds import Barrier, Bridge, Edit, Point, Region


def barriers(edits: Iterable[Edit], frame: int) -> list[NDArray[np.float64]]:
    """Return the barriers drawn for a frame, each (n, 2) as (y_px, x_px), for `unwrap`."""
    return _lines(edits, frame, Barrier)


def bridges(edits: Iterable[Edit], frame: int) -> list[NDArray[np.float64]]:
    """Return the bridges drawn for a frame, each (n, 2) as (y_px, x_px), for `unwrap`."""
    return _lines(edits, frame, Bridge)


def used_pixels(
    edits: Iterable[Edit], frame: int, frame_shape: tuple[int, int]
) -> NDArray[np.bool_] | None:
    """Return which pixels of a frame are to be used, (y, x); None where no region is drawn."""
    drawn = [e for e in edits if isinstance(e, Region) and e.frame in (None, frame)]
    if not drawn:
        return None
    y, x = np.indices(frame_shape, dtype=np.float64)
    return used(drawn, np.full(y.shape, frame), y, x)


def used(
    edits: Iterable[Edit], frame: ArrayLike, y_px: ArrayLike, x_px: ArrayLike
) -> NDArray[np.bool_]:
    """Tell which places are to be used.

    A place is used if it lies in some region to analyse, or there is none for its frame, and
    in no region to leave out.

    Parameters
    ----------
    edits : iterable of Edit
        All but regions are passed over.
    frame, y_px, x_px : arrays of one shape
    """
    frame, y, x = np.broadcast_arrays(
        np.asarray(frame), np.asarray(y_px, np.float64), np.asarray(x_px, np.float64)
    )
    wanted, asked = np.zeros(y.shape, np.bool_), np.zeros(y.shape, np.bool_)
    left_out = np.zeros(y.shape, np.bool_)
    for edit in edits:
        if not isinstance(edit, Region):
            continue
        here = np.ones(y.shape, np.bool_) if edit.frame is None else frame == edit.frame
        inside = here.copy()
        inside[here] = _inside(edit.where, y[here], x[here])
        if edit.use == "analyse":
            wanted |= inside
            asked |= here
        else:
            left_out |= inside
    return (wanted | ~asked) & ~left_out


def _lines(edits: Iterable[Edit], frame: int, kind: type[Edit]) -> list[NDArray[np.float64]]:
    return [
        np.array(edit.where)
        for edit in edits
        if isinstance(edit, kind) and edit.frame in (None, frame)
    ]


def _inside(
    polygon: tuple[Point, ...], y: NDArray[np.float64], x: NDArray[np.float64]
) -> NDArray[np.bool_]:
    """Tell which points a polygon holds, by the number of its sides to their right."""
    inside = np.zeros(y.shape, np.bool_)
    for (y0, x0), (y1, x1) in zip(polygon, (*polygon[1:], polygon[0]), strict=True):
        crosses = (y0 > y) != (y1 > y)
        if y0 != y1:
            inside ^= crosses & (x < x0 + (y - y0) * (x1 - x0) / (y1 - y0))
    return inside
