"""Ways in: all docks at once, and a viewer with a stack and its result."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import napari
from napari import Viewer
from qtpy.QtCore import Qt
from qtpy.QtWidgets import QDockWidget, QTabBar

from hologyre.recipe import Recipe
from hologyre.results import OutputError, Result, load_result
from hologyre.stacks import open_stack
from hologyre.viewer.opening import show_stack
from hologyre.viewer.session import Session, Tables

PLUGIN = "hologyre"
DOCKS = ("Stack", "Field", "Phase", "Singularities", "Motion", "Review")
OVERVIEW = "All docks"

_TABS = "QTabBar::tab { padding: 4px; min-width: 0px; font-size: 11px; }"


def open_docks(viewer: Viewer | None = None) -> None:
    """Open the overview and the docks of all steps, tabbed together in the order of the work."""
    viewer = viewer or napari.current_viewer()
    if viewer is None:
        raise RuntimeError("no napari viewer is open")
    viewer.window.add_plugin_dock_widget(PLUGIN, OVERVIEW, tabify=True)
    open_steps(viewer)
    raise_dock(viewer, OVERVIEW)


def open_steps(viewer: Viewer) -> None:
    """Open the docks of all steps, behind the dock that is in front."""
    docks = [viewer.window.add_plugin_dock_widget(PLUGIN, n, tabify=True)[0] for n in DOCKS]
    _fit_tabs(docks[0])


def raise_dock(viewer: Viewer, name: str) -> None:
    """Bring a dock to the front, opening it if need be."""
    dock, _ = viewer.window.add_plugin_dock_widget(PLUGIN, name, tabify=True)
    dock.show()
    dock.raise_()


def view(
    source: str | Path | Sequence[str | Path],
    *,
    result: str | Path | None = None,
    recipe: Recipe | None = None,
) -> Viewer:
    """Open napari with a stack, all docks and, if there is one, the result of a run.

    Start napari's event loop with ``napari.run()`` to use it.

    Parameters
    ----------
    source : path, pattern, folder or list of paths
        Holograms, as for `hologyre.open_stack`.
    result : path, optional
        Folder that ``hologyre run`` wrote for this stack.
    recipe : Recipe, optional
        Settings to begin with; those of the result are taken if there is one.

    Raises
    ------
    StackError
        If the images cannot be used.
    OutputError
        If the folder holds no result, or that of frames of another size or number.
    """
    stack = open_stack(source)
    loaded = None if result is None else load_result(result)
    if loaded is not None and tuple(loaded.run["input"]["shape"]) != stack.shape:
        raise OutputError(
            f"{result}: holds the result of a stack of {_size(loaded.run['input']['shape'])} px, "
            f"and this one has {_size(stack.shape)} px; name the result of this stack."
        )
    viewer = Viewer(title=PLUGIN)
    session = show_stack(viewer, stack, recipe=recipe if loaded is None else loaded.recipe)
    open_docks(viewer)
    if loaded is not None:
        _show_result(session, loaded)
    return viewer


def _show_result(session: Session, loaded: Result) -> None:
    whole = loaded.recipe if loaded.run["status"] == "done" else None
    found = loaded.as_found
    if loaded.annotations is not None and not session.editing.log.standing:
        session.editing.keep_in(loaded.annotations)
    session.tables = Tables(
        singularities=found.singularities,
        frames=found.frames,
        trajectories=found.trajectories,
        events=found.events,
        found_with=whole,
        linked_with=whole,
    )
    if session.display is not None:
        session.display.show("phase", "singularities", "tracks")


def _size(shape: Sequence[int]) -> str:
    return " x ".join(map(str, shape))


def _fit_tabs(dock: QDockWidget) -> None:
    """Give the tabs of the docks room for their whole titles."""
    for bar in dock.window().findChildren(QTabBar):
        titles = {bar.tabText(i) for i in range(bar.count())}
        if titles >= {*DOCKS}:
            bar.setElideMode(Qt.TextElideMode.ElideNone)
            bar.setStyleSheet(_TABS)
