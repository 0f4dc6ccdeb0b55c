"""From files and layers to sessions."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import xarray as xr
from napari import Viewer
from napari.layers import Image

from hologyre.recipe import Recipe
from hologyre.stacks import as_stack, open_stack
from hologyre.viewer.display import Display
from hologyre.viewer.layers import placement
from hologyre.viewer.session import Session, metadata_for, session_of
from hologyre.viewer.styles import STACK_OPTIONS


def current_session(viewer: Viewer) -> Session | None:
    """Return the session of the selected layer.

    If the selected layer belongs to none and could not be a stack either, and there is only one
    session, that one is meant.
    """
    active = viewer.layers.selection.active
    session = session_of(active)
    if session is None and candidate_layer(viewer) is None:
        open_ones = {id(s): s for s in map(session_of, viewer.layers) if s is not None}
        session = next(iter(open_ones.values())) if len(open_ones) == 1 else None
    if session is not None and session.display is None:
        # the layer was made without a viewer, as sample data are
        Display(viewer, session)
    return session


def candidate_layer(viewer: Viewer) -> Image | None:
    """Return the selected layer if it could be a hologram stack and is not one yet."""
    active = viewer.layers.selection.active
    fits = (
        isinstance(active, Image)
        and session_of(active) is None
        and not active.rgb
        and not active.multiscale
        and active.ndim in (2, 3)
        and active.dtype.kind in "uif"
    )
    return active if fits else None


def use_layer(viewer: Viewer, layer: Image) -> Session:
    """Make a session of an image layer that holds holograms.

    Raises
    ------
    StackError
        If the layer's data are not holograms.
    """
    path = layer.source.path
    stack = open_stack(path) if path and Path(path).exists() else as_stack(layer.data)
    session = Session(stack, name=layer.name)
    layer.metadata.update(metadata_for(session, "stack"))
    if layer.ndim == 2:
        layer.data = stack.data
    Display(viewer, session)
    return session


def show_stack(
    viewer: Viewer,
    source: xr.DataArray | str | Path | Sequence[str | Path],
    *,
    recipe: Recipe | None = None,
) -> Session:
    """Show holograms, opened lazily if they are given by their files.

    Raises
    ------
    StackError
        If the images cannot be used.
    """
    stack = source if isinstance(source, xr.DataArray) else open_stack(source)
    session = Session(stack, name=str(stack.attrs["name"]), recipe=recipe)
    data, options, _ = stack_layer(session)
    viewer.add_image(data, **options)
    Display(viewer, session)
    return session


def stack_layer(session: Session) -> tuple[object, dict[str, object], str]:
    """Return the layer of a session's holograms as data, options and kind."""
    return (
        session.stack.data,
        {
            "name": session.name,
            "metadata": metadata_for(session, "stack"),
            **placement(session.optics).of(3),
            **STACK_OPTIONS,
        },
        "image",
    )
