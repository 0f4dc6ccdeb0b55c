"""Tables of a session written as the command writes them."""

from __future__ import annotations

from pathlib import Path
from typing import Literal

from hologyre.recipe import recipe_text
from hologyre.results import csv_bytes, write_whole
from hologyre.tables import EVENTS, FRAMES, SINGULARITIES, TRAJECTORIES
from hologyre.viewer.session import Session

Table = Literal["trajectories", "singularities", "events", "frames"]

_COLUMNS = {
    "trajectories": TRAJECTORIES,
    "singularities": SINGULARITIES,
    "events": EVENTS,
    "frames": FRAMES,
}


def export_table(session: Session, name: Table, path: Path) -> Path:
    """Write one table as CSV.

    Returns
    -------
    Path
        Where it was written; a name beside `path` if another program holds that open.

    Raises
    ------
    OSError, OutputError
        If it cannot be written there.
    """
    return write_whole(path, csv_bytes(getattr(session.tables, name), _COLUMNS[name]))


def export_all(session: Session, folder: Path) -> list[Path]:
    """Write all tables and the recipe they were found with into a folder.

    Raises
    ------
    OSError, OutputError
        If they cannot be written there.
    """
    folder.mkdir(parents=True, exist_ok=True)
    names: tuple[Table, ...] = ("trajectories", "singularities", "events", "frames")
    paths = [export_table(session, name, folder / f"{name}.csv") for name in names]
    recipe = session.tables.linked_with or session.tables.found_with or session.recipe
    return [*paths, write_whole(folder / "recipe.toml", recipe_text(recipe).encode("utf-8"))]
