"""Centre and radius of a speckle sideband by likelihood."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from hologyre.fields.sidebands import Spectrum

_BLUR = np.sqrt(1 / 3)
"""Standard deviation, in bins, of a Hann window's power response."""
_SOFT = (6.0, 3.0, 1.5, 1.0)
"""Blurs of the rim, over the true one, through which the search closes in."""
_MOST_BINS = 20_000
_STEPS = 40
_SECTORS = 12


@dataclass(frozen=True)
class Disc:
    """A filled disc over a floor, fitted to a power spectrum.

    Parameters
    ----------
    fy, fx, radius : float
        Centre and radius, cycles/px.
    sigma_fy, sigma_fx, sigma_radius : float
        Standard errors; zero for a radius that was given.
    level, floor : float
        Power per bin within, and of what lies around.
    """

    fy: float
    fx: float
    radius: float
    sigma_fy: float
    sigma_fx: float
    sigma_radius: float
    level: float
    floor: float


def fit_disc(
    spectrum: Spectrum, fy: float, fx: float, radius: float, *, fixed_radius: bool = False
) -> Disc:
    """Fit a disc of speckle to the power spectrum around a rough sideband.

    Powers of a Gaussian random field are spread exponentially about their mean m, here a
    disc blurred by the frame's window over a floor; the sum of ``log m + P / m`` is least at
    the maximum of Whittle's likelihood (Whittle, Ark. Mat. 2, 423, 1953). Fisher scoring,
    through a rim made soft at first, from several starts. Standard errors by leaving out one
    sector of the disc after another: bins are correlated under a window, and few waves are
    no Gaussian field, so that the likelihood's own curvature promises too much.

    Parameters
    ----------
    spectrum : Spectrum
        Under a Hann window.
    fy, fx, radius : float
        Where to start, cycles/px.
    fixed_radius : bool
        Keep the radius, where optics give it.
    """
    bins = _neighbourhood(spectrum, fy, fx, radius)
    free = np.array([True, True, not fixed_radius, True, True])
    factors = (1.0,) if fixed_radius else (1.0, 0.85, 1.15)
    fits = [_descend(bins, _start(bins, fy, fx, f * radius), free, _SOFT) for f in factors]
    state, _ = min(fits, key=lambda fit: fit[1])
    sector = np.arctan2(bins.fy - state[0], bins.fx - state[1]) / (2 * np.pi) * _SECTORS
    sector = np.floor(sector).astype(int) % _SECTORS
    left_out = np.array(
        [_descend(bins.kept(sector != s), state, free, _SOFT[-1:])[0] for s in range(_SECTORS)]
    )
    errors = np.sqrt((_SECTORS - 1) * left_out.var(axis=0))
    return Disc(
        *(float(v) for v in state[:3]),
        *(float(v) for v in errors[:3]),
        *(float(np.exp(v)) for v in state[3:]),
    )


@dataclass(frozen=True, eq=False)
class _Bins:
    """Bins around a sideband: frequencies, powers, and the blur of a rim along each axis."""

    fy: NDArray[np.float64]
    fx: NDArray[np.float64]
    power: NDArray[np.float64]
    blur: tuple[float, float]

    def kept(self, which: NDArray[np.bool_]) -> _Bins:
        """Return some of the bins."""
        return _Bins(self.fy[which], self.fx[which], self.power[which], self.blur)


def _neighbourhood(spectrum: Spectrum, fy: float, fx: float, radius: float) -> _Bins:
    ny, nx = spectrum.power.shape
    distance = spectrum.distance(fy, fx)
    reach = 1.7 * radius + 4 / min(ny, nx)
    # The zero order is no floor: keep off it where the sideband leaves room.
    clear = np.hypot(spectrum.fy[:, None], spectrum.fx[None, :]) > min(
        2 * radius, float(np.hypot(fy, fx)) - radius
    )
    rows, columns = np.nonzero((distance < reach) & clear)
    stride = max(1, rows.size // _MOST_BINS)
    rows, columns = rows[::stride], columns[::stride]
    return _Bins(
        fy + (spectrum.fy[rows] - fy + 0.5) % 1 - 0.5,
        fx + (spectrum.fx[columns] - fx + 0.5) % 1 - 0.5,
        np.maximum(spectrum.power[rows, columns], 1e-300),
        (_BLUR / ny, _BLUR / nx),
    )


def _start(bins: _Bins, fy: float, fx: float, radius: float) -> NDArray[np.float64]:
    inside = np.hypot(bins.fy - fy, bins.fx - fx) < radius
    scale = float(bins.power.mean())
    level, floor = (
        max(float(bins.power[part].mean()) if part.any() else 0.0, 1e-9 * scale)
        for part in (inside, ~inside)
    )
    return np.array([fy, fx, radius, np.log(level), np.log(floor)])


def _descend(
    bins: _Bins,
    state: NDArray[np.float64],
    free: NDArray[np.bool_],
    softnesses: tuple[float, ...],
) -> tuple[NDArray[np.float64], float]:
    """Follow Fisher's score to the least of minus the log-likelihood."""
    limit = np.array([0.3 * state[2]] * 3 + [1.0, 1.0])
    smallest = 0.2 * state[2]
    value = np.inf
    for softness in softnesses:
        damping = 1e-3
        value, score, information = _score(bins, state, softness)
        for _ in range(_STEPS):
            matrix = information[np.ix_(free, free)]
            matrix[np.diag_indices_from(matrix)] *= 1 + damping
            step = np.zeros(5)
            step[free] = np.linalg.lstsq(matrix, score[free], rcond=None)[0]
            trial = state + np.clip(step, -limit, limit)
            trial[2] = max(trial[2], smallest)
            fresh = _score(bins, trial, softness)
            if fresh[0] < value:
                gained = value - fresh[0]
                state = trial
                value, score, information = fresh
                damping = max(damping / 5, 1e-6)
                if gained < 1e-6:
                    break
            else:
                damping *= 8
                if damping > 1e6:
                    break
    return state, value


def _score(
    bins: _Bins, state: NDArray[np.float64], softness: float
) -> tuple[float, NDArray[np.float64], NDArray[np.float64]]:
    """Return minus the log-likelihood, its score and Fisher's information."""
    dy, dx = bins.fy - state[0], bins.fx - state[1]
    distance = np.hypot(dy, dx) + 1e-12
    cosine, sine = dx / distance, dy / distance
    blur = softness * np.hypot(sine * bins.blur[0], cosine * bins.blur[1])
    depth = (state[2] - distance) / blur
    level, floor = np.exp(state[3]), np.exp(state[4])
    share = ndtr(depth)
    mean = level * share + floor
    rim = level * np.exp(-(depth**2) / 2) / np.sqrt(2 * np.pi) / blur
    slopes = np.stack([rim * sine, rim * cosine, rim, level * share, np.full_like(mean, floor)])
    slopes /= mean
    ratio = bins.power / mean
    # The powers' own logarithms are constant.
    return float(np.sum(ratio - np.log(ratio))), slopes @ (ratio - 1), slopes @ slopes.T
