"""Saddles of |E|: where two parts of {|E| <= r} meet."""

from __future__ import annotations

import numba
import numpy as np

from hologyre.singularities.cells import BASIS, FIRST, STENCIL
from hologyre.singularities.kernel import HALO, scratch, value_and_slopes

_REACH = 2.0
"""Steps a saddle may lie from where it is looked for."""


@numba.njit(cache=True, nogil=True)
def _fall(e, ey, ex):  # type: ignore[no-untyped-def]
    """Return half the gradient of |E|^2, along y and along x."""
    return e.real * ey.real + e.imag * ey.imag, e.real * ex.real + e.imag * ex.imag


@numba.njit(cache=True, nogil=True)
def _basis_at(u, weights):  # type: ignore[no-untyped-def]
    """Fill the samples' weights for the value, the slope and the curvature at one place."""
    weights[:] = 0.0
    for d in range(STENCIL):
        for k in range(STENCIL):
            weights[2, k] = weights[2, k] * u + 2.0 * weights[1, k]
            weights[1, k] = weights[1, k] * u + weights[0, k]
            weights[0, k] = weights[0, k] * u + BASIS[d, k]


@numba.njit(cache=True, nogil=True)
def _curved(planes, y, x, across, down, row):  # type: ignore[no-untyped-def]
    """Return half the gradient and half the Hessian of |E|^2, by short stencils."""
    j = min(max(int(np.floor(y)), 0), planes.shape[1] - 2 * HALO - 2)
    i = min(max(int(np.floor(x)), 0), planes.shape[2] - 2 * HALO - 2)
    _basis_at(y - j, down)
    _basis_at(x - i, across)
    row[:] = 0.0
    for part in range(2):
        for r in range(STENCIL):
            for d in range(3):
                weight = down[d, r]
                for k in range(STENCIL):
                    row[part, d, k] += (
                        weight * planes[part, j + HALO - FIRST + r, i + HALO - FIRST + k]
                    )
    gy = gx = hyy = hxx = hyx = 0.0
    for part in range(2):
        e = ey = ex = eyy = eyx = exx = 0.0
        for k in range(STENCIL):
            a, b = across[0, k], across[1, k]
            e += a * row[part, 0, k]
            ey += a * row[part, 1, k]
            eyy += a * row[part, 2, k]
            ex += b * row[part, 0, k]
            eyx += b * row[part, 1, k]
            exx += across[2, k] * row[part, 0, k]
        gy += e * ey
        gx += e * ex
        hyy += ey * ey + e * eyy
        hxx += ex * ex + e * exx
        hyx += ey * ex + e * eyx
    return gy, gx, hyy, hxx, hyx


@numba.njit(cache=True, nogil=True)
def polish(planes, table, places):  # type: ignore[no-untyped-def]
    """Go from each place (y, x) to the saddle of |E| nearby.

    Returns
    -------
    (n, 3) array
        The saddles' y, x and |E|; NaN where none was reached.
    """
    out = np.full((places.shape[0], 3), np.nan)
    across, down = np.empty((3, STENCIL)), np.empty((3, STENCIL))
    row = np.empty((2, 3, STENCIL))
    work = scratch()
    for n in range(places.shape[0]):
        y, x = places[n]
        for _ in range(30):
            gy, gx, hyy, hxx, hyx = _curved(planes, y, x, across, down, row)
            dy, dx = _towards_saddle(gy, gx, hyy, hxx, hyx)
            far = max(abs(dy), abs(dx))
            if far > 0.5:
                dy, dx = dy * 0.5 / far, dx * 0.5 / far
            y, x = y + dy, x + dx
            if max(abs(y - places[n, 0]), abs(x - places[n, 1])) > _REACH:
                break
            if far < 3e-3:
                if hyy * hxx < hyx * hyx:
                    # The last step on the exact interpolant; its Hessian need not be exact.
                    e, ey, ex = value_and_slopes(planes, table, y, x, work)
                    gy, gx = _fall(e, ey, ex)
                    dy, dx = _towards_saddle(gy, gx, hyy, hxx, hyx)
                    half = 0.5 * abs(e) ** 2 + 0.5 * (gy * dy + gx * dx)
                    out[n, 0], out[n, 1] = y + dy, x + dx
                    out[n, 2] = np.sqrt(max(2.0 * half, 0.0))
                break
    return out


@numba.njit(cache=True, nogil=True)
def _towards_saddle(gy, gx, hyy, hxx, hyx):  # type: ignore[no-untyped-def]
    """Return Newton's step, turned uphill along the less curved axis where both go one way."""
    mean, split = 0.5 * (hyy + hxx), np.hypot(0.5 * (hyy - hxx), hyx)
    high, low = abs(mean + split) + 1e-300, -abs(mean - split) - 1e-300
    angle = 0.5 * np.arctan2(2.0 * hyx, hyy - hxx)
    cos, sin = np.cos(angle), np.sin(angle)
    along, aside = -(gy * cos + gx * sin) / high, -(gx * cos - gy * sin) / low
    return along * cos - aside * sin, along * sin + aside * cos


@numba.njit(cache=True, nogil=True)
def lowest_on_edges(planes, table, places, along_x):  # type: ignore[no-untyped-def]
    """Return the least |E| on the lattice edges through these places.

    Parameters
    ----------
    planes, table
        The lattice's.
    places : (n, 2) array
        Where on each edge the search starts, node coordinates.
    along_x : (n,) bool array
        Direction of each edge.
    """
    out = np.empty(places.shape[0])
    work = scratch()
    for n in range(places.shape[0]):
        at = places[n].copy()
        axis = 1 if along_x[n] else 0
        first = min(np.floor(at[axis]), planes.shape[1 + axis] - 2.0 * HALO - 2.0)
        out[n] = np.inf
        for _ in range(12):
            e, ey, ex = value_and_slopes(planes, table, at[0], at[1], work)
            out[n] = min(out[n], abs(e))
            slope = ex if axis == 1 else ey
            size = slope.real**2 + slope.imag**2
            if size == 0.0:
                break
            # The nearest point of the tangent to zero; exact where the image is straight.
            step = -(e.real * slope.real + e.imag * slope.imag) / size
            at[axis] = min(max(at[axis] + step, first), first + 1.0)
            if abs(step) < 1e-9:
                break
    return out
