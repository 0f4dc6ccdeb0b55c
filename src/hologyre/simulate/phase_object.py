"""Things put in a wave's way: a transparent object, a steady drift."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from hologyre.simulate.wave import FloatArray, Jet, Wave, points, require_positive


@dataclass(frozen=True)
class PhaseBump:
    """A smooth phase ``height * exp(-(rho^2)^order)``, rho the distance in radii.

    Parameters
    ----------
    centre_px : (float, float)
        Centre (y, x) at t = 0, px.
    radius_px : (float, float)
        Radii along y and x, px.
    height_rad : float
        Phase at the centre; positive where the optical path is longer.
    order : int
        1 for a Gaussian, 2 or more for a flatter top with steeper sides.
    velocity_px : (float, float)
        Motion (y, x), px per frame.

    Raises
    ------
    ValueError
        If a radius or the order is not positive.
    """

    centre_px: tuple[float, float]
    radius_px: tuple[float, float]
    height_rad: float
    order: int = 1
    velocity_px: tuple[float, float] = (0.0, 0.0)

    def __post_init__(self) -> None:
        for radius in self.radius_px:
            require_positive("radius_px", radius)
        require_positive("order", self.order)

    def phase_jet(
        self, y: FloatArray, x: FloatArray, t: FloatArray
    ) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
        """Return the phase and its derivatives along y, x and in time."""
        v = (y - self.centre_px[0] - self.velocity_px[0] * t) / self.radius_px[0]
        u = (x - self.centre_px[1] - self.velocity_px[1] * t) / self.radius_px[1]
        square = v**2 + u**2
        phase = self.height_rad * np.exp(-(square**self.order))
        slope = -2 * self.order * square ** (self.order - 1) * phase
        dy, dx = slope * v / self.radius_px[0], slope * u / self.radius_px[1]
        return phase, dy, dx, -(dy * self.velocity_px[0] + dx * self.velocity_px[1])


@dataclass(frozen=True)
class ThroughPhaseObject(Wave):
    """A wave seen through a thin transparent object in focus: ``host * exp(i sum of bumps)``.

    The zeros are the host's.
    """

    host: Wave
    bumps: tuple[PhaseBump, ...]

    @property
    def finest_px(self) -> float:
        """The host's: a phase factor moves no zero."""
        return self.host.finest_px

    def phase(self, y_px: ArrayLike, x_px: ArrayLike, t: ArrayLike) -> FloatArray:
        """Return the object's phase at the points, rad, not wrapped."""
        y, x, time = points(y_px, x_px, t)
        total = np.zeros(y.shape)
        for bump in self.bumps:
            total += bump.phase_jet(y, x, time)[0]
        return total

    def jet(self, y_px: ArrayLike, x_px: ArrayLike, t: ArrayLike) -> Jet:
        """Return value and derivatives at the points, broadcast together."""
        y, x, time = points(y_px, x_px, t)
        total = np.zeros((4, *y.shape))
        for bump in self.bumps:
            total += np.stack(bump.phase_jet(y, x, time))
        turn = np.exp(1j * total[0])
        host = self.host.jet(y, x, time)
        slopes = (
            turn * (of_host + 1j * along * host.value)
            for of_host, along in zip(host[1:], total[1:], strict=True)
        )
        return Jet(turn * host.value, *slopes)


@dataclass(frozen=True)
class Drifting(Wave):
    """A wave that moves over the frame as a whole: ``host(r - velocity t, t)``.

    Parameters
    ----------
    host : Wave
        The wave.
    velocity_px : (float, float)
        Motion (y, x), px per frame.
    """

    host: Wave
    velocity_px: tuple[float, float]

    @property
    def finest_px(self) -> float:
        """The host's."""
        return self.host.finest_px

    def jet(self, y_px: ArrayLike, x_px: ArrayLike, t: ArrayLike) -> Jet:
        """Return value and derivatives at the points, broadcast together."""
        y, x, time = points(y_px, x_px, t)
        jet = self.host.jet(y - self.velocity_px[0] * time, x - self.velocity_px[1] * time, time)
        return jet._replace(dt=jet.dt - self.velocity_px[0] * jet.dy - self.velocity_px[1] * jet.dx)
