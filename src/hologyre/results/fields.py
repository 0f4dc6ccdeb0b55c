"""Complex fields kept as zarr, with what is needed to evaluate them anywhere."""

from __future__ import annotations

import shutil
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, overload

import numpy as np
import zarr

from hologyre.grid import Field
from hologyre.results.description import describe, field_from


def write_fields(path: Path, fields: Sequence[Field], frames: Sequence[int]) -> Path:
    """Write fields as a zarr group, whole or not at all; return its path.

    ``fields`` is (t, y, x) complex, one frame a chunk, kept on the band; ``frame`` the
    stack's frame numbers; the group's attributes are those of the field's grid. All fields
    must share them, as those of one recipe do.
    """
    first = fields[0]
    temporary = path.with_name(f".{path.name}.new")
    shutil.rmtree(temporary, ignore_errors=True)
    group = zarr.create_group(temporary, attributes=describe(first))
    group.create_array("frame", data=np.array(frames, dtype=np.int64))
    values = group.create_array(
        "fields",
        shape=(len(fields), *first.shape),
        chunks=(1, *first.shape),
        dtype=first.values.dtype,
        dimension_names=("t", "y", "x"),
    )
    for slot, field in enumerate(fields):
        values[slot] = field.values
    shutil.rmtree(path, ignore_errors=True)
    temporary.rename(path)
    return path


@dataclass(frozen=True, eq=False)
class KeptFields(Sequence[Field]):
    """Fields of a result folder, each read when asked for."""

    frames: tuple[int, ...]
    array: Any
    about: dict[str, Any]

    def __len__(self) -> int:
        return len(self.frames)

    @overload
    def __getitem__(self, index: int) -> Field: ...
    @overload
    def __getitem__(self, index: slice) -> list[Field]: ...
    def __getitem__(self, index: int | slice) -> Field | list[Field]:
        if isinstance(index, slice):
            return [self[i] for i in range(*index.indices(len(self)))]
        return field_from(np.asarray(self.array[index]), self.about)


def read_fields(path: Path) -> KeptFields:
    """Open fields written by `write_fields`."""
    group = zarr.open_group(path, mode="r")
    frames = tuple(int(n) for n in np.asarray(group["frame"]))
    return KeptFields(frames, group["fields"], dict(group.attrs))
