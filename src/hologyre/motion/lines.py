"""Vortex lines in space: the zeros of a field followed through refocused planes."""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hologyre.grid import Field
from hologyre.motion.slabs import Slab, slabs
from hologyre.motion.ties import BORDER, Nodes, on_zeros, tie
from hologyre.motion.trace import follow
from hologyre.singularities.locate import locate_singularities

_LONGEST = 0.1
_MOST_POINTS = 5000


@dataclass(frozen=True)
class VortexLines:
    """Lines of zeros in (y, x, z).

    Parameters
    ----------
    points : DataFrame
        line, point, y_px, x_px, z_um, y_um, x_um; points in the order in which the line runs
        along grad Re E x grad Im E: a section of constant z has charge +1 where z grows.
    lines : DataFrame
        line, closed, points, length_um, z_min_um, z_max_um, and the ends of open lines, start
        and end: "first plane", "last plane", "border" or "lost"; "" for closed ones.
    """

    points: pd.DataFrame
    lines: pd.DataFrame


def vortex_lines(
    planes: Iterable[Field], z_um: Sequence[float], *, pixel_um: float, margin_px: float = 0.0
) -> VortexLines:
    """Follow vortex lines through a volume, plane by plane.

    Parameters
    ----------
    planes : iterable of Field
        The field in every plane, on one grid, such as one hologram refocused; taken one after
        another, no more than ten are held.
    z_um : sequence of float
        The planes' depths in the object, in equal steps, increasing, um. Steps over which the
        field changes by less than a radian beside its common phase are followed safely.
    pixel_um : float
        Size of a hologram pixel in the object, um.
    margin_px : float
        Width of the rim along the border that lines are not followed into.

    Returns
    -------
    VortexLines
        All lines that meet one of the planes. A closed loop that lies wholly between two
        planes is not seen.

    Raises
    ------
    ValueError
        If the depths are not in equal increasing steps or not as many as planes, or the pixel
        is not positive.

    Notes
    -----
    The same tracing as through time (`follow_threads`): a line that turns back in z is a pair
    of opposite charges that meets there. Vortex lines have no ends but the volume's border and
    may close in loops (M. V. Berry and M. R. Dennis, Proc. R. Soc. Lond. A 457, 2251, 2001).
    """
    depth = np.asarray(z_um, dtype=np.float64)
    if depth.ndim != 1 or len(depth) < 2:
        raise ValueError(f"z_um: expected at least two depths, got {z_um!r}")
    steps = np.diff(depth)
    if not (steps > 0).all() or np.ptp(steps) > 1e-6 * steps.mean():
        raise ValueError("z_um: expected equal increasing steps")
    if not 0 < pixel_um < np.inf:
        raise ValueError(f"pixel_um: expected a positive number, got {pixel_um!r}")
    segments: list[_Segment] = []
    tables: list[pd.DataFrame] = []
    stream = _located(planes, tables, margin_px)
    near: Nodes | None = None
    offset = 0
    for count, slab in enumerate(slabs(stream, margin_px=margin_px)):
        if count + 1 >= len(depth):
            raise ValueError(f"z_um: {len(depth)} depths for more planes")
        if near is None:
            near = _nodes(slab, 0.0, tables[0])
        far = _nodes(slab, 1.0, tables[count + 1])
        z = depth[count], steps[count]
        segments += _segments(slab, near, far, offset, z)
        offset += len(near)
        near = far
    if len(tables) != len(depth):
        raise ValueError(f"z_um: {len(depth)} depths for {len(tables)} planes")
    total = offset + (0 if near is None else len(near))
    first = len(tables[0]) if near is not None else 0
    return _assemble(segments, total, (first, offset), pixel_um)


@dataclass(frozen=True, eq=False)
class _Segment:
    """A piece of a line within one slab, in the order in which the line runs.

    `start` and `end` are nodes, or -1 at the border; `path` is (y_px, x_px, z_um).
    """

    start: int
    end: int
    path: NDArray[np.float64]


def _located(
    planes: Iterable[Field], tables: list[pd.DataFrame], margin_px: float
) -> Iterator[Field]:
    """Pass planes on, and note their zeros."""
    for plane in planes:
        tables.append(locate_singularities(plane, margin_px=margin_px))
        yield plane


def _nodes(slab: Slab, u: float, table: pd.DataFrame) -> Nodes:
    nodes, found = on_zeros(slab, u, table[["y_px", "x_px"]].to_numpy(), table["charge"].to_numpy())
    del found  # zeros of one interpolant: those not found are the same zero twice
    return nodes


def _segments(
    slab: Slab, near: Nodes, far: Nodes, offset: int, z: tuple[float, float]
) -> list[_Segment]:
    """Return the pieces of all lines in a slab; nodes are numbered from `offset`."""
    mate = tie(slab, near, far).mate
    charge = np.concatenate([near.charge, far.charge])
    place = np.concatenate([near.place, far.place])
    found = []
    path = np.empty((_MOST_POINTS, 3))
    for k in range(len(mate)):
        if mate[k] != BORDER and mate[k] <= k:
            continue
        begins_far = k >= len(near)
        *_, count = follow(
            slab.samples,
            slab.series,
            place[k, 0],
            place[k, 1],
            begins_far,
            slab.unit,
            slab.frame.bounds,
            _LONGEST,
            path,
        )
        line = np.empty((count, 3))
        line[:, :2] = slab.frame.to_px(path[:count, :2])
        line[:, 2] = z[0] + z[1] * path[:count, 2]
        ends = offset + k, -1 if mate[k] == BORDER else offset + int(mate[k])
        # it leaves the near plane upwards: along the line where the charge is positive
        if (charge[k] > 0) == begins_far:
            line, ends = line[::-1], ends[::-1]
        found.append(_Segment(*ends, line))
    return found


def _assemble(
    segments: list[_Segment], total: int, planes: tuple[int, int], pixel_um: float
) -> VortexLines:
    """Join the pieces at their nodes; nodes below and from `planes` lie on the outer planes."""
    after = np.full(total, -1, dtype=np.int64)
    before = np.full(total, -1, dtype=np.int64)
    for number, segment in enumerate(segments):
        if segment.start >= 0:
            after[segment.start] = number
        if segment.end >= 0:
            before[segment.end] = number

    def end_of(node: int) -> str:
        if node < 0:
            return "border"
        if node < planes[0]:
            return "first plane"
        return "last plane" if node >= planes[1] else "lost"

    free = [
        number
        for number, segment in enumerate(segments)
        if segment.start < 0 or before[segment.start] < 0
    ]
    used = np.zeros(len(segments), dtype=np.bool_)
    points: list[pd.DataFrame] = []
    lines: list[dict[str, object]] = []
    for first in itertools.chain(free, range(len(segments))):
        if used[first]:
            continue
        chain = []
        number = first
        while number >= 0 and not used[number]:
            used[number] = True
            chain.append(segments[number])
            number = int(after[chain[-1].end]) if chain[-1].end >= 0 else -1
        closed = number == first
        path = np.concatenate([chain[0].path[:1], *(s.path[1:] for s in chain)])
        scaled = path * (pixel_um, pixel_um, 1.0)
        line = len(lines)
        lines.append(
            {
                "line": line,
                "closed": closed,
                "points": len(path),
                "length_um": float(np.linalg.norm(np.diff(scaled, axis=0), axis=1).sum()),
                "z_min_um": float(path[:, 2].min()),
                "z_max_um": float(path[:, 2].max()),
                "start": "" if closed else end_of(chain[0].start),
                "end": "" if closed else end_of(chain[-1].end),
            }
        )
        points.append(
            pd.DataFrame(
                {
                    "line": line,
                    "point": np.arange(len(path)),
                    "y_px": path[:, 0],
                    "x_px": path[:, 1],
                    "z_um": path[:, 2],
                    "y_um": scaled[:, 0],
                    "x_um": scaled[:, 1],
                }
            )
        )
    if not lines:
        return VortexLines(_no_points(), _no_lines())
    return VortexLines(pd.concat(points, ignore_index=True), pd.DataFrame(lines))


def _no_points() -> pd.DataFrame:
    types = dict.fromkeys(("line", "point"), "int64")
    types |= dict.fromkeys(("y_px", "x_px", "z_um", "y_um", "x_um"), "float64")
    return pd.DataFrame({name: pd.Series(dtype=kind) for name, kind in types.items()})


def _no_lines() -> pd.DataFrame:
    types = {"line": "int64", "closed": "bool", "points": "int64"}
    types |= dict.fromkeys(("length_um", "z_min_um", "z_max_um"), "float64")
    types |= dict.fromkeys(("start", "end"), "str")
    return pd.DataFrame({name: pd.Series(dtype=kind) for name, kind in types.items()})
