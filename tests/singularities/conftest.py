from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pandas as pd
import pytest
from scipy.spatial import cKDTree

from hologyre.grid import Field, Grid, Window
from hologyre.simulate.waves import RandomWaves


@pytest.fixture(scope="session")
def periodic() -> Callable[..., Field]:
    """Make a speckle Field on its band's sampling, valid on a part of the torus."""

    def make(
        spectrum: str = "disc",
        shortest_px: float = 24.0,
        box_px: float = 384.0,
        seed: int = 0,
        samples_per_wavelength: float = 2.2,
        valid: Window | None = None,
    ) -> Field:
        wave = RandomWaves(spectrum, shortest_px, box_px=box_px, seed=seed)
        # A ring drawn with a finite width reaches a little beyond its radius.
        reach = 1 / shortest_px + (2 / box_px if spectrum == "ring" else 0.0)
        count = int(np.ceil(samples_per_wavelength * box_px * reach))
        at = np.arange(count) * (box_px / count)
        frame = int(box_px)
        window = Window(0.0, frame - 1.0, 0.0, frame - 1.0) if valid is None else valid
        grid = Grid((frame, frame), (box_px / count, box_px / count), (0.0, 0.0), window)
        return Field(wave.on_grid(at, at, 0.0), grid, (0.0, 0.0), reach)

    return make


@pytest.fixture(scope="session")
def farthest() -> Callable[[pd.DataFrame, pd.DataFrame], float]:
    """Pair two tables of zeros one to one, charge for charge; return the largest distance."""

    def measure(found: pd.DataFrame, truth: pd.DataFrame) -> float:
        assert len(found) == len(truth)
        places = truth[["y_px", "x_px"]].to_numpy()
        distance, index = cKDTree(places).query(found[["y_px", "x_px"]].to_numpy())
        assert np.unique(index).size == index.size
        np.testing.assert_array_equal(truth["charge"].to_numpy()[index], found["charge"].to_numpy())
        return float(distance.max()) if len(found) else 0.0

    return measure
