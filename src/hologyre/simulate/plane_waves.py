"""Sums of plane waves, and three of them whose zeros are known in closed form."""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from hologyre.simulate.wave import ComplexArray, FloatArray, Jet, Wave, points, require_positive

# Points times waves worked on at once; bounds memory near 30 MB.
_CHUNK = 1 << 20


class Modes(NamedTuple):
    """Plane waves ``amplitude * exp(i (ky y + kx x - omega tau))``, one an entry.

    Attributes
    ----------
    ky, kx : float arrays
        Wavevectors, rad/px.
    omega : float array
        Angular frequencies, rad per unit of tau.
    amplitude : complex array
        Amplitudes with their phases.
    """

    ky: FloatArray
    kx: FloatArray
    omega: FloatArray
    amplitude: ComplexArray


def sum_jet(modes: Modes, y: FloatArray, x: FloatArray, tau: FloatArray) -> Jet:
    """Return the sum of the waves and its derivatives along y, x and tau; arrays of one shape."""
    weights = modes.amplitude[:, np.newaxis] * np.stack(
        [np.ones_like(modes.ky), 1j * modes.ky, 1j * modes.kx, -1j * modes.omega], axis=1
    )
    flat_y, flat_x, flat_tau = y.ravel(), x.ravel(), tau.ravel()
    sums = np.empty((flat_y.size, 4), dtype=np.complex128)
    step = max(1, _CHUNK // max(1, modes.ky.size))
    for start in range(0, flat_y.size, step):
        part = slice(start, start + step)
        phase = np.outer(flat_y[part], modes.ky)
        phase += np.outer(flat_x[part], modes.kx)
        phase -= np.outer(flat_tau[part], modes.omega)
        sums[part] = _turned(phase) @ weights
    value, dy, dx, dtau = (sums[:, i].reshape(y.shape) for i in range(4))
    return Jet(value, dy, dx, dtau)


def sum_on_grid(modes: Modes, y: FloatArray, x: FloatArray, tau: float) -> ComplexArray:
    """Return the sum of the waves on the lattice y by x: exp(i ky y) diag(a) exp(i kx x)."""
    amplitude = modes.amplitude * _turned(-modes.omega * tau)
    rows, row_of = np.unique(modes.ky, return_inverse=True)
    columns, column_of = np.unique(modes.kx, return_inverse=True)
    if rows.size * columns.size <= 4 * amplitude.size:
        # Wavevectors on a lattice (a periodic box): far fewer rows and columns than waves.
        table = np.zeros((rows.size, columns.size), dtype=np.complex128)
        np.add.at(table, (row_of, column_of), amplitude)
        return _turned(np.outer(y, rows)) @ table @ _turned(np.outer(columns, x))
    return (_turned(np.outer(y, modes.ky)) * amplitude) @ _turned(np.outer(modes.kx, x))


def _turned(phase: FloatArray) -> ComplexArray:
    """Return exp(i phase); cosine and sine apart are faster than a complex exponential."""
    turned = np.empty(phase.shape, dtype=np.complex128)
    np.cos(phase, out=turned.real)
    np.sin(phase, out=turned.imag)
    return turned


@dataclass(frozen=True)
class ThreeWaves(Wave):
    """Three plane waves 120 degrees apart, of amplitudes (1, 1, a3), a3 = third + rate * t.

    Zeros exist where the three amplitudes can form a triangle, so while ``a3 < 2``. Then every
    unit cell holds one of each charge, and their density is ``2 |(k2-k1) x (k3-k1)| / (4 pi^2)``,
    whatever a3: all pairs are born or die together when a3 passes 2.

    Parameters
    ----------
    wavelength_px : float
        Wavelength of each wave in the frame, px.
    angle_rad : float
        Direction of the first wavevector, from +x towards +y.
    third : float
        Amplitude of the third wave at t = 0.
    third_rate : float
        Growth of that amplitude per frame.

    Raises
    ------
    ValueError
        If the wavelength is not positive.
    """

    wavelength_px: float
    angle_rad: float = 0.0
    third: float = 1.0
    third_rate: float = 0.0

    def __post_init__(self) -> None:
        require_positive("wavelength_px", self.wavelength_px)

    @property
    def finest_px(self) -> float:
        """Wavelength of the waves, px."""
        return self.wavelength_px

    @property
    def wavevectors(self) -> FloatArray:
        """The three wavevectors as rows (ky, kx), rad/px."""
        k = 2 * np.pi / self.wavelength_px
        angles = self.angle_rad + 2 * np.pi / 3 * np.arange(3)
        return k * np.stack([np.sin(angles), np.cos(angles)], axis=1)

    def jet(self, y_px: ArrayLike, x_px: ArrayLike, t: ArrayLike) -> Jet:
        """Return value and derivatives at the points, broadcast together."""
        y, x, time = points(y_px, x_px, t)
        k = self.wavevectors
        waves = [_turned(ky * y + kx * x) for ky, kx in k]
        third = self.third + self.third_rate * time
        parts = [waves[0], waves[1], third * waves[2]]
        return Jet(
            value=parts[0] + parts[1] + parts[2],
            dy=1j * (k[0, 0] * parts[0] + k[1, 0] * parts[1] + k[2, 0] * parts[2]),
            dx=1j * (k[0, 1] * parts[0] + k[1, 1] * parts[1] + k[2, 1] * parts[2]),
            dt=self.third_rate * waves[2],
        )
