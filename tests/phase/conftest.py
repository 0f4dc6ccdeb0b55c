"""Simulated phases, and solvers of other makes to compare with."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import linprog
from scipy.sparse import coo_array


def _wrapped(phase):
    """Wrap into (-pi, pi] by another formula than the package's."""
    angle = np.angle(np.exp(1j * np.asarray(phase, dtype=float)))
    return np.where(angle == -np.pi, np.pi, angle)


def _dipole(shape, positive, negative):
    """Phase of a +1 and a -1 vortex at plaquettes (j, i) of a frame."""
    y, x = np.indices(shape, dtype=float)
    angles = [np.arctan2(y - j - 0.5, x - i - 0.5) for j, i in (positive, negative)]
    return _wrapped(angles[0] - angles[1])


def _speckle(shape, shortest_px, seed):
    """Simulate a complex random wave with a disc spectrum, not periodic in the frame."""
    rng = np.random.default_rng(seed)
    size = [int(1.25 * n) + 8 for n in shape]
    fy, fx = (np.fft.fftfreq(n) for n in size)
    inside = np.hypot(fy[:, None], fx) <= 1.0 / shortest_px
    noise = rng.normal(size=size) + 1j * rng.normal(size=size)
    field = np.fft.ifft2(np.where(inside, noise, 0))[: shape[0], : shape[1]]
    return field / np.abs(field).max()


def edge_problem(phase):
    """Return wrapped differences and the curl operator of the plaquettes, row by row."""
    ny, nx = phase.shape
    step_y, step_x = _wrapped(np.diff(phase, axis=0)), _wrapped(np.diff(phase, axis=1))
    edge_y = np.arange(step_y.size).reshape(step_y.shape)
    edge_x = step_y.size + np.arange(step_x.size).reshape(step_x.shape)
    plaquette = np.arange((ny - 1) * (nx - 1)).reshape(ny - 1, nx - 1)
    rows = np.tile(plaquette.ravel(), 4)
    columns = np.concatenate(
        [e.ravel() for e in (edge_x[:-1], edge_y[:, 1:], edge_x[1:], edge_y[:, :-1])]
    )
    signs = np.repeat([1.0, 1.0, -1.0, -1.0], plaquette.size)
    count = step_y.size + step_x.size
    curl = coo_array((signs, (rows, columns)), shape=(plaquette.size, count)).tocsr()
    return np.concatenate([step_y.ravel(), step_x.ravel()]), curl


def _linear_programme(phase, cost_y, cost_x):
    """Least cost of corrections k with curl(wrapped + 2 pi k) = 0; inf forbids an edge."""
    steps, curl = edge_problem(phase)
    cost = np.concatenate([np.ravel(cost_y), np.ravel(cost_x)]).astype(float)
    bounds = np.where(np.isinf(cost), 0.0, np.inf)
    solved = linprog(
        np.tile(np.where(np.isinf(cost), 0.0, cost), 2),
        A_eq=coo_array(curl).tocsr().dot(_plus_minus(len(cost))),
        b_eq=-np.rint(curl @ steps / (2 * np.pi)),
        bounds=np.column_stack([np.zeros(2 * len(cost)), np.tile(bounds, 2)]),
        method="highs",
    )
    assert solved.status == 0, solved.message
    return solved.fun


def _plus_minus(count):
    index = np.arange(count)
    return coo_array(
        (
            np.repeat([1.0, -1.0], count),
            (np.tile(index, 2), np.arange(2 * count)),
        ),
        shape=(count, 2 * count),
    ).tocsr()


@pytest.fixture
def rng():
    return np.random.default_rng(20240607)


@pytest.fixture
def wrapped():
    return _wrapped


@pytest.fixture
def dipole():
    return _dipole


@pytest.fixture
def speckle():
    return _speckle


@pytest.fixture
def linear_programme():
    return _linear_programme
