"""The spectrum of an isotropic random wave: its autocorrelation and moments."""

from __future__ import annotations

from dataclasses import dataclass, field
from math import lgamma
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import jv

FloatArray = NDArray[np.float64]

_CHUNK = 1_000_000
"""Products of a distance and a wavenumber held in memory at once."""


@dataclass(frozen=True, eq=False)
class Spectrum:
    """Power over wavenumbers of an isotropic random wave, centred on the carrier.

    Made by `ring`, `disc`, `gauss` or `measured`. All that the theory of its zeros needs
    follows from the autocorrelation ``C(R) = <conj(E(r)) E(r + R)> / <|E|^2>``, which is real.

    Parameters
    ----------
    kind : {"ring", "disc", "gauss", "measured"}
        Power on the circle |k| = K, evenly on the disc |k| < K, as exp(-k^2 / (2 K^2)), or as
        given by the arrays.
    wavenumber_per_px : float
        K, rad/px; of a measured spectrum its largest wavenumber.
    radial_per_px : (n,) array
        Wavenumbers of a measured spectrum, rad/px, increasing; else empty.
    radial_power : (n,) array
        Share of the power at each (over all directions), sum 1; else empty.
    """

    kind: Literal["ring", "disc", "gauss", "measured"]
    wavenumber_per_px: float
    radial_per_px: FloatArray = field(default_factory=lambda: np.empty(0), repr=False)
    radial_power: FloatArray = field(default_factory=lambda: np.empty(0), repr=False)

    @classmethod
    def ring(cls, wavenumber_per_px: float) -> Spectrum:
        """Return the spectrum of waves of one wavenumber K, C = J0(K R)."""
        return cls("ring", _positive(wavenumber_per_px))

    @classmethod
    def disc(cls, wavenumber_per_px: float) -> Spectrum:
        """Return the spectrum of an evenly filled round pupil, C = 2 J1(K R) / (K R)."""
        return cls("disc", _positive(wavenumber_per_px))

    @classmethod
    def gauss(cls, wavenumber_per_px: float) -> Spectrum:
        """Return the spectrum exp(-k^2 / (2 K^2)), C = exp(-K^2 R^2 / 2)."""
        return cls("gauss", _positive(wavenumber_per_px))

    @classmethod
    def measured(cls, radial_per_px: ArrayLike, radial_power: ArrayLike) -> Spectrum:
        """Return the spectrum that has this power at these wavenumbers.

        Parameters
        ----------
        radial_per_px : (n,) array
            Wavenumbers |k|, rad/px, in any order.
        radial_power : (n,) array
            Power found at each, summed over directions; 0 or more, in any unit.

        Raises
        ------
        ValueError
            If the arrays differ in shape, hold negative or non-finite values, or no power at
            any wavenumber above 0.
        """
        k = np.asarray(radial_per_px, dtype=np.float64)
        power = np.asarray(radial_power, dtype=np.float64)
        if k.ndim != 1 or k.shape != power.shape:
            msg = (
                "radial_power: expected one value for each of radial_per_px, got shapes "
                f"{power.shape} and {k.shape}"
            )
            raise ValueError(msg)
        for name, values in (("radial_per_px", k), ("radial_power", power)):
            if not (np.isfinite(values) & (values >= 0)).all():
                raise ValueError(f"{name}: expected finite values of 0 or more")
        kept = power > 0
        if not (k[kept] > 0).any():
            raise ValueError("radial_power: expected power at some wavenumber above 0, got none")
        radial, index = np.unique(k[kept], return_inverse=True)
        share: FloatArray = np.bincount(index, weights=power[kept]) / power[kept].sum()
        return cls("measured", float(radial[-1]), radial, share)

    def moment(self, order: int) -> float:
        """Return <k^order> over the power, (rad/px)^order; for even orders.

        Raises
        ------
        ValueError
            If `order` is odd or negative.
        """
        if order < 0 or order % 2:
            raise ValueError(f"order: expected an even number of 0 or more, got {order!r}")
        return float(self.scaled_moments(order // 2 + 1)[-1]) * self.wavenumber_per_px**order

    @property
    def mean_square_k(self) -> float:
        """<k^2>, (rad/px)^2."""
        return self.moment(2)

    @property
    def kurtosis(self) -> float:
        """<k^4> / <k^2>^2: 1 for a ring, 4/3 for a disc, 2 for a Gaussian spectrum."""
        return self.moment(4) / self.mean_square_k**2

    def correlation(self, r_px: ArrayLike) -> FloatArray:
        """Return the autocorrelation C at distances, px; C(0) = 1."""
        return self.scaled(self._scale(r_px))[0]

    def slope(self, r_px: ArrayLike) -> FloatArray:
        """Return dC/dR at distances, px, per px."""
        z = self._scale(r_px)
        return -self.wavenumber_per_px * z * self.scaled(z)[1]

    def curvature(self, r_px: ArrayLike) -> FloatArray:
        """Return d^2C/dR^2 at distances, px, per px^2; -<k^2>/2 at 0."""
        return -(self.wavenumber_per_px**2) * self.scaled(self._scale(r_px))[2]

    def scaled(self, z: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return C, -C'/z and -C'' as functions of z = K R, all regular at 0."""
        if self.kind == "ring":
            zeroth, first = jv(0, z), _jinc(1, z)
            return zeroth, first, zeroth - first
        if self.kind == "disc":
            first, second = _jinc(1, z), _jinc(2, z)
            return 2 * first, 2 * second, 2 * first - 6 * second
        if self.kind == "gauss":
            fall = np.exp(-(z**2) / 2)
            return fall, fall, (1 - z**2) * fall
        flat, k = z.ravel(), self.radial_per_px / self.wavenumber_per_px
        out = np.empty((3, flat.size))
        rows = max(_CHUNK // k.size, 1)
        for at in range(0, flat.size, rows):
            kz = flat[at : at + rows, np.newaxis] * k
            zeroth, first = jv(0, kz), _jinc(1, kz)
            out[0, at : at + rows] = zeroth @ self.radial_power
            out[1, at : at + rows] = first @ (self.radial_power * k**2)
            out[2, at : at + rows] = (zeroth - first) @ (self.radial_power * k**2)
        return out[0].reshape(z.shape), out[1].reshape(z.shape), out[2].reshape(z.shape)

    def scaled_moments(self, count: int) -> FloatArray:
        """Return <(k/K)^(2n)> for n = 0 .. count - 1."""
        n = np.arange(count, dtype=np.float64)
        if self.kind == "ring":
            return np.ones(count)
        if self.kind == "disc":
            return 1 / (n + 1)
        if self.kind == "gauss":
            return np.exp([m * np.log(2.0) + lgamma(m + 1.0) for m in n])
        squared = (self.radial_per_px / self.wavenumber_per_px) ** 2
        return np.array([float(np.sum(self.radial_power * squared**m)) for m in n])

    def _scale(self, r_px: ArrayLike) -> FloatArray:
        return nonnegative(r_px) * self.wavenumber_per_px


def nonnegative(values: ArrayLike, name: str = "r_px") -> FloatArray:
    """Return values as a float array.

    Raises
    ------
    ValueError
        If one is negative or not finite.
    """
    checked = np.asarray(values, dtype=np.float64)
    if not (np.isfinite(checked) & (checked >= 0)).all():
        raise ValueError(f"{name}: expected finite values of 0 or more")
    return checked


def _jinc(order: int, z: FloatArray) -> FloatArray:
    """Return J_n(z) / z^n, which is 1 / (2^n n!) at 0 for n of 1 and 2."""
    # Below 1e-6 the next term of the series is beyond double precision.
    small = z < 1e-6
    safe = np.where(small, 1.0, z)
    limit = 0.5 if order == 1 else 0.125
    result: FloatArray = np.where(small, limit, jv(order, safe) / safe**order)
    return result


def _positive(wavenumber_per_px: float) -> float:
    if not 0 < wavenumber_per_px < np.inf:
        msg = f"wavenumber_per_px: expected a positive number, got {wavenumber_per_px!r}"
        raise ValueError(msg)
    return float(wavenumber_per_px)
