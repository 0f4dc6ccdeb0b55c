"""Frames that are finished, kept while the rest is under way."""

from __future__ import annotations

import io
import json
import shutil
from collections.abc import Iterator, Sequence
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any, Literal, overload

import numpy as np
import pandas as pd

from hologyre.analyse import FrameResult
from hologyre.grid import Field
from hologyre.results.description import describe, field_from
from hologyre.results.files import write_whole
from hologyre.tables import SINGULARITIES, conform

NAME = ".partial"


@dataclass(frozen=True)
class Job:
    """What a run is: another one must not be continued with its frames."""

    checksum: str
    recipe: str
    version: str


@dataclass(frozen=True)
class FrameStore:
    """A folder with one file for each finished frame."""

    folder: Path

    @classmethod
    def begin(cls, folder: Path, job: Job) -> FrameStore:
        """Make an empty store for a job, in place of any other."""
        shutil.rmtree(folder, ignore_errors=True)
        folder.mkdir(parents=True)
        write_whole(folder / "job.json", json.dumps(asdict(job), indent=1).encode())
        return cls(folder)

    @property
    def job(self) -> Job | None:
        """The job the frames belong to; None if there is no store."""
        try:
            return Job(**json.loads((self.folder / "job.json").read_text(encoding="utf-8")))
        except (OSError, ValueError, TypeError):
            return None

    def frames(self) -> tuple[int, ...]:
        """Return the numbers of the frames kept, sorted."""
        return tuple(sorted(int(p.stem) for p in self.folder.glob("[0-9]*.npz")))

    def put(self, result: FrameResult) -> None:
        """Keep a frame."""
        columns = {
            f"table.{c.name}": result.singularities[c.name].to_numpy(
                dtype="U16" if c.dtype == "str" else c.dtype
            )
            for c in SINGULARITIES
        }
        about: dict[str, Any] = {
            "frame": result.frame,
            "status": result.status,
            "reason": result.reason,
            "row": result.row,
        }
        if result.field is not None:
            columns["field"] = result.field.values
            about["field"] = describe(result.field)
        columns["about"] = np.frombuffer(json.dumps(about).encode(), np.uint8)
        packed = io.BytesIO()
        np.savez(packed, allow_pickle=False, **columns)
        write_whole(self.folder / f"{result.frame:08d}.npz", packed.getvalue())

    def get(self, frame: int) -> FrameResult:
        """Return a frame as it was put in."""
        with np.load(self.folder / f"{frame:08d}.npz", allow_pickle=False) as kept:
            about = json.loads(kept["about"].tobytes())
            table = pd.DataFrame({c.name: kept[f"table.{c.name}"] for c in SINGULARITIES})
            field = field_from(kept["field"], about["field"]) if "field" in about else None
        status: Literal["done", "skipped"] = about["status"]
        return FrameResult(
            about["frame"], status, about["reason"], field, conform(table, SINGULARITIES),
            about["row"],
        )  # fmt: skip

    def field(self, frame: int) -> Field:
        """Return the field of a frame alone.

        Raises
        ------
        ValueError
            If the frame was skipped and has none.
        """
        with np.load(self.folder / f"{frame:08d}.npz", allow_pickle=False) as kept:
            about = json.loads(kept["about"].tobytes())
            if "field" not in about:
                raise ValueError(f"frame: {frame} was skipped: {about['reason']}")
            return field_from(kept["field"], about["field"])

    def remove(self) -> None:
        """Delete the store."""
        shutil.rmtree(self.folder, ignore_errors=True)


@dataclass(frozen=True)
class StoredFields(Sequence[Field]):
    """The fields of some frames of a store, each read when asked for."""

    frames: tuple[int, ...]
    store: FrameStore

    def __len__(self) -> int:
        return len(self.frames)

    @overload
    def __getitem__(self, index: int) -> Field: ...
    @overload
    def __getitem__(self, index: slice) -> StoredFields: ...
    def __getitem__(self, index: int | slice) -> Field | StoredFields:
        if isinstance(index, slice):
            return StoredFields(self.frames[index], self.store)
        return self.store.field(self.frames[index])

    def __iter__(self) -> Iterator[Field]:
        return (self.store.field(frame) for frame in self.frames)
