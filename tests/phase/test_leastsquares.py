"""The fit by least squares."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.sparse import coo_array, diags_array
from scipy.sparse.linalg import lsqr

from hologyre.phase.leastsquares import fit_smooth
from hologyre.phase.unwrap import unwrap


def surface(shape):
    y, x = np.indices(shape, dtype=float)
    return 3.0 * np.sin(x / 9.0) * np.cos(y / 7.0) + 0.4 * x


def by_sparse_least_squares(phase, weight, wrapped):
    """Solve the weighted problem by another method, with the differences as a matrix."""
    ny, nx = phase.shape
    index = np.arange(ny * nx).reshape(ny, nx)
    pairs = np.concatenate(
        [
            np.column_stack([index[:-1].ravel(), index[1:].ravel()]),
            np.column_stack([index[:, :-1].ravel(), index[:, 1:].ravel()]),
        ]
    )
    rows = np.repeat(np.arange(len(pairs)), 2)
    difference = coo_array(
        (np.tile([-1.0, 1.0], len(pairs)), (rows, pairs.ravel())), shape=(len(pairs), ny * nx)
    )
    root = np.sqrt(np.minimum(*weight.ravel()[pairs.T]))
    wanted = wrapped(np.diff(phase.ravel()[pairs], axis=1)[:, 0])
    fitted = lsqr(diags_array(root) @ difference.tocsr(), root * wanted, atol=1e-13, btol=1e-13)[0]
    return fitted.reshape(ny, nx) - fitted.mean()


# Ghiglia, Romero, J. Opt. Soc. Am. A 11, 107 (1994): equal when there are no residues.
def test_without_residues_the_fit_is_the_unwrapped_phase(wrapped):
    phase = wrapped(surface((50, 64)))
    exact = unwrap(phase).phase
    fit = fit_smooth(phase)
    np.testing.assert_allclose(fit.phase, exact - exact.mean(), atol=1e-11)
    assert fit.iterations == 0
    assert fit.misfit_rad < 1e-12


def test_direct_solution_equals_sparse_least_squares(rng, wrapped):
    phase = rng.uniform(-np.pi, np.pi, (20, 25))
    expected = by_sparse_least_squares(phase, np.ones(phase.shape), wrapped)
    np.testing.assert_allclose(fit_smooth(phase).phase, expected, atol=1e-9)


def test_weighted_solution_equals_sparse_least_squares(rng, wrapped):
    phase, weight = rng.uniform(-np.pi, np.pi, (20, 25)), rng.uniform(0.05, 1, (20, 25))
    expected = by_sparse_least_squares(phase, weight, wrapped)
    fit = fit_smooth(phase, weight=weight, tolerance=1e-11)
    np.testing.assert_allclose(fit.phase, expected, atol=1e-8)
    assert fit.misfit_rad > 0.5


def test_regions_left_out_do_not_count(rng, wrapped):
    truth = surface((40, 60))
    valid = np.ones(truth.shape, bool)
    valid[:, 30:33] = False
    valid[10:15, 5:9] = False
    phase = wrapped(truth)
    phase[~valid] = np.nan
    fit = fit_smooth(phase, valid=valid, tolerance=1e-10)
    for side in (np.s_[:, :30], np.s_[:, 33:]):
        use = valid[side]
        expected = truth[side] - truth[side][use].mean()
        np.testing.assert_allclose(fit.phase[side][use], expected[use], atol=1e-7)
    assert np.isnan(fit.phase[~valid]).all()


def test_a_dipole_pulls_the_fit_but_leaves_no_jump(dipole):
    fit = fit_smooth(dipole((60, 60), (30, 20), (30, 40)))
    assert fit.misfit_rad > 0.05
    assert np.abs(np.diff(fit.phase, axis=0)).max() < np.pi


def test_too_few_iterations_are_told(rng):
    phase, weight = rng.uniform(-np.pi, np.pi, (30, 30)), rng.uniform(0, 1, (30, 30))
    with pytest.raises(ArithmeticError, match="in 2 iterations; allow more or ask for less"):
        fit_smooth(phase, weight=weight, max_iterations=2)
