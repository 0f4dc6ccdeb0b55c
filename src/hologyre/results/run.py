"""A whole run: from a stack to a folder of results."""

from __future__ import annotations

import json
import platform
import time
from collections.abc import Callable
from contextlib import suppress
from dataclasses import dataclass
from importlib import metadata
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

import pandas as pd
import xarray as xr

from hologyre.analyse import (
    Analysis,
    Plan,
    frame_table,
    inspect_plan,
    iter_frames,
    join_singularities,
    link,
    plan,
)
from hologyre.edits import NAME as LOG
from hologyre.recipe import Recipe, recipe_text
from hologyre.results.annotations import (
    about,
    check_log,
    correct,
    drop_found,
    read_annotations,
    remarks,
)
from hologyre.results.files import require_writable, write_whole
from hologyre.results.folder import Existing, check_free, enter, finished
from hologyre.results.store import FrameStore, Job, StoredFields
from hologyre.results.writing import Draw, write_found, write_results
from hologyre.stacks import fingerprint
from hologyre.survey import SurveyError, survey

if TYPE_CHECKING:
    from distributed import Client

Progress = Callable[[int, int], None]
Status = Literal["done", "interrupted"]

_PACKAGES = ("numpy", "scipy", "numba", "pandas", "tifffile", "dask")


@dataclass(frozen=True)
class RunSummary:
    """What a run made, in numbers.

    Parameters
    ----------
    folder : Path
        Where the results are.
    name : str
        The stack's name.
    status : "done" or "interrupted"
    frames, done, skipped : int
        Frames asked for, measured, and left out.
    singularities, tracks, events : int
        Rows of the tables.
    warnings : tuple of str
        What the user should know.
    files : dict
        From the name of each file to where it was written.
    """

    folder: Path
    name: str
    status: Status
    frames: int
    done: int
    skipped: int
    singularities: int
    tracks: int
    events: int
    warnings: tuple[str, ...]
    files: dict[str, Path]


def run(
    stack: xr.DataArray,
    folder: str | Path,
    recipe: Recipe | None = None,
    *,
    annotations: str | Path | None = None,
    existing: Existing = "refuse",
    workers: int = 1,
    client: Client | None = None,
    keep_fields: bool = False,
    progress: Progress | None = None,
    draw: Draw | None = None,
) -> RunSummary:
    """Analyse a stack and write the results into a folder.

    Every finished frame is kept at once, so that a run that ends before its time can be
    resumed and then writes the same files. KeyboardInterrupt ends it early: what is finished
    is linked and written, with the status "interrupted".

    Parameters
    ----------
    stack : DataArray from `open_stack`
        Holograms.
    folder : path
        Made if missing.
    recipe : Recipe, optional
        What it leaves "auto", or all, is surveyed.
    annotations : path, optional
        Log of edits by hand. They are replayed on what is found, as a viewer session does; the
        tables as found are kept too, in the subfolder ``found``, and so is the log.
    existing : "refuse", "replace" or "resume"
        What to do about a run that is in the folder already.
    workers, client
        As for `iter_frames`.
    keep_fields : bool
        Write the complex fields too, as ``fields.zarr``.
    progress : callable, optional
        Called with (frames finished, frames in all).
    draw : callable, optional
        Makes the bytes of ``overview.png`` of the Analysis.

    Returns
    -------
    RunSummary

    Raises
    ------
    OutputError
        If the folder cannot be written, holds another run, or holds other edits by hand.
    LogError
        If the log of edits cannot be read. Nothing is written then.
    SurveyError, RecipeError, StackError
        If the input cannot be used. Nothing is written then.
    """
    began = time.perf_counter()
    folder = Path(folder)
    by_hand = None if annotations is None else read_annotations(annotations)
    check_free(folder, existing)
    log_before = None if by_hand is None else check_log(folder, by_hand)
    planned = plan(stack, survey(stack, recipe))
    job = Job(
        fingerprint(stack.attrs["paths"]), recipe_text(planned.recipe), metadata.version("hologyre")
    )
    annotated = None if by_hand is None else by_hand.checksum
    kept = finished(folder, job, annotated) if existing == "resume" else None
    if kept is not None and (not keep_fields or "fields.zarr" in kept["files"]):
        return _recall(folder, kept)
    require_writable(folder)
    store = enter(folder, job, existing, annotated)
    surveyed = time.perf_counter()
    status = _measure(planned, store, workers, client, progress)
    if status == "interrupted" and not store.frames():
        _leave(folder, store)
        raise KeyboardInterrupt
    measured = time.perf_counter()
    found = _collect(planned, store)
    if not found.fields and status == "done":
        _leave(folder, store)
        reason = found.frames["reason"].value_counts().index[0]
        raise SurveyError(
            f"{stack.attrs['name']}: none of its {len(found.frames)} frames could be used "
            f"({reason}); check the recording and the recipe's carrier."
        )
    analysis, told, replayed = found, _unused_log(folder), None
    if by_hand is not None:
        analysis, corrected = correct(found, by_hand.log)
        told, replayed = remarks(by_hand.log, corrected), about(by_hand, corrected)
    linked = time.perf_counter()
    warnings = (*_warnings(planned, analysis, status), *told)
    files, moved = write_results(folder, analysis, keep_fields, draw)
    if by_hand is not None:
        more, aside = write_found(folder, found, by_hand, log_before)
        files, moved = files | more, moved + aside
    else:
        drop_found(folder)
    written = time.perf_counter()
    seconds = {
        "survey": surveyed - began,
        "frames": measured - surveyed,
        "motion": linked - measured,
        "writing": written - linked,
    }
    summary = _summary(folder, analysis, status, (*warnings, *moved), files)
    described = _about(summary, job, planned, replayed, seconds)
    files["run.json"] = write_whole(folder / "run.json", described)
    if status == "done":
        store.remove()
    return summary


def _leave(folder: Path, store: FrameStore) -> None:
    """Remove the store, and the folder if nothing else is in it."""
    store.remove()
    with suppress(OSError):
        folder.rmdir()


def _measure(
    planned: Plan,
    store: FrameStore,
    workers: int,
    client: Client | None,
    progress: Progress | None,
) -> Status:
    """Measure and keep every frame that is not kept yet."""
    kept = set(store.frames())
    todo = [frame for frame in planned.all_frames if frame not in kept]
    total, finished = len(planned.all_frames), len(planned.all_frames) - len(todo)
    results = iter_frames(planned, frames=todo, workers=workers, client=client)
    try:
        if progress is not None:
            progress(finished, total)
        for result in results:
            store.put(result)
            finished += 1
            if progress is not None:
                progress(finished, total)
    except KeyboardInterrupt:
        return "interrupted"
    finally:
        results.close()
    return "done"


def _collect(planned: Plan, store: FrameStore) -> Analysis:
    """Link what is kept; a resumed run reads the same frames as one that was not stopped."""
    tables: list[pd.DataFrame] = []
    rows: list[dict[str, Any]] = []
    done: list[int] = []
    for frame in store.frames():
        result = store.get(frame)
        tables.append(result.singularities)
        rows.append(result.row)
        if result.status == "done":
            done.append(frame)
    singularities = join_singularities(tables)
    fields = StoredFields(tuple(done), store)
    motion = link(planned, singularities, fields, done)
    return Analysis(
        planned.stack,
        planned.recipe,
        fields,
        singularities,
        motion.trajectories,
        motion.events,
        frame_table(rows, motion),
    )


def _warnings(planned: Plan, analysis: Analysis, status: Status) -> tuple[str, ...]:
    frames = analysis.frames
    told = []
    if analysis.measured:
        found = inspect_plan(planned, analysis.measured[len(analysis.measured) // 2])
        told += [f"{caution[:1].upper()}{caution[1:]}." for caution in found.warnings]
    skipped = frames[(frames["status"] == "skipped") & ~frames["frame"].isin(planned.left_out)]
    for reason, group in skipped.groupby("reason", sort=False):
        told.append(f"{_frames(group['frame'].tolist())} skipped: {reason}.")
    odd = frames[~frames["audit"].isin(("", "ok"))]
    if len(odd):
        first = odd.iloc[0]
        told.append(
            f"{_frames(odd['frame'].tolist())}: not everything adds up (frame {first['frame']}: "
            f"{first['audit']}); see the column audit of frames.csv."
        )
    if status == "interrupted":
        told.append(
            f"Interrupted after {len(frames)} of {len(planned.all_frames)} frames; go on by "
            "--resume."
        )
    return tuple(told)


def _frames(numbers: list[int]) -> str:
    shown = ", ".join(map(str, numbers[:5]))
    if len(numbers) == 1:
        return f"Frame {shown}"
    return f"Frames {shown}" + (f" and {len(numbers) - 5} more" if len(numbers) > 5 else "")


def _unused_log(folder: Path) -> tuple[str, ...]:
    if not (folder / LOG).is_file():
        return ()
    return (f"The edits by hand in {LOG} are not in the tables; replay them by --annotations.",)


def _summary(
    folder: Path,
    analysis: Analysis,
    status: Status,
    warnings: tuple[str, ...],
    files: dict[str, Path],
) -> RunSummary:
    return RunSummary(
        folder,
        str(analysis.stack.attrs["name"]),
        status,
        len(analysis.frames),
        len(analysis.fields),
        len(analysis.frames) - len(analysis.fields),
        len(analysis.singularities),
        int(analysis.trajectories["track"].nunique()),
        len(analysis.events),
        warnings,
        files,
    )


def _recall(folder: Path, kept: dict[str, Any]) -> RunSummary:
    """Return the summary of a run that was finished before."""
    files = {name: folder / written for name, written in kept["files"].items()}
    files["run.json"] = folder / "run.json"
    name = kept["input"]["name"]
    return RunSummary(
        folder, name, "done", **kept["counts"], warnings=tuple(kept["warnings"]), files=files
    )


def _about(
    summary: RunSummary,
    job: Job,
    planned: Plan,
    replayed: dict[str, Any] | None,
    seconds: dict[str, float],
) -> bytes:
    counts = ("frames", "done", "skipped", "singularities", "tracks", "events")
    told = {
        "status": summary.status,
        "hologyre": job.version,
        "versions": {
            "python": platform.python_version(),
            **{name: metadata.version(name) for name in _PACKAGES},
        },
        "platform": platform.platform(),
        "input": {
            "name": summary.name,
            "paths": list(planned.stack.attrs["paths"]),
            "checksum": job.checksum,
            "shape": list(planned.stack.shape),
            "dtype": str(planned.stack.dtype),
        },
        "annotations": replayed,
        "counts": {name: getattr(summary, name) for name in counts},
        "files": {
            name: path.relative_to(summary.folder).as_posix()
            for name, path in summary.files.items()
        },
        "seconds": {name: round(value, 3) for name, value in seconds.items()},
        "warnings": list(summary.warnings),
    }
    return (json.dumps(told, indent=2, ensure_ascii=False) + "\n").encode()
