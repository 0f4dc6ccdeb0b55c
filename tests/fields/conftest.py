from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pytest


@dataclass(frozen=True)
class Speckle:
    """A simulated hologram of random plane waves, and its field in counts."""

    hologram: np.ndarray
    field: np.ndarray
    expected: np.ndarray
    """Counts without noise."""


def waves(shape: tuple[int, int], shortest_px: float, count: int, seed: int) -> np.ndarray:
    """Sum plane waves whose frequencies fill a disc, as a field of unit power."""
    rng = np.random.default_rng(seed)
    f = np.sqrt(rng.uniform(size=count)) / shortest_px
    angle = rng.uniform(0, 2 * np.pi, count)
    amplitude = (rng.normal(size=count) + 1j * rng.normal(size=count)) / np.sqrt(2 * count)
    along_y = np.exp(2j * np.pi * np.outer(np.arange(shape[0]), f * np.sin(angle)))
    along_x = np.exp(2j * np.pi * np.outer(f * np.cos(angle), np.arange(shape[1])))
    return (along_y * amplitude) @ along_x


@pytest.fixture
def speckle() -> Callable[..., Speckle]:
    """Return a function that simulates a speckle hologram."""

    def simulate(
        shape: tuple[int, int] = (256, 288),
        *,
        carrier: tuple[float, float] = (0.2013, 0.1801),
        shortest_px: float = 24.0,
        full_well: float = 1e4,
        visibility: float = 0.8,
        bits: int = 8,
        seed: int = 0,
        count: int = 400,
    ) -> Speckle:
        rng = np.random.default_rng([seed, 1])
        weak = (1 - np.sqrt(1 - visibility**2)) / visibility
        scattered = weak * waves(shape, shortest_px, count, seed)
        y, x = np.arange(shape[0])[:, None], np.arange(shape[1])
        wave = np.exp(2j * np.pi * (carrier[0] * y + carrier[1] * x))
        light = np.abs(1 + scattered * wave) ** 2
        electrons = 0.9 * full_well / np.quantile(light, 0.9999)
        step = (2**bits - 1) / full_well
        counts = np.rint(rng.poisson(light * electrons) * step)
        hologram = np.minimum(counts, 2**bits - 1).astype(np.uint8 if bits == 8 else np.uint16)
        return Speckle(hologram, scattered * electrons * step, light * electrons * step)

    return simulate
