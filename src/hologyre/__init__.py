"""From off-axis hologram time-lapses to trajectories of phase singularities.

Names are imported on first use, so that ``import hologyre`` stays fast and needs no screen.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from hologyre.grid import Field, Grid
    from hologyre.optics import Optics

__version__ = "0.1.0"

_HOMES = {
    "Field": "hologyre.grid",
    "Grid": "hologyre.grid",
    "Optics": "hologyre.optics",
}

__all__ = ["Field", "Grid", "Optics"]


def __getattr__(name: str) -> Any:
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'hologyre' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
