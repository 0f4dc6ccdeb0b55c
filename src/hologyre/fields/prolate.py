"""Sequences that hold a band of frequencies on a finite stretch of pixels."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

_FULL = 1e-7
"""Share beyond the frame under which a sequence is taken to lie within it."""


@dataclass(frozen=True, eq=False)
class AxisBasis:
    """Orthonormal sequences on `pixels` pixels that span a band of a torus's frequencies.

    Discrete prolate spheroidal sequences (Slepian, Bell Syst. Tech. J. 57, 1371, 1978),
    built from whole bins of a torus longer than the frame. The origin is the middle of the
    frame, so that every matrix is real.

    Parameters
    ----------
    pixels, period : int
        Length of the frame and of the torus.
    bins : (K,) int array
        Bins of the torus in the band, consecutive.
    vectors : (K, m) float array
        Eigenvectors of the band's Gram matrix on the frame that are kept, as columns.
    energy : (m,) float array
        Their eigenvalues: how much of a sequence lies in the frame.
    """

    pixels: int
    period: int
    bins: NDArray[np.intp]
    vectors: NDArray[np.float64]
    energy: NDArray[np.float64]

    @property
    def analysis(self) -> NDArray[np.float64]:
        """Matrix (m, K) that turns the frame's centred transform into coordinates."""
        return (self.vectors / np.sqrt(self.energy)).T

    @property
    def centring(self) -> NDArray[np.complex128]:
        """Phases (K,) that move the origin of a transform to the middle of the frame."""
        turn = np.pi * self.bins * (self.pixels - 1) / self.period
        return np.exp(1j * turn)

    @property
    def missing(self) -> NDArray[np.float64]:
        """What is missing of the inner products of the bins' waves to an identity.

        Matrix (K, few) whose product with its transpose is the identity less those products.
        """
        gram = overlap(self.bins, self.bins, self.pixels, self.period)
        values, vectors = np.linalg.eigh(gram)
        kept = values < 1 - _FULL
        return np.asarray(vectors[:, kept] * np.sqrt(1 - np.maximum(values[kept], 0)))

    @property
    def waves(self) -> NDArray[np.complex128]:
        """The bins' waves (pixels, K) on the frame, of unit norm on the torus."""
        place = np.arange(self.pixels) - (self.pixels - 1) / 2
        return np.exp(2j * np.pi * np.outer(place, self.bins) / self.period) / np.sqrt(self.period)

    @property
    def sequences(self) -> NDArray[np.complex128]:
        """The sequences (pixels, m) themselves, orthonormal."""
        return self.waves @ self.analysis.T

    def cross(self, other: AxisBasis, sign: int = 1) -> NDArray[np.float64]:
        """Inner products (m, m') with another band's sequences, or their conjugates."""
        between = overlap(self.bins, sign * other.bins, self.pixels, self.period)
        return self.analysis @ between @ other.analysis.T


@lru_cache(maxsize=32)
def axis_basis(pixels: int, period: int, first: int, last: int, least: float) -> AxisBasis:
    """Build the basis of bins `first` to `last`, keeping eigenvalues above `least`.

    Even and odd sequences are found apart, so that each is one or the other even where
    eigenvalues coincide.
    """
    bins = np.arange(first, last + 1)
    gram = overlap(bins, bins, pixels, period)
    half = bins.size // 2
    mirror = bins.size - 1 - np.arange(half)
    front, back = gram[:half, :half], gram[:half, mirror]
    even, odd = front + back, front - back
    if bins.size % 2:
        middle = np.sqrt(2) * gram[:half, [half]]
        even = np.block([[even, middle], [middle.T, gram[half : half + 1, half : half + 1]]])
    vectors, energy = [], []
    for block, sign in ((even, 1), (odd, -1)):
        if block.size == 0:
            continue
        values, found = np.linalg.eigh(block)
        kept = values > least
        whole = np.zeros((bins.size, int(kept.sum())))
        whole[:half] = found[:half, kept] / np.sqrt(2)
        whole[mirror] = sign * whole[:half]
        if sign == 1 and bins.size % 2:
            whole[half] = found[half, kept]
        vectors.append(whole)
        energy.append(values[kept])
    joined, values = np.concatenate(vectors, axis=1), np.concatenate(energy)
    order = np.argsort(values)[::-1]
    return AxisBasis(pixels, period, bins, joined[:, order], np.minimum(values[order], 1.0))


def overlap(
    bins: NDArray[np.intp], others: NDArray[np.intp], pixels: int, period: int
) -> NDArray[np.float64]:
    """Inner products of waves on the frame, origin at its middle: Dirichlet's kernel."""
    turn = np.pi * (others[None, :] - bins[:, None]) / period
    sine = np.sin(turn)
    small = np.abs(sine) < 1e-12
    kernel: NDArray[np.float64] = np.sin(pixels * turn) / np.where(small, 1, period * sine)
    # Multiples of the period: the kernel repeats with the sign of the middle's half pixel.
    repeats = np.cos(pixels * turn) / np.where(np.cos(turn) < 0, -1, 1)
    return np.where(small, repeats * pixels / period, kernel)
