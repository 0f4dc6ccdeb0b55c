"""The field between frames: its memory in time and the interpolation that follows from it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import nnls

LAGS = 7
"""Longest lag a memory is fitted to, in frames."""

_PACES = np.geomspace(0.01, 2.0, 24)
_DEGREE = 20
# share of the power below which nothing is known of the spectrum
_FLOOR = 1e-7

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Memory:
    """Correlation in time of a field that is stationary after its common phase is taken out.

    ``C(tau) = sum_j power_j exp(-pace_j^2 tau^2 / 2) + fresh max(0, 1 - |tau|)``: a mixture of
    Gaussian spectra centred on 0, plus what is new in each frame, which is drawn linearly from
    one frame to the next; and, in the frames, noise that is no part of the field.

    Parameters
    ----------
    power : (n,) array
        Powers of the mixture, 1 in all together with `fresh` and `noise`.
    fresh : float
        Share of the power that is new in every frame.
    noise : float
        Share of the power that is known to be noise.
    """

    power: Array
    fresh: float
    noise: float

    def __call__(self, tau: Array) -> Array:
        """Return the field's correlation at lags `tau`, in frames, noise left out."""
        lag = np.abs(tau)
        smooth = np.exp(-0.5 * np.square(np.multiply.outer(lag, _PACES))) @ self.power
        correlation: Array = smooth + self.fresh * np.maximum(0.0, 1.0 - lag)
        return correlation

    def between(self, times: Array) -> Array:
        """Return the correlation between frames at these times, noise included."""
        matrix: Array = self(times[:, None] - times) + (self.noise + _FLOOR) * np.eye(len(times))
        return matrix

    def slope(self, lag: Array) -> Array:
        """Return the correlation of frames `lag` away with the smooth part's rate of change."""
        waves = np.exp(-0.5 * np.square(np.multiply.outer(lag, _PACES)))
        correlation: Array = lag * (waves @ (self.power * _PACES**2))
        return correlation

    @property
    def pace(self) -> float:
        """Standard deviation of the angular frequencies, rad per frame."""
        return float(np.sqrt(self.power @ _PACES**2 / max(self.power.sum(), 1e-12)))


def fit_memory(correlation: Array, noise: float = 0.0) -> Memory:
    """Fit a memory to the correlation at lags 0, 1, 2, ..., the first one being 1.

    Parameters
    ----------
    correlation : (lags,) array
        Real part of <E(t + k) E*(t)> over <|E|^2>, the common phase of frames taken out.
        Lags that are not known are NaN.
    noise : float
        Share of <|E|^2> that is noise, 0 where that is not known.
    """
    lag = np.arange(len(correlation), dtype=np.float64)
    design = np.column_stack([np.exp(-0.5 * np.outer(lag, _PACES) ** 2), lag == 0])
    known = np.isfinite(correlation)
    noise = min(noise, 0.9)
    power, _ = nnls(design[known], (correlation - noise * (lag == 0))[known])
    power *= (1.0 - noise) / power.sum()
    return Memory(power[:-1], float(power[-1]), noise)


def frame_weights(memory: Memory, times: Array, index: int) -> Array:
    """Return the least-squares estimate of the field in one frame, noise averaged down.

    Parameters
    ----------
    memory : Memory
    times : (frames,) array
        Times of the frames used, in frames.
    index : int
        The frame wanted.

    Returns
    -------
    (frames,) array
        The frames' weights: 1 for the frame itself if there is no noise.
    """
    if memory.noise == 0.0:
        return np.eye(len(times))[index]
    return np.asarray(
        np.linalg.solve(memory.between(times), memory(times - times[index])), dtype=np.float64
    )


@dataclass(frozen=True)
class Interpolator:
    """Weights that give the field at any time between two frames.

    Parameters
    ----------
    series : (degree + 1, frames) array
        Chebyshev coefficients of each frame's weight in ``2 u - 1``, u in [0, 1] being the
        time between the two frames.
    miss : float
        Expected error halfway between them (root mean square), over the field.
    """

    series: Array
    miss: float


def interpolator(
    memory: Memory, times: Array, interval: int, near: Array, far: Array
) -> Interpolator:
    """Make the least-squares interpolation between two of the frames at `times`.

    Parameters
    ----------
    memory : Memory
        The field's correlation.
    times : (frames,) array
        Times of the frames used, in frames, increasing; holes are welcome.
    interval : int
        The field is wanted between ``times[interval]`` and ``times[interval + 1]``.
    near, far : (frames,) arrays
        Weights to be met at these two frames, so that it goes on without a jump from one
        interval to the next.

    Notes
    -----
    The weights are those of optimal linear prediction of a stationary process from the samples
    at hand (N. Wiener, 1949; known as simple kriging).
    """
    start, end = times[interval], times[interval + 1]
    nodes = np.cos(np.pi * (np.arange(_DEGREE + 1) + 0.5) / (_DEGREE + 1))
    u = 0.5 * (np.concatenate([nodes, [-1.0, 1.0, 0.0]]) + 1.0)
    wanted = memory(times[:, None] - (start + u * (end - start)))
    weights = np.linalg.solve(memory.between(times), wanted).T
    lack = np.stack([near, far]) - weights[-3:-1]
    weights = weights + (1.0 - u)[:, None] * lack[0] + u[:, None] * lack[1]
    series = np.polynomial.chebyshev.chebfit(nodes, weights[:-3], _DEGREE)
    half = weights[-1]
    total = 1.0 - memory.noise
    error = total - 2.0 * half @ wanted[:, -1] + half @ memory.between(times) @ half
    return Interpolator(series, float(np.sqrt(max(error, 0.0) / total)))


def slope_weights(memory: Memory, times: Array, at: float) -> tuple[Array, float]:
    """Return the least-squares estimate of the smooth part's rate of change.

    Parameters
    ----------
    memory : Memory
    times : (frames,) array
        Times of the frames used.
    at : float
        When it is wanted, in frames.

    Returns
    -------
    weights : (frames,) array
        Weights of the frames, per frame.
    error : float
        Expected root mean square error, over the frames' rms, per frame.
    """
    wanted = memory.slope(times - at)
    weights: Array = np.asarray(np.linalg.solve(memory.between(times), wanted))
    left = float(memory.power @ _PACES**2 - weights @ wanted)
    return weights, float(np.sqrt(max(left, 0.0)))
