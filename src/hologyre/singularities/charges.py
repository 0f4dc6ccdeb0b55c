"""Vortices of higher charge, where noise does not tell their unit parts apart."""

from __future__ import annotations

from math import factorial
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hologyre.singularities.kernel import scratch, value_and_slopes, values_at
from hologyre.singularities.lattice import Lattice

UNRESOLVED = 2.15
"""Like charges count as one where |E| between them is below this many times the noise.

For a vortex of charge 2 under noise |E| in its middle is that of the noise alone, which stays
below in 99 of 100 cases."""

_SLOPE_FREE = 2.15
"""The antiholomorphic slope of a vortex of higher charge over that of the noise, in 99 of 100."""


class Vortices(NamedTuple):
    """Zeros after like ones that cannot be told apart were joined; arrays of one length.

    Attributes
    ----------
    first : int array
        Row of the zero that stands for the vortex.
    y, x : float arrays
        Node coordinates; the parts' mean.
    charge : int64 array
        Sum of the parts' charges.
    """

    first: NDArray[np.intp]
    y: NDArray[np.float64]
    x: NDArray[np.float64]
    charge: NDArray[np.int64]


def joined(
    lattice: Lattice,
    zeros: NDArray[np.float64],
    alike: NDArray[np.int64],
    level: NDArray[np.float64],
    sigma: NDArray[np.float64],
) -> Vortices:
    """Join like zeros where the field may be that of one vortex of higher charge.

    Low |E| between them does not suffice: where two unit vortices of a speckle field come close,
    the field there still has the antiholomorphic slope they are made with, and a vortex of
    higher charge has none.

    Parameters
    ----------
    lattice : Lattice
        The field.
    zeros : (n, 9) array
        As `find_zeros` gives them.
    alike : (n,) int array
        Zeros to be joined have one number.
    level : (n,) array
        Robustness of each; a vortex of higher charge must stand out of the noise as a whole.
    sigma : (n,) array
        Root mean square noise of the field at each.
    """
    alike = np.where(level > 2 * UNRESOLVED * sigma, alike, np.arange(alike.size))
    numbers, counts = np.unique(alike, return_counts=True)
    for number in numbers[counts > 1]:
        parts = np.flatnonzero(alike == number)
        middle, charge = zeros[parts, :2].mean(axis=0), zeros[parts, 6].sum()
        _, dy, dx = value_and_slopes(lattice.planes, lattice.table, *middle, scratch())
        dy, dx = dy / lattice.step_px[0], dx / lattice.step_px[1]
        against = abs(dx + 1j * np.sign(charge) * dy) / 2
        # Mean square of the noise's: E|n|^2 <k^2> / 4, over a disc of frequencies.
        expected = sigma[parts].mean() * 2 * np.pi * lattice.radius_per_px / np.sqrt(8)
        if against > _SLOPE_FREE * expected:
            alike[parts] = parts
    _, first, back = np.unique(alike, return_index=True, return_inverse=True)
    parts = np.bincount(back)
    return Vortices(
        first,
        np.bincount(back, zeros[:, 0]) / parts,
        np.bincount(back, zeros[:, 1]) / parts,
        np.rint(np.bincount(back, zeros[:, 6])).astype(np.int64),
    )


def centred(
    lattice: Lattice, y: float, x: float, charge: int, variance: float
) -> tuple[float, float, float]:
    """Return place and standard error of a vortex of charge m, 2 or more in size.

    Near it E = c (u - u0)^m, u = x + iy, or the conjugate for m < 0. On a ring about the parts'
    mean the harmonics of order m and m - 1 give c and ``-m c u0``; noise n reaches u0 through
    its coefficient of u^(m-1), whose variance is that of noise even over the disc of frequencies
    that holds the field.

    Parameters
    ----------
    lattice : Lattice
        The field.
    y, x : float
        Node coordinates near the vortex.
    charge : int
        m.
    variance : float
        E|n|^2 there.

    Returns
    -------
    y, x : float
        Node coordinates of the vortex.
    sigma : float
        Standard error of either coordinate, px.
    """
    order, step_y, step_x = abs(charge), *lattice.step_px
    radius = 0.08 / lattice.radius_per_px
    angle = 2 * np.pi * np.arange(32) / 32
    for _ in range(2):
        ring = np.stack(
            [y + radius * np.sin(angle) / step_y, x + radius * np.cos(angle) / step_x], axis=1
        )
        values = values_at(lattice.planes, lattice.table, ring)
        values = values if charge > 0 else values.conj()
        power = np.mean(values * np.exp(-1j * order * angle)) / radius**order
        below = np.mean(values * np.exp(-1j * (order - 1) * angle)) / radius ** (order - 1)
        shift = complex(-below / (order * power))
        y, x = y + shift.imag / step_y, x + shift.real / step_x
    k = 2 * np.pi * lattice.radius_per_px
    derivative = variance * k ** (2 * order - 2) / order / 4 ** (order - 1)
    spread = derivative / factorial(order - 1) ** 2 / (order * abs(power)) ** 2
    return y, x, float(np.sqrt(spread / 2))
