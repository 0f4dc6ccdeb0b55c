"""Bessel vortices, whole and unfolded by a coherent background."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import jv

from hologyre.simulate.wave import ComplexArray, FloatArray, Jet, Wave, points, require_positive


@dataclass(frozen=True)
class BesselVortex(Wave):
    """``J_m(k r) exp(i m phi) + eps J_0(k r)``, eps = background + background_rate * t.

    Without background one vortex of charge m; its wavevector is m / r along the azimuth, beyond
    k where k r < m. A small background unfolds it into unit vortices on rings where
    ``|J_m(k r)| = eps |J_0(k r)|``.

    Parameters
    ----------
    charge : int
        m, any sign.
    wavelength_px : float
        2 pi / k, px.
    centre_px : (float, float)
        Axis (y, x), px.
    background : float
        eps at t = 0.
    background_rate : float
        Growth of eps per frame.

    Raises
    ------
    ValueError
        If the wavelength is not positive.
    """

    charge: int
    wavelength_px: float
    centre_px: tuple[float, float]
    background: float = 0.0
    background_rate: float = 0.0

    def __post_init__(self) -> None:
        require_positive("wavelength_px", self.wavelength_px)

    @property
    def finest_px(self) -> float:
        """Wavelength, px."""
        return self.wavelength_px

    def jet(self, y_px: ArrayLike, x_px: ArrayLike, t: ArrayLike) -> Jet:
        """Return value and derivatives at the points, broadcast together."""
        y, x, time = points(y_px, x_px, t)
        k = 2 * np.pi / self.wavelength_px
        dy, dx = y - self.centre_px[0], x - self.centre_px[1]
        radius, angle = k * np.hypot(dy, dx), np.arctan2(dy, dx)

        def order(m: int) -> ComplexArray:
            return jv(m, radius) * np.exp(1j * m * angle)

        def slopes(m: int) -> tuple[ComplexArray, ComplexArray]:
            # (d/dx + i d/dy) raises the order and turns the sign, (d/dx - i d/dy) lowers it.
            lower, upper = order(m - 1), order(m + 1)
            return 0.5j * k * (lower + upper), 0.5 * k * (lower - upper)

        background: FloatArray = self.background + self.background_rate * time
        whole_y, whole_x = slopes(self.charge)
        flat_y, flat_x = slopes(0)
        return Jet(
            value=order(self.charge) + background * order(0),
            dy=whole_y + background * flat_y,
            dx=whole_x + background * flat_x,
            dt=self.background_rate * order(0),
        )
