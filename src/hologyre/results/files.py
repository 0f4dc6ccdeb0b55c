"""Files written whole or not at all, and tables as CSV that reads back."""

from __future__ import annotations

import io
import os
import secrets
from pathlib import Path

import pandas as pd

from hologyre.tables import Column, conform


class OutputError(ValueError):
    """A result folder that cannot or must not be written; one sentence that says why."""


def write_whole(path: Path, content: bytes) -> Path:
    """Write a file by way of a temporary one, so that it is never seen half written.

    Returns
    -------
    Path
        Where it was written: `path`, or a name beside it if another program holds `path` open.
    """
    temporary = path.with_name(f".{path.name}.{secrets.token_hex(4)}")
    try:
        temporary.write_bytes(content)
        for target in (path, *(path.with_stem(f"{path.stem}-new{n}") for n in ("", 2, 3, 4))):
            try:
                os.replace(temporary, target)
            except PermissionError:
                continue
            return target
        raise OutputError(
            f"{path}: another program holds this file and its newer copies open; close it and run "
            "again with --resume."
        )
    finally:
        temporary.unlink(missing_ok=True)


def csv_bytes(table: pd.DataFrame, columns: tuple[Column, ...]) -> bytes:
    """Return a table as UTF-8 CSV: comma, dot, LF, floats that read back bit for bit."""
    text = io.StringIO()
    conform(table, columns).to_csv(text, index=False, lineterminator="\n")
    return text.getvalue().encode("utf-8")


def read_csv(path: Path, columns: tuple[Column, ...]) -> pd.DataFrame:
    """Read a table written by `csv_bytes`.

    Raises
    ------
    ValueError
        If the file has other columns.
    """
    table = pd.read_csv(
        path,
        dtype={c.name: c.dtype for c in columns},
        keep_default_na=False,
        na_values={c.name: [""] for c in columns if c.dtype != "str"},
    )
    return conform(table, columns)


def require_writable(folder: Path) -> None:
    """Raise OutputError unless files can be written in the folder, which is made if missing."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
        probe = folder / f".probe.{secrets.token_hex(4)}"
        probe.write_bytes(b"")
        probe.unlink()
    except OSError as error:
        raise OutputError(
            f"{folder}: results cannot be written there ({error.strerror}); choose another folder "
            "with --out."
        ) from error
