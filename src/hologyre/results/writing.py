"""Tables, figure, fields and edits written into a result folder."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from hologyre.analyse import Analysis
from hologyre.edits import NAME as LOG
from hologyre.recipe import recipe_text
from hologyre.results.annotations import Annotations, keep_log
from hologyre.results.fields import write_fields
from hologyre.results.files import csv_bytes, write_whole
from hologyre.results.folder import FOUND
from hologyre.tables import EVENTS, FRAMES, SINGULARITIES, TRAJECTORIES

Draw = Callable[[Analysis], bytes]


def write_results(
    folder: Path, analysis: Analysis, keep_fields: bool, draw: Draw | None
) -> tuple[dict[str, Path], list[str]]:
    """Write all but run.json; tell where each file went and which had to be moved aside."""
    contents = {"recipe.toml": recipe_text(analysis.recipe).encode(), **_tables(analysis)}
    if draw is not None and analysis.fields:
        contents["overview.png"] = draw(analysis)
    files = {name: write_whole(folder / name, content) for name, content in contents.items()}
    moved = _moved(folder, files)
    if keep_fields and analysis.fields:
        files["fields.zarr"] = write_fields(
            folder / "fields.zarr", analysis.fields, analysis.measured
        )
    return files, moved


def write_found(
    folder: Path, found: Analysis, by_hand: Annotations, log_before: bytes | None
) -> tuple[dict[str, Path], list[str]]:
    """Write what a later session needs to take the edits up: tables as found, and the log."""
    (folder / FOUND).mkdir(exist_ok=True)
    files = {
        f"{FOUND}/{name}": write_whole(folder / FOUND / name, content)
        for name, content in _tables(found).items()
    }
    files[LOG] = keep_log(folder, by_hand, log_before)
    return files, _moved(folder, files)


def _tables(analysis: Analysis) -> dict[str, bytes]:
    return {
        "singularities.csv": csv_bytes(analysis.singularities, SINGULARITIES),
        "trajectories.csv": csv_bytes(analysis.trajectories, TRAJECTORIES),
        "events.csv": csv_bytes(analysis.events, EVENTS),
        "frames.csv": csv_bytes(analysis.frames, FRAMES),
    }


def _moved(folder: Path, files: dict[str, Path]) -> list[str]:
    return [
        f"{name} is open in another program; it was written as {path.relative_to(folder)}."
        for name, path in files.items()
        if path != folder / name
    ]
