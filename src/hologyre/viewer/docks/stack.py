"""The Stack dock: optics, frame timing, blank frames, region, frames left out, notes."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from napari import Viewer
from napari.layers import Shapes
from qtpy.QtWidgets import QFileDialog, QInputDialog, QLabel

from hologyre.recipe import LeftOut, RecipeError, load_recipe, save_recipe
from hologyre.viewer.docks.base import SessionDock, button, open_dialog, side_by_side, titled
from hologyre.viewer.editors import FileEditor, NotesEditor
from hologyre.viewer.forms import RecipeForm
from hologyre.viewer.session import Session, session_of

_OPTICS = (
    "optics.wavelength_nm",
    "optics.pixel_um",
    "optics.camera_pixel_um",
    "optics.magnification",
    "optics.medium_index",
    "optics.numerical_aperture",
    "optics.frame_interval_s",
)
_LABELS = {
    "optics.pixel_um": "Pixel in the object",
    "optics.camera_pixel_um": "Pixel of the camera",
    "optics.medium_index": "Index of the medium",
    "stack.frames": "Frames used",
    "stack.region": "Region (y, y end, x, x end)",
    "stack.dark": "Dark (no light)",
    "stack.reference": "Reference beam alone",
    "stack.empty": "Empty (no object)",
    "stack.saturation": "Saturated from (counts)",
}


class StackDock(SessionDock):
    """What was recorded, and which part of it is used."""

    title = "Stack"
    help_text = "What was recorded. Empty fields are found out from the stack, or stay unknown."
    action = "Open stack…"
    action_tip = "Open a TIFF or OME-TIFF stack, or several files as one, without reading it all."
    needs_session = False

    def __init__(self, napari_viewer: Viewer) -> None:
        self._summary = QLabel()
        self._summary.setWordWrap(True)
        self.left_out = QLabel()
        self.left_out.setWordWrap(True)
        self._optics = RecipeForm(_OPTICS, labels=_LABELS)
        self._frames = RecipeForm(("stack.frames", "stack.region"), labels=_LABELS)
        self._blanks = RecipeForm(
            ("stack.dark", "stack.reference", "stack.empty", "stack.saturation"),
            labels=_LABELS,
            editors={
                f"stack.{kind}": FileEditor(title=f"Choose the {kind} frame")
                for kind in ("dark", "reference", "empty")
            },
        )
        self._notes = RecipeForm(("stack.notes",), editors={"stack.notes": NotesEditor()})
        super().__init__(napari_viewer)

    def _lay_out(self) -> None:
        self.leave_out_button = button(
            "Leave out this frame…",
            "Do not use the frame the time slider stands at; a reason is kept with the result.",
            self._leave_out,
        )
        self.take_back_button = button(
            "Use it again", "Take the current frame back into use.", self._take_back
        )
        self.region_button = button(
            "Use drawn rectangle as region",
            "Use only the pixels inside the rectangle drawn in a Shapes layer.",
            self._take_region,
        )
        for part in (
            self._summary,
            titled("Optics", self._optics),
            titled(
                "Frames and region",
                self._frames,
                side_by_side(self.leave_out_button, self.take_back_button),
                self.left_out,
                self.region_button,
            ),
            titled("Blank frames", self._blanks),
            titled("Notes", self._notes),
        ):
            self.rows.addWidget(part)
        self.rows.addStretch(1)
        for form in (self._optics, self._frames, self._blanks, self._notes):
            form.changed.connect(self.set_recipe)
            form.refused.connect(lambda reason: self.say(reason, warning=True))
        super()._lay_out()
        self.load_button = button(
            "Load recipe…", "Take all settings from a saved recipe.", self._load
        )
        self.save_button = button(
            "Save recipe…", "Save all settings; the command repeats them.", self._save
        )
        self.footer.addWidget(self.load_button)
        self.footer.addWidget(self.save_button)

    def show_session(self, session: Session) -> None:
        """Show what the stack is and how it is used."""
        sizes, attrs = session.stack.sizes, session.stack.attrs
        count = f"{sizes['t']} frames" if sizes["t"] > 1 else "1 frame"
        told = [f"{count} of {sizes['y']} × {sizes['x']} px, {attrs.get('bits', '?')} bit"]
        told += [str(note) for note in attrs.get("notes", ())]
        self._summary.setText("\n".join(told))
        for form in (self._optics, self._frames, self._blanks, self._notes):
            form.show_recipe(session.recipe)
        left_out = session.recipe.stack.left_out
        self.left_out.setText(
            "\n".join(f"{entry.frame}: {entry.reason}" for entry in left_out)
            or "No frame is left out."
        )
        self.take_back_button.setEnabled(bool(left_out))

    def act(self) -> None:
        """Ask for files and open them."""
        open_dialog(self)

    def _leave_out(self) -> None:
        session = self.session()
        if session is None:
            return
        frame = session.frame
        reason, ok = QInputDialog.getText(
            self, "Leave out a frame", f"Why is frame {frame} not used?"
        )
        if ok and reason.strip():
            kept = [x for x in session.recipe.stack.left_out if x.frame != frame]
            kept.append(LeftOut(frame=frame, reason=reason.strip()))
            self._set_left_out(session, kept)

    def _take_back(self) -> None:
        session = self.session()
        if session is None:
            return
        frame = session.frame
        kept = [x for x in session.recipe.stack.left_out if x.frame != frame]
        if len(kept) == len(session.recipe.stack.left_out):
            self.say(f"Frame {frame} is not left out; move the time slider to one that is.")
        else:
            self._set_left_out(session, kept)

    def _set_left_out(self, session: Session, entries: list[LeftOut]) -> None:
        ordered = [x.model_dump() for x in sorted(entries, key=lambda entry: entry.frame)]
        self.set_recipe(session.recipe.with_settings({"stack.left_out": ordered}))

    def _take_region(self) -> None:
        session = self.session()
        shapes = self.viewer.layers.selection.active
        if not isinstance(shapes, Shapes):
            shapes = next(
                (
                    x
                    for x in self.viewer.layers
                    if isinstance(x, Shapes) and session_of(x) is None and len(x.data)
                ),
                None,
            )
        if session is None or shapes is None or not len(shapes.data):
            self.say("Draw a rectangle in a new Shapes layer first.", warning=True)
            return
        corners = np.asarray(shapes.data[-1])
        world = np.array([shapes.data_to_world(corner)[-2:] for corner in corners])
        scale = np.array(session.optics.pixel_um or 1.0)
        (y0, x0), (y1, x1) = world.min(axis=0) / scale, world.max(axis=0) / scale
        ny, nx = session.stack.sizes["y"], session.stack.sizes["x"]
        region = (
            int(np.clip(np.ceil(y0), 0, ny)),
            int(np.clip(np.floor(y1) + 1, 0, ny)),
            int(np.clip(np.ceil(x0), 0, nx)),
            int(np.clip(np.floor(x1) + 1, 0, nx)),
        )
        try:
            self.set_recipe(session.recipe.with_settings({"stack.region": region}))
        except RecipeError as error:
            self.say(str(error), warning=True)

    def _load(self) -> None:
        session = self.session()
        path, _ = QFileDialog.getOpenFileName(self, "Load a recipe", "", "Recipes (*.toml)")
        if session is not None and path:
            try:
                self.set_recipe(load_recipe(path))
            except RecipeError as error:
                self.say(str(error), warning=True)

    def _save(self) -> None:
        session = self.session()
        if session is None:
            return
        path, _ = QFileDialog.getSaveFileName(
            self, "Save the recipe", f"{session.name}.toml", "Recipes (*.toml)"
        )
        if path:
            try:
                save_recipe(session.recipe, path)
            except OSError as error:
                self.say(f"{path}: cannot be written ({error.strerror}).", warning=True)
            else:
                self.say(f"Recipe saved as {Path(path).name}.")
