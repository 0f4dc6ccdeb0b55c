"""How each layer of a session looks."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np
import pandas as pd
from napari.utils import Colormap
from numpy.typing import NDArray

Role = Literal[
    "amplitude",
    "phase",
    "unwrapped",
    "jumps",
    "cuts",
    "residues",
    "wavevectors",
    "singularities",
    "tracks",
    "events",
    "barriers",
    "bridges",
    "analysed",
    "left_out",
    "steps",
    "review",
]

# Okabe and Ito's colours, told apart with every common colour vision deficiency
POSITIVE = "#E69F00"
NEGATIVE = "#56B4E9"
CUT = "#D55E00"
ARROW = "#009E73"
BARRIER = "#CC79A7"
BRIDGE = "#F0E442"
STEP = "#FFFFFF"
_OUTLINE = "#000000"
_CHARGE_MAP = Colormap([NEGATIVE, NEGATIVE, POSITIVE, POSITIVE], name="charge")


@dataclass(frozen=True)
class Style:
    """A layer's name, the napari method that adds it and what that is given."""

    name: str
    kind: Literal["image", "shapes", "vectors", "points", "tracks"]
    options: dict[str, Any] = field(default_factory=dict)


def _line(colour: str) -> dict[str, Any]:
    return {
        "edge_color": colour, "face_color": "transparent", "edge_width": 1.5, "opacity": 1.0,
    }  # fmt: skip


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
    "jumps": Style(
        "jumps",
        "image",
        {"colormap": "gray", "contrast_limits": (0.0, 1.0), "interpolation2d": "nearest"},
    ),
    "cuts": Style(
        "cuts",
        "shapes",
        {"edge_color": CUT, "face_color": "transparent", "edge_width": 1.0, "opacity": 1.0},
    ),
    "residues": Style(
        "residues",
        "points",
        {"border_color": _OUTLINE, "border_width": 0.2, "size": 4.0, "symbol": "square"},
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
    "barriers": Style("barriers", "shapes", _line(BARRIER)),
    "bridges": Style("bridges", "shapes", _line(BRIDGE)),
    "analysed": Style("region to analyse", "shapes", _line(ARROW)),
    "left_out": Style("region to leave out", "shapes", _line(CUT)),
    "steps": Style(
        "last steps",
        "vectors",
        {"edge_color": STEP, "edge_width": 1.0, "vector_style": "line", "opacity": 0.9},
    ),
    "review": Style(
        "singularities under review",
        "points",
        {"border_color": _OUTLINE, "border_width": 0.1, "size": 6.0, "opacity": 1.0},
    ),
}

RASTERS: tuple[Role, ...] = ("amplitude", "phase", "unwrapped", "jumps")
PLANE: tuple[Role, ...] = (
    "cuts", "residues", "wavevectors", "barriers", "bridges", "analysed", "left_out", "steps",
    "review",
)  # fmt: skip
"""Layers that hold one frame at a time."""

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
