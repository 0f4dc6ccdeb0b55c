"""How often a field turns around zero along lattice edges, counted so that it adds up.

A turn is counted where an edge's image crosses the negative real axis. With one half of the
axis closed and the other open, counts along edges add to the winding of any closed path, to
the unit and without rounding.
"""

from __future__ import annotations

import numba
import numpy as np
from numpy.typing import NDArray

from hologyre.singularities.kernel import HALO, scratch, value_at

BEND_SLACK = 1.25
"""How much an edge may bend beyond what its ends' second differences say."""

_DEEPEST = 40
_MOST_PIECES = 200


@numba.njit(cache=True, nogil=True)
def chord_turns(a, b):  # type: ignore[no-untyped-def]
    """Return the signed crossings of the negative real axis by the segment from a to b."""
    above_a, above_b = a.imag >= 0.0, b.imag >= 0.0
    if above_a == above_b:
        return 0
    cross = a.real * b.imag - a.imag * b.real
    if above_b:
        return -1 if cross < 0.0 else 0
    return 1 if cross > 0.0 else 0


@numba.njit(cache=True, nogil=True)
def chord_clear(a, b, bow):  # type: ignore[no-untyped-def]
    """Tell whether no curve within `bow` of the segment from a to b can reach zero."""
    d_re, d_im = b.real - a.real, b.imag - a.imag
    length = d_re * d_re + d_im * d_im
    along = -(a.real * d_re + a.imag * d_im)
    if along <= 0.0:
        return a.real * a.real + a.imag * a.imag > bow * bow
    if along >= length:
        return b.real * b.real + b.imag * b.imag > bow * bow
    cross = a.real * b.imag - a.imag * b.real
    return cross * cross > bow * bow * length


@numba.njit(cache=True, nogil=True)
def edge_turns(planes, table, y, x, dy, dx, a, b, bend, work):  # type: ignore[no-untyped-def]
    """Return the turns of the field along the edge from (y, x) to (y + dy, x + dx).

    `bend` bounds the second difference over the edge. It is halved until every piece's chord
    is clear of zero; a zero on the edge itself falls to one side by the half-open rule.
    """
    if chord_clear(a, b, bend / 8.0):
        return chord_turns(a, b)
    start = np.empty(_DEEPEST)
    size = np.empty(_DEEPEST)
    first = np.empty(_DEEPEST, dtype=np.complex128)
    last = np.empty(_DEEPEST, dtype=np.complex128)
    start[0], size[0], first[0], last[0] = 0.0, 1.0, a, b
    top, turns, pieces = 1, 0, 0
    while top > 0:
        top -= 1
        t, s, p, q = start[top], size[top], first[top], last[top]
        done = top >= _DEEPEST - 2 or pieces > _MOST_PIECES
        if done or chord_clear(p, q, bend * s * s / 8.0):
            turns += chord_turns(p, q)
            continue
        pieces += 1
        half = t + s / 2.0
        m = value_at(planes, table, y + half * dy, x + half * dx, work)
        start[top], size[top], first[top], last[top] = t, s / 2.0, p, m
        top += 1
        start[top], size[top], first[top], last[top] = half, s / 2.0, m, q
        top += 1
    return turns


@numba.njit(cache=True, nogil=True)
def bends(planes):  # type: ignore[no-untyped-def]
    """Return the field's second differences at the nodes.

    Returns
    -------
    (4, ny, nx) float32 array
        Size of the one along y and of the one along x; real and imaginary part of their sum.
    """
    ny, nx = planes.shape[1] - 2 * HALO, planes.shape[2] - 2 * HALO
    # Bounds and directions only: single precision halves what has to be written and read.
    out = np.empty((4, ny, nx), dtype=np.float32)
    for j in range(ny):
        above, here, below = planes[:, j + HALO - 1], planes[:, j + HALO], planes[:, j + HALO + 1]
        for i in range(nx):
            c = i + HALO
            re, im = 2.0 * here[0, c], 2.0 * here[1, c]
            y_re, y_im = above[0, c] + below[0, c] - re, above[1, c] + below[1, c] - im
            x_re = here[0, c - 1] + here[0, c + 1] - re
            x_im = here[1, c - 1] + here[1, c + 1] - im
            out[0, j, i] = np.sqrt(y_re * y_re + y_im * y_im)
            out[1, j, i] = np.sqrt(x_re * x_re + x_im * x_im)
            out[2, j, i] = y_re + x_re
            out[3, j, i] = y_im + x_im
    return out


@numba.njit(cache=True, nogil=True)
def lattice_turns(planes, table, bend):  # type: ignore[no-untyped-def]
    """Return the turns along all edges: along y (ny-1, nx) and along x (ny, nx-1)."""
    ny, nx = planes.shape[1] - 2 * HALO, planes.shape[2] - 2 * HALO
    along_y = np.empty((ny - 1, nx), dtype=np.int8)
    along_x = np.empty((ny, nx - 1), dtype=np.int8)
    # The edges whose chord may deceive are few: first find them, then look closer.
    doubt = np.empty(nx, dtype=np.bool_)
    work = scratch()
    for j in range(ny):
        re, im = planes[0, j + HALO], planes[1, j + HALO]
        for axis in range(2):
            if axis == 0 and j == ny - 1:
                continue
            dy, dx = 1 - axis, axis
            end_re = planes[0, j + HALO + dy]
            end_im = planes[1, j + HALO + dy]
            count = nx - dx
            out = along_x[j] if axis == 1 else along_y[j]
            here, there = bend[axis, j], bend[axis, j + dy]
            for i in range(count):
                a_re, a_im = re[i + HALO], im[i + HALO]
                b_re, b_im = end_re[i + HALO + dx], end_im[i + HALO + dx]
                d_re, d_im = b_re - a_re, b_im - a_im
                bow = BEND_SLACK / 8.0 * max(here[i], there[i + dx])
                length = d_re * d_re + d_im * d_im
                cross = a_re * b_im - a_im * b_re
                near = cross * cross <= bow * bow * length
                # The foot of zero's perpendicular lies on the chord, or an end is close to zero.
                between = a_re * d_re + a_im * d_im < 0.0 and b_re * d_re + b_im * d_im > 0.0
                ends = min(a_re * a_re + a_im * a_im, b_re * b_re + b_im * b_im) <= bow * bow
                doubt[i] = near and (between or ends)
                up, over = a_im >= 0.0, b_im >= 0.0
                out[i] = (up and not over and cross > 0.0) - (over and not up and cross < 0.0)
            for i in range(count):
                if doubt[i]:
                    out[i] = edge_turns(
                        planes,
                        table,
                        float(j),
                        float(i),
                        float(dy),
                        float(dx),
                        complex(re[i + HALO], im[i + HALO]),
                        complex(end_re[i + HALO + dx], end_im[i + HALO + dx]),
                        BEND_SLACK * max(here[i], there[i + dx]),
                        work,
                    )
    return along_y, along_x


def cell_turns(turns_y: NDArray[np.int8], turns_x: NDArray[np.int8]) -> NDArray[np.int8]:
    """Return the winding of every cell from the turns along its edges."""
    return turns_x[:-1] + turns_y[:, 1:] - turns_x[1:] - turns_y[:, :-1]


def dark_cells(planes: NDArray[np.float64], floor: float) -> NDArray[np.bool_]:
    """Tell the cells at all of whose corners the field is below `floor`, the arithmetic's error."""
    inner = planes[:, HALO:-HALO, HALO:-HALO]
    dark = np.maximum(np.abs(inner[0]), np.abs(inner[1])) <= floor
    cells: NDArray[np.bool_] = dark[:-1, :-1] & dark[:-1, 1:] & dark[1:, :-1] & dark[1:, 1:]
    return cells


@numba.njit(cache=True, nogil=True)
def path_turns(planes, table, corners, bend):  # type: ignore[no-untyped-def]
    """Return the turns along a closed polygon of node coordinates (y, x), and |E| at its least.

    `bend` bounds the second difference along any step of unit length.
    """
    work = scratch()
    turns, least = 0, np.inf
    for n in range(corners.shape[0]):
        y, x = corners[n]
        to_y, to_x = corners[(n + 1) % corners.shape[0]]
        count = max(int(np.ceil(max(abs(to_y - y), abs(to_x - x)))), 1)
        dy, dx = (to_y - y) / count, (to_x - x) / count
        a = value_at(planes, table, y, x, work)
        for k in range(1, count + 1):
            v, u = (y + (k - 1) * dy, x + (k - 1) * dx)
            at_y, at_x = (to_y, to_x) if k == count else (y + k * dy, x + k * dx)
            b = value_at(planes, table, at_y, at_x, work)
            turns += edge_turns(planes, table, v, u, dy, dx, a, b, bend, work)
            least = min(least, abs(b))
            a = b
    return turns, least
