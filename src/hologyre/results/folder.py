"""What is in a result folder, and whether a run may write there."""

from __future__ import annotations

import difflib
import json
import shutil
from pathlib import Path
from typing import Any, Literal

import xarray as xr

from hologyre.results.files import OutputError
from hologyre.results.store import NAME, FrameStore, Job

TABLES = ("trajectories.csv", "singularities.csv", "events.csv", "frames.csv")
FOUND = "found"
"""Subfolder of the tables without the edits by hand, where a run replays some."""

FILES = (*TABLES, "recipe.toml", "overview.png", "fields.zarr", "run.json")

Existing = Literal["refuse", "replace", "resume"]


def default_folder(stack: xr.DataArray) -> Path:
    """Return the folder beside an opened stack that bears its name and ``.hologyre``."""
    return Path(stack.attrs["home"]).with_name(f"{stack.attrs['name']}.hologyre")


def read_run(folder: Path) -> dict[str, Any] | None:
    """Return the folder's run.json, or None if there is none that can be read."""
    try:
        run = json.loads((folder / "run.json").read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return None
    return run if isinstance(run, dict) else None


def check_free(folder: Path, existing: Existing) -> None:
    """Raise OutputError if the folder holds another run and nothing was said about it.

    Nothing is made or changed.
    """
    if folder.exists() and not folder.is_dir():
        raise OutputError(f"{folder}: this is a file; choose another folder with --out.")
    present = [name for name in (*FILES, NAME) if (folder / name).exists()]
    if not present or existing != "refuse":
        return
    if NAME in present:
        count = len(FrameStore(folder / NAME).frames())
        raise OutputError(
            f"{folder}: holds a run that was interrupted after {count} frames; go on with it by "
            "--resume or begin anew by --replace."
        )
    raise OutputError(
        f"{folder}: holds the results of another run; write over them by --replace or choose "
        "another folder by --out."
    )


def enter(folder: Path, job: Job, existing: Existing, annotated: str | None = None) -> FrameStore:
    """Return the store of frames to work with: what is there for this job, or a new one.

    Frames do not depend on edits by hand: a run may be resumed with others.

    Raises
    ------
    OutputError
        If frames are there that belong to other images, another recipe or another version.
    """
    store = FrameStore(folder / NAME)
    kept = store.job
    if existing == "resume" and kept is not None:
        if kept.checksum != job.checksum:
            raise OutputError(
                f"{folder}: the run there was begun with other images; resume it with those, or "
                "begin anew by --replace."
            )
        if kept.recipe != job.recipe:
            raise OutputError(
                f"{folder}: the run there was begun with another recipe "
                f"({_difference(kept.recipe, job.recipe)}); resume it with that one, or begin "
                "anew by --replace."
            )
        if kept.version != job.version:
            raise OutputError(
                f"{folder}: the run there was begun with hologyre {kept.version} and this is "
                f"{job.version}; begin anew by --replace."
            )
        return store
    done = finished(folder, job, annotated)
    if existing == "resume" and done is None and read_run(folder) is not None:
        raise OutputError(
            f"{folder}: holds the finished results of other images or another recipe, or with "
            "other edits by hand; write over them by --replace or choose another folder by --out."
        )
    # from here on the folder does not hold a finished run
    (folder / "run.json").unlink(missing_ok=True)
    shutil.rmtree(folder / "fields.zarr", ignore_errors=True)
    return FrameStore.begin(store.folder, job)


def finished(folder: Path, job: Job, annotated: str | None = None) -> dict[str, Any] | None:
    """Return the folder's run.json if it holds the finished results of this very job.

    Parameters
    ----------
    folder : Path
    job : Job
    annotated : str, optional
        Checksum of the log of edits that is replayed.
    """
    run = read_run(folder)
    if run is None or run["status"] != "done" or (folder / NAME).exists():
        return None
    try:
        recipe = (folder / run["files"]["recipe.toml"]).read_text(encoding="utf-8")
    except OSError:
        return None
    same = Job(run["input"]["checksum"], recipe, run["hologyre"]) == job
    replayed = (run.get("annotations") or {}).get("checksum")
    return run if same and replayed == annotated else None


def _difference(before: str, now: str) -> str:
    lines = [
        line
        for line in difflib.ndiff(before.splitlines(), now.splitlines())
        if line[:2] in ("- ", "+ ")
    ]
    there = next((line[2:] for line in lines if line[0] == "-"), "")
    here = next((line[2:] for line in lines if line[0] == "+"), "")
    return f"there {there or 'nothing'}, here {here or 'nothing'}"
