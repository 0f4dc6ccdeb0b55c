"""How often a field turns around zero along lattice edges, counted so that it adds up.

A turn is counted where an edge's image crosses the negative real axis. With one half of the
axis closed and the other open, counts along edges add to the winding of any closed path, to
the unit and without rounding.
"""

from __future__ import annotations

import numba
import numpy as np

from hologyre.singularities.kernel import HALO, value_at

_EDGE_DEPTH = 40
_EDGE_PIECES = 200


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
def edge_turns(samples, table, y, x, dy, dx, a, b, bend, work):  # type: ignore[no-untyped-def]
    """Return the turns of the true field along the edge from (y, x) to (y + dy, x + dx).

    `bend` bounds the second difference over the edge. Halved until every piece's chord is
    clear of zero; a zero on the edge itself falls to one side by the half-open rule.
    """
    if chord_clear(a, b, bend / 8.0):
        return chord_turns(a, b)
    start = np.empty(_EDGE_DEPTH + 2)
    size = np.empty(_EDGE_DEPTH + 2)
    first = np.empty(_EDGE_DEPTH + 2, dtype=np.complex128)
    last = np.empty(_EDGE_DEPTH + 2, dtype=np.complex128)
    start[0], size[0], first[0], last[0] = 0.0, 1.0, a, b
    top, turns, pieces = 1, 0, 0
    while top > 0:
        top -= 1
        t, s, p, q = start[top], size[top], first[top], last[top]
        if s < 1e-11 or pieces > _EDGE_PIECES or chord_clear(p, q, bend * s * s / 8.0):
            turns += chord_turns(p, q)
            continue
        pieces += 1
        half = t + s / 2.0
        m = value_at(samples, table, y + half * dy, x + half * dx, work)
        start[top], size[top], first[top], last[top] = t, s / 2.0, p, m
        top += 1
        start[top], size[top], first[top], last[top] = half, s / 2.0, m, q
        top += 1
    return turns


@numba.njit(cache=True, nogil=True)
def bends(samples):  # type: ignore[no-untyped-def]
    """Return the size of the second differences along x plus along y at every node.

    Nodes one beyond the lattice on each side are included: (ny + 2, nx + 2).
    """
    ny, nx = samples.shape[0] - 2 * HALO + 2, samples.shape[1] - 2 * HALO + 2
    out = np.empty((ny, nx, 2))
    for j in range(ny):
        r = j + HALO - 1
        for i in range(nx):
            c = i + HALO - 1
            twice = 2.0 * samples[r, c]
            v = samples[r, c - 1] - twice + samples[r, c + 1]
            w = samples[r - 1, c] - twice + samples[r + 1, c]
            out[j, i, 1] = np.sqrt(v.real * v.real + v.imag * v.imag)
            out[j, i, 0] = np.sqrt(w.real * w.real + w.imag * w.imag)
    return out


@numba.njit(cache=True, nogil=True)
def lattice_turns(samples, table, bend):  # type: ignore[no-untyped-def]
    """Return the turns along all edges of the lattice: along x (ny, nx-1), along y (ny-1, nx)."""
    ny, nx = samples.shape[0] - 2 * HALO, samples.shape[1] - 2 * HALO
    along_x = np.empty((ny, nx - 1), dtype=np.int8)
    along_y = np.empty((ny - 1, nx), dtype=np.int8)
    work = np.empty((4, table.shape[1]))
    for j in range(ny):
        for i in range(nx):
            a = samples[j + HALO, i + HALO]
            if i < nx - 1:
                b = samples[j + HALO, i + HALO + 1]
                m = 1.25 * max(bend[j + 1, i + 1, 1], bend[j + 1, i + 2, 1])
                along_x[j, i] = edge_turns(
                    samples, table, float(j), float(i), 0.0, 1.0, a, b, m, work
                )
            if j < ny - 1:
                b = samples[j + HALO + 1, i + HALO]
                m = 1.25 * max(bend[j + 1, i + 1, 0], bend[j + 2, i + 1, 0])
                along_y[j, i] = edge_turns(
                    samples, table, float(j), float(i), 1.0, 0.0, a, b, m, work
                )
    return along_x, along_y
