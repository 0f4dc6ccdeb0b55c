"""Truth of a simulation: zeros and their motion, from the formula of the wave alone."""

from __future__ import annotations

from hologyre.simulate.zeros import TruthError, border_winding, find_zeros

__all__ = ["TruthError", "border_winding", "find_zeros"]
