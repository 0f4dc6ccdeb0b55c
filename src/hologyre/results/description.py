"""All of a field but its values, as plain lists and numbers, and back."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from hologyre.grid import Field, Grid, Window


def describe(field: Field) -> dict[str, Any]:
    """Return all of a field but its values, as plain lists and numbers."""
    return {
        "frame_shape": list(field.grid.frame_shape),
        "step_px": list(field.grid.step_px),
        "origin_px": list(field.grid.origin_px),
        "valid": list(field.grid.valid),
        "tilt_per_px": list(field.tilt_per_px),
        "radius_per_px": field.radius_per_px,
    }


def field_from(values: NDArray[np.complexfloating], about: dict[str, Any]) -> Field:
    """Make a field of its values and what `describe` gave."""
    pairs = {
        name: (about[name][0], about[name][1])
        for name in ("frame_shape", "step_px", "origin_px", "tilt_per_px")
    }
    grid = Grid(pairs["frame_shape"], pairs["step_px"], pairs["origin_px"], Window(*about["valid"]))
    return Field(values, grid, pairs["tilt_per_px"], about["radius_per_px"])
