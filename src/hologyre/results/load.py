"""Read a result folder back."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd

from hologyre.edits import NAME as LOG
from hologyre.recipe import Recipe, load_recipe
from hologyre.results.fields import KeptFields, read_fields
from hologyre.results.files import OutputError, read_csv
from hologyre.results.folder import FOUND, read_run
from hologyre.tables import EVENTS, FRAMES, SINGULARITIES, TRAJECTORIES


@dataclass(frozen=True, eq=False)
class AsFound:
    """The tables without edits by hand.

    Parameters
    ----------
    singularities, trajectories, events, frames : DataFrame
        Columns as in `hologyre.tables`.
    """

    singularities: pd.DataFrame
    trajectories: pd.DataFrame
    events: pd.DataFrame
    frames: pd.DataFrame


@dataclass(frozen=True, eq=False)
class Result:
    """What a run wrote.

    Parameters
    ----------
    folder : Path
    recipe : Recipe
        As used.
    run : dict
        Content of run.json.
    singularities, trajectories, events, frames : DataFrame
        Columns as in `hologyre.tables`.
    as_found : AsFound
        The tables without edits by hand, for `hologyre.edits.found_of`; the same ones where
        none were replayed.
    annotations : Path or None
        The log of the edits that were replayed.
    fields : sequence of Field, or None
        Lazy; None unless they were kept.
    """

    folder: Path
    recipe: Recipe
    run: dict[str, Any]
    singularities: pd.DataFrame
    trajectories: pd.DataFrame
    events: pd.DataFrame
    frames: pd.DataFrame
    as_found: AsFound
    annotations: Path | None
    fields: KeptFields | None


def load_result(folder: str | Path) -> Result:
    """Read the result folder of a finished or interrupted run.

    Raises
    ------
    OutputError
        If the folder holds no result.
    """
    folder = Path(folder)
    run = read_run(folder)
    if run is None:
        raise OutputError(
            f"{folder}: holds no result (run.json is missing); name a folder hologyre run wrote."
        )
    names = {name: folder / written for name, written in run["files"].items()}
    kept = names.get("fields.zarr")
    tables = _read_tables(names)
    replayed = f"{FOUND}/singularities.csv" in names
    return Result(
        folder,
        load_recipe(names["recipe.toml"]),
        run,
        tables.singularities,
        tables.trajectories,
        tables.events,
        tables.frames,
        _read_tables(names, f"{FOUND}/") if replayed else tables,
        names.get(LOG),
        None if kept is None else read_fields(kept),
    )


def _read_tables(names: dict[str, Path], where: str = "") -> AsFound:
    return AsFound(
        read_csv(names[f"{where}singularities.csv"], SINGULARITIES),
        read_csv(names[f"{where}trajectories.csv"], TRAJECTORIES),
        read_csv(names[f"{where}events.csv"], EVENTS),
        read_csv(names[f"{where}frames.csv"], FRAMES),
    )
