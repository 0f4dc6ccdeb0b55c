"""The result folder: written whole, resumed, read back."""

from __future__ import annotations

from hologyre.results.files import OutputError, csv_bytes, read_csv, write_whole
from hologyre.results.folder import Existing, check_free, default_folder, read_run
from hologyre.results.load import AsFound, Result, load_result
from hologyre.results.run import RunSummary, run

__all__ = [
    "AsFound",
    "Existing",
    "OutputError",
    "Result",
    "RunSummary",
    "check_free",
    "csv_bytes",
    "default_folder",
    "load_result",
    "read_csv",
    "read_run",
    "run",
    "write_whole",
]
