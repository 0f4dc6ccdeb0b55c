"""The merge tree of |E|: at what level the parts of {|E| <= r} join and lose their charge.

Nodes are lattice cells with their winding; two neighbours join at the least |E| along their
common edge, and the outside is one more node. Cells without charge first fall onto their
lowest edge, which changes no level at which charges meet.
"""

from __future__ import annotations

import numba
import numpy as np

from hologyre.singularities.kernel import HALO

# Weights of the four samples on either side for the value half-way, degree 7.
_HALF = (1225 / 2048, -245 / 2048, 49 / 2048, -5 / 2048)


@numba.njit(cache=True, nogil=True)
def _nearest2(a_re, a_im, b_re, b_im):  # type: ignore[no-untyped-def]
    """Return the squared distance of the segment from a to b to zero."""
    d_re, d_im = b_re - a_re, b_im - a_im
    length = d_re * d_re + d_im * d_im + 1e-300
    t = min(max(-(a_re * d_re + a_im * d_im) / length, 0.0), 1.0)
    p_re, p_im = a_re + t * d_re, a_im + t * d_im
    return p_re * p_re + p_im * p_im


@numba.njit(cache=True, nogil=True)
def edge_levels(planes):  # type: ignore[no-untyped-def]
    """Return the least |E| along every edge: along y (ny-1, nx) and along x (ny, nx-1).

    Each edge is taken as two chords that meet at its middle.
    """
    ny, nx = planes.shape[1] - 2 * HALO, planes.shape[2] - 2 * HALO
    # For the order of levels; those that count are found again at their saddles.
    along_y = np.empty((ny - 1, nx), dtype=np.float32)
    along_x = np.empty((ny, nx - 1), dtype=np.float32)
    h0, h1, h2, h3 = _HALF
    for j in range(ny):
        re, im = planes[0, j + HALO], planes[1, j + HALO]
        for i in range(nx - 1):
            c = i + HALO
            m_re = (
                h0 * (re[c] + re[c + 1])
                + h1 * (re[c - 1] + re[c + 2])
                + h2 * (re[c - 2] + re[c + 3])
                + h3 * (re[c - 3] + re[c + 4])
            )
            m_im = (
                h0 * (im[c] + im[c + 1])
                + h1 * (im[c - 1] + im[c + 2])
                + h2 * (im[c - 2] + im[c + 3])
                + h3 * (im[c - 3] + im[c + 4])
            )
            first = _nearest2(re[c], im[c], m_re, m_im)
            along_x[j, i] = np.sqrt(min(first, _nearest2(m_re, m_im, re[c + 1], im[c + 1])))
        if j == ny - 1:
            continue
        r = j + HALO
        for i in range(nx):
            c = i + HALO
            m_re = (
                h0 * (planes[0, r, c] + planes[0, r + 1, c])
                + h1 * (planes[0, r - 1, c] + planes[0, r + 2, c])
                + h2 * (planes[0, r - 2, c] + planes[0, r + 3, c])
                + h3 * (planes[0, r - 3, c] + planes[0, r + 4, c])
            )
            m_im = (
                h0 * (planes[1, r, c] + planes[1, r + 1, c])
                + h1 * (planes[1, r - 1, c] + planes[1, r + 2, c])
                + h2 * (planes[1, r - 2, c] + planes[1, r + 3, c])
                + h3 * (planes[1, r - 3, c] + planes[1, r + 4, c])
            )
            first = _nearest2(re[c], im[c], m_re, m_im)
            last = _nearest2(m_re, m_im, planes[0, r + 1, c], planes[1, r + 1, c])
            along_y[j, i] = np.sqrt(min(first, last))
    return along_y, along_x


@numba.njit(cache=True, nogil=True)
def basins(turns, along_y, along_x):  # type: ignore[no-untyped-def]
    """Tell the basin every cell falls into: a charged cell, a low without charge, outside.

    Returns
    -------
    basin : (cells,) int32 array
        Number of the basin, 0 for the outside.
    bottom : (basins,) int32 array
        The cell at the bottom of each; -1 for the outside.
    """
    ny, nx = turns.shape
    outside = ny * nx
    to = np.empty(ny * nx, dtype=np.int32)
    for j in range(ny):
        for i in range(nx):
            here = j * nx + i
            if turns[j, i] != 0:
                to[here] = here
                continue
            best, way = along_x[j, i], here - nx if j > 0 else outside
            if along_x[j + 1, i] < best:
                best, way = along_x[j + 1, i], here + nx if j < ny - 1 else outside
            if along_y[j, i] < best:
                best, way = along_y[j, i], here - 1 if i > 0 else outside
            if along_y[j, i + 1] < best:
                best, way = along_y[j, i + 1], here + 1 if i < nx - 1 else outside
            to[here] = way
    basin = np.full(ny * nx, -1, dtype=np.int32)
    bottom = np.empty(ny * nx + 1, dtype=np.int32)
    bottom[0] = -1
    count = 1
    for here in range(ny * nx):
        at, number = here, -1
        while number < 0:
            if at == outside:
                number = 0
            elif basin[at] >= 0:
                number = basin[at]
            else:
                after = to[at]
                # A charged cell, or two lows that point at each other.
                if after == at or (after != outside and to[after] == at):
                    number = count
                    bottom[count] = at
                    count += 1
                    basin[at] = number
                else:
                    at = after
        at = here
        while at != outside and basin[at] < 0:
            basin[at] = number
            at = to[at]
    return basin, bottom[:count].copy()


@numba.njit(cache=True, nogil=True)
def passes(basin, along_y, along_x):  # type: ignore[no-untyped-def]
    """List the edges between different basins.

    Returns
    -------
    level : (n,) float32 array
        Least |E| along the edge.
    ends : (n, 2) int32 array
        The basins on either side.
    edge : (n,) int64 array
        Number of the edge: those along x first, row by row, then those along y.
    """
    ny, nx = along_y.shape[0], along_x.shape[1]
    room, count = 4096, 0
    level = np.empty(room, dtype=np.float32)
    ends = np.empty((room, 2), dtype=np.int32)
    edge = np.empty(room, dtype=np.int64)
    for axis in range(2):
        rows, columns = (ny + 1, nx) if axis == 0 else (ny, nx + 1)
        levels = along_x if axis == 0 else along_y
        start = axis * (ny + 1) * nx
        for j in range(rows):
            if count + columns > room:
                more = room + columns
                level = np.concatenate((level, np.empty(more, dtype=np.float32)))
                ends = np.concatenate((ends, np.empty((more, 2), dtype=np.int32)))
                edge = np.concatenate((edge, np.empty(more, dtype=np.int64)))
                room += more
            for i in range(columns):
                if axis == 0:
                    p = basin[(j - 1) * nx + i] if j > 0 else 0
                    q = basin[j * nx + i] if j < ny else 0
                else:
                    p = basin[j * nx + i - 1] if i > 0 else 0
                    q = basin[j * nx + i] if i < nx else 0
                if p != q:
                    level[count] = levels[j, i]
                    ends[count, 0], ends[count, 1] = p, q
                    edge[count] = start + j * columns + i
                    count += 1
    return level[:count], ends[:count], edge[:count]


@numba.njit(cache=True, nogil=True)
def _root(parent, at):  # type: ignore[no-untyped-def]
    while parent[at] != at:
        parent[at] = parent[parent[at]]
        at = parent[at]
    return at


@numba.njit(cache=True, nogil=True)
def merge(order, level, ends, charge, alike):  # type: ignore[no-untyped-def]
    """Join basins from the lowest pass up, and note where charged ones lose their charge.

    Parameters
    ----------
    order : (n,) int array
        The passes, lowest first.
    level, ends
        As `passes` gives them.
    charge : (basins,) int32 array
        Charge of each basin, 0 for the outside; changed on the way.
    alike : (basins,) array
        |E| up to which like charges that meet cannot be told apart, at each basin.

    Returns
    -------
    end : (basins,) int64 array
        For each charged basin the pass at which its part of {|E| <= r} has no charge, or n + the
        pass at which it meets the outside, as it must in the end; -1 without charge.
    group : (basins,) int32 array
        For each basin a basin it cannot be told apart from, itself as a rule.
    """
    count = charge.size
    parent = np.arange(count).astype(np.int32)
    group = parent.copy()
    # Charged basins of a part that still count, as a ring; and whether all are of one sign.
    head = np.full(count, -1, dtype=np.int32)
    ring = np.full(count, -1, dtype=np.int32)
    clean = np.ones(count, dtype=np.bool_)
    end = np.full(count, -1, dtype=np.int64)
    left = 0
    for c in range(1, count):
        if charge[c] != 0:
            head[c] = c
            ring[c] = c
            left += 1
    for k in order:
        if left == 0:
            break
        p, q = _root(parent, ends[k, 0]), _root(parent, ends[k, 1])
        if p == q:
            continue
        if p == 0:
            p, q = q, p
        parent[p] = q
        a, b = head[p], head[q]
        gone = a
        if q != 0:
            if a >= 0 and b >= 0:
                like = clean[p] and clean[q] and (charge[p] > 0) == (charge[q] > 0)
                if like and level[k] <= min(alike[a], alike[b]):
                    group[_root(group, a)] = _root(group, b)
                clean[q] = like
                ring[a], ring[b] = ring[b], ring[a]
            else:
                clean[q] = clean[p] and clean[q]
                head[q] = max(a, b)
            charge[q] += charge[p]
            gone = head[q] if charge[q] == 0 else -1
        if gone >= 0:
            c = gone
            while True:
                end[c] = k if q != 0 else level.size + k
                left -= 1
                c = ring[c]
                if c == gone:
                    break
            head[q] = -1
            clean[q] = False
    for c in range(count):
        group[c] = _root(group, c)
    return end, group
