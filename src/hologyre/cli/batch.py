"""Several stacks in one go: a folder each and a table of what came of them."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from pathlib import Path

from hologyre.results import RunSummary, write_whole

_COUNTS = ("frames", "done", "skipped", "singularities", "tracks", "events")


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
