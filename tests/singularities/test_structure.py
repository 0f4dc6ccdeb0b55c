from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from hologyre.grid import Field, Grid, Window
from hologyre.simulate.waves import RandomWaves
from hologyre.singularities.locate import locate_singularities
from hologyre.singularities.structure import phase_critical_points


def torus(spectrum: str, seed: int) -> tuple[Field, float]:
    """A whole period of speckle, and <k^4>/<k^2>^2 of the waves it is made of."""
    box, shortest = 480.0, 24.0
    wave = RandomWaves(spectrum, shortest, box_px=box, seed=seed)
    power, k2 = np.abs(wave.modes.amplitude) ** 2, wave.modes.ky**2 + wave.modes.kx**2
    reach = 1 / shortest + (2 / box if spectrum == "ring" else 0.0)
    count = int(np.ceil(2.2 * box * reach))
    at = np.arange(count) * box / count
    grid = Grid((480, 480), (box / count, box / count), (0.0, 0.0), Window(0.0, box, 0.0, box))
    field = Field(wave.on_grid(at, at, 0.0), grid, (0.0, 0.0), reach)
    return field, float((power @ k2**2) / (power @ k2) ** 2)


# Dennis, J. Phys. A 34, L297 (2001): saddles over vortices kappa^1.5 / sqrt(3 kappa - 2), kappa
# = <k^4>/<k^2>^2; extrema are the rest. 1 and 0 for a ring, 1.0887 for a disc, 1.414 for a
# Gaussian.
@pytest.mark.parametrize(("spectrum", "error"), [("ring", 1e-9), ("disc", 0.02), ("gauss", 0.05)])
def test_saddles_and_extrema_come_in_the_numbers_of_theory(spectrum: str, error: float) -> None:
    vortices = saddles = extrema = 0
    ratio = []
    for seed in range(3):
        field, kappa = torus(spectrum, seed)
        _, balance = phase_critical_points(field)
        assert balance.consistent
        assert balance.net_index == balance.border_winding == 0
        vortices, saddles = vortices + balance.vortices, saddles + balance.saddles
        extrema += balance.extrema
        ratio.append(kappa**1.5 / np.sqrt(3 * kappa - 2))
    # Some 3700, 1900 and 780 vortices: the errors are three standard errors of the ratio. A ring
    # drawn on the box's lattice is all but monochromatic: it has no extrema at all.
    expected = np.mean(ratio) if spectrum != "ring" else 1.0
    assert saddles / vortices == pytest.approx(expected, abs=error)
    assert extrema == saddles - vortices


def test_the_vortices_among_the_critical_points_are_the_singularities(
    periodic: Callable[..., Field],
) -> None:
    field = periodic(seed=1, valid=Window(20.0, 250.0, 30.0, 240.0))
    points, balance = phase_critical_points(field)
    vortices = points[points.kind == "vortex"]
    found = locate_singularities(field)
    np.testing.assert_allclose(vortices[["y_px", "x_px"]], found[["y_px", "x_px"]], atol=1e-4)
    assert balance.vortices == len(found)


def test_indices_add_up_in_any_window(periodic: Callable[..., Field]) -> None:
    for margin in (0.0, 13.7, 60.0):
        _, balance = phase_critical_points(periodic(seed=2), margin_px=margin)
        assert balance.consistent
        assert balance.vortices + balance.extrema - balance.saddles == balance.net_index


def test_a_wave_over_a_hill_of_phase_has_a_maximum_there() -> None:
    y, x = np.mgrid[:80, :90]
    hill = 1.5 * np.exp(-((y - 41.3) ** 2 + (x - 44.6) ** 2) / (2 * 9.0**2))
    points, _ = phase_critical_points(np.exp(1j * hill), margin_px=30.0)
    assert points.kind.tolist() == ["maximum"]
    np.testing.assert_allclose(points[["y_px", "x_px"]], [[41.3, 44.6]], atol=1e-4)
    pit, _ = phase_critical_points(np.exp(-1j * hill), margin_px=30.0)
    assert pit.kind.tolist() == ["minimum"]


def test_nothing_is_left_within_a_wide_margin(periodic: Callable[..., Field]) -> None:
    points, balance = phase_critical_points(periodic(), margin_px=400.0)
    assert points.empty
    assert balance == (0, 0, 0, 0, 0, True)
