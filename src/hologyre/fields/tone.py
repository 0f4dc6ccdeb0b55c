"""The frequency of plain fringes, by maximum likelihood."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

_ROWS = 64
_STEPS = 8


@dataclass(frozen=True)
class Tone:
    """Fringes ``mean + 2 Re(amplitude exp(2 pi i (fy y + fx x)))`` fitted to a frame.

    Parameters
    ----------
    fy, fx : float
        Frequency, cycles/px.
    sigma_fy, sigma_fx : float
        Their standard errors from what is left of the frame.
    amplitude : complex
        Field of the fringes, counts, phase at the first pixel.
    mean : float
        Counts without fringes.
    residual : float
        Variance of what is left.
    """

    fy: float
    fx: float
    sigma_fy: float
    sigma_fx: float
    amplitude: complex
    mean: float
    residual: float


def fit_tone(
    frame: NDArray[np.float64], fy: float, fx: float, weight: NDArray[np.float64] | None = None
) -> Tone:
    """Fit plain fringes to a frame by least squares, from a frequency within half a bin.

    In white noise this is the maximum of the likelihood, which attains the Cramer-Rao bound
    of a tone (Rife and Boorstyn, IEEE Trans. Inf. Theory 20, 591, 1974, in one dimension).

    Parameters
    ----------
    frame : (y, x) array
        Counts.
    fy, fx : float
        Where to start, cycles/px.
    weight : (y, x) array, optional
        Weight of each pixel, 0 to 1.
    """
    ny, nx = frame.shape
    middle = ((ny - 1) / 2, (nx - 1) / 2)
    amplitude: complex | None = None
    errors = np.zeros(5)
    mean, residual = float(frame.mean()), float(frame.var())
    for _ in range(_STEPS):
        unknowns = 3 if amplitude is None else 5
        matrix, right, power = np.zeros((unknowns, unknowns)), np.zeros(unknowns), 0.0
        for top in range(0, ny, _ROWS):
            part = frame[top : top + _ROWS]
            y = np.arange(top, top + part.shape[0]) - middle[0]
            x = np.arange(nx) - middle[1]
            wave = np.exp(2j * np.pi * fy * y)[:, None] * np.exp(2j * np.pi * fx * x)
            columns = [np.ones_like(part), 2 * wave.real, -2 * wave.imag]
            value = np.full_like(part, mean)
            if amplitude is not None:
                slope = -4 * np.pi * (amplitude * wave).imag
                columns += [slope * y[:, None], slope * x]
                value += 2 * (amplitude * wave).real
            design = np.stack([c.ravel() for c in columns])
            off = (part - value).ravel()
            w = None if weight is None else weight[top : top + _ROWS].ravel()
            weighted = design if w is None else design * w
            matrix += weighted @ design.T
            right += weighted @ off
            power += float(off @ off) if w is None else float((w * off) @ off)
        step = np.linalg.solve(matrix, right)
        mean += float(step[0])
        amplitude = (amplitude or 0) + complex(step[1], step[2])
        area = frame.size if weight is None else float(weight.sum())
        if unknowns == 5:
            # Never further than half a bin at once.
            limits = (0.5 / ny, 0.5 / nx)
            dy, dx = (float(np.clip(s, -m, m)) for s, m in zip(step[3:], limits, strict=True))
            fy, fx = fy + dy, fx + dx
            residual = max(power - float(step @ right), 0.0) / area
            errors = np.sqrt(residual * np.diag(np.linalg.inv(matrix)))
            if abs(dy) < 0.01 * errors[3] and abs(dx) < 0.01 * errors[4]:
                break
    start = (amplitude or 0) * np.exp(-2j * np.pi * (fy * middle[0] + fx * middle[1]))
    return Tone(fy, fx, float(errors[3]), float(errors[4]), complex(start), mean, residual)
