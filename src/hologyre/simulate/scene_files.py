"""Files of a simulated scene: the stack, its truth, its settings."""

from __future__ import annotations

import json
import os
import uuid
from collections.abc import Callable, Iterable
from dataclasses import asdict, is_dataclass
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np
import pandas as pd
import tifffile
from numpy.typing import NDArray

from hologyre.optics import Optics
from hologyre.simulate.camera import Setup
from hologyre.simulate.truth import Truth
from hologyre.simulate.wave import Wave

# Decimals of the tables, a hundred times finer than any detector reaches.
_DECIMALS = {"time_s": 4, "y_px": 4, "x_px": 4, "y_um": 5, "x_um": 5}

_README = """# {stack}: a SIMULATION

{description}.

Nothing here was measured. The holograms were computed by hologyre from a field known in closed
form (`scene.json` holds every setting) and a camera with noise. Make it again with

    {how}

| file | what it holds |
|---|---|
| `{stack}` | the holograms, {frames} x {ny} x {nx}, {bits} bit |
| `truth_singularities.csv` | every zero of the field inside the frame, by frame |
| `truth_trajectories.csv` | the same zeros joined into tracks |
| `truth_events.csv` | births and deaths of pairs, entries and exits |
| `scene.json` | the settings |

The truth comes from the formula of the field, not from the holograms. Positions count from the
centre of the first pixel, y down, x right. Charge is +1 when the phase grows on a loop turning
from +x towards +y (clockwise on the screen). The field is what multiplies
exp(+2 pi i (fy y + fx x)) in the hologram, (fy, fx) = ({fy}, {fx}) cycles per pixel. Lengths in
um are in the object. Positions are rounded to 0.0001 px.
"""


class SceneFiles(NamedTuple):
    """Paths of a scene's files."""

    stack: Path
    singularities: Path
    trajectories: Path
    events: Path
    settings: Path
    readme: Path


def file_names(name: str, folder: Path) -> SceneFiles:
    """Return the paths of a scene's files in a folder."""
    return SceneFiles(
        folder / f"{name.replace('-', '_')}.tif",
        folder / "truth_singularities.csv",
        folder / "truth_trajectories.csv",
        folder / "truth_events.csv",
        folder / "scene.json",
        folder / "README.md",
    )


def refuse_existing(paths: Iterable[Path]) -> None:
    """Raise FileExistsError if one of the files is there already."""
    for path in paths:
        if path.exists():
            raise FileExistsError(f"{path} is there already")


def write_files(
    paths: SceneFiles,
    *,
    name: str,
    description: str,
    stack: NDArray[np.unsignedinteger],
    truth: Truth,
    wave: Wave,
    setup: Setup,
    optics: Optics,
    how: str,
) -> None:
    """Write a scene's files, each whole (under another name first).

    Parameters
    ----------
    paths : SceneFiles
        Where.
    name, description : str
        Of the scene.
    stack : (t, y, x) unsigned integer array
        The holograms.
    truth : Truth
        Tracks and events.
    wave : Wave
        The wave.
    setup : Setup
        The camera before it.
    optics : Optics
        Wavelength, pixel and frame interval.
    how : str
        The line that makes the scene again.
    """
    paths.stack.parent.mkdir(parents=True, exist_ok=True)
    settings = {
        "kind": "SIMULATION",
        "scene": name,
        "description": description,
        "seed": setup.seed,
        "frames": int(stack.shape[0]),
        "shape": [int(n) for n in stack.shape[1:]],
        "wave": described(wave),
        "camera": described(setup.camera),
        "object_gain": setup.object_gain,
        "counts_per_unit": setup.counts_per_unit,
        "optics": described(optics),
    }
    fy, fx = setup.camera.carrier_per_px
    readme = _README.format(
        stack=paths.stack.name,
        description=description[0].upper() + description[1:],
        how=how,
        frames=stack.shape[0],
        ny=stack.shape[1],
        nx=stack.shape[2],
        bits=setup.camera.bits,
        fy=fy,
        fx=fx,
    )
    singularities = truth.tracks.drop(columns="track").sort_values(
        ["frame", "y_px", "x_px"], ignore_index=True
    )
    write_whole(paths.singularities, lambda part: _write_csv(singularities, part))
    write_whole(paths.trajectories, lambda part: _write_csv(truth.tracks, part))
    write_whole(paths.events, lambda part: _write_csv(truth.events, part))
    write_whole(paths.stack, lambda part: write_stack(part, stack, optics, identity=name))
    write_whole(paths.readme, lambda part: _write_text(readme, part))
    write_whole(
        paths.settings, lambda part: _write_text(json.dumps(settings, indent=2) + "\n", part)
    )


def write_stack(
    path: Path, stack: NDArray[np.unsignedinteger], optics: Optics, *, identity: str
) -> None:
    """Write holograms as OME-TIFF, deflated without loss, with pixel size and frame interval."""
    metadata: dict[str, Any] = {
        "axes": "TYX",
        "Description": "SIMULATION of an off-axis hologram time-lapse",
        # A fixed identifier keeps the file the same each time it is made.
        "UUID": str(uuid.uuid5(uuid.NAMESPACE_OID, identity)),
    }
    if optics.pixel_um is not None:
        metadata |= {
            "PhysicalSizeX": optics.pixel_um,
            "PhysicalSizeXUnit": "µm",
            "PhysicalSizeY": optics.pixel_um,
            "PhysicalSizeYUnit": "µm",
        }
    if optics.frame_interval_s is not None:
        metadata |= {"TimeIncrement": optics.frame_interval_s, "TimeIncrementUnit": "s"}
    tifffile.imwrite(
        path,
        stack,
        ome=True,
        photometric="minisblack",
        compression="zlib",
        compressionargs={"level": 9},
        predictor=True,
        metadata=metadata,
    )


def write_whole(path: Path, write: Callable[[Path], None]) -> None:
    """Let `write` fill a file under another name, then give it its own."""
    part = path.with_name(f".{path.name}.part{path.suffix}")
    try:
        write(part)
        os.replace(part, path)
    finally:
        part.unlink(missing_ok=True)


def described(value: object) -> Any:
    """Return nested dataclasses as plain values for JSON, each with the name of its class."""
    if is_dataclass(value) and not isinstance(value, type):
        parts = {key: described(getattr(value, key)) for key in asdict(value)}
        return {"class": type(value).__name__, **parts}
    if isinstance(value, (tuple, list)):
        return [described(part) for part in value]
    if isinstance(value, complex):
        return [value.real, value.imag]
    return value


def _write_csv(table: pd.DataFrame, path: Path) -> None:
    table.round(_DECIMALS).to_csv(path, index=False, lineterminator="\n", encoding="utf-8")


def _write_text(text: str, path: Path) -> None:
    path.write_text(text, encoding="utf-8", newline="\n")
