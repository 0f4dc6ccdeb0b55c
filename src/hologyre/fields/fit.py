"""The field of a frame that ends at its edges, by least squares on the pixels it has.

A hologram's fringes are not periodic in the frame, so that its edges leak through any Fourier
filter, far into the picture. Here the terms of a hologram, each band-limited, are fitted to
the frame's own pixels instead: nothing is said about what lies beyond them.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from hologyre.fields.fit_plan import ComplexArray, Plan, RealArray
from hologyre.fields.transform import band_spectra

_SWEEPS = 20
_DAMPING = 1e-5
_STEPS = 120
_ALIKE = 0.1
"""Directions alike to this degree are told apart no further: it would magnify noise."""


@dataclass(frozen=True, eq=False)
class Shared:
    """What sideband, conjugate and zero order hold in the few directions they share."""

    zero: ComplexArray
    conjugate: ComplexArray
    side: ComplexArray


def fit_spectrum(counts: RealArray, plan: Plan) -> ComplexArray:
    """Return the sideband's coefficients ``(ky, kx)`` on the torus of the plan.

    Parameters
    ----------
    counts : (y, x) real array
        Frame with the blanks subtracted, of the plan's precision.
    plan : Plan
        From `make_plan`.

    Notes
    -----
    The counts are modelled as a zero order and a sideband with its conjugate, in bases that
    are orthonormal on the frame; what they share is told apart first, then the sideband is
    continued to the torus by the coefficients in its disc that give it on the frame, of
    least norm for a small damping, by conjugate gradients.
    """
    side, zero = transform(counts - counts.mean(), plan)
    return within_disc(side, separate(side, zero, plan), plan)


def transform(frame: RealArray, plan: Plan) -> tuple[ComplexArray, ComplexArray]:
    """Return a frame's inner products with the waves of the sideband and the zero order."""
    side, zero = band_spectra(frame, [plan.side, plan.zero])
    return side * plan.side_phase, zero * plan.zero_phase


def separate(side: ComplexArray, zero: ComplexArray, plan: Plan) -> Shared:
    """Tell sideband, its conjugate and zero order apart where they overlap on the frame.

    Each is what the frame holds of it less what the others have in its directions: a fixed
    point of small matrices.
    """
    y, x = plan.y, plan.x
    zero_0 = sandwich(y.right @ y.zero, zero, x.right @ x.zero)
    side_0 = sandwich(y.left.T @ y.side, side, x.left.T @ x.side)
    conj_0 = sandwich(y.conj_right @ y.side, side.conj(), x.conj_right @ x.side)
    side_zero = [a.left.T @ a.left for a in (y, x)]
    side_conj = [a.left.T @ a.conj_left for a in (y, x)]
    conj_zero = [a.conj_right @ a.left for a in (y, x)]
    conj_conj = [a.conj_right @ a.conj_left for a in (y, x)]
    mirror = [(a.right * a.parity) @ a.right.T for a in (y, x)]
    # Direction by direction sideband and zero order are told apart in closed form.
    common = np.outer(np.diag(side_zero[0]), np.diag(side_zero[1]))
    apart = np.maximum(1 - common, _ALIKE)
    in_zero, in_conj, in_side = zero_0, conj_0, side_0
    for _ in range(_SWEEPS):
        free = side_0 - sandwich(side_conj[0], in_conj, side_conj[1])
        mirrored = sandwich(mirror[0], in_side.conj(), mirror[1])
        in_zero = (zero_0 - free - mirrored) / apart
        in_side = free - common * in_zero
        shared = sandwich(conj_zero[0], in_zero.conj(), conj_zero[1])
        in_conj = conj_0 - shared - sandwich(conj_conj[0], in_conj.conj(), conj_conj[1])
    return Shared(in_zero, in_conj, in_side)


def within_disc(side: ComplexArray, shared: Shared, plan: Plan) -> ComplexArray:
    """Find the coefficients within the disc that give the sideband on the frame."""
    y, x, inside = plan.y, plan.x, plan.inside
    others = sandwich(y.side_lift @ y.left, shared.zero, x.side_lift @ x.left)
    others += sandwich(y.side_lift @ y.conj_left, shared.conjugate, x.side_lift @ x.conj_left)
    target = inside * (side - others)
    damping = inside.dtype.type(_DAMPING)
    found = np.zeros_like(target)
    left, step = target, target
    power = np.vdot(left, left).real
    enough = 1e-14 * power
    for _ in range(_STEPS):
        if power <= enough:
            break
        image = inside * _on_frame(step, y.side_missing, x.side_missing) + damping * step
        length = power / np.vdot(step, image).real
        found = found + length * step
        left = left - length * image
        fresh = np.vdot(left, left).real
        step = left + (fresh / power) * step
        power = fresh
    return plan.side_coefficients(found)


def _on_frame(amplitudes: ComplexArray, missing_y: RealArray, missing_x: RealArray) -> ComplexArray:
    """Return the inner products on the frame of waves with these amplitudes."""
    for missing in (missing_y, missing_x):
        flat = np.ascontiguousarray(amplitudes).view(missing.dtype)
        within: ComplexArray = (flat - missing @ (missing.T @ flat)).view(amplitudes.dtype)
        amplitudes = within.T
    return amplitudes


def sandwich(left: RealArray, middle: ComplexArray, right: RealArray) -> ComplexArray:
    """Return ``left @ middle @ right.T`` by products of real matrices, twice as quick."""
    half = left @ np.ascontiguousarray(middle).view(left.dtype)
    turned = np.ascontiguousarray(half.view(middle.dtype).T)
    product: ComplexArray = (right @ turned.view(right.dtype)).view(middle.dtype).T
    return product
