"""What hands have done to a layer: its points and lines held against what was drawn there."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, NamedTuple

import numpy as np
import pandas as pd
from napari.layers import Points, Shapes
from numpy.typing import NDArray

from hologyre.edits.kinds import Point
from hologyre.viewer.styles import NEGATIVE, POSITIVE

_MOVED_PX = 1e-3
_SYMBOLS = {1: "triangle_up", -1: "triangle_down"}


class Changes(NamedTuple):
    """Points that came, rows whose points went, and rows whose points lie elsewhere."""

    added: list[Point]
    removed: list[int]
    moved: list[tuple[int, Point]]


def changed_points(drawn: pd.DataFrame, data: NDArray[Any], ids: Sequence[int]) -> Changes:
    """Compare points with the table they were drawn from.

    Parameters
    ----------
    drawn : DataFrame
        Columns singularity, y_px and x_px.
    data : (n, 2) array
        The points as they are, (y_px, x_px).
    ids : sequence of int
        The singularity each is; one that is not in the table, or comes twice, is new.
    """
    row_of = {int(name): row for row, name in enumerate(drawn["singularity"])}
    place = drawn[["y_px", "x_px"]].to_numpy(dtype=np.float64)
    added: list[Point] = []
    moved: list[tuple[int, Point]] = []
    for name, (y, x) in zip(ids, np.asarray(data, dtype=np.float64).tolist(), strict=True):
        row = row_of.pop(int(name), None)
        if row is None:
            added.append((y, x))
        elif np.hypot(y - place[row, 0], x - place[row, 1]) > _MOVED_PX:
            moved.append((row, (y, x)))
    return Changes(added, sorted(row_of.values()), moved)


def draw_points(layer: Points, table: pd.DataFrame) -> None:
    """Show a frame's singularities in a layer, those selected still selected.

    Where the layer shows them already, nothing is drawn; else it is drawn once.
    """
    features = table[["singularity", "charge", "track", "trust", "origin"]].reset_index(drop=True)
    # pandas lends its values to be read only, and napari drags points in place
    place = np.array(table[["y_px", "x_px"]], dtype=np.float64)
    if layer.features.equals(features) and np.array_equal(layer.data, place):
        return
    chosen = set(selected_ids(layer))
    charge = table["charge"].to_numpy()
    layer.selected_data = set()
    with layer.events.blocker_all():
        layer.data = place
        layer.features = features
        layer.feature_defaults = {
            "singularity": -1, "charge": 0, "track": -1, "trust": np.nan, "origin": "placed",
        }  # fmt: skip
        if len(table):
            colours = np.array([_rgba(NEGATIVE), _rgba(POSITIVE)])
            layer.face_color = colours[(charge > 0).astype(np.intp)]
            layer.symbol = np.where(charge > 0, _SYMBOLS[1], _SYMBOLS[-1])
    layer.refresh()
    if chosen:
        layer.selected_data = set(np.flatnonzero(table["singularity"].isin(chosen)).tolist())


def selected_ids(layer: Points) -> list[int]:
    """Return the singularities whose points are selected."""
    if "singularity" not in layer.features:
        return []
    names = layer.features["singularity"].to_numpy()
    return [int(names[i]) for i in sorted(layer.selected_data) if i < len(names)]


class Drawn(NamedTuple):
    """A line as drawn: the number of its edit and its places."""

    number: int
    where: tuple[Point, ...]


def changed_lines(drawn: Sequence[Drawn], shapes: Sequence[Drawn]) -> tuple[
    list[tuple[Point, ...]], list[int]
]:  # fmt: skip
    """Compare lines with what was drawn; return those to add and numbers of those to take out.

    A line with other corners is taken out and added anew; one whose number is not known, or
    comes twice, is new.
    """
    left = {one.number: one for one in drawn}
    added: list[tuple[Point, ...]] = []
    removed: list[int] = []
    for shape in shapes:
        before = left.pop(shape.number, None)
        if before is None:
            added.append(shape.where)
        elif not _same(before.where, shape.where):
            added.append(shape.where)
            removed.append(shape.number)
    return added, sorted([*removed, *left])


def draw_lines(layer: Shapes, lines: Sequence[Drawn], shape: str) -> None:
    """Show lines, or polygons, in a layer."""
    layer.data = ([np.array(one.where) for one in lines], [shape] * len(lines)) if lines else []
    layer.features = pd.DataFrame({"edit": [one.number for one in lines]}, dtype="int64")
    layer.feature_defaults = {"edit": -1}


def lines_in(layer: Shapes) -> list[Drawn]:
    """Return the lines a layer holds now, outlines closed."""
    known = "edit" in layer.features
    numbers = layer.features["edit"].to_numpy() if known else np.full(layer.nshapes, -1)
    return [
        Drawn(int(number), tuple((float(y), float(x)) for y, x in corners))
        for number, corners in zip(numbers, layer.data, strict=True)
    ]


def _same(first: tuple[Point, ...], second: tuple[Point, ...]) -> bool:
    return len(first) == len(second) and bool(np.allclose(first, second, rtol=0, atol=_MOVED_PX))


def _rgba(colour: str) -> tuple[float, float, float, float]:
    red, green, blue = (int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5))
    return (red, green, blue, 1.0)
