"""Lines drawn by hand, and the unwrapping of a frame that keeps to them."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hologyre.analyse import unwrap_field
from hologyre.edits import Barrier, Bridge, Edit
from hologyre.edits.kinds import Point
from hologyre.grid import Field
from hologyre.phase.residues import residues
from hologyre.phase.unwrap import Unwrapped
from hologyre.recipe import PhaseSettings


@dataclass(frozen=True)
class Lines:
    """Barriers and bridges of one frame, each a tuple of places (y_px, x_px)."""

    barriers: tuple[tuple[Point, ...], ...] = ()
    bridges: tuple[tuple[Point, ...], ...] = ()

    def __bool__(self) -> bool:
        return bool(self.barriers or self.bridges)


NO_LINES = Lines()


def lines_of(edits: Iterable[Edit], frame: int) -> Lines:
    """Return the lines that hold in a frame."""
    here = [edit for edit in edits if edit.frame in (None, frame)]
    return Lines(
        tuple(edit.where for edit in here if isinstance(edit, Barrier)),
        tuple(edit.where for edit in here if isinstance(edit, Bridge)),
    )


def unwrap_along(field: Field, settings: PhaseSettings, lines: Lines) -> Unwrapped:
    """Unwrap a field on the hologram's pixels as a recipe says, keeping to drawn lines.

    Raises
    ------
    ShutInError
        If bridges leave a residue no way out.
    """
    return unwrap_field(
        field, settings, barriers=_arrays(lines.barriers), bridges=_arrays(lines.bridges)
    )


def residue_points(phase: NDArray[np.floating]) -> tuple[NDArray[np.float64], NDArray[np.int8]]:
    """Return the places (n, 2) as (y_px, x_px) and the charges of a phase's residues.

    Pixels that are not finite count as left out.
    """
    valid = np.isfinite(phase)
    charge = residues(np.where(valid, phase, 0), valid=None if valid.all() else valid)
    places = np.argwhere(charge)
    return places.astype(np.float64) + 0.5, charge[tuple(places.T)]


def _arrays(lines: tuple[tuple[Point, ...], ...]) -> list[NDArray[np.float64]] | None:
    return [np.array(line) for line in lines] or None
