"""Watch a folder while the microscope is being aligned."""

from __future__ import annotations

import json
import time
from pathlib import Path

import typer

from hologyre.analyse import inspect
from hologyre.recipe import Recipe
from hologyre.stacks import StackError, open_stack
from hologyre.stacks.sequence import files_of
from hologyre.survey import SurveyError

_POLL_S = 0.3


def follow(source: str, recipe: Recipe | None, as_json: bool) -> None:
    """Print a line on the newest image each time there is a newer one, until interrupted."""
    seen: tuple[Path, int] | None = None
    typer.echo(f"Watching {source}; stop with Ctrl-C.", err=True)
    while True:
        newest = _newest(source)
        if newest is not None and newest != seen:
            line = _line(newest[0], recipe, as_json)
            if line is not None:
                seen = newest
                typer.echo(line)
        time.sleep(_POLL_S)


def _newest(source: str) -> tuple[Path, int] | None:
    try:
        stamped = [(path, path.stat().st_mtime_ns) for path in files_of(source)]
    except (StackError, FileNotFoundError):
        return None
    return max(stamped, key=lambda entry: entry[1])


def _line(path: Path, recipe: Recipe | None, as_json: bool) -> str | None:
    """Return what the last frame of a file says; None while it is still being written."""
    try:
        stack = open_stack(path)
        found = inspect(stack[-1:], recipe)
    except SurveyError as error:
        return json.dumps({"path": str(path), "fault": str(error)}) if as_json else str(error)
    except StackError:
        return None
    if as_json:
        return json.dumps({"path": str(path), **found.as_dict()})
    return f"{path.name}: {found.summary()}."
