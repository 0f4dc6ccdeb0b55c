"""Which cells of a lattice can hold a zero, told from the samples around them."""

from __future__ import annotations

import numba
import numpy as np
from numpy.typing import NDArray

from hologyre.singularities.kernel import HALO
from hologyre.singularities.winding import BEND_SLACK

PARTS = 4
"""Parts a doubtful cell is cut into along each axis."""

STENCIL = 8
FIRST = STENCIL // 2 - 1


def _lagrange() -> NDArray[np.float64]:
    """Return the nearest samples' weights as polynomials in the place within a cell.

    Returns
    -------
    (8, 8) array
        Coefficient of each power, highest first, for each sample.
    """
    nodes = np.arange(STENCIL) - float(FIRST)
    columns = []
    for k in range(STENCIL):
        others = np.delete(nodes, k)
        columns.append(np.poly(others) / np.prod(nodes[k] - others))
    return np.ascontiguousarray(np.stack(columns, axis=1))


BASIS = _lagrange()
QUARTERS = np.stack([np.polyval(BASIS, q / PARTS) for q in range(PARTS + 1)])
"""Weights at the quarters, (quarters, samples)."""


def cut_error(band: float) -> float:
    """Return what samples cut between a lattice's nodes err by, over the second difference.

    Parameters
    ----------
    band : float
        Highest frequency along an axis, cycles per step.
    """
    # Half-way between nodes, where (u + 3) (u + 2) ... (u - 4) / 8! is largest, along both axes.
    return 2 * 0.00107 * float(2 * np.pi * band) ** 6


@numba.njit(cache=True, nogil=True)
def _beyond(n_re, n_im, a, b, c, d, s_re, s_im):  # type: ignore[no-untyped-def]
    """Return how far the corners, drawn by minus s, lie along n, times the length of n."""
    low = min(n_re * a[0] + n_im * a[1], n_re * b[0] + n_im * b[1])
    high = min(n_re * c[0] + n_im * c[1], n_re * d[0] + n_im * d[1])
    return min(low, high) - max(0.0, n_re * s_re + n_im * s_im)


@numba.njit(cache=True, nogil=True)
def near_zero(a, b, c, d, s_re, s_im, bow):  # type: ignore[no-untyped-def]
    """Tell whether a patch within `bow` of its corners' hull, drawn by minus s, may reach zero.

    The corners (re, im) go round the patch. Two directions are tried: to the corners' mean, and
    across the patch's longer side, which tells more where the patch is nearly flat.
    """
    m_re, m_im = a[0] + b[0] + c[0] + d[0], a[1] + b[1] + c[1] + d[1]
    x_re, x_im = b[0] + c[0] - a[0] - d[0], b[1] + c[1] - a[1] - d[1]
    y_re, y_im = c[0] + d[0] - a[0] - b[0], c[1] + d[1] - a[1] - b[1]
    long_x = x_re * x_re + x_im * x_im > y_re * y_re + y_im * y_im
    n_re = -x_im if long_x else -y_im
    n_im = x_re if long_x else y_re
    turn = 1.0 if n_re * m_re + n_im * m_im > 0.0 else -1.0
    n_re, n_im = turn * n_re, turn * n_im
    along = _beyond(m_re, m_im, a, b, c, d, s_re, s_im)
    across = _beyond(n_re, n_im, a, b, c, d, s_re, s_im)
    near_along = along <= bow * np.sqrt(m_re * m_re + m_im * m_im)
    near_across = across <= bow * np.sqrt(n_re * n_re + n_im * n_im)
    return near_along & near_across


@numba.njit(cache=True, nogil=True)
def doubtful(planes, bend):  # type: ignore[no-untyped-def]
    """Tell which cells cannot be seen at a glance to hold no zero.

    A cell's image lies in the hull of its corners, drawn against the mean of their second
    differences, and as far around it as those differ. Where that hull is on one side of zero
    there is none.

    Returns
    -------
    (ny-1, nx-1) bool array
    """
    ny, nx = bend.shape[1], bend.shape[2]
    out = np.empty((ny - 1, nx - 1), dtype=np.bool_)
    for j in range(ny - 1):
        re, im = planes[0, j + HALO], planes[1, j + HALO]
        re_n, im_n = planes[0, j + HALO + 1], planes[1, j + HALO + 1]
        p, q, p_n, q_n = bend[2, j], bend[3, j], bend[2, j + 1], bend[3, j + 1]
        row = out[j]
        # The corners' mean as the direction first: a loop without branches, many cells at once.
        for i in range(nx - 1):
            c = i + HALO
            m_re = re[c] + re[c + 1] + re_n[c] + re_n[c + 1]
            m_im = im[c] + im[c + 1] + im_n[c] + im_n[c + 1]
            s_re, s_im, bow = _drawn(p, q, p_n, q_n, i)
            least = min(
                min(m_re * re[c] + m_im * im[c], m_re * re[c + 1] + m_im * im[c + 1]),
                min(m_re * re_n[c] + m_im * im_n[c], m_re * re_n[c + 1] + m_im * im_n[c + 1]),
            )
            least -= max(0.0, m_re * s_re + m_im * s_im)
            row[i] = least <= bow * np.sqrt(m_re * m_re + m_im * m_im)
        for i in range(nx - 1):
            if row[i]:
                c = i + HALO
                s_re, s_im, bow = _drawn(p, q, p_n, q_n, i)
                row[i] = near_zero(
                    (re[c], im[c]),
                    (re[c + 1], im[c + 1]),
                    (re_n[c + 1], im_n[c + 1]),
                    (re_n[c], im_n[c]),
                    s_re,
                    s_im,
                    bow,
                )
    return out


@numba.njit(cache=True, nogil=True)
def _drawn(p, q, p_n, q_n, i):  # type: ignore[no-untyped-def]
    """Return how far a cell is drawn, and how far around that its image may be."""
    s_re = 0.25 * (p[i] + p[i + 1] + p_n[i] + p_n[i + 1])
    s_im = 0.25 * (q[i] + q[i + 1] + q_n[i] + q_n[i + 1])
    spread = max(
        max(
            (p[i] - s_re) ** 2 + (q[i] - s_im) ** 2,
            (p[i + 1] - s_re) ** 2 + (q[i + 1] - s_im) ** 2,
        ),
        max(
            (p_n[i] - s_re) ** 2 + (q_n[i] - s_im) ** 2,
            (p_n[i + 1] - s_re) ** 2 + (q_n[i + 1] - s_im) ** 2,
        ),
    )
    around = BEND_SLACK * np.sqrt(spread) + 0.05 * np.sqrt(s_re * s_re + s_im * s_im)
    return s_re / 8.0, s_im / 8.0, around / 8.0


@numba.njit(cache=True, nogil=True)
def cut_cell(planes, j, i, fine):  # type: ignore[no-untyped-def]
    """Fill `fine` (2, 5, 5) with the field at the quarters of cell (j, i)."""
    q, c = QUARTERS, i + HALO - FIRST
    for part in range(2):
        for v in range(PARTS + 1):
            # Written out by sample: sums in registers take half the time of sums in an array.
            a0 = a1 = a2 = a3 = a4 = a5 = a6 = a7 = 0.0
            for r in range(STENCIL):
                w, row = q[v, r], planes[part, j + HALO - FIRST + r]
                a0 += w * row[c]
                a1 += w * row[c + 1]
                a2 += w * row[c + 2]
                a3 += w * row[c + 3]
                a4 += w * row[c + 4]
                a5 += w * row[c + 5]
                a6 += w * row[c + 6]
                a7 += w * row[c + 7]
            for u in range(PARTS + 1):
                left = a0 * q[u, 0] + a1 * q[u, 1] + a2 * q[u, 2] + a3 * q[u, 3]
                right = a4 * q[u, 4] + a5 * q[u, 5] + a6 * q[u, 6] + a7 * q[u, 7]
                fine[part, v, u] = left + right


@numba.njit(cache=True, nogil=True)
def _basis_at(u, weights):  # type: ignore[no-untyped-def]
    """Fill the samples' weights for the value and the slope at one place."""
    weights[:] = 0.0
    for d in range(STENCIL):
        for k in range(STENCIL):
            weights[1, k] = weights[1, k] * u + weights[0, k]
            weights[0, k] = weights[0, k] * u + BASIS[d, k]


@numba.njit(cache=True, nogil=True)
def cut_part(planes, j, i, v, u, size, fine, det):  # type: ignore[no-untyped-def]
    """Cut the part of cell (j, i) that starts at (v, u) and has this size.

    Fills `fine` (2, 5, 5) with the field and `det` (5, 5) with det J, per square step.
    """
    across = np.empty((PARTS + 1, 2, STENCIL))
    down = np.empty((2, STENCIL))
    row = np.empty((2, 2, STENCIL))
    for q in range(PARTS + 1):
        _basis_at(u + size * q / PARTS, across[q])
    for p in range(PARTS + 1):
        _basis_at(v + size * p / PARTS, down)
        row[:] = 0.0
        for part in range(2):
            for r in range(STENCIL):
                value, slope = down[0, r], down[1, r]
                for k in range(STENCIL):
                    here = planes[part, j + HALO - FIRST + r, i + HALO - FIRST + k]
                    row[part, 0, k] += value * here
                    row[part, 1, k] += slope * here
        for q in range(PARTS + 1):
            e_re = e_im = x_re = x_im = y_re = y_im = 0.0
            for k in range(STENCIL):
                value, slope = across[q, 0, k], across[q, 1, k]
                e_re += value * row[0, 0, k]
                e_im += value * row[1, 0, k]
                x_re += slope * row[0, 0, k]
                x_im += slope * row[1, 0, k]
                y_re += value * row[0, 1, k]
                y_im += value * row[1, 1, k]
            fine[0, p, q], fine[1, p, q] = e_re, e_im
            det[p, q] = x_re * y_im - y_re * x_im


@numba.njit(cache=True, nogil=True)
def judge(fine, bend_y, bend_x, coarse):  # type: ignore[no-untyped-def]
    """Tell whether a cut cell can hold a zero, and of which sign, by its chords alone.

    `coarse` is what the cut's samples may err by, over the second difference.

    Returns
    -------
    verdict : int
        0 for none; 1 or -1 where det J has this sign wherever a zero may be, so that there are
        as many as turns; 2 where that cannot be told.
    y, x : float
        Where in the cell to look first, 0 to 1.
    """
    step = 1.0 / PARTS
    bow = (BEND_SLACK / 8.0 * step * step + coarse) * (bend_y + bend_x)
    off_y = (0.6 * step * step + coarse) * bend_y
    off_x = (0.6 * step * step + coarse) * bend_x
    positive, negative, unclear = False, False, False
    best = np.inf
    y = x = 0.5
    for v in range(PARTS):
        for u in range(PARTS):
            if not _part_near_zero(fine, v, u, bow):
                continue
            # Corners' determinants of the bilinear patch: its extremes.
            lx_re, lx_im = fine[0, v, u + 1] - fine[0, v, u], fine[1, v, u + 1] - fine[1, v, u]
            ly_re, ly_im = fine[0, v + 1, u] - fine[0, v, u], fine[1, v + 1, u] - fine[1, v, u]
            far_re, far_im = fine[0, v + 1, u + 1], fine[1, v + 1, u + 1]
            hx_re, hx_im = far_re - fine[0, v + 1, u], far_im - fine[1, v + 1, u]
            hy_re, hy_im = far_re - fine[0, v, u + 1], far_im - fine[1, v, u + 1]
            d1, d2 = lx_re * ly_im - lx_im * ly_re, lx_re * hy_im - lx_im * hy_re
            d3, d4 = hx_re * ly_im - hx_im * ly_re, hx_re * hy_im - hx_im * hy_re
            ex = np.sqrt(max(lx_re * lx_re + lx_im * lx_im, hx_re * hx_re + hx_im * hx_im))
            ey = np.sqrt(max(ly_re * ly_re + ly_im * ly_im, hy_re * hy_re + hy_im * hy_im))
            slack = ex * off_y + ey * off_x + off_x * off_y
            if min(min(d1, d2), min(d3, d4)) > slack:
                positive = True
            elif max(max(d1, d2), max(d3, d4)) < -slack:
                negative = True
            else:
                unclear = True
            m_re = 0.25 * (fine[0, v, u] + fine[0, v, u + 1] + fine[0, v + 1, u] + far_re)
            m_im = 0.25 * (fine[1, v, u] + fine[1, v, u + 1] + fine[1, v + 1, u] + far_im)
            size = m_re * m_re + m_im * m_im
            if size < best:
                best = size
                p, q = _linear_zero(
                    m_re, m_im, 0.5 * (ly_re + hy_re), 0.5 * (ly_im + hy_im),
                    0.5 * (lx_re + hx_re), 0.5 * (lx_im + hx_im),
                )  # fmt: skip
                y, x = (v + p) * step, (u + q) * step
    if unclear or (positive and negative):
        return 2, y, x
    return (1 if positive else -1 if negative else 0), y, x


@numba.njit(cache=True, nogil=True)
def judge_parts(fine, det, size, bend, coarse, verdicts):  # type: ignore[no-untyped-def]
    """Tell for every quarter of a cut part what `judge` tells for a cell, from det J.

    `size` is the part's side, `bend` the sum of the second differences over a whole step,
    `coarse` what the samples err by over it. Fills `verdicts` (4, 4) with 0, 1, -1 or 2.
    """
    bow = (BEND_SLACK / 8.0 * (size / PARTS) ** 2 + coarse) * bend
    ripple = 0.0
    for v in range(PARTS + 1):
        for u in range(1, PARTS):
            ripple = max(ripple, abs(det[v, u - 1] - 2.0 * det[v, u] + det[v, u + 1]))
            ripple = max(ripple, abs(det[u - 1, v] - 2.0 * det[u, v] + det[u + 1, v]))
    # Between the quarters det J bends along both axes.
    slack = BEND_SLACK * ripple / 4.0 + 4.0 * coarse * np.abs(det).max()
    for v in range(PARTS):
        for u in range(PARTS):
            verdicts[v, u] = 0
            if not _part_near_zero(fine, v, u, bow):
                continue
            d1, d2, d3, d4 = det[v, u], det[v, u + 1], det[v + 1, u], det[v + 1, u + 1]
            if min(min(d1, d2), min(d3, d4)) > slack:
                verdicts[v, u] = 1
            elif max(max(d1, d2), max(d3, d4)) < -slack:
                verdicts[v, u] = -1
            else:
                verdicts[v, u] = 2


@numba.njit(cache=True, nogil=True)
def _part_near_zero(fine, v, u, bow):  # type: ignore[no-untyped-def]
    """Tell whether a part's image may reach zero."""
    return near_zero(
        (fine[0, v, u], fine[1, v, u]),
        (fine[0, v, u + 1], fine[1, v, u + 1]),
        (fine[0, v + 1, u + 1], fine[1, v + 1, u + 1]),
        (fine[0, v + 1, u], fine[1, v + 1, u]),
        0.0,
        0.0,
        bow,
    )


@numba.njit(cache=True, nogil=True)
def _linear_zero(e_re, e_im, y_re, y_im, x_re, x_im):  # type: ignore[no-untyped-def]
    """Return the zero of a patch from its middle's value and slopes, kept near the patch."""
    det = x_re * y_im - y_re * x_im
    if det == 0.0:
        return 0.5, 0.5
    y = 0.5 - (x_re * e_im - x_im * e_re) / det
    x = 0.5 - (e_re * y_im - e_im * y_re) / det
    return min(max(y, -0.5), 1.5), min(max(x, -0.5), 1.5)
