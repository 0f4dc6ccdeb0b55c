"""Several stacks in one go: a folder each and a table of what came of them."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from contextlib import nullcontext
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import typer
import xarray as xr

from hologyre.analyse import connect
from hologyre.cli.faults import DONE, INTERRUPTED, UNUSABLE, complain, is_expected
from hologyre.cli.progress import Progress
from hologyre.recipe import Recipe
from hologyre.report import overview_png
from hologyre.results import Existing, RunSummary, default_folder, run, write_whole
from hologyre.stacks import StackError, open_stack

if TYPE_CHECKING:
    from distributed import Client

_COUNTS = ("frames", "done", "skipped", "singularities", "tracks", "events")

# from here on single frames are more likely to be one time-lapse
_MANY = 3

Failures = list[tuple[str, str]]


@dataclass(frozen=True)
class Options:
    """What holds for all stacks of a command."""

    existing: Existing
    workers: int
    scheduler: str | None
    keep_fields: bool
    annotations: Path | None = None


def run_all(
    sources: Sequence[str], out: Path | None, recipe: Recipe | None, options: Options
) -> int:
    """Run stack after stack and return the command's status.

    One stack that cannot be used must not cost the others: it is told, listed and passed
    over. Alone, its error is raised.
    """
    opened, failures = _open(sources)
    if len(opened) > _MANY and all(stack.sizes["t"] == 1 for stack in opened):
        complain(
            f"{len(opened)} files of one frame each are taken for as many stacks; quote a pattern, "
            "as 'run1/*.tif', to make them one."
        )
    places = [default_folder(stack) for stack in opened]
    if out is not None:
        names = [stack.attrs["name"] for stack in opened]
        places = [out] if len(sources) == 1 else folders(names, out)
    summaries: list[RunSummary] = []
    with nullcontext() if options.scheduler is None else connect(options.scheduler) as client:
        for stack, folder in zip(opened, places, strict=True):
            try:
                summary = _run(stack, folder, recipe, options, client)
            except ValueError as error:
                if len(sources) == 1 or not is_expected(error):
                    raise
                failures.append((stack.attrs["name"], str(error)))
                complain(str(error))
                continue
            summaries.append(summary)
            if summary.status == "interrupted":
                break
    if len(sources) > 1 and out is not None and summaries:
        typer.echo(f"summary: {write_summary(out, summaries, failures)}")
    if summaries and summaries[-1].status == "interrupted":
        return INTERRUPTED
    return UNUSABLE if failures else DONE


def _open(sources: Sequence[str]) -> tuple[list[xr.DataArray], Failures]:
    opened: list[xr.DataArray] = []
    failures: Failures = []
    for source in sources:
        try:
            opened.append(open_stack(source))
        except StackError as error:
            if len(sources) == 1:
                raise
            failures.append((source, str(error)))
            complain(str(error))
    return opened, failures


def _run(
    stack: xr.DataArray,
    folder: Path,
    recipe: Recipe | None,
    options: Options,
    client: Client | None,
) -> RunSummary:
    with Progress(stack.attrs["name"]) as progress:
        summary = run(
            stack,
            folder,
            recipe,
            annotations=options.annotations,
            existing=options.existing,
            workers=options.workers,
            client=client,
            keep_fields=options.keep_fields,
            progress=progress,
            draw=overview_png,
        )
    typer.echo(tell(summary))
    for warning in summary.warnings:
        complain(f"{summary.name}: {warning}")
    return summary


def folders(names: Sequence[str], out: Path) -> list[Path]:
    """Return a folder under `out` for each stack; stacks of one name are numbered."""
    made: list[Path] = []
    for name in names:
        folder, number = out / f"{name}.hologyre", 1
        while folder in made:
            number += 1
            folder = out / f"{name}-{number}.hologyre"
        made.append(folder)
    return made


def write_summary(
    out: Path, summaries: Sequence[RunSummary], failures: Sequence[tuple[str, str]]
) -> Path:
    """Write summary.csv, one row a stack, and return where it is."""
    text = io.StringIO()
    table = csv.writer(text, lineterminator="\n")
    table.writerow(["stack", "status", *_COUNTS, "folder", "remark"])
    for summary in summaries:
        counts = [getattr(summary, name) for name in _COUNTS]
        remark = " ".join(summary.warnings)
        table.writerow([summary.name, summary.status, *counts, summary.folder.name, remark])
    for name, why in failures:
        table.writerow([name, "failed", *([""] * len(_COUNTS)), "", why])
    out.mkdir(parents=True, exist_ok=True)
    return write_whole(out / "summary.csv", text.getvalue().encode("utf-8"))


def tell(summary: RunSummary) -> str:
    """Return what a run made, in a few lines."""
    counts = (
        f"{summary.done} of {summary.frames} frames measured: {summary.singularities} "
        f"singularities, {summary.tracks} tracks, {summary.events} events"
    )
    if summary.skipped:
        counts += f"; {summary.skipped} frames skipped"
    lines = [f"{summary.name}: {counts}."]
    for label, name in (("trajectories", "trajectories.csv"), ("overview", "overview.png")):
        if name in summary.files:
            lines.append(f"  {label}: {summary.files[name]}")
    return "\n".join(lines)
