from __future__ import annotations

import pytest

from hologyre.grid import Window
from hologyre.simulate.truth import true_tracks
from hologyre.simulate.waves import VortexBeam


def test_dipole_is_born_and_annihilates_where_theory_says() -> None:
    # a = 0.4 w0: zeta = -+ 2 a^2 / (w0 sqrt(w0^2 - 4 a^2)) = -+0.533333 and y = -+0.453333 w0;
    # G. Indebetouw, J. Mod. Opt. 40, 73 (1993), closed form re-derived.
    beam = VortexBeam.hosting(
        [(0, 40.0)], [(0, -40.0)], waist_px=100, centre_px=(0, 0), zeta=-0.62, zeta_rate=0.1
    )
    truth = true_tracks(beam, Window(-100, 100, -100, 100), 13)
    events = truth.events
    assert events["kind"].tolist() == ["pair_birth", "pair_death"]
    assert events["tracks"].tolist() == ["0;1", "0;1"]
    zeta = -0.62 + 0.1 * events["time_s"]
    assert zeta.tolist() == pytest.approx([-0.533333, 0.533333], abs=1e-6)
    assert events["y_px"].tolist() == pytest.approx([45.3333, -45.3333], abs=1e-3)
    assert events["frame_before"].tolist() == [0, 11]
