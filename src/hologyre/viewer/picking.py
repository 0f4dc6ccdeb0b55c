"""Clicks on singularities, and the track they belong to drawn along its whole way."""

from __future__ import annotations

from collections.abc import Callable, Generator
from typing import Any

import numpy as np
from napari import Viewer

from hologyre.viewer.history import nearest_track
from hologyre.viewer.layers import placement
from hologyre.viewer.session import Session, metadata_for, role_of, session_of

ROLE = "picked"
_NEAR = 14.0
_WIDTH = 1.8
_RING = 9.0
_INNER = 0.9
_COLOUR = "#F0E442"


class Picker:
    """Tells which track was clicked on in the canvas; dragging the picture picks nothing.

    Parameters
    ----------
    viewer : Viewer
    session : callable
        Returns the session that is meant, or None.
    on_pick : callable
        Given the number of the track.
    """

    def __init__(
        self,
        viewer: Viewer,
        session: Callable[[], Session | None],
        on_pick: Callable[[int], object],
    ) -> None:
        self._viewer = viewer
        self._session = session
        self._on_pick = on_pick
        viewer.mouse_drag_callbacks.append(self._follow)

    def release(self) -> None:
        """Let go of the viewer."""
        if self._follow in self._viewer.mouse_drag_callbacks:
            self._viewer.mouse_drag_callbacks.remove(self._follow)

    def track_near(self, position: tuple[float, ...]) -> int | None:
        """Return the track near a place in the world, none in three dimensions."""
        session = self._session()
        if session is None or self._viewer.dims.ndisplay != 2:
            return None
        scale = placement(session.optics).scale
        y, x = (p / s for p, s in zip(position[-2:], scale[1:], strict=True))
        reach = _NEAR / self._viewer.scene.camera.zoom / scale[2]
        return nearest_track(session.tables.trajectories, session.frame, y, x, within_px=reach)

    def _follow(self, viewer: Any, event: Any) -> Generator[None, None, None]:
        start = np.asarray(event.pos, dtype=float)
        yield
        while event.type == "mouse_move":
            yield
        if np.hypot(*(np.asarray(event.pos, dtype=float) - start)) > 3:
            return
        track = self.track_near(event.position)
        if track is not None:
            self._on_pick(track)


def draw_picked(
    viewer: Viewer,
    session: Session,
    track: int | None,
    mark: tuple[float, float] | None = None,
) -> None:
    """Draw the way of a track over the pictures, and a ring around a place (y_px, x_px).

    No track takes both away.
    """
    layer = next(
        (x for x in viewer.layers if role_of(x) == ROLE and session_of(x) is session), None
    )
    rows = session.tables.trajectories
    rows = rows[rows["track"] == track]
    path = rows[["y_px", "x_px"]].to_numpy(dtype=np.float64)
    if len(path) == 0:
        if layer is not None:
            viewer.layers.remove(layer)
        return
    if len(path) == 1:
        # a path takes two places
        path = path + np.array([[-1.0, 0.0], [1.0, 0.0]])
    if layer is None:
        selected = viewer.layers.selection.active
        layer = viewer.add_shapes(
            None,
            ndim=2,
            name=f"picked trajectory [{session.name}]",
            metadata=metadata_for(session, ROLE),
            edge_color=_COLOUR,
            face_color="transparent",
            edge_width=_WIDTH,
            opacity=1.0,
            visible=viewer.dims.ndisplay == 2,
            **placement(session.optics).of(2),
        )
        viewer.layers.selection.active = selected
    drawn, kinds = [path], ["path"]
    if mark is not None:
        corners = _RING * np.array([[-1, -1], [-1, 1], [1, 1], [1, -1]])
        drawn, kinds = [*drawn, np.array(mark) + corners], [*kinds, "ellipse"]
    # new shapes take the layer's current looks
    layer.data = (drawn, kinds)


def bring_into_view(viewer: Viewer, session: Session, y_px: float, x_px: float) -> None:
    """Move the camera to a place, unless it is well in view already."""
    _, dy, dx = placement(session.optics).scale
    camera, place = viewer.scene.camera, np.array([y_px * dy, x_px * dx])
    reach = np.array(viewer.canvas.size) / camera.zoom / 2
    if (np.abs(place - camera.center[-2:]) > _INNER * reach).any():
        camera.center = (0.0, *place)
