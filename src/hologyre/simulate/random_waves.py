"""Random waves: speckle with a chosen spectrum and a chosen pace."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from hologyre.simulate.plane_waves import Modes, sum_jet, sum_on_grid
from hologyre.simulate.wave import ComplexArray, FloatArray, Jet, Wave, points, require_positive

Spectrum = Literal["ring", "disc", "gauss"]

# A Gaussian spectrum is cut where it has fallen to exp(-4.5), so that a shortest wavelength exists.
_GAUSS_CUT = 3.0
# Width of the ring in a periodic box, in units of the box's frequency step.
_RING_WIDTH = 0.35


@dataclass(frozen=True)
class RandomWaves(Wave):
    """A sum of plane waves with random wavevectors, amplitudes and frequencies.

    ``E = sum_n a_n exp(i (k_n . r - omega_n tau(t)))`` with ``sum |a_n|^2 = 1``, so that the mean
    intensity over the plane is 1. Wavevectors are drawn anywhere in the spectrum: the field is
    not periodic in the frame, which ends in mid-fringe as real frames do.

    Parameters
    ----------
    spectrum : {"ring", "disc", "gauss"}
        Power on the circle |k| = K, evenly on the disc |k| < K, or as exp(-k^2 / (2 (K/3)^2)) on
        the disc; K = 2 pi / shortest_px.
    shortest_px : float
        Shortest wavelength, px.
    spread_rad_per_frame : float
        Standard deviation of the angular frequencies; 0 for a field at rest. Zeros then move
        with a median speed of ``spread * sqrt(2 / <k^2>)`` px per frame.
    seed : int
        Seed of the draw.
    count : int
        Number of waves; not used in a periodic box.
    slowing_frames : float, optional
        Time constant T of a slowing clock, tau = T (1 - exp(-t / T)); None for tau = t.
    box_px : float, optional
        Make the field periodic in a square of this side: every wavevector of the box's lattice
        within the spectrum takes part.

    Raises
    ------
    ValueError
        If a setting is out of range.
    """

    spectrum: Spectrum
    shortest_px: float
    spread_rad_per_frame: float = 0.0
    seed: int = 0
    count: int = 400
    slowing_frames: float | None = None
    box_px: float | None = None

    def __post_init__(self) -> None:
        if self.spectrum not in get_args(Spectrum):
            expected = ", ".join(get_args(Spectrum))
            raise ValueError(f"spectrum: expected one of {expected}, got {self.spectrum!r}")
        require_positive("shortest_px", self.shortest_px)
        require_positive("count", self.count)
        if not 0 <= self.spread_rad_per_frame < float("inf"):
            raise ValueError(
                f"spread_rad_per_frame: expected 0 or more, got {self.spread_rad_per_frame!r}"
            )
        if self.slowing_frames is not None:
            require_positive("slowing_frames", self.slowing_frames)
        if self.box_px is not None and not self.box_px > 2 * self.shortest_px:
            raise ValueError(
                f"box_px: expected more than two shortest wavelengths, got {self.box_px!r}"
            )

    @property
    def finest_px(self) -> float:
        """Shortest wavelength, px."""
        return self.shortest_px

    @cached_property
    def modes(self) -> Modes:
        """The waves drawn."""
        rng = np.random.default_rng(self.seed)
        ky, kx, power = self._box_wavevectors() if self.box_px else self._free_wavevectors(rng)
        normal = rng.standard_normal((3, ky.size))
        amplitude = np.sqrt(power) * (normal[0] + 1j * normal[1])
        amplitude /= np.sqrt(np.sum(np.abs(amplitude) ** 2))
        return Modes(ky, kx, self.spread_rad_per_frame * normal[2], amplitude)

    @property
    def mean_square_k(self) -> float:
        """<k^2> of the waves drawn, weighted by their power, (rad/px)^2."""
        power = np.abs(self.modes.amplitude) ** 2
        return float(np.sum(power * (self.modes.ky**2 + self.modes.kx**2)))

    @property
    def expected_mean_square_k(self) -> float:
        """<k^2> of the spectrum the waves are drawn from, (rad/px)^2."""
        k = 2 * np.pi / self.shortest_px
        if self.spectrum == "ring":
            return float(k**2)
        if self.spectrum == "disc":
            return float(k**2 / 2)
        edge = _GAUSS_CUT**2 / 2
        return float(2 * (k / _GAUSS_CUT) ** 2 * (1 - edge / np.expm1(edge)))

    @property
    def frequency_variance(self) -> float:
        """<omega^2> - <omega>^2 of the waves drawn at t = 0, weighted by power, (rad/frame)^2."""
        power = np.abs(self.modes.amplitude) ** 2
        mean = np.sum(power * self.modes.omega)
        return float(np.sum(power * (self.modes.omega - mean) ** 2))

    def jet(self, y_px: ArrayLike, x_px: ArrayLike, t: ArrayLike) -> Jet:
        """Return value and derivatives at the points, broadcast together."""
        y, x, time = points(y_px, x_px, t)
        tau, pace = self._clock(time)
        jet = sum_jet(self.modes, y, x, tau)
        return jet._replace(dt=jet.dt * pace)

    def on_grid(self, y_px: ArrayLike, x_px: ArrayLike, t: float) -> ComplexArray:
        """Return the field on the lattice of all pairs of y and x, shape (len(y), len(x))."""
        tau, _ = self._clock(np.float64(t))
        y, x = np.asarray(y_px, dtype=np.float64), np.asarray(x_px, dtype=np.float64)
        return sum_on_grid(self.modes, y, x, float(tau))

    def _clock(self, t: FloatArray | np.float64) -> tuple[FloatArray, FloatArray]:
        """Return tau(t) and its pace."""
        if self.slowing_frames is None:
            return np.asarray(t), np.ones_like(t)
        slowed = np.exp(-np.asarray(t) / self.slowing_frames)
        return self.slowing_frames * (1 - slowed), slowed

    def _free_wavevectors(
        self, rng: np.random.Generator
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Draw wavevectors by the spectrum; all of the same power."""
        share = rng.random(self.count)
        angle = 2 * np.pi * rng.random(self.count)
        k = np.full(self.count, 2 * np.pi / self.shortest_px)
        if self.spectrum == "disc":
            k *= np.sqrt(share)
        elif self.spectrum == "gauss":
            # Inverse of the cumulative distribution of k^2, an exponential one cut at K^2.
            kept = -np.expm1(-(_GAUSS_CUT**2) / 2)
            k *= np.sqrt(-2 * np.log1p(-share * kept)) / _GAUSS_CUT
        return k * np.sin(angle), k * np.cos(angle), np.ones(self.count)

    def _box_wavevectors(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return the lattice wavevectors of the periodic box and their power."""
        step = 2 * np.pi / float(self.box_px or 0)
        edge = 2 * np.pi / self.shortest_px / step
        reach = int(edge) + 2
        whole = np.arange(-reach, reach + 1, dtype=np.float64)
        my, mx = np.meshgrid(whole, whole, indexing="ij")
        m = np.hypot(my, mx)
        if self.spectrum == "ring":
            power = np.exp(-((m - edge) ** 2) / (2 * _RING_WIDTH**2))
            kept = np.abs(m - edge) < 3 * _RING_WIDTH
        elif self.spectrum == "disc":
            power, kept = np.ones_like(m), m < edge
        else:
            power = np.exp(-((m * _GAUSS_CUT / edge) ** 2) / 2)
            kept = m < edge
        return step * my[kept], step * mx[kept], power[kept]
