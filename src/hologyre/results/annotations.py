"""Edits by hand: replayed on what a run finds, and kept with its results."""

from __future__ import annotations

import hashlib
from contextlib import suppress
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from hologyre.analyse import Analysis
from hologyre.edits import NAME, Corrected, Log, found_of, load_log, recount, replay
from hologyre.motion import Motion
from hologyre.results.files import OutputError, write_whole
from hologyre.results.folder import FOUND, TABLES, read_run

_MOST_NAMED = 5


@dataclass(frozen=True, eq=False)
class Annotations:
    """A log of edits, as it was when it was read.

    Parameters
    ----------
    path : Path
    content : bytes
        All of the file.
    log : Log
        What it says.
    """

    path: Path
    content: bytes
    log: Log

    @property
    def checksum(self) -> str:
        """The SHA-256 of the content, as ``sha256:...``."""
        return _checksum(self.content)


def read_annotations(path: str | Path) -> Annotations:
    """Read a log of edits.

    Raises
    ------
    LogError
        If there is none or it cannot be read.
    """
    log = load_log(path)
    return Annotations(Path(path), Path(path).read_bytes(), log)


def correct(found: Analysis, log: Log) -> tuple[Analysis, Corrected]:
    """Replay a log on what was found, as a viewer session does."""
    recipe = found.recipe
    laid_out = found_of(
        found.singularities,
        Motion(found.trajectories, found.events),
        frames=found.measured,
        frame_shape=(found.stack.sizes["y"], found.stack.sizes["x"]),
        region=recipe.stack.region,
        margin_px=recipe.singularities.margin_px,
        max_step_px=recipe.motion.max_step_px,
        max_gap=recipe.motion.max_gap,
    )
    corrected = replay(log.standing, laid_out)
    analysis = replace(
        found,
        singularities=corrected.singularities,
        trajectories=corrected.trajectories,
        events=corrected.events,
        frames=recount(found.frames, corrected),
    )
    return analysis, corrected


def remarks(log: Log, corrected: Corrected) -> tuple[str, ...]:
    """Return what the user should know of a replay, a sentence each."""
    told = [*log.warnings]
    told += [f"Edit {m.number} ({m.edit.kind}): {m.reason}" for m in corrected.misfits]
    against = corrected.contradictions["edit"].unique().tolist()
    if against:
        subject = "1 edit contradicts" if len(against) == 1 else f"{len(against)} edits contradict"
        named = ", ".join(map(str, against[:_MOST_NAMED]))
        more = ", ..." if len(against) > _MOST_NAMED else ""
        told.append(
            f"{subject} the measured winding (number {named}{more}); why is told in {NAME}."
        )
    return tuple(told)


def about(annotations: Annotations, corrected: Corrected) -> dict[str, Any]:
    """Return what run.json says of a replay."""
    return {
        "path": str(annotations.path),
        "checksum": annotations.checksum,
        "edits": len(annotations.log.standing),
        "misfits": len(corrected.misfits),
        "contradictions": int(corrected.contradictions["edit"].nunique()),
    }


def check_log(folder: Path, annotations: Annotations) -> bytes | None:
    """Return the log that is in the folder and may be written over, None if there is none.

    It may be if it is an earlier state of this one, or the copy that a run left.

    Raises
    ------
    OutputError
        If it holds other work by hand.
    """
    there = _log_in(folder)
    if there is None or annotations.content.startswith(there):
        return there
    replayed = (read_run(folder) or {}).get("annotations") or {}
    if replayed.get("checksum") != _checksum(there):
        raise OutputError(
            f"{folder / NAME}: holds other edits than {annotations.path}; replay that log, move it "
            "away, or choose another folder by --out."
        )
    return there


def keep_log(folder: Path, annotations: Annotations, before: bytes | None) -> Path:
    """Keep a copy of the log with the results, beside one that has changed since `before`."""
    path = folder / NAME
    there = _log_in(folder)
    if there is not None and path.samefile(annotations.path):
        return path
    if there not in (None, before):
        path = path.with_stem(f"{path.stem}-replayed")
    return write_whole(path, annotations.content)


def drop_found(folder: Path) -> None:
    """Delete the tables as found that an earlier run kept."""
    for name in TABLES:
        (folder / FOUND / name).unlink(missing_ok=True)
    # whatever else is in there is not ours
    with suppress(OSError):
        (folder / FOUND).rmdir()


def _log_in(folder: Path) -> bytes | None:
    try:
        return (folder / NAME).read_bytes()
    except (FileNotFoundError, NotADirectoryError):
        return None


def _checksum(content: bytes) -> str:
    return f"sha256:{hashlib.sha256(content).hexdigest()}"
