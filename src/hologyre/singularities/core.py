"""The core of a zero, from the field's slopes there: its shape and its uncertainty."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray


class Cores(NamedTuple):
    """Cores of zeros; arrays of one length.

    The Jacobian J has the rows (Re E_x, Re E_y) and (Im E_x, Im E_y).

    Attributes
    ----------
    steep, flat : float arrays
        Its singular values, larger and smaller, field units per px.
    orientation_rad : float array
        Long axis of the ellipses of equal amplitude, from +x to +y, in [0, pi).
    """

    steep: NDArray[np.float64]
    flat: NDArray[np.float64]
    orientation_rad: NDArray[np.float64]

    @property
    def axis_ratio(self) -> NDArray[np.float64]:
        """Minor over major axis of the ellipses of equal amplitude."""
        with np.errstate(invalid="ignore"):
            ratio: NDArray[np.float64] = self.flat / self.steep
        return ratio

    def covariance(
        self, variance: NDArray[np.float64]
    ) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
        """Return the variances of y and x and their covariance under noise of this E|n|^2.

        To first order ``(E|n|^2 / 2) (J^T J)^-1``: the noise's real and imaginary part hold
        half of E|n|^2 each and move the zero by ``-J^-1 n``.
        """
        with np.errstate(divide="ignore", invalid="ignore"):
            along, across = variance / 2 / self.flat**2, variance / 2 / self.steep**2
        cos, sin = np.cos(self.orientation_rad), np.sin(self.orientation_rad)
        return (
            along * sin**2 + across * cos**2,
            along * cos**2 + across * sin**2,
            (along - across) * sin * cos,
        )


def cores(dy: NDArray[np.complex128], dx: NDArray[np.complex128]) -> Cores:
    """Return the cores of zeros from the slopes dE/dy and dE/dx, per px."""
    yy, xx, yx = np.abs(dy) ** 2, np.abs(dx) ** 2, (dx.conj() * dy).real
    det = np.abs(dx.real * dy.imag - dy.real * dx.imag)
    steep = np.sqrt((xx + yy + np.hypot(xx - yy, 2 * yx)) / 2)
    with np.errstate(invalid="ignore"):
        flat = np.where(steep > 0, det / steep, 0.0)
    return Cores(steep, flat, (np.arctan2(2 * yx, xx - yy) / 2 + np.pi / 2) % np.pi)
