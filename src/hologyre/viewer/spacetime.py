"""Trajectories as lines in (x, y, t), seen in three dimensions."""

from __future__ import annotations

from typing import Any

from napari import Viewer

from hologyre.viewer.history import threads
from hologyre.viewer.layers import placement
from hologyre.viewer.session import Session, metadata_for
from hologyre.viewer.styles import STYLES

ROLE = "spacetime"
_DEPTH = 0.6
"""How deep the whole stack is drawn, in longer sides of the frame."""
_ANGLES = (0.0, 35.0, 60.0)


class SpaceTime:
    """Turns a viewer to three dimensions and back.

    Pictures would have to be computed for all frames at once to be drawn as volumes, so that
    all layers are hidden but one made for the purpose; it goes when the viewer is back in two
    dimensions, by whichever button, and the others are as they were.
    """

    def __init__(self, viewer: Viewer) -> None:
        self._viewer = viewer
        self._shown: list[Any] = []
        self._made: Any = None
        self._frame = 0
        self._session: Session | None = None
        viewer.dims.events.ndisplay.connect(self._follow)

    @property
    def active(self) -> bool:
        """Whether the lines are shown."""
        return self._made is not None

    def release(self) -> None:
        """Let go of the viewer, back in two dimensions."""
        self.leave()
        self._viewer.dims.events.ndisplay.disconnect(self._follow)

    def enter(self, session: Session) -> None:
        """Show the session's trajectories as lines, unless it has none."""
        tables, optics = session.tables, session.optics
        if self.active or not len(tables.trajectories):
            return
        layers = self._viewer.layers
        selected = layers.selection.active
        self._session, self._frame = session, session.frame
        self._shown = [layer for layer in layers if layer.visible]
        for layer in self._shown:
            layer.visible = False
        self._viewer.dims.ndisplay = 3
        vertices, charge = threads(tables.trajectories, tables.events, optics)
        frames = int(vertices[:, 1].max()) + 1
        place = placement(optics).of(3)
        _, dy, dx = place["scale"]
        side = max(session.stack.sizes["y"] * dy, session.stack.sizes["x"] * dx)
        style = STYLES["tracks"]
        options = {**style.options, "tail_length": frames, "head_length": frames, "tail_width": 2}
        self._made = self._viewer.add_tracks(
            vertices,
            name=f"{style.name} in time [{session.name}]",
            metadata=metadata_for(session, ROLE),
            features={"charge": charge},
            color_by="charge",
            **options,
            **{**place, "scale": (_DEPTH * side / max(frames - 1, 1), dy, dx)},
        )
        if selected is not None and selected in layers:
            layers.selection.active = selected
        self._viewer.scene.overlays.axes.visible = True
        self._viewer.scene.camera.angles = _ANGLES
        self._viewer.fit_to_view(layers=[self._made])

    def leave(self) -> None:
        """Show again what was shown before."""
        made, self._made = self._made, None
        if made is None:
            return
        if made in self._viewer.layers:
            self._viewer.layers.remove(made)
        self._viewer.scene.overlays.axes.visible = False
        self._viewer.dims.ndisplay = 2
        for layer in self._shown:
            if layer in self._viewer.layers:
                layer.visible = True
        self._shown = []
        session, self._session = self._session, None
        if session is not None and session.display is not None:
            session.display.go_to(self._frame)
        self._viewer.reset_view()

    def _follow(self, event: Any = None) -> None:
        if self._viewer.dims.ndisplay == 2:
            self.leave()
