"""What each layer of a session is given: data and the options that go with them."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from hologyre.phase.unwrap import Unwrapped
from hologyre.recipe import Recipe
from hologyre.viewer.frames import lazy_frames
from hologyre.viewer.layers import (
    points_from_events,
    points_from_singularities,
    tracks_from_trajectories,
    vectors_from_wavevector,
)
from hologyre.viewer.maps import Skipped
from hologyre.viewer.session import Session
from hologyre.viewer.styles import Role, charge_colours, charge_symbols, event_symbols


def picture(session: Session, recipe: Recipe, role: Role) -> Any:
    """Return the lazy (t, y, x) array of a quantity."""
    maps = session.maps
    quantity = {
        "amplitude": maps.amplitude,
        "phase": maps.phase,
        "unwrapped": maps.unwrapped,
        "jumps": maps.jumps,
    }[role]
    return lazy_frames(lambda t: quantity(recipe, t), maps.shape, np.float32)


def contrast(session: Session, recipe: Recipe, role: Role, frame: int) -> dict[str, Any]:
    """Return the contrast limits a picture starts with, from one of its frames."""
    if role in ("phase", "jumps"):
        return {}
    values = np.asarray(picture(session, recipe, role)[frame])
    values = values[np.isfinite(values)]
    if not len(values):
        return {"contrast_limits": (0.0, 1.0)}
    if role == "amplitude":
        high = float(np.percentile(values, 99.7))
        return {"contrast_limits": (0.0, max(high, 1e-6))}
    # symmetric, as the phase of other frames may lean the other way
    reach = float(np.abs(values).max())
    return {"contrast_limits": (-max(reach, np.pi), max(reach, np.pi))}


def table(session: Session, role: Role) -> tuple[NDArray[np.float64], dict[str, Any]]:
    """Return data and options of a layer made of a table."""
    tables = session.tables
    if role == "tracks":
        data, features, graph = tracks_from_trajectories(tables.trajectories, tables.events)
        # tracks can be coloured by numbers only
        numbers = features.select_dtypes("number")
        return data, {"features": numbers, "graph": graph, "color_by": "charge"}
    if role == "singularities":
        data, features = points_from_singularities(tables.singularities)
        charge = features["charge"]
        looks = {"face_color": charge_colours(charge), "symbol": charge_symbols(charge)}
    else:
        data, features = points_from_events(tables.events)
        looks = {"symbol": event_symbols(features["kind"])}
    # napari takes no looks point by point where there are no points
    return data, {"features": features, **(looks if len(data) else {})}


def cuts(found: Unwrapped | Skipped | None) -> list[NDArray[np.float64]]:
    """Return the cuts of a frame as paths; none if they are not computed yet."""
    return found.cuts.polylines if isinstance(found, Unwrapped) else []


def residue_marks(found: Any) -> tuple[NDArray[np.float64], NDArray[np.int8]]:
    """Return places and charges of a frame's residues; none if they are not computed yet."""
    return (np.empty((0, 2)), np.empty(0, np.int8)) if found is None else found


def arrows(found: NDArray[np.floating] | Skipped | None) -> NDArray[np.float64]:
    """Return the wavevectors of a frame as arrows; none if they are not computed yet."""
    if isinstance(found, np.ndarray):
        return vectors_from_wavevector(found)
    return np.empty((0, 2, 2))
