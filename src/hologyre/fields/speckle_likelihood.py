"""The aberration of a speckle field, by the likelihood of a random field."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
import scipy.linalg
import scipy.optimize
import scipy.special
from numpy.typing import NDArray

SpectrumModel = Literal["disc", "gauss"]

_NOISE = (1e-4, 3e-4, 1e-3, 3e-3, 1e-2, 1e-1)
"""Relative noise powers tried where it is not known."""
_WIDTHS = 1.1 ** np.arange(-8, 2)
"""Widths of the spectrum tried, over the one before."""
_SMALL, _LARGE = 18, 44
"""Samples along a side of the pieces the field is cut into."""
_ROUNDS, _LAST_ROUNDS = 3, 2


@dataclass(frozen=True, eq=False)
class Patch:
    """Samples of a field on one piece of a lattice.

    Parameters
    ----------
    samples : (frames, points) complex array
        The field, of unit mean power.
    terms : (terms, points) float array
        The surface's terms there.
    y_px, x_px : (points,) float arrays
        Positions.
    """

    samples: NDArray[np.complex128]
    terms: NDArray[np.float64]
    y_px: NDArray[np.float64]
    x_px: NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class SpeckleFit:
    """Coefficients found, their standard errors, and the spectrum that made them likeliest."""

    coefficients: NDArray[np.float64]
    sigma: NDArray[np.float64]
    radius_per_px: float
    noise: float


def fit_speckle(
    cut: Callable[[float, int], list[Patch]],
    start: NDArray[np.float64],
    radius_per_px: float,
    *,
    model: SpectrumModel = "disc",
    noise: float | None = None,
) -> SpeckleFit:
    """Find the surface that makes the field likeliest as a circular Gaussian random field.

    With phi the surface and E' = E exp(-i phi), minus the log-likelihood is
    ``N log(E'^H C^-1 E' / N) + log det C``, C the covariance of the spectrum's model: for a
    disc of radius K, ``2 J1(K d) / (K d)``, plus noise on its diagonal. Least over the
    coefficients by BFGS with the closed gradient, over width and noise by search: in small
    pieces of the field at first, then in large ones.

    Parameters
    ----------
    cut : function of (radius in cycles/px, samples a side) -> list of Patch
        Samples the field for a spectrum of that radius and cuts it into pieces.
    start : (terms,) float array
        Coefficients to start from, rad.
    radius_per_px : float
        Radius of the band that was read, which holds the aberrated spectrum, cycles/px.
    model : "disc" or "gauss"
        Shape of the spectrum: filled disc, or Gaussian of which the radius holds three
        standard deviations.
    noise : float, optional
        Noise power over signal power of a sample; found by likelihood where not given.
    """
    coefficients = np.asarray(start, dtype=np.float64)
    covariance = _Covariance(model, radius_per_px, noise or _NOISE[1])
    for _ in range(_ROUNDS):
        small = cut(covariance.radius, _SMALL)
        covariance = _likeliest(small, coefficients, covariance, noise is None)
        coefficients = _minimise(small, _precision(small, covariance), coefficients)
    large = cut(covariance.radius, _LARGE)
    for _ in range(_LAST_ROUNDS):
        covariance = _narrowed(large, coefficients, covariance)
        precision = _precision(large, covariance)
        coefficients = _minimise(large, precision, coefficients)
    sigma = _standard_errors(large, precision, covariance)
    return SpeckleFit(coefficients, sigma, covariance.radius, covariance.noise)


@dataclass(frozen=True)
class _Covariance:
    """Covariance of a field of unit power and noise, by distance."""

    model: SpectrumModel
    radius: float
    noise: float

    def matrix(self, patch: Patch) -> NDArray[np.float64]:
        """Return the covariance between a patch's points."""
        away_y = patch.y_px[:, None] - patch.y_px[None, :]
        away_x = patch.x_px[:, None] - patch.x_px[None, :]
        squared = away_y**2 + away_x**2
        # A lattice has few distances: the functions are evaluated once for each.
        distances, place = np.unique(np.round(squared, 6), return_inverse=True)
        distance = np.sqrt(distances)
        signal = _disc(2 * np.pi * self.radius * distance)
        if self.model == "gauss":
            signal = np.exp(-((2 * np.pi * self.radius / 3 * distance) ** 2) / 2)
        matrix: NDArray[np.float64] = signal[place].reshape(squared.shape)
        matrix[np.diag_indices_from(matrix)] += self.noise
        return matrix


def _disc(z: NDArray[np.float64]) -> NDArray[np.float64]:
    z = np.maximum(z, 1e-9)
    value: NDArray[np.float64] = 2 * scipy.special.j1(z) / z
    return value


def _shape_key(patch: Patch) -> bytes:
    """Patches of one geometry share a covariance."""
    away = np.stack([patch.y_px - patch.y_px[0], patch.x_px - patch.x_px[0]])
    return np.round(away, 6).tobytes()


def _grouped(patches: list[Patch]) -> list[list[int]]:
    groups: dict[bytes, list[int]] = {}
    for i, patch in enumerate(patches):
        groups.setdefault(_shape_key(patch), []).append(i)
    return list(groups.values())


def _likeliest(
    patches: list[Patch],
    coefficients: NDArray[np.float64],
    covariance: _Covariance,
    search_noise: bool,
) -> _Covariance:
    """Search the spectrum's width, and the noise where it is not known."""
    cost = _width_cost(patches, coefficients)
    tried = [replace(covariance, radius=w * covariance.radius) for w in _WIDTHS]
    best = min(tried, key=cost)
    if search_noise:
        best = min((replace(best, noise=n) for n in _NOISE), key=cost)
    return _narrowed(patches, coefficients, best, _WIDTHS[-1] - 1)


def _narrowed(
    patches: list[Patch],
    coefficients: NDArray[np.float64],
    covariance: _Covariance,
    reach: float = 0.04,
) -> _Covariance:
    """Refine the spectrum's width within a part of it on either side."""
    cost = _width_cost(patches, coefficients)
    found = scipy.optimize.minimize_scalar(
        lambda radius: cost(replace(covariance, radius=radius)),
        bounds=(covariance.radius * (1 - reach), covariance.radius * (1 + reach)),
        method="bounded",
        options={"xatol": 1e-3 * covariance.radius},
    )
    return replace(covariance, radius=float(found.x))


def _width_cost(
    patches: list[Patch], coefficients: NDArray[np.float64]
) -> Callable[[_Covariance], float]:
    """Return minus the log-likelihood of a covariance, the surface being given."""
    groups = [
        (
            patches[group[0]],
            np.concatenate(
                [
                    patches[i].samples * np.exp(-1j * (coefficients @ patches[i].terms))
                    for i in group
                ]
            ),
        )
        for group in _grouped(patches)
    ]
    count = sum(samples.size for _, samples in groups)

    def cost(trial: _Covariance) -> float:
        power, log_det = 0.0, 0.0
        for patch, samples in groups:
            factor = np.linalg.cholesky(trial.matrix(patch))
            both = np.concatenate([samples.real, samples.imag])
            white = scipy.linalg.solve_triangular(factor, both.T, lower=True)
            power += float((white**2).sum())
            log_det += 2 * samples.shape[0] * float(np.log(np.diag(factor)).sum())
        return count * float(np.log(power / count)) + log_det

    return cost


def _precision(patches: list[Patch], covariance: _Covariance) -> list[NDArray[np.float64]]:
    found: list[NDArray[np.float64]] = [np.empty(0)] * len(patches)
    for group in _grouped(patches):
        matrix = covariance.matrix(patches[group[0]])
        inverse = np.asarray(np.linalg.inv(matrix), dtype=np.float64)
        for i in group:
            found[i] = inverse
    return found


def _minimise(
    patches: list[Patch], precision: list[NDArray[np.float64]], start: NDArray[np.float64]
) -> NDArray[np.float64]:
    count = sum(p.samples.size for p in patches)

    def cost(coefficients: NDArray[np.float64]) -> tuple[float, NDArray[np.float64]]:
        power, slope = 0.0, np.zeros_like(coefficients)
        for patch, inverse in zip(patches, precision, strict=True):
            flat = patch.samples * np.exp(-1j * (coefficients @ patch.terms))
            image = flat.real @ inverse + 1j * (flat.imag @ inverse)
            product = flat.conj() * image
            power += float(product.real.sum())
            slope -= 2 * patch.terms @ product.imag.sum(axis=0)
        return count * float(np.log(power)), count / power * slope

    found = scipy.optimize.minimize(cost, start, jac=True, method="BFGS", options={"gtol": 1e-3})
    return np.asarray(found.x, dtype=np.float64)


def _standard_errors(
    patches: list[Patch], precision: list[NDArray[np.float64]], covariance: _Covariance
) -> NDArray[np.float64]:
    """Return the Cramer-Rao bound, from Fisher's information of a Gaussian field's phase."""
    terms = patches[0].terms.shape[0]
    information = np.zeros((terms, terms))
    for group in _grouped(patches):
        matrix = precision[group[0]] * covariance.matrix(patches[group[0]])
        for i in group:
            p = patches[i].terms
            a = p @ matrix @ p.T
            information += patches[i].samples.shape[0] * (a + a.T - 2 * p @ p.T)
    return np.sqrt(np.maximum(np.diag(np.linalg.pinv(information)), 0))
