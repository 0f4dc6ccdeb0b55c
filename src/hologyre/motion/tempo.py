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


@dataclass(frozen=True)
class Memory:
    """Correlation in time of a field that is stationary after its common phase is taken out.

    ``C(tau) = sum_j power_j exp(-pace_j^2 tau^2 / 2) + fresh max(0, 1 - |tau|)``: a mixture of
    Gaussian spectra centred on 0, plus what is new in each frame (noise), which is drawn
    linearly from one frame to the next.

    Parameters
    ----------
    power : (n,) array
        Powers of the mixture, 1 in all together with `fresh`.
    fresh : float
        Share of the power that is new in every frame.
    """

    power: NDArray[np.float64]
    fresh: float

    def __call__(self, tau: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the correlation at lags `tau`, in frames."""
        lag = np.abs(tau)
        smooth = np.exp(-0.5 * np.square(np.multiply.outer(lag, _PACES))) @ self.power
        correlation: NDArray[np.float64] = smooth + self.fresh * np.maximum(0.0, 1.0 - lag)
        return correlation

    @property
    def pace(self) -> float:
        """Standard deviation of the angular frequencies, rad per frame."""
        total = self.power.sum()
        return float(np.sqrt(self.power @ _PACES**2 / total)) if total > 0 else float("inf")


def fit_memory(correlation: NDArray[np.float64]) -> Memory:
    """Fit a memory to the correlation at lags 0, 1, 2, ..., the first one being 1.

    Parameters
    ----------
    correlation : (lags,) array
        Real part of <E(t + k) E*(t)> over <|E|^2>, the common phase of frames taken out.
        Lags that are not known are NaN.
    """
    lag = np.arange(len(correlation), dtype=np.float64)
    design = np.column_stack([np.exp(-0.5 * np.outer(lag, _PACES) ** 2), lag == 0])
    known = np.isfinite(correlation)
    power, _ = nnls(design[known], correlation[known])
    power /= power.sum()
    return Memory(power[:-1], float(power[-1]))


@dataclass(frozen=True)
class Interpolator:
    """Weights that give the field at any time between two frames.

    Parameters
    ----------
    series : (degree + 1, frames) array
        Chebyshev coefficients of each frame's weight in ``2 u - 1``, u in [0, 1] being the
        time between the two frames.
    miss : float
        Expected relative error (root mean square) of the smooth part halfway between them.
    """

    series: NDArray[np.float64]
    miss: float


def interpolator(memory: Memory, times: NDArray[np.float64], interval: int) -> Interpolator:
    """Make the least-squares interpolation between two of the frames at `times`.

    Parameters
    ----------
    memory : Memory
        The field's correlation.
    times : (frames,) array
        Times of the frames used, in frames, increasing; holes are welcome.
    interval : int
        The field is wanted between ``times[interval]`` and ``times[interval + 1]``.

    Notes
    -----
    The weights are those of optimal linear prediction of a stationary process from the samples
    at hand (N. Wiener, 1949; known as simple kriging); they are exact at the frames themselves.
    """
    between = memory(times[:, None] - times) + _FLOOR * np.eye(len(times))
    nodes = np.cos(np.pi * (np.arange(_DEGREE + 1) + 0.5) / (_DEGREE + 1))
    start, end = times[interval], times[interval + 1]
    # the two frames themselves are met exactly, whatever the floor: mix in what they lack
    u = 0.5 * (np.concatenate([nodes, [-1.0, 1.0, 0.0]]) + 1.0)
    weights = np.linalg.solve(between, memory(times[:, None] - (start + u * (end - start)))).T
    ends = np.zeros((2, len(times)))
    ends[0, interval] = ends[1, interval + 1] = 1.0
    lack = ends - weights[-3:-1]
    exact = weights + (1.0 - u)[:, None] * lack[0] + u[:, None] * lack[1]
    series = np.polynomial.chebyshev.chebfit(nodes, exact[:-3], _DEGREE)
    half = exact[-1]
    smooth = Memory(memory.power, 0.0)
    at_half = smooth(times - 0.5 * (start + end))
    error = (
        smooth(np.zeros(1))[0]
        - 2.0 * half @ at_half
        + half @ (smooth(times[:, None] - times) @ half)
    )
    total = max(float(memory.power.sum()), 1e-12)
    return Interpolator(series, float(np.sqrt(max(error, 0.0) / total)))
