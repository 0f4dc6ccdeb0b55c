"""The smooth phase whose differences come nearest to the wrapped ones."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.fft import dctn, idctn

from hologyre.phase.components import integrate_valid
from hologyre.phase.costs import checked_weight
from hologyre.phase.residues import TWO_PI, checked_phase, edge_turns


@dataclass(frozen=True, eq=False)
class LeastSquares:
    """A phase fitted to wrapped differences.

    Parameters
    ----------
    phase : (y, x) float64 array
        Fitted phase, in radians; NaN where left out. Its mean over each region of valid
        pixels that hang together is 0.
    misfit_rad : float
        Weighted root mean square of wrapped less fitted differences. It is 0 only when
        there are no residues.
    iterations : int
        Steps of conjugate gradients; 0 when the solution is direct.
    """

    phase: NDArray[np.float64]
    misfit_rad: float
    iterations: int


def fit_smooth(
    phase: NDArray[np.floating],
    *,
    weight: NDArray[np.floating] | None = None,
    valid: NDArray[np.bool_] | None = None,
    tolerance: float = 1e-5,
    max_iterations: int = 500,
) -> LeastSquares:
    """Fit a phase without jumps to wrapped differences, by least squares.

    Parameters
    ----------
    phase : (y, x) float array
        Phase in radians, taken modulo 2 pi.
    weight : (y, x) float array, optional
        Trust in each pixel, 0 to 1; a difference weighs the lesser of its two pixels.
    valid : (y, x) bool array, optional
        True for the pixels to use.
    tolerance : float
        Conjugate gradients stop when the residual has fallen by this factor.
    max_iterations : int
        Most steps they may take.

    Returns
    -------
    LeastSquares

    Raises
    ------
    TypeError, ValueError
        As `hologyre.unwrap`.
    ArithmeticError
        If conjugate gradients do not reach `tolerance` in `max_iterations`.

    Notes
    -----
    The normal equations are Poisson's, with no flux through the border: solved at once by
    cosine transforms when all pixels count alike, else by conjugate gradients with that
    solution as preconditioner. The fit is not congruent to the input: each vortex pulls the
    phase around it. Take vortices out first with `split_vortices` to avoid this.

    References
    ----------
    D. C. Ghiglia, L. A. Romero, J. Opt. Soc. Am. A 11, 107 (1994).
    """
    wrapped, mask = checked_phase(phase, valid)
    shape = (wrapped.shape[0], wrapped.shape[1])
    trust = checked_weight(weight, shape, mask)
    turn_y, turn_x = edge_turns(wrapped)
    start = wrapped.astype(np.float64)
    wanted_y = np.diff(start, axis=0) - TWO_PI * turn_y
    wanted_x = np.diff(start, axis=1) - TWO_PI * turn_x
    if trust is None and mask is None:
        weight_y, weight_x = np.ones_like(wanted_y), np.ones_like(wanted_x)
        fitted, iterations = _poisson(_divergence(wanted_y, wanted_x)), 0
    else:
        pixel = np.ones(shape) if trust is None else trust.astype(np.float64)
        if mask is not None:
            pixel = pixel * mask
        weight_y = np.minimum(pixel[1:], pixel[:-1])
        weight_x = np.minimum(pixel[:, 1:], pixel[:, :-1])
        fitted, iterations = _conjugate_gradients(
            weight_y, weight_x, wanted_y, wanted_x, tolerance, max_iterations
        )
    miss_y, miss_x = wanted_y - np.diff(fitted, axis=0), wanted_x - np.diff(fitted, axis=1)
    total = weight_y.sum() + weight_x.sum()
    misfit = (weight_y * miss_y**2).sum() + (weight_x * miss_x**2).sum()
    return LeastSquares(
        phase=_centred(fitted, mask),
        misfit_rad=float(np.sqrt(misfit / total)) if total > 0 else 0.0,
        iterations=iterations,
    )


def _divergence(along_y: NDArray[np.float64], along_x: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return what flows out of each pixel, with a minus: the adjoint of the differences."""
    out = np.zeros((along_x.shape[0], along_y.shape[1]))
    out[:-1] += along_y
    out[1:] -= along_y
    out[:, :-1] += along_x
    out[:, 1:] -= along_x
    return out


def _poisson(source: NDArray[np.float64]) -> NDArray[np.float64]:
    """Invert the divergence of differences on a frame without flux through its border."""
    ny, nx = source.shape
    spectrum = dctn(source, type=2)
    decay = 2.0 * (np.cos(np.pi * np.arange(ny) / ny)[:, None] - 1.0) + 2.0 * (
        np.cos(np.pi * np.arange(nx) / nx)[None, :] - 1.0
    )
    decay[0, 0] = 1.0
    spectrum /= decay
    spectrum[0, 0] = 0.0
    return np.asarray(idctn(spectrum, type=2))


def _conjugate_gradients(
    weight_y: NDArray[np.float64],
    weight_x: NDArray[np.float64],
    wanted_y: NDArray[np.float64],
    wanted_x: NDArray[np.float64],
    tolerance: float,
    max_iterations: int,
) -> tuple[NDArray[np.float64], int]:
    residual = _divergence(weight_y * wanted_y, weight_x * wanted_x)
    fitted = np.zeros_like(residual)
    goal = tolerance * float(np.linalg.norm(residual))
    direction, slope = fitted, 1.0
    for step in range(max_iterations):
        if np.linalg.norm(residual) <= goal:
            return fitted, step
        better = _poisson(residual)
        before, slope = slope, float((residual * better).sum())
        direction = better + (slope / before) * direction if step else better
        along = _divergence(
            weight_y * np.diff(direction, axis=0), weight_x * np.diff(direction, axis=1)
        )
        length = slope / float((direction * along).sum())
        fitted = fitted + length * direction
        residual = residual - length * along
    if np.linalg.norm(residual) <= goal:
        return fitted, max_iterations
    raise ArithmeticError(
        f"conjugate gradients: residual fell by {np.linalg.norm(residual) * tolerance / goal:.1e}, "
        f"not {tolerance:.1e}, in {max_iterations} iterations; allow more or ask for less"
    )


def _centred(fitted: NDArray[np.float64], mask: NDArray[np.bool_] | None) -> NDArray[np.float64]:
    """Take the mean off each region of valid pixels, and blank the others."""
    if mask is None:
        return fitted - fitted.mean()
    ny, nx = mask.shape
    nothing_y, nothing_x = np.zeros((ny - 1, nx), np.int32), np.zeros((ny, nx - 1), np.int32)
    _, labels, sizes = integrate_valid(nothing_y, nothing_x, nothing_y, nothing_x, mask)
    sums = np.bincount(labels[mask], fitted[mask], minlength=len(sizes) + 1)[1:]
    means = np.concatenate(([np.nan], sums / sizes))
    return fitted - means[labels]
