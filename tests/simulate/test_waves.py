from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from hologyre.simulate.waves import (
    BesselVortex,
    Drifting,
    HalfPlane,
    PhaseBump,
    RandomWaves,
    ThreeWaves,
    ThroughPhaseObject,
    VortexBeam,
    Wave,
)

BEAM = VortexBeam.hosting(
    [(50, 60), (70, 52)],
    [(61, 40)],
    waist_px=30,
    centre_px=(55, 50),
    zeta=0.2,
    zeta_rate=0.05,
)
WAVES = {
    "random disc, slowing": RandomWaves("disc", 24, 0.1, slowing_frames=15),
    "random gauss in a box": RandomWaves("gauss", 24, 0.1, box_px=100),
    "random ring": RandomWaves("ring", 24, 0.1),
    "three waves": ThreeWaves(24, 0.3, 1.2, 0.05),
    "beam": BEAM,
    "bessel": BesselVortex(3, 30, (50, 50), 0.1, 0.01),
    "bessel, negative charge": BesselVortex(-2, 30, (50, 50), 0.1, 0.01),
    "half-plane E": HalfPlane(30, (50.3, 50.2), "E", 1.2, 0.01),
    "half-plane H": HalfPlane(30, (50.3, 50.2), "H", 1.2, 0.01),
    "phase object": ThroughPhaseObject(BEAM, (PhaseBump((52, 48), (20, 30), 2.0, 2, (0.5, -0.3)),)),
    "drifting": Drifting(BEAM, (0.7, -0.4)),
}


@pytest.fixture(params=WAVES.values(), ids=WAVES.keys())
def wave(request: pytest.FixtureRequest) -> Wave:
    chosen: Wave = request.param
    return chosen


def test_derivatives_are_those_of_the_field(wave: Wave) -> None:
    rng = np.random.default_rng(0)
    y, x = rng.uniform(20, 90, (2, 40))
    t = rng.uniform(0, 8, 40)
    h = 1e-3
    jet = wave.jet(y, x, t)
    differences = (
        (wave.field(y + h, x, t) - wave.field(y - h, x, t)) / (2 * h),
        (wave.field(y, x + h, t) - wave.field(y, x - h, t)) / (2 * h),
        (wave.field(y, x, t + h) - wave.field(y, x, t - h)) / (2 * h),
    )
    for difference, exact in zip(differences, jet[1:], strict=True):
        # Central differences err by h^2/6 times the third derivative over the first: some 1e-7.
        np.testing.assert_allclose(difference, exact, atol=1e-6 * np.abs(exact).max())


def test_grid_and_points_give_the_same_field(wave: Wave) -> None:
    y, x = np.arange(9.0), np.arange(7.0) + 0.5
    at_points = wave.field(y[:, np.newaxis], x[np.newaxis, :], 1.5)
    np.testing.assert_allclose(wave.on_grid(y, x, 1.5), at_points, atol=1e-12)
    assert wave.on_frame((4, 5), 0.0).shape == (4, 5)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: ThreeWaves(0.0), r"wavelength_px: expected a positive number, got 0\.0"),
        (lambda: BesselVortex(1, -3.0, (0, 0)), "wavelength_px: expected a positive number"),
        (lambda: HalfPlane(20.0, (0, 0), "TE"), "polarisation: expected E or H, got 'TE'"),  # type: ignore[arg-type]
        (lambda: VortexBeam(0.0, (0, 0)), r"waist_px: expected a positive number, got 0\.0"),
        (
            lambda: VortexBeam(9.0, (0, 0), ((1.0, 2.0), (1.0,))),
            r"coefficients: expected rows of one length, got lengths \[2, 1\]",
        ),
    ],
)
def test_wrong_settings_are_named(make: Callable[[], Wave], message: str) -> None:
    with pytest.raises(ValueError, match=message):
        make()
