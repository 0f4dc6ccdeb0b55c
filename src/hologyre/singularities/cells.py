"""Which cells of a lattice can hold a zero, told from the samples around them."""

from __future__ import annotations

import numba
import numpy as np
from numpy.typing import NDArray

from hologyre.singularities.kernel import HALO
from hologyre.singularities.winding import BEND_SLACK

PARTS = 4
"""Parts a doubtful cell is cut into along each axis."""

_STENCIL = 8
_FIRST = _STENCIL // 2 - 1


def _lagrange() -> NDArray[np.float64]:
    """Return the nearest samples' weights as polynomials in the place within a cell.

    Returns
    -------
    (8, 8) array
        Coefficient of each power, highest first, for each sample.
    """
    nodes = np.arange(_STENCIL) - float(_FIRST)
    columns = []
    for k in range(_STENCIL):
        others = np.delete(nodes, k)
        columns.append(np.poly(others) / np.prod(nodes[k] - others))
    return np.ascontiguousarray(np.stack(columns, axis=1))


_BASIS = _lagrange()
_QUARTERS = np.stack([np.polyval(_BASIS, q / PARTS) for q in range(PARTS + 1)])


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
def doubtful(planes, bend):  # type: ignore[no-untyped-def]
    """Tell which cells cannot be seen at a glance to hold no zero.

    A cell's image lies in the hull of its corners, drawn towards the mean of their second
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
        for i in range(nx - 1):
            c = i + HALO
            m_re = re[c] + re[c + 1] + re_n[c] + re_n[c + 1]
            m_im = im[c] + im[c + 1] + im_n[c] + im_n[c + 1]
            s_re = 0.25 * (p[i] + p[i + 1] + p_n[i] + p_n[i + 1])
            s_im = 0.25 * (q[i] + q[i + 1] + q_n[i] + q_n[i + 1])
            least = min(
                min(m_re * re[c] + m_im * im[c], m_re * re[c + 1] + m_im * im[c + 1]),
                min(m_re * re_n[c] + m_im * im_n[c], m_re * re_n[c + 1] + m_im * im_n[c + 1]),
            )
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
            drawn = min(0.0, -(m_re * s_re + m_im * s_im) / 8.0)
            around = BEND_SLACK * np.sqrt(spread) + 0.05 * np.sqrt(s_re * s_re + s_im * s_im)
            size = np.sqrt(m_re * m_re + m_im * m_im)
            out[j, i] = least + drawn <= around / 8.0 * size
    return out


@numba.njit(cache=True, nogil=True)
def cut_cell(planes, j, i, fine):  # type: ignore[no-untyped-def]
    """Fill `fine` (2, 5, 5) with the field at the quarters of cell (j, i)."""
    row = np.empty((PARTS + 1, _STENCIL))
    for part in range(2):
        for v in range(PARTS + 1):
            for k in range(_STENCIL):
                row[v, k] = 0.0
            for r in range(_STENCIL):
                weight = _QUARTERS[v, r]
                for k in range(_STENCIL):
                    row[v, k] += weight * planes[part, j + HALO - _FIRST + r, i + HALO - _FIRST + k]
        for v in range(PARTS + 1):
            for u in range(PARTS + 1):
                total = 0.0
                for k in range(_STENCIL):
                    total += row[v, k] * _QUARTERS[u, k]
                fine[part, v, u] = total


@numba.njit(cache=True, nogil=True)
def _basis_at(u, weights):  # type: ignore[no-untyped-def]
    """Fill the samples' weights for the value and for the slope at one place."""
    weights[:] = 0.0
    for d in range(_STENCIL):
        for k in range(_STENCIL):
            weights[1, k] = weights[1, k] * u + weights[0, k]
            weights[0, k] = weights[0, k] * u + _BASIS[d, k]


@numba.njit(cache=True, nogil=True)
def cut_part(planes, j, i, v, u, size, fine, det):  # type: ignore[no-untyped-def]
    """Cut the part of cell (j, i) that starts at (v, u) and has this size.

    Fills `fine` (2, 5, 5) with the field and `det` (5, 5) with det J, per square step.
    """
    across = np.empty((PARTS + 1, 2, _STENCIL))
    down = np.empty((2, _STENCIL))
    row = np.empty((2, 2, _STENCIL))
    for q in range(PARTS + 1):
        _basis_at(u + size * q / PARTS, across[q])
    for p in range(PARTS + 1):
        _basis_at(v + size * p / PARTS, down)
        row[:] = 0.0
        for part in range(2):
            for r in range(_STENCIL):
                value, slope = down[0, r], down[1, r]
                for k in range(_STENCIL):
                    here = planes[part, j + HALO - _FIRST + r, i + HALO - _FIRST + k]
                    row[part, 0, k] += value * here
                    row[part, 1, k] += slope * here
        for q in range(PARTS + 1):
            e_re = e_im = x_re = x_im = y_re = y_im = 0.0
            for k in range(_STENCIL):
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
            m_re, m_im, near = _near_zero(fine, v, u, bow)
            if not near:
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
def judge_parts(fine, det, bow, coarse, verdicts):  # type: ignore[no-untyped-def]
    """Tell for every quarter of a cut part what `judge` tells for a cell, from det J.

    `bow` is how far the field may be from a quarter's bilinear patch. Fills `verdicts` (4, 4)
    with 0, 1, -1 or 2.
    """
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
            if not _near_zero(fine, v, u, bow)[2]:
                continue
            d1, d2, d3, d4 = det[v, u], det[v, u + 1], det[v + 1, u], det[v + 1, u + 1]
            if min(min(d1, d2), min(d3, d4)) > slack:
                verdicts[v, u] = 1
            elif max(max(d1, d2), max(d3, d4)) < -slack:
                verdicts[v, u] = -1
            else:
                verdicts[v, u] = 2


@numba.njit(cache=True, nogil=True)
def _near_zero(fine, v, u, bow):  # type: ignore[no-untyped-def]
    """Return the mean of a part's corners, and whether its image may reach zero."""
    m_re = 0.25 * (fine[0, v, u] + fine[0, v, u + 1] + fine[0, v + 1, u] + fine[0, v + 1, u + 1])
    m_im = 0.25 * (fine[1, v, u] + fine[1, v, u + 1] + fine[1, v + 1, u] + fine[1, v + 1, u + 1])
    least = min(
        min(
            m_re * fine[0, v, u] + m_im * fine[1, v, u],
            m_re * fine[0, v, u + 1] + m_im * fine[1, v, u + 1],
        ),
        min(
            m_re * fine[0, v + 1, u] + m_im * fine[1, v + 1, u],
            m_re * fine[0, v + 1, u + 1] + m_im * fine[1, v + 1, u + 1],
        ),
    )
    apart = least > 0.0 and least * least > bow * bow * (m_re * m_re + m_im * m_im)
    return m_re, m_im, not apart


@numba.njit(cache=True, nogil=True)
def _linear_zero(e_re, e_im, y_re, y_im, x_re, x_im):  # type: ignore[no-untyped-def]
    """Return the zero of a patch from its middle's value and slopes, kept near the patch."""
    det = x_re * y_im - y_re * x_im
    if det == 0.0:
        return 0.5, 0.5
    y = 0.5 - (x_re * e_im - x_im * e_re) / det
    x = 0.5 - (e_re * y_im - e_im * y_re) / det
    return min(max(y, -0.5), 1.5), min(max(x, -0.5), 1.5)
