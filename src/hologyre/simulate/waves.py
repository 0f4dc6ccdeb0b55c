"""Every wave of the simulation under one roof."""

from __future__ import annotations

from hologyre.simulate.beams import VortexBeam
from hologyre.simulate.bessel import BesselVortex
from hologyre.simulate.half_plane import HalfPlane
from hologyre.simulate.phase_object import Drifting, PhaseBump, ThroughPhaseObject
from hologyre.simulate.plane_waves import ThreeWaves
from hologyre.simulate.random_waves import RandomWaves
from hologyre.simulate.wave import Jet, Wave

__all__ = [
    "BesselVortex",
    "Drifting",
    "HalfPlane",
    "Jet",
    "PhaseBump",
    "RandomWaves",
    "ThreeWaves",
    "ThroughPhaseObject",
    "VortexBeam",
    "Wave",
]
