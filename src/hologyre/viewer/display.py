"""The layers of one session in one viewer, kept in step with recipe, tables and time slider."""

from __future__ import annotations

from collections.abc import Hashable
from functools import partial
from typing import TYPE_CHECKING, Any

import numpy as np
from napari import Viewer
from napari.layers import Layer
from qtpy.QtCore import QTimer

from hologyre.viewer import drawing
from hologyre.viewer.ahead import Ahead
from hologyre.viewer.layers import Placement, placement
from hologyre.viewer.session import Session, metadata_for, role_of, session_of
from hologyre.viewer.styles import PLANE, RASTERS, STYLES, Role, charge_colours

if TYPE_CHECKING:
    from hologyre.viewer.gestures import Gestures

_AHEAD = 3
_SETTLE_MS = 700
_FRAME_BOUND: tuple[Role, ...] = ("cuts", "residues", "wavevectors")
_BY_CUTS: tuple[Role, ...] = ("unwrapped", "jumps")
_TABLES: tuple[Role, ...] = ("tracks", "events", "singularities")


class Display:
    """Shows a session in a viewer.

    It listens to the session and to the viewer, and is the only one that touches the session's
    layers. A layer that the user deletes comes back only when it is asked for again.
    """

    def __init__(self, viewer: Viewer, session: Session) -> None:
        self._viewer = viewer
        self._session = session
        self._drawn = session.recipe
        self._bound: dict[Role, Hashable] = {}
        self._placed: Placement | None = None
        self._solved: dict[Role, Hashable] = {}
        self._settle = QTimer()
        self._settle.setSingleShot(True)
        self._settle.setInterval(_SETTLE_MS)
        self._settle.timeout.connect(session.tables_changed.emit)
        self._ahead = Ahead(self._draw_frame)
        self.gestures: Gestures | None = None
        session.display = self
        session.recipe_changed.connect(self._follow_recipe)
        session.tables_changed.connect(self._follow_tables)
        session.editing.changed.connect(self._follow_edits)
        viewer.dims.events.current_step.connect(self._follow_slider)
        viewer.layers.events.removed.connect(self._follow_removal)
        self._place()
        if len(viewer.layers) == len(self._layers()):
            # napari starts in the middle of its sliders; a time-lapse starts at its start
            self.go_to(0)

    @property
    def frame(self) -> int:
        """The frame the time slider stands at, kept within the stack."""
        volume = next((x for x in self._layers() if x.ndim == 3), None)
        if volume is None:
            return 0
        position = volume.world_to_data(self._viewer.dims.point[-3:])[0]
        return int(np.clip(np.rint(position), 0, self._session.stack.sizes["t"] - 1))

    def go_to(self, frame: int) -> None:
        """Move the time slider to a frame."""
        interval = placement(self._session.optics).scale[0]
        self._viewer.dims.set_point(self._viewer.dims.ndim - 3, frame * interval)

    def layer(self, role: str) -> Layer | None:
        """Return the session's layer of this role, if the viewer has one."""
        return next((x for x in self._layers() if role_of(x) == role), None)

    def show(self, *roles: Role) -> None:
        """Add the layers if need be and make them visible; of the pictures, the last one named.

        The selection stays as it is.
        """
        active = self._viewer.layers.selection.active
        for role in roles:
            layer = self.layer(role) or self._add(role)
            if layer is not None:
                layer.visible = True
        pictures = [role for role in roles if role in RASTERS]
        for role in RASTERS:
            if pictures and role != pictures[-1]:
                self.hide(role)
        if active is not None and active in self._viewer.layers:
            self._viewer.layers.selection.active = active
        self._follow_slider()

    def hide(self, *roles: Role) -> None:
        """Make layers invisible."""
        for role in roles:
            layer = self.layer(role)
            if layer is not None:
                layer.visible = False

    def shows_picture(self) -> bool:
        """Tell whether one of the session's computed pictures is visible."""
        return any(self.is_visible(role) for role in RASTERS)

    def is_visible(self, role: str) -> bool:
        """Tell whether there is a visible layer of this role."""
        layer = self.layer(role)
        return layer is not None and bool(layer.visible)

    def _layers(self) -> list[Layer]:
        return [x for x in self._viewer.layers if session_of(x) is self._session]

    def _add(self, role: Role) -> Layer | None:
        style = STYLES[role]
        common = {
            "name": f"{style.name} [{self._session.name}]",
            "metadata": metadata_for(self._session, role),
            **style.options,
        }
        place = placement(self._session.optics)
        if role in RASTERS:
            layer = self._viewer.add_image(
                drawing.picture(self._session, self._drawn, role),
                **common,
                **drawing.contrast(self._session, self._drawn, role, self.frame),
                **place.of(3),
            )
            self._put_above_pictures(layer)
        elif role in PLANE:
            adds = {
                "shapes": self._viewer.add_shapes,
                "vectors": self._viewer.add_vectors,
                "points": self._viewer.add_points,
            }
            layer = adds[style.kind](None, ndim=2, **common, **place.of(2))
            if role in _FRAME_BOUND:
                layer.events.visible.connect(self._follow_slider)
        else:
            data, options = drawing.table(self._session, role)
            if role == "tracks" and not len(data):
                # napari has no tracks without rows
                return None
            add = self._viewer.add_tracks if role == "tracks" else self._viewer.add_points
            layer = add(data, **common, **options, **place.of(3))
        return layer

    def _put_above_pictures(self, layer: Layer) -> None:
        """Move a new picture down to the session's other pictures, under what is drawn on them."""
        layers = self._viewer.layers
        below = [x for x in self._layers() if x is not layer and role_of(x) in (*RASTERS, "stack")]
        if below:
            layers.move(layers.index(layer), max(layers.index(x) for x in below) + 1)

    def _place(self) -> None:
        place = placement(self._session.optics)
        if place == self._placed:
            return
        self._placed = place
        for layer in self._layers():
            for name, value in place.of(layer.ndim).items():
                setattr(layer, name, value)

    def _follow_recipe(self) -> None:
        self._place()
        maps, old, new = self._session.maps, self._drawn, self._session.recipe
        if new.undecided():
            # nothing can be computed; what is shown stays until it can
            return
        self._drawn = new
        for role in RASTERS:
            layer = self.layer(role)
            if layer is not None and maps.key(role, old) != maps.key(role, new):
                layer.data = drawing.picture(self._session, self._drawn, role)
        self._follow_slider()

    def _follow_tables(self) -> None:
        for role in _TABLES:
            layer = self.layer(role)
            if layer is None:
                continue
            data, options = drawing.table(self._session, role)
            if role == "tracks" and not len(data):
                self._viewer.layers.remove(layer)
                continue
            if role == "tracks":
                _replace_tracks(layer, data, options)
                continue
            layer.data = data
            for name, value in options.items():
                setattr(layer, name, value)

    def _follow_slider(self, event: Any = None) -> None:
        self._draw_frame()
        session, recipe, frame = self._session, self._drawn, self.frame
        wanted: list[Role] = [role for role in (*RASTERS, *_FRAME_BOUND) if self.is_visible(role)]
        last = session.stack.sizes["t"] - 1
        steps = [
            partial(session.maps.prepare, role, recipe, t)
            for t in range(frame, min(frame + _AHEAD, last) + 1)
            for role in wanted
            if session.maps.ready(role, recipe, t) is None
        ]
        self._ahead.ask(steps)

    def _draw_frame(self) -> None:
        """Draw what belongs to the current frame alone, as far as it is computed."""
        frame = self.frame
        self._draw_solved(frame)
        for role in _FRAME_BOUND:
            layer = self.layer(role)
            if layer is None or not layer.visible:
                self._bound.pop(role, None)
                continue
            maps = self._session.maps
            found = maps.ready(role, self._drawn, frame)
            key = (id(layer), maps.entry(role, self._drawn, frame), found is None)
            if self._bound.get(role) == key:
                continue
            self._bound[role] = key
            if role == "wavevectors":
                layer.data = drawing.arrows(found)
                continue
            if role == "residues":
                places, charge = drawing.residue_marks(found)
                layer.data = places
                if len(charge):
                    layer.face_color = charge_colours(charge)
                continue
            # one assignment, since each redraws; new paths take the layer's current colour
            paths = drawing.cuts(found)
            layer.data = (paths, ["path"] * len(paths)) if paths else []
        self._session.drawn.emit()

    def _draw_solved(self, frame: int) -> None:
        """Show pictures that depend on lines drawn by hand anew once they are solved."""
        lines = self._session.editing.drawn_lines
        for role in _BY_CUTS:
            layer = self.layer(role)
            if layer is None or not layer.visible or self._solved.get(role, ()) == lines:
                continue
            if self._session.maps.ready(role, self._drawn, frame) is not None:
                self._solved[role] = lines
                layer.data = drawing.picture(self._session, self._drawn, role)

    def _follow_edits(self, frames: Any) -> None:
        self._follow_slider()
        # tables of all frames are put together once the hand rests
        self._settle.start()

    def _follow_removal(self, event: Any) -> None:
        if session_of(event.value) is self._session and not self._layers():
            self._ahead.stop()
            self._settle.stop()
            if self._session.task is not None:
                self._session.task.cancel()


def _replace_tracks(layer: Layer, data: Any, options: dict[str, Any]) -> None:
    """Give tracks other data; new data drop features and graph, and with them the colouring."""
    colour_by = layer.color_by
    layer.color_by = "track_id"
    layer.graph = {}
    layer.data = data
    layer.features = options["features"]
    layer.graph = options["graph"]
    layer.color_by = colour_by
