"""Proof that cuts are the cheapest ones."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hologyre.phase.flow import FORBIDDEN


@dataclass(frozen=True, eq=False)
class Certificate:
    """Potentials of the plaquettes that bound the cost of any cuts from below.

    Parameters
    ----------
    charge : (y - 1, x - 1) int8 array
        Residue of each plaquette. Those of plaquettes that touch a pixel left out add up to
        the winding around the region; how they are spread over it means nothing.
    cost_y, cost_x : (y - 1, x) and (y, x - 1) int16 arrays
        Cost of cutting each edge, in levels; -1 where a bridge forbids it.
    potential : (y - 1, x - 1) int32 array
        One value per plaquette, in levels. It is 0 on the border.

    Notes
    -----
    If potentials differ across no edge by more than its cost, any cuts that take all
    residues away cost at least the sum of charge times potential (weak duality of linear
    programming). Cuts that cost just that are the cheapest.

    References
    ----------
    R. K. Ahuja, T. L. Magnanti, J. B. Orlin, Network Flows, Prentice Hall (1993), ch. 9.
    """

    charge: NDArray[np.int8]
    cost_y: NDArray[np.int16]
    cost_x: NDArray[np.int16]
    potential: NDArray[np.int32]

    @property
    def bound(self) -> int:
        """The least cost that any cuts could have, in levels."""
        return int((self.charge * self.potential.astype(np.int64)).sum())

    def is_feasible(self) -> bool:
        """Tell whether potentials differ across no edge by more than its cost."""
        around = np.pad(self.potential.astype(np.int64), 1)
        across_y = np.abs(np.diff(around[1:-1], axis=1))
        across_x = np.abs(np.diff(around[:, 1:-1], axis=0))
        return bool(
            ((across_y <= self.cost_y) | (self.cost_y == FORBIDDEN)).all()
            and ((across_x <= self.cost_x) | (self.cost_x == FORBIDDEN)).all()
        )

    def proves(self, jump_y: NDArray[np.integer], jump_x: NDArray[np.integer]) -> bool:
        """Tell whether cuts with these jumps are proved to be the cheapest.

        Parameters
        ----------
        jump_y, jump_x : (y - 1, x) and (y, x - 1) int arrays
            Turns added across each edge, as in `hologyre.phase.cuts.Cuts`.
        """
        cost = int((np.abs(jump_y).astype(np.int64) * np.maximum(self.cost_y, 0)).sum())
        cost += int((np.abs(jump_x).astype(np.int64) * np.maximum(self.cost_x, 0)).sum())
        crossed = np.any(jump_y[self.cost_y == FORBIDDEN]) or np.any(
            jump_x[self.cost_x == FORBIDDEN]
        )
        return not crossed and self.is_feasible() and cost == self.bound
