from __future__ import annotations

import numpy as np
import pytest

from hologyre.fields.zernike import (
    fringe_index,
    noll_index,
    osa_index,
    osa_orders,
    zernike,
    zernike_powers,
)


def orders(n: int) -> list[tuple[int, int]]:
    return [(n, m) for m in range(-n, n + 1, 2)]


# OSA/ANSI Z80.28; Noll, J. Opt. Soc. Am. 66, 207 (1976), OEIS A176988; fringe, OEIS A375510.
@pytest.mark.parametrize(
    ("n", "osa", "noll", "fringe"),
    [
        (2, [3, 4, 5], [5, 4, 6], [6, 4, 5]),
        (3, [6, 7, 8, 9], [9, 7, 8, 10], [11, 8, 7, 10]),
        (4, [10, 11, 12, 13, 14], [15, 13, 11, 12, 14], [18, 13, 9, 12, 17]),
    ],
)
def test_indices_are_those_of_the_tables(
    n: int, osa: list[int], noll: list[int], fringe: list[int]
) -> None:
    assert [osa_index(*o) for o in orders(n)] == osa
    assert [noll_index(*o) for o in orders(n)] == noll
    assert [fringe_index(*o) for o in orders(n)] == fringe


def test_indices_leave_no_gap_and_can_be_turned_back() -> None:
    every = [o for n in range(9) for o in orders(n)]
    assert [osa_orders(osa_index(*o)) for o in every] == every
    assert sorted(osa_index(*o) for o in every) == list(range(45))
    assert sorted(noll_index(*o) for o in every) == list(range(1, 46))


def disc(radial: int = 20, angular: int = 64) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Nodes y, x and weights that average polynomials over the unit disc exactly."""
    nodes, weights = np.polynomial.legendre.leggauss(radial)
    r, w = np.sqrt((nodes + 1) / 2), weights / 2
    angle = 2 * np.pi * np.arange(angular) / angular
    return (
        np.outer(r, np.sin(angle)),
        np.outer(r, np.cos(angle)),
        np.outer(w, np.full(angular, 1 / angular)),
    )


def test_polynomials_are_orthonormal_over_the_disc() -> None:
    y, x, weight = disc()
    every = np.stack([zernike(n, m, y, x) for n in range(9) for _, m in orders(n)])
    products = np.einsum("ayx,byx,yx->ab", every, every, weight)
    assert np.allclose(products, np.eye(len(every)), atol=1e-11)


def test_powers_of_r_have_the_known_coefficients() -> None:
    y, x, weight = disc()

    def coefficient(function: np.ndarray, n: int, m: int) -> float:
        return float((function * zernike(n, m, y, x) * weight).sum())

    square = y**2 + x**2
    for function, n, m, expected in (
        (square, 0, 0, 1 / 2),
        (square, 2, 0, 1 / (2 * np.sqrt(3))),
        (square**2, 0, 0, 1 / 3),
        (square**2, 2, 0, 0.2886751345948129),
        (square**2, 4, 0, 1 / (6 * np.sqrt(5))),
        (x, 1, 1, 1 / 2),
    ):
        assert coefficient(function, n, m) == pytest.approx(expected, abs=1e-12)


def test_the_cosine_points_along_x_and_the_sine_along_y() -> None:
    assert zernike(1, 1, 0.0, 0.5) == pytest.approx(1.0)
    assert zernike(1, -1, 0.5, 0.0) == pytest.approx(1.0)
    assert zernike_powers(2, 0)[0, 0] == pytest.approx(-np.sqrt(3))


def test_impossible_orders_are_refused() -> None:
    with pytest.raises(ValueError, match=r"expected \|m\| <= n with n - m even, got n=2, m=1"):
        osa_index(2, 1)
    with pytest.raises(ValueError, match="j: expected 0 or more, got -1"):
        osa_orders(-1)
