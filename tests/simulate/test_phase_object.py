from __future__ import annotations

import numpy as np
import pytest

from hologyre.grid import Window
from hologyre.simulate.truth import find_zeros
from hologyre.simulate.waves import Drifting, PhaseBump, ThroughPhaseObject, VortexBeam

HOST = VortexBeam.hosting([(30.0, 40.0)], [(55.0, 62.0)], waist_px=50, centre_px=(50, 50))


def test_a_phase_object_in_focus_moves_no_zero_and_adds_its_phase() -> None:
    wave = ThroughPhaseObject(HOST, (PhaseBump((45.0, 50.0), (20.0, 25.0), 2.5, 2),))
    window = Window(0.0, 100.0, 0.0, 100.0)
    seen, bare = find_zeros(wave, window), find_zeros(HOST, window)
    np.testing.assert_allclose(seen.to_numpy(), bare.to_numpy(), atol=1e-8)
    y, x = np.array([45.0, 45.0]), np.array([50.0, 75.0])
    added = np.angle(wave.field(y, x, 0.0) / HOST.field(y, x, 0.0))
    np.testing.assert_allclose(added, [2.5, 2.5 / np.e], atol=1e-12)
    np.testing.assert_allclose(wave.phase(y, x, 0.0), added, atol=1e-12)


def test_a_drifting_wave_is_the_same_wave_elsewhere() -> None:
    drifting = Drifting(HOST, (1.5, -2.0))
    assert drifting.field(10.0, 20.0, 4.0) == pytest.approx(HOST.field(4.0, 28.0, 4.0))


def test_wrong_settings_are_named() -> None:
    with pytest.raises(ValueError, match=r"radius_px: expected a positive number, got -1\.0"):
        PhaseBump((0.0, 0.0), (1.0, -1.0), 1.0)
    with pytest.raises(ValueError, match="order: expected a positive number, got 0"):
        PhaseBump((0.0, 0.0), (1.0, 1.0), 1.0, 0)
