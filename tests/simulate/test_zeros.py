from __future__ import annotations

import numpy as np

from hologyre.grid import Window
from hologyre.simulate.truth import border_winding, find_zeros
from hologyre.simulate.waves import RandomWaves, VortexBeam


def test_zeros_of_a_beam_are_where_they_were_put() -> None:
    beam = VortexBeam.hosting(
        [(50.0, 50.0), (50.0, 50.0), (60.0, 70.5)],
        [(61.0, 40.0)],
        waist_px=40,
        centre_px=(55, 50),
    )
    zeros = find_zeros(beam, Window(0, 100, 0, 100))
    assert zeros["charge"].tolist() == [2, 1, -1]
    # A double zero is known to the root of the rounding error over the waist.
    np.testing.assert_allclose(zeros["y_px"], [50, 60, 61], atol=1e-5)
    np.testing.assert_allclose(zeros["x_px"], [50, 70.5, 40], atol=1e-5)


def test_charge_inside_equals_winding_along_the_border() -> None:
    wave = RandomWaves("disc", 24, seed=5, count=100)
    rng = np.random.default_rng(1)
    for _ in range(6):
        y, x = rng.uniform(-200, 200, 2)
        window = Window(y, y + rng.uniform(40, 120), x, x + rng.uniform(40, 120))
        assert find_zeros(wave, window)["charge"].sum() == border_winding(wave, window)
