"""Diffraction by a half-plane screen: Sommerfeld's exact solution."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import erfc

from hologyre.simulate.wave import ComplexArray, FloatArray, Jet, Wave, points, require_positive


@dataclass(frozen=True)
class HalfPlane(Wave):
    """A plane wave met by the perfectly conducting screen y = 0, x >= 0 (from the edge).

    The wave exp(-i k r cos(theta - a)) comes from direction a, theta the polar angle about the
    edge in [0, 2 pi) from +x towards +y. "E": the field vanishes on the screen; "H": its normal
    derivative does. A. Sommerfeld, Math. Ann. 47, 317 (1896); Born and Wolf, Principles of
    Optics, section 11.5.

    Parameters
    ----------
    wavelength_px : float
        Wavelength, px.
    edge_px : (float, float)
        The screen's edge (y, x), px.
    polarisation : {"E", "H"}
        What vanishes on the screen.
    angle_rad : float
        Direction a the wave comes from at t = 0.
    angle_rate : float
        Growth of the angle per frame.

    Raises
    ------
    ValueError
        If the wavelength is not positive or the polarisation is unknown.
    """

    wavelength_px: float
    edge_px: tuple[float, float]
    polarisation: Literal["E", "H"] = "E"
    angle_rad: float = np.pi / 2
    angle_rate: float = 0.0

    def __post_init__(self) -> None:
        require_positive("wavelength_px", self.wavelength_px)
        if self.polarisation not in ("E", "H"):
            raise ValueError(f"polarisation: expected E or H, got {self.polarisation!r}")

    @property
    def finest_px(self) -> float:
        """Half the wavelength: incident and reflected waves make standing fringes, px."""
        return self.wavelength_px / 2

    def jet(self, y_px: ArrayLike, x_px: ArrayLike, t: ArrayLike) -> Jet:
        """Return value and derivatives at the points, broadcast together."""
        y, x, time = points(y_px, x_px, t)
        k = 2 * np.pi / self.wavelength_px
        down, right = y - self.edge_px[0], x - self.edge_px[1]
        # The formulas divide by r; the edge itself is a branch point without a gradient.
        r = np.maximum(np.hypot(down, right), np.finfo(np.float64).tiny)
        theta = np.mod(np.arctan2(down, right), 2 * np.pi)
        angle = self.angle_rad + self.angle_rate * time
        sign = -1.0 if self.polarisation == "E" else 1.0
        incident, incident_r, incident_psi = _half(k, r, theta - angle)
        mirrored, mirrored_r, mirrored_psi = _half(k, r, theta + angle)
        along_r = incident_r + sign * mirrored_r
        along_theta = (incident_psi + sign * mirrored_psi) / r
        cos, sin = right / r, down / r
        return Jet(
            value=incident + sign * mirrored,
            dy=sin * along_r + cos * along_theta,
            dx=cos * along_r - sin * along_theta,
            dt=self.angle_rate * (sign * mirrored_psi - incident_psi),
        )


def _half(
    k: float, r: FloatArray, psi: FloatArray
) -> tuple[ComplexArray, ComplexArray, ComplexArray]:
    """Return exp(-i k r cos psi) erfc(w) / 2 and its derivatives along r and psi."""
    turn = np.exp(-0.25j * np.pi)
    w = -turn * np.sqrt(2 * k * r) * np.cos(psi / 2)
    value = 0.5 * np.exp(-1j * k * r * np.cos(psi)) * erfc(w)
    # exp(-w^2) times the plane wave is the cylindrical wave exp(i k r).
    edge_wave = np.exp(1j * k * r) / np.sqrt(np.pi)
    along_r = -1j * k * np.cos(psi) * value - edge_wave * w / (2 * r)
    along_psi = 1j * k * r * np.sin(psi) * value - edge_wave * turn * np.sqrt(k * r / 2) * np.sin(
        psi / 2
    )
    return value, along_r, along_psi
