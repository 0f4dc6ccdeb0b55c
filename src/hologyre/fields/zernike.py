"""Zernike polynomials: indices, values and powers of the coordinates."""

from __future__ import annotations

from math import comb, factorial

import numpy as np
from numpy.typing import ArrayLike, NDArray


def osa_index(n: int, m: int) -> int:
    """Return the OSA/ANSI Z80.28 single index of radial order n and azimuthal frequency m.

    ``j = (n (n + 2) + m) / 2``, from 0.

    Raises
    ------
    ValueError
        If |m| > n or n - m is odd.
    """
    _check(n, m)
    return (n * (n + 2) + m) // 2


def osa_orders(j: int) -> tuple[int, int]:
    """Return (n, m) of an OSA/ANSI index.

    Raises
    ------
    ValueError
        If j is negative.
    """
    if j < 0:
        raise ValueError(f"j: expected 0 or more, got {j}")
    n = int(np.ceil((-3 + np.sqrt(9 + 8 * j)) / 2))
    return n, 2 * j - n * (n + 2)


def noll_index(n: int, m: int) -> int:
    """Return Noll's index, from 1 (J. Opt. Soc. Am. 66, 207, 1976)."""
    _check(n, m)
    low = n % 4 in (0, 1)
    extra = 0 if (m > 0 and low) or (m < 0 and not low) else 1
    return n * (n + 1) // 2 + abs(m) + extra


def fringe_index(n: int, m: int) -> int:
    """Return the fringe index (University of Arizona), from 1."""
    _check(n, m)
    return (1 + (n + abs(m)) // 2) ** 2 - 2 * abs(m) + (m < 0)


def zernike(n: int, m: int, y: ArrayLike, x: ArrayLike) -> NDArray[np.float64]:
    """Return a Zernike polynomial of unit mean square over the unit disc.

    Parameters
    ----------
    n, m : int
        Orders; cos(m theta) for m >= 0, sin(|m| theta) for m < 0, theta from +x to +y.
    y, x : arrays
        Coordinates, in radii of the disc.

    Returns
    -------
    float array of their common shape
    """
    powers = zernike_powers(n, m)
    y, x = np.asarray(y, dtype=np.float64), np.asarray(x, dtype=np.float64)
    return np.asarray(np.polynomial.polynomial.polyval2d(y, x, powers), dtype=np.float64)


def zernike_powers(n: int, m: int) -> NDArray[np.float64]:
    """Return the coefficients of ``y^a x^b`` of a Zernike polynomial, shape (n + 1, n + 1)."""
    _check(n, m)
    order = abs(m)
    norm = np.sqrt(2 * (n + 1) / (1 + (m == 0)))
    powers = np.zeros((n + 1, n + 1))
    for k in range((n - order) // 2 + 1):
        radial = (-1) ** k * factorial(n - k) / factorial(k)
        radial /= factorial((n + order) // 2 - k) * factorial((n - order) // 2 - k)
        squares = (n - order) // 2 - k
        # r^|m| e^(i m theta) is (x + i y)^|m|; what is left of r is powers of x^2 + y^2.
        for i in range(order + 1):
            turn = 1j**i
            angular = comb(order, i) * (turn.imag if m < 0 else turn.real)
            for q in range(squares + 1):
                powers[i + 2 * q, order - i + 2 * (squares - q)] += (
                    norm * radial * angular * comb(squares, q)
                )
    return powers


def _check(n: int, m: int) -> None:
    if n < 0 or abs(m) > n or (n - m) % 2:
        raise ValueError(f"n, m: expected |m| <= n with n - m even, got n={n}, m={m}")
