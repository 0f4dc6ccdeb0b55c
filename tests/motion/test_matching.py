"""The cheapest matching of two sparse sets."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import linear_sum_assignment

from hologyre.motion.matching import cheapest_matching


def total(left, right, cost, left_alone, right_alone, partner) -> float:
    price = {(i, j): c for i, j, c in zip(left, right, cost, strict=True)}
    taken = [(i, j) for i, j in enumerate(partner.tolist()) if j >= 0]
    assert len({j for _, j in taken}) == len(taken)
    free_left = set(range(len(left_alone))) - {i for i, _ in taken}
    free_right = set(range(len(right_alone))) - {j for _, j in taken}
    return (
        sum(price[pair] for pair in taken)
        + sum(left_alone[i] for i in free_left)
        + sum(right_alone[j] for j in free_right)
    )


def test_the_published_three_by_three_example_is_solved():
    # The worked example of scipy.optimize.linear_sum_assignment's documentation; the method
    # is H. W. Kuhn's, Nav. Res. Logist. Q. 2, 83 (1955).
    matrix = np.array([[4.0, 1.0, 3.0], [2.0, 0.0, 5.0], [3.0, 2.0, 2.0]])
    left, right = np.indices(matrix.shape).reshape(2, -1)
    dear = np.full(3, 100.0)
    partner = cheapest_matching(left, right, matrix.ravel(), left_alone=dear, right_alone=dear)
    assert partner.tolist() == [1, 0, 2]
    assert matrix[[0, 1, 2], partner].sum() == 5.0


@pytest.mark.parametrize("seed", range(40))
def test_no_dense_assignment_is_cheaper(seed):
    rng = np.random.default_rng(seed)
    n_left, n_right = rng.integers(0, 12, 2)
    left, right = np.nonzero(rng.random((n_left, n_right)) < 0.5)
    cost = 2.0 * rng.normal(size=len(left))
    left_alone, right_alone = 2.0 * rng.random(n_left), 2.0 * rng.random(n_right)
    partner = cheapest_matching(left, right, cost, left_alone=left_alone, right_alone=right_alone)

    matrix = np.full((n_left + n_right, n_left + n_right), 1e6)
    matrix[left, right] = cost
    matrix[range(n_left), n_right + np.arange(n_left)] = left_alone
    matrix[n_left + np.arange(n_right), range(n_right)] = right_alone
    matrix[n_left:, n_right:] = 0.0
    rows, columns = linear_sum_assignment(matrix)
    found = total(left, right, cost, left_alone, right_alone, partner)
    # sums of a dozen numbers of order one
    assert found == pytest.approx(matrix[rows, columns].sum(), abs=1e-9)


def test_pairs_dearer_than_being_alone_stay_apart():
    alone = np.array([1.0])
    for cost, expected in ((1.9, 0), (2.1, -1)):
        partner = cheapest_matching(
            np.array([0]), np.array([0]), np.array([cost]), left_alone=alone, right_alone=alone
        )
        assert partner.tolist() == [expected]
