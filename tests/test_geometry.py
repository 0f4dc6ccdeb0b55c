"""How wide a band a carrier leaves room for."""

from __future__ import annotations

import math

import numpy as np
import pytest

from hologyre.analyse import inspect
from hologyre.recipe import Recipe
from hologyre.survey import survey


# |f0| > 3 B keeps the sideband out of the zero order: Goodman, Introduction to Fourier Optics,
# off-axis holography (from memory); the widest band on a square sensor follows:
# B = 1/(2 + 3 sqrt 2) on the diagonal, 1/8 along an axis.
@pytest.mark.parametrize(
    ("carrier", "widest"),
    [((0.339811, 0.339811), 1 / (2 + 3 * math.sqrt(2))), ((0.0, 0.375), 1 / 8)],
)
def test_widest_band_of_a_square_sensor_is_that_of_the_best_carrier(
    carrier: tuple[float, float], widest: float
) -> None:
    y, x = np.mgrid[:128, :128]
    fringes = 100 + 50 * np.cos(2 * np.pi * (carrier[0] * y + carrier[1] * x))
    noisy = np.random.default_rng(2).poisson(fringes).astype(np.uint8)[None]
    told = inspect(noisy, survey(noisy, Recipe()))
    # The carrier of these fringes is known to some 1e-5 cycles/px.
    assert told.radius_limit_per_px == pytest.approx(widest, abs=1e-4)
