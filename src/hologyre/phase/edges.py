"""Edges between neighbouring pixels, and the edges that a drawn line meets."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray


@dataclass(frozen=True, eq=False)
class PixelEdges:
    """A set of edges between neighbouring pixels.

    Parameters
    ----------
    y : (y - 1, x) bool array
        ``y[j, i]`` is the edge between pixels (j, i) and (j + 1, i).
    x : (y, x - 1) bool array
        ``x[j, i]`` is the edge between pixels (j, i) and (j, i + 1).
    """

    y: NDArray[np.bool_]
    x: NDArray[np.bool_]

    def __post_init__(self) -> None:
        for name, edges in (("y", self.y), ("x", self.x)):
            if np.asarray(edges).dtype != np.bool_ or np.ndim(edges) != 2:
                raise TypeError(
                    f"{name}: expected a 2-D bool array, got {np.asarray(edges).dtype} "
                    f"of shape {np.shape(edges)}"
                )
        ny, nx = self.shape
        if self.y.shape != (ny - 1, nx):
            raise ValueError(
                f"y: expected shape {(ny - 1, nx)} beside x of shape {self.x.shape}, "
                f"got {self.y.shape}"
            )

    @classmethod
    def none(cls, shape: tuple[int, int]) -> PixelEdges:
        """Return the empty set for a frame of `shape` (y, x) pixels."""
        ny, nx = shape
        return cls(np.zeros((ny - 1, nx), np.bool_), np.zeros((ny, nx - 1), np.bool_))

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns of the frame's pixels."""
        return self.x.shape[0], self.x.shape[1] + 1

    def __or__(self, other: PixelEdges) -> PixelEdges:
        return PixelEdges(self.y | other.y, self.x | other.x)


EdgesOrLines = PixelEdges | Sequence[NDArray[np.floating]]


def edges_crossed(line: ArrayLike, shape: tuple[int, int]) -> PixelEdges:
    """Return the edges that a drawn line crosses: where a cut along the line would run.

    Parameters
    ----------
    line : (n, 2) array_like
        Vertices (y_px, x_px) of an open polyline, in pixels. It may leave the frame.
    shape : (int, int)
        Rows and columns of the frame.

    Returns
    -------
    PixelEdges
        The edges whose end pixels lie on different sides of the line. They form an unbroken
        path from plaquette to plaquette, so that a cut can follow it from end to end.

    Raises
    ------
    ValueError
        If `line` is not (n, 2) with at least 2 finite vertices.
    """
    # Plaquette (j, i) is the unit square around (j + 0.5, i + 0.5): the squares that the
    # line passes through, one after another, are the path of the cut.
    walk = _cells(_checked_line(line), offset_px=0.0)
    edges = PixelEdges.none(shape)
    low = np.minimum(walk[:-1], walk[1:])
    down = walk[:-1, 0] != walk[1:, 0]
    # A step down or up between plaquettes crosses an x edge in the lower one's first row.
    _mark(edges.x, low[down] + (1, 0))
    _mark(edges.y, low[~down] + (0, 1))
    return edges


def edges_along(line: ArrayLike, shape: tuple[int, int]) -> PixelEdges:
    """Return the edges that a drawn line runs along: those no cut may cross.

    Parameters
    ----------
    line : (n, 2) array_like
        Vertices (y_px, x_px) of an open polyline, in pixels. It may leave the frame.
    shape : (int, int)
        Rows and columns of the frame.

    Returns
    -------
    PixelEdges
        The edges between the pixels the line passes through, one after another. A cut that
        crosses the line would cross one of them.

    Raises
    ------
    ValueError
        If `line` is not (n, 2) with at least 2 finite vertices.
    """
    walk = _cells(_checked_line(line), offset_px=0.5)
    edges = PixelEdges.none(shape)
    low = np.minimum(walk[:-1], walk[1:])
    down = walk[:-1, 0] != walk[1:, 0]
    _mark(edges.y, low[down])
    _mark(edges.x, low[~down])
    return edges


def _checked_line(line: ArrayLike) -> NDArray[np.float64]:
    vertices = np.asarray(line, dtype=np.float64)
    if vertices.ndim != 2 or vertices.shape[1] != 2 or len(vertices) < 2:
        raise ValueError(
            f"line: expected at least 2 vertices (y_px, x_px), shape (n, 2), got {vertices.shape}"
        )
    if not np.isfinite(vertices).all():
        raise ValueError("line: expected finite vertices (y_px, x_px), got NaN or infinity")
    return vertices


def _cells(vertices: NDArray[np.float64], *, offset_px: float) -> NDArray[np.int64]:
    """List the unit cells a polyline passes through, each a side's neighbour of the last."""
    cells = [np.floor(vertices[:1] + offset_px).astype(np.int64)]
    for start, end in zip(vertices[:-1] + offset_px, vertices[1:] + offset_px, strict=True):
        first, last = np.floor(start).astype(np.int64), np.floor(end).astype(np.int64)
        count = np.abs(last - first)
        direction = np.sign(last - first)
        times, axes = [], []
        for axis in (0, 1):
            # Fractions of the segment at which it meets the lattice lines of this axis.
            lines = first[axis] + direction[axis] * np.arange(count[axis])
            lines += direction[axis] > 0
            times.append((lines - start[axis]) / ((end - start)[axis] or 1.0))
            axes.append(np.full(count[axis], axis))
        axis_of_step = np.concatenate(axes)[np.argsort(np.concatenate(times), kind="stable")]
        steps = np.zeros((len(axis_of_step), 2), np.int64)
        steps[np.arange(len(axis_of_step)), axis_of_step] = direction[axis_of_step]
        cells.append(first + np.cumsum(steps, axis=0))
    return np.concatenate(cells)


def _mark(edges: NDArray[np.bool_], where: NDArray[np.int64]) -> None:
    """Set the edges that lie in the frame."""
    inside = ((where >= 0) & (where < edges.shape)).all(axis=1)
    j, i = where[inside].T
    edges[j, i] = True


def gathered(
    name: str,
    given: EdgesOrLines | None,
    shape: tuple[int, int],
    edges_of: Any,
) -> PixelEdges | None:
    """Return one set of edges from a set or from drawn lines.

    Raises
    ------
    ValueError
        If the set belongs to another shape.
    """
    if given is None:
        return None
    if isinstance(given, PixelEdges):
        if given.shape != shape:
            raise ValueError(f"{name}: expected edges of a frame of {shape}, got {given.shape}")
        return given
    edges = PixelEdges.none(shape)
    for line in given:
        edges |= edges_of(line, shape)
    return edges
