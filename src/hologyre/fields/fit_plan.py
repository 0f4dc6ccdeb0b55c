"""What a least-squares fit needs to know of a frame's shape and carrier, made once."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Literal

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from hologyre.fields.bands import Band
from hologyre.fields.prolate import AxisBasis, axis_basis

ComplexArray = NDArray[np.complexfloating]
RealArray = NDArray[np.floating]

_PADDING = 128
"""Pixels the torus is longer than the frame; under some 100 the two edges feel each other."""
_RIM = 1.5
"""Bins of the torus added to the radius: a wave on the rim needs bins on either side."""
_GUARD = 2.0
"""Bins of the torus between sideband and zero order that tell them apart."""
_LEAST = 1e-4
_WEAK = 1e-7


@dataclass(frozen=True, eq=False)
class Axis:
    """Bases of sideband and zero order along one axis, and the little they have in common.

    On a finite frame two bands overlap in few directions, those of the edges: the inner
    products of their sequences are ``left @ right``, with a handful of columns.

    Parameters
    ----------
    side, zero : (m, K) real arrays
        From inner products with a band's waves to coordinates in its orthonormal sequences.
    side_missing : (K, few) real array
        Inner products of the sideband's waves on the frame are the identity less this times
        its transpose: what lies beyond the frame, on a torus not much longer.
    side_lift : (K, m) real array
        From coordinates back to inner products with waves.
    left, right : real arrays (m, few), (few, m')
        Overlap of sideband and zero order.
    conj_left, conj_right : real arrays
        Overlap of the sideband with its conjugate.
    parity : (m',) real array
        +1 or -1: even and odd sequences of the zero order.
    side_waves, zero_waves : (pixels, m) complex arrays
        The sequences on the frame.
    """

    side: RealArray
    zero: RealArray
    side_missing: RealArray
    side_lift: RealArray
    left: RealArray
    right: RealArray
    conj_left: RealArray
    conj_right: RealArray
    parity: RealArray
    side_waves: ComplexArray
    zero_waves: ComplexArray

    @classmethod
    def of(cls, side: AxisBasis, zero: AxisBasis, real: type[np.floating]) -> Axis:
        """Find what two bases have in common, and keep it at one precision."""
        complex_ = np.result_type(real, np.complex64)
        left, right = _split(side.cross(zero))
        conj_left, conj_right = _split(side.cross(side, -1))
        arrays = (
            side.analysis,
            zero.analysis,
            side.missing,
            side.vectors * np.sqrt(side.energy),
            left,
            right,
            conj_left,
            conj_right,
            np.sign(np.einsum("km,km->m", zero.vectors, zero.vectors[::-1])),
        )
        waves = (basis.sequences.astype(complex_) for basis in (side, zero))
        return cls(*(np.ascontiguousarray(a, dtype=real) for a in arrays), *waves)


@dataclass(frozen=True, eq=False)
class Plan:
    """Bands, bases and phases of a fit; `make_plan` keeps them for the frames of a stack.

    Parameters
    ----------
    side, zero : Band
        Bins of the sideband and of the zero order, on a torus longer than the frame.
    y, x : Axis
        The bases along each axis.
    side_phase, zero_phase : (ky, kx) complex arrays
        From Fourier coefficients to inner products with waves of unit norm, the origin in
        the middle of the frame, where all matrices are real.
    inside : (ky, kx) real array
        1 in the sideband's disc.
    """

    side: Band
    zero: Band
    y: Axis
    x: Axis
    side_phase: ComplexArray
    zero_phase: ComplexArray
    inside: RealArray

    def side_coefficients(self, products: ComplexArray) -> ComplexArray:
        """Turn amplitudes of the sideband's unit waves into Fourier coefficients."""
        area = self.side.period[0] * self.side.period[1]
        return products * (self.side_phase.conj() / area)


@lru_cache(maxsize=8)
def make_plan(
    frame_shape: tuple[int, int],
    carrier: tuple[float, float],
    radius: float,
    precision: Literal["single", "double"] = "single",
) -> Plan:
    """Build the bases and what they share."""
    real: type[np.floating] = np.float32 if precision == "single" else np.float64
    period = (
        scipy.fft.next_fast_len(frame_shape[0] + _PADDING, real=True),
        scipy.fft.next_fast_len(frame_shape[1] + _PADDING, real=True),
    )
    side = Band(frame_shape, period, carrier, min(radius + _RIM / min(period), 0.49))
    zero = _zero_order(side)
    axes, phases = [], []
    for i, (n, p) in enumerate(zip(frame_shape, period, strict=True)):
        bases = [
            axis_basis(n, p, int(band.bins(i)[0]), int(band.bins(i)[-1]), _LEAST)
            for band in (side, zero)
        ]
        axes.append(Axis.of(bases[0], bases[1], real))
        phases.append([basis.centring * np.sqrt(p) for basis in bases])
    complex_: Any = np.result_type(real, np.complex64)
    return Plan(
        side,
        zero,
        axes[0],
        axes[1],
        np.outer(phases[0][0], phases[1][0]).astype(complex_),
        np.outer(phases[0][1], phases[1][1]).astype(complex_),
        side.weights().astype(real),
    )


def _zero_order(side: Band) -> Band:
    """Return the band of the zero order, twice as wide, kept clear of the sideband's.

    Bands are rectangles here; it is enough that they are apart along one axis.
    """
    whole = min(2 * side.radius, 0.49)
    gaps = [
        (abs(f) - side.radius) * p - _GUARD for f, p in zip(side.carrier, side.period, strict=True)
    ]
    most = [p // 2 for p in side.period]
    if all(gap < whole * p for gap, p in zip(gaps, side.period, strict=True)):
        axis = int(np.argmax(gaps))
        most[axis] = max(int(gaps[axis]), 1)
    return Band(side.frame_shape, side.period, (0.0, 0.0), whole, (most[0], most[1]))


def _split(
    matrix: NDArray[np.float64],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Split a matrix into a product of few columns and rows, by singular values."""
    u, s, v = np.linalg.svd(matrix, full_matrices=False)
    kept = s > _WEAK
    return u[:, kept] * s[kept], v[kept]
