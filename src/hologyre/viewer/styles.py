"""How each layer of a session looks."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np
import pandas as pd
from napari.utils import Colormap
from numpy.typing import NDArray

Role = Literal[
    "amplitude", "phase", "unwrapped", "cuts", "wavevectors", "singularities", "tracks", "events"
]

# Okabe and Ito's colours, told apart with every common colour vision deficiency
POSITIVE = "#E69F00"
NEGATIVE = "#56B4E9"
CUT = "#D55E00"
ARROW = "#009E73"
_OUTLINE = "#000000"
_CHARGE_MAP = Colormap([NEGATIVE, NEGATIVE, POSITIVE, POSITIVE], name="charge")


@dataclass(frozen=True)
class Style:
    """A layer's name, the napari method that adds it and what that is given."""

    name: str
    kind: Literal["image", "shapes", "vectors", "points", "tracks"]
    options: dict[str, Any] = field(default_factory=dict)


STYLES: dict[Role, Style] = {
    "amplitude": Style("amplitude", "image", {"colormap": "gray", "interpolation2d": "linear"}),
    # a phase has no end: its map must be cyclic, and nothing may be interpolated across the wrap
    "phase": Style(
        "phase",
        "image",
        {
            "colormap": "twilight_shifted",
            "contrast_limits": (-np.pi, np.pi),
            "interpolation2d": "nearest",
        },
    ),
    "unwrapped": Style("unwrapped", "image", {"colormap": "viridis", "interpolation2d": "nearest"}),
    "cuts": Style(
        "cuts",
        "shapes",
        {"edge_color": CUT, "face_color": "transparent", "edge_width": 1.0, "opacity": 1.0},
    ),
    "wavevectors": Style(
        "wavevectors",
        "vectors",
        {"edge_color": ARROW, "edge_width": 3.0, "vector_style": "triangle", "opacity": 0.9},
    ),
    "singularities": Style(
        "singularities",
        "points",
        {"border_color": _OUTLINE, "border_width": 0.1, "size": 7.0, "opacity": 1.0},
    ),
    "tracks": Style(
        "trajectories",
        "tracks",
        {
            "tail_width": 3,
            "tail_length": 30,
            "head_length": 0,
            "blending": "translucent_no_depth",
            "colormaps_dict": {"charge": _CHARGE_MAP},
        },
    ),
    "events": Style(
        "events",
        "points",
        {
            "face_color": "transparent",
            "border_color": "#FFFFFF",
            "border_width": 0.15,
            "size": 16.0,
        },
    ),
}

RASTERS: tuple[Role, ...] = ("amplitude", "phase", "unwrapped")

_EVENT_SYMBOLS = {
    "pair_birth": "star",
    "pair_death": "x",
    "entry": "triangle_up",
    "exit": "triangle_down",
    "split": "diamond",
    "merge": "square",
}


def charge_symbols(charge: pd.Series) -> NDArray[np.str_]:
    """Return a symbol for each charge: upright for positive, turned over for negative."""
    return np.where(charge > 0, "triangle_up", "triangle_down")


def charge_colours(charge: pd.Series) -> NDArray[np.str_]:
    """Return a colour for each charge."""
    return np.where(charge > 0, POSITIVE, NEGATIVE)


def event_symbols(kind: pd.Series) -> NDArray[np.str_]:
    """Return a symbol for each kind of event."""
    return np.array([_EVENT_SYMBOLS.get(k, "disc") for k in kind], dtype=str)


STACK_OPTIONS: dict[str, Any] = {"colormap": "gray", "interpolation2d": "nearest"}
