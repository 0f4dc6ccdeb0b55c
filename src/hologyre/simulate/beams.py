"""Gaussian beams hosting several vortices, propagated in closed form."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import comb, factorial
from typing import Self

import numpy as np
from numpy.polynomial import polynomial
from numpy.typing import ArrayLike, NDArray

from hologyre.simulate.wave import ComplexArray, Jet, Wave, points, require_positive


@dataclass(frozen=True)
class VortexBeam(Wave):
    """A polynomial in u = x + iy and its conjugate times a Gaussian beam.

    At the waist ``E = sum_mn c_mn u^m conj(u)^n exp(-|u|^2 / w0^2)``, lengths in units of w0.
    Propagated by ``zeta = z / z_R`` (paraxially, exact), with ``q = 1 + i zeta``, each monomial
    turns into ``sum_k k! C(m,k) C(n,k) (i zeta / q)^k (u/q)^(m-k) (conj(u)/q)^(n-k)`` times
    ``exp(-|u|^2 / q) / q``. Like charges rotate and scale together, ``u_j -> u_j (1 + i zeta)``;
    a vortex dipole may annihilate (G. Indebetouw, J. Mod. Opt. 40, 73 (1993)).

    Parameters
    ----------
    waist_px : float
        Waist radius w0 (1/e amplitude), px.
    centre_px : (float, float)
        Axis of the beam (y, x), px.
    coefficients : tuple of tuples of complex
        c_mn, row m for powers of u, column n for powers of its conjugate, u in waists.
    zeta : float
        Distance from the waist in Rayleigh ranges at t = 0.
    zeta_rate : float
        Growth of zeta per frame.

    Raises
    ------
    ValueError
        If the waist is not positive or the coefficients are not a rectangle.
    """

    waist_px: float
    centre_px: tuple[float, float]
    coefficients: tuple[tuple[complex, ...], ...] = ((1.0,),)
    zeta: float = 0.0
    zeta_rate: float = 0.0

    def __post_init__(self) -> None:
        require_positive("waist_px", self.waist_px)
        widths = {len(row) for row in self.coefficients}
        if len(widths) != 1 or 0 in widths:
            raise ValueError(
                "coefficients: expected rows of one length, got lengths "
                f"{[len(row) for row in self.coefficients]}"
            )

    @classmethod
    def hosting(
        cls,
        positive_px: Sequence[tuple[float, float]] = (),
        negative_px: Sequence[tuple[float, float]] = (),
        *,
        waist_px: float,
        centre_px: tuple[float, float],
        zeta: float = 0.0,
        zeta_rate: float = 0.0,
    ) -> Self:
        """Return the beam whose zeros at the waist are these points (y, x) of charge +1 and -1.

        A point given m times is a vortex of charge m.
        """
        require_positive("waist_px", waist_px)

        def offset(point: tuple[float, float]) -> complex:
            return complex(point[1] - centre_px[1], point[0] - centre_px[0]) / waist_px

        in_u = polynomial.polyfromroots([offset(p) for p in positive_px])
        in_conj = polynomial.polyfromroots([offset(p).conjugate() for p in negative_px])
        table = np.outer(in_u, in_conj).astype(np.complex128)
        return cls(
            waist_px=waist_px,
            centre_px=centre_px,
            coefficients=tuple(tuple(complex(c) for c in row) for row in table),
            zeta=zeta,
            zeta_rate=zeta_rate,
        )

    @property
    def finest_px(self) -> float:
        """A length well below the waist, shorter for higher powers, px."""
        degree = len(self.coefficients) + len(self.coefficients[0]) - 2
        return self.waist_px / (1 + 0.25 * degree)

    def jet(self, y_px: ArrayLike, x_px: ArrayLike, t: ArrayLike) -> Jet:
        """Return value and derivatives at the points, broadcast together."""
        y, x, time = points(y_px, x_px, t)
        u = ((x - self.centre_px[1]) + 1j * (y - self.centre_px[0])) / self.waist_px
        v = np.conj(u)
        zeta = self.zeta + self.zeta_rate * time
        q = 1 + 1j * zeta
        p, p_u, p_v, p_uv = self._polynomial(u / q, v / q, 1j * zeta / q)
        host = np.exp(-u * v / q) / q
        along_u = (p_u - v * p) / q * host
        along_v = (p_v - u * p) / q * host
        along_uv = ((p_uv - u * p_u - v * p_v + u * v * p) / q - p) / q * host
        return Jet(
            value=p * host,
            dy=1j * (along_u - along_v) / self.waist_px,
            dx=(along_u + along_v) / self.waist_px,
            # The paraxial equation: d/dzeta = i d^2/(du dconj(u)), u in waists.
            dt=1j * self.zeta_rate * along_uv,
        )

    def _polynomial(
        self, u: ComplexArray, v: ComplexArray, s: NDArray[np.complexfloating]
    ) -> tuple[ComplexArray, ComplexArray, ComplexArray, ComplexArray]:
        """Return the propagated polynomial and its derivatives along u, v and both."""
        sums = [np.zeros(u.shape, dtype=np.complex128) for _ in range(4)]
        for m, row in enumerate(self.coefficients):
            for n, c in enumerate(row):
                if c == 0:
                    continue
                for k in range(min(m, n) + 1):
                    factor = c * factorial(k) * comb(m, k) * comb(n, k) * s**k
                    a, b = m - k, n - k
                    u_a, v_b = u**a, v**b
                    du_a = a * u ** max(a - 1, 0)
                    dv_b = b * v ** max(b - 1, 0)
                    sums[0] += factor * u_a * v_b
                    sums[1] += factor * du_a * v_b
                    sums[2] += factor * u_a * dv_b
                    sums[3] += factor * du_a * dv_b
        return sums[0], sums[1], sums[2], sums[3]
