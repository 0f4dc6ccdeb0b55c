"""Newton's method for a zero inside a square of a lattice."""

from __future__ import annotations

import numba

from hologyre.singularities.kernel import value_and_slopes

COLUMNS = 9
"""Columns of a table of zeros, see `hologyre.singularities.search.Found`."""

_LEFT = 2e-8
"""Distance from the zero, in steps, that may be left."""


@numba.njit(cache=True, nogil=True)
def newton(planes, table, square, v, u, work, zero):  # type: ignore[no-untyped-def]
    """Go from (v, u) to the zero of a square (y, x, side).

    Fills `zero` with its y and x and the slopes along y and x (real, imaginary), and returns
    False when the way leads out of the square or does not settle.
    """
    y, x, size = square
    slack = 0.02 * size + 1e-7
    before = 1e-9
    for _ in range(30):
        e, ey, ex = value_and_slopes(planes, table, v, u, work)
        det = ex.real * ey.imag - ey.real * ex.imag
        if det == 0.0:
            return False
        du = -(e.real * ey.imag - e.imag * ey.real) / det
        dv = -(ex.real * e.imag - ex.imag * e.real) / det
        reach = max(abs(du), abs(dv))
        if reach > size:
            du, dv = du * size / reach, dv * size / reach
        u, v = u + du, v + dv
        if max(reach, before**2) * reach**2 < _LEFT * before**2:
            # Steps shrink as their squares, by the last two of them or faster than by one.
            zero[0], zero[1] = v, u
            zero[2], zero[3], zero[4], zero[5] = ey.real, ey.imag, ex.real, ex.imag
            return max(abs(u - x - 0.5 * size), abs(v - y - 0.5 * size)) <= 0.5 * size + slack
        # There is nothing to look for outside: come back to the border.
        before = reach
        u = min(max(u, x - slack), x + size + slack)
        v = min(max(v, y - slack), y + size + slack)
    return False
