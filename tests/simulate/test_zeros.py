from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from hologyre.grid import Window
from hologyre.simulate.truth import TruthError, border_winding, find_zeros
from hologyre.simulate.waves import RandomWaves, ThreeWaves, VortexBeam


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


@pytest.mark.parametrize("spectrum", ["ring", "disc", "gauss"])
def test_a_finer_lattice_finds_no_other_zeros(
    spectrum: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    wave = RandomWaves(spectrum, 24.0, seed=6, count=80)  # type: ignore[arg-type]
    window = Window(0.0, 150.0, 0.0, 150.0)
    usual = find_zeros(wave, window)
    monkeypatch.setattr("hologyre.simulate.zeros._CELLS", 33)
    pd.testing.assert_frame_equal(find_zeros(wave, window), usual, atol=1e-8, rtol=0)


def test_zeros_vanish_in_the_formula() -> None:
    wave = RandomWaves("disc", 24.0, 0.2, seed=6, count=80)
    zeros = find_zeros(wave, Window(0.0, 200.0, 0.0, 200.0), 3.5)
    assert len(zeros) > 80
    # Slopes are about 0.2 a pixel and steps end below 2.4e-10 px.
    assert np.abs(wave.field(zeros["y_px"], zeros["x_px"], 3.5)).max() < 1e-9


def test_mirrored_phase_flips_every_charge() -> None:
    places = [(20.0, 30.0), (60.0, 45.0)]
    window = Window(0.0, 100.0, 0.0, 100.0)
    settings = {"waist_px": 50.0, "centre_px": (50.0, 50.0)}
    plain = find_zeros(VortexBeam.hosting(places, **settings), window)
    mirrored = find_zeros(VortexBeam.hosting((), places, **settings), window)
    np.testing.assert_allclose(plain["y_px"], mirrored["y_px"], atol=1e-9)
    assert plain["charge"].tolist() == [1, 1]
    assert mirrored["charge"].tolist() == [-1, -1]


def test_a_zero_on_the_border_has_no_winding() -> None:
    beam = VortexBeam.hosting([(0.0, 30.0)], waist_px=50, centre_px=(50, 50))
    with pytest.raises(TruthError, match="a zero lies on the closed line at t = 0"):
        border_winding(beam, Window(0.0, 100.0, 0.0, 100.0))


def test_a_line_of_zeros_is_refused() -> None:
    # Two plane waves alone vanish along lines.
    with pytest.raises(TruthError, match="at t = 0"):
        find_zeros(ThreeWaves(24.0, third=0.0), Window(0.1, 60.3, 0.2, 70.0))


def test_zeros_that_do_not_add_up_are_told_with_both_counts(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr("hologyre.simulate.zeros._REFINEMENTS", 1)
    beam = VortexBeam.hosting([(50.0, 45.0)], waist_px=60, centre_px=(50, 50))
    with pytest.raises(TruthError, match=r"1 zeros of total charge \+1 .* winds \+1 times"):
        find_zeros(beam, Window(0, 100, 0, 100))
