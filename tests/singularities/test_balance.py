from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from hologyre.grid import Field, Window
from hologyre.simulate.waves import RandomWaves, VortexBeam
from hologyre.singularities.balance import charge_balance
from hologyre.singularities.locate import locate_singularities


# The residue theorem; Goldstein, Zebker and Werner, Radio Science 23, 713 (1988).
@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("spectrum", ["ring", "disc", "gauss"])
def test_the_net_charge_of_any_window_is_the_winding_along_its_border(
    seed: int, spectrum: str, periodic: Callable[..., Field]
) -> None:
    low, high = np.random.default_rng(seed).uniform([5, 150], [90, 230], (2, 2)).T
    window = Window(low[0], high[0], low[1], high[1])
    field = periodic(spectrum, 16.0, 256.0, seed=seed, valid=window)
    balance = charge_balance(field, locate_singularities(field))
    assert balance.consistent
    assert balance.net_charge == balance.border_winding
    assert balance.positive + balance.negative > 5


@pytest.mark.parametrize("margin", [0.0, 3.0, 7.3, 40.0])
def test_pixels_balance_at_any_margin(margin: float) -> None:
    pixels = RandomWaves("disc", 10, seed=11).on_frame((120, 100), 0)
    found = locate_singularities(pixels)
    assert charge_balance(pixels, found, margin_px=margin).consistent


def test_a_missing_singularity_is_told(periodic: Callable[..., Field]) -> None:
    field = periodic(seed=3)
    found = locate_singularities(field)
    balance = charge_balance(field, found.drop(index=17))
    assert not balance.consistent
    assert abs(balance.net_charge - balance.border_winding) == 1


def test_a_vortex_of_charge_two_counts_once_and_turns_twice() -> None:
    beam = VortexBeam.hosting([(40, 41)] * 2, waist_px=24, centre_px=(40, 41)).on_frame((80, 80), 0)
    assert charge_balance(beam, locate_singularities(beam)) == (1, 0, 2, 2, True)


def test_nothing_is_left_within_a_wide_margin(periodic: Callable[..., Field]) -> None:
    field = periodic()
    balance = charge_balance(field, locate_singularities(field), margin_px=400.0)
    assert balance == (0, 0, 0, 0, True)


def test_a_table_without_charges_is_refused(periodic: Callable[..., Field]) -> None:
    field = periodic()
    with pytest.raises(ValueError, match="table: column charge is missing"):
        charge_balance(field, locate_singularities(field).drop(columns="charge"))
