"""What is open: one stack with its recipe, the tables found and the work that runs on it."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import pandas as pd
import xarray as xr
from psygnal import Signal

from hologyre.optics import Optics
from hologyre.recipe import Recipe
from hologyre.tables import EVENTS, FRAMES, SINGULARITIES, TRAJECTORIES, empty
from hologyre.viewer.maps import FrameMaps
from hologyre.viewer.review_log import Editing

if TYPE_CHECKING:
    from hologyre.viewer.display import Display
    from hologyre.viewer.worker import Task

_METADATA = "hologyre"
_ROLE = "hologyre_role"


@dataclass(frozen=True, eq=False)
class Tables:
    """Tables found so far, and the recipes they were found with.

    No recipe stands for not yet, or not yet in all frames.
    """

    singularities: pd.DataFrame = field(default_factory=lambda: empty(SINGULARITIES))
    frames: pd.DataFrame = field(default_factory=lambda: empty(FRAMES))
    trajectories: pd.DataFrame = field(default_factory=lambda: empty(TRAJECTORIES))
    events: pd.DataFrame = field(default_factory=lambda: empty(EVENTS))
    found_with: Recipe | None = None
    linked_with: Recipe | None = None


class Session:
    """One open stack.

    Recipe and tables are values: a change puts a new one in place and tells whoever listens.
    A session is found through the metadata of its layers, so that layers may be renamed.

    Parameters
    ----------
    stack : DataArray
        Holograms (t, y, x), one frame a chunk.
    name : str
        What the user calls the stack.
    recipe : Recipe, optional
        Settings to begin with.
    """

    recipe_changed = Signal()
    tables_changed = Signal()
    task_changed = Signal()
    drawn = Signal()
    """What belongs to the current frame alone is drawn, as far as it is computed."""

    told = Signal(str, bool)
    """A sentence on what hands have done, and whether it is a warning."""

    def __init__(self, stack: xr.DataArray, *, name: str, recipe: Recipe | None = None) -> None:
        self.stack = stack
        self.name = name
        self.maps = FrameMaps(stack)
        self.editing = Editing(stack, Tables())
        self.maps.lines = self.editing.lines
        self.display: Display | None = None
        self._recipe = recipe or Recipe()
        self._task: Task | None = None

    def __deepcopy__(self, memo: dict[int, Any]) -> Session:
        # napari copies a layer's metadata when the layer is duplicated; it is the same stack
        return self

    @property
    def recipe(self) -> Recipe:
        """The settings, a value."""
        return self._recipe

    @recipe.setter
    def recipe(self, recipe: Recipe) -> None:
        if recipe != self._recipe:
            self._recipe = recipe
            self.recipe_changed.emit()

    @property
    def tables(self) -> Tables:
        """The tables found so far, with edits by hand in them; a value.

        What is set are tables as found, and the edits are done again on them.
        """
        return self.editing.tables

    @tables.setter
    def tables(self, tables: Tables) -> None:
        self.editing.found = tables
        self.tables_changed.emit()

    @property
    def task(self) -> Task | None:
        """The work that runs, if any."""
        return self._task

    @task.setter
    def task(self, task: Task | None) -> None:
        self._task = task
        self.task_changed.emit()

    @property
    def frame(self) -> int:
        """The frame that is looked at; the first one where nothing is shown."""
        return 0 if self.display is None else self.display.frame

    @property
    def optics(self) -> Optics:
        """What is known of the optics, from the recipe or else from the file."""
        told = self._recipe.optics
        by_lens = told.camera_pixel_um is not None and told.magnification is not None
        settings = {
            f"optics.{name}": self.stack.attrs.get(name) or "unknown"
            for name in ("pixel_um", "frame_interval_s")
            if getattr(told, name) == "auto" and not (name == "pixel_um" and by_lens)
        }
        return self._recipe.with_settings(settings).optics.values()


def session_of(layer: Any) -> Session | None:
    """Return the session a layer belongs to, or None."""
    session = layer.metadata.get(_METADATA) if layer is not None else None
    return session if isinstance(session, Session) else None


def role_of(layer: Any) -> str:
    """Return what a layer shows of its session: "stack", or a role of `styles`."""
    return str(layer.metadata.get(_ROLE, ""))


def metadata_for(session: Session, role: str) -> dict[str, Any]:
    """Return the metadata of a layer that shows `role` of a session."""
    return {_METADATA: session, _ROLE: role}
