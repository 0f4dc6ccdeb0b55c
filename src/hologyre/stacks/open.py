"""Open a hologram stack, lazily."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from pathlib import Path
from typing import Any

import dask.array as da
import numpy as np
import xarray as xr
from numpy.typing import ArrayLike

from hologyre.stacks.errors import StackError
from hologyre.stacks.frames import FrameFiles
from hologyre.stacks.metadata import Metadata
from hologyre.stacks.ome_zarr import read_zarr
from hologyre.stacks.sequence import files_of, is_zarr
from hologyre.stacks.tiff import TiffLayout, read_layout


def open_stack(source: str | Path | Iterable[str | Path]) -> xr.DataArray:
    """Open hologram frames as a lazy (t, y, x) array, one frame a chunk.

    Nothing but headers is read; each frame is read when it is computed, so that a stack may
    be larger than memory. The array pickles, and may be read from threads, processes or
    other machines that see the same files.

    Parameters
    ----------
    source : path, pattern, folder or list of paths
        A TIFF, BigTIFF, ImageJ or OME-TIFF file (8 to 64 bits a pixel, whole or floating
        point), a zarr array or OME-Zarr image; a pattern such as ``"run1/*.tif"`` or a
        folder, sorted naturally (9 before 10); or a list, whose order is kept. Files of a
        sequence are joined in time. One frame alone is a stack of one.

    Returns
    -------
    xarray.DataArray, dims ("t", "y", "x")
        Coordinate ``t`` holds frame numbers from 0. If there is no time axis, the z axis or
        the plain pages are taken for it. Attributes: ``name``, ``paths`` (tuple of str),
        ``home`` (the file, or the folder of a sequence; str), ``pixel_um`` (pixel size in
        object space as the file gives it, or None), ``frame_interval_s`` (or None), ``bits``
        (bits a pixel in the file), ``notes`` (remarks, tuple of str).

    Raises
    ------
    StackError
        If the images cannot be used; one sentence says which file, why, and what helps.
    """
    files = files_of(source)
    if len(files) == 1 and is_zarr(files[0]):
        frames, metadata = read_zarr(files[0])
        bits = frames.dtype.itemsize * 8
        paths: tuple[Path, ...] = files
    else:
        frames, metadata, bits, paths = _join(files)
    home = _home(files)
    stack = _array(frames, metadata, _name(home), paths, bits)
    stack.attrs["home"] = str(home)
    return stack


def as_stack(holograms: ArrayLike | xr.DataArray, *, name: str = "holograms") -> xr.DataArray:
    """Return a stack as it is, or make one of a (y, x) or (t, y, x) array of numbers.

    Raises
    ------
    StackError
        If the array has other axes or does not hold real numbers.
    """
    if isinstance(holograms, xr.DataArray):
        if holograms.dims != ("t", "y", "x"):
            raise StackError(
                f"{name}: expected the dimensions ('t', 'y', 'x'), got {holograms.dims}."
            )
        return holograms
    values = holograms if isinstance(holograms, da.Array) else np.asarray(holograms)
    if values.ndim not in (2, 3) or values.dtype.kind not in "uif" or 0 in values.shape:
        raise StackError(
            f"{name}: expected a (y, x) or (t, y, x) array of real numbers, got {values.dtype} of "
            f"shape {values.shape}."
        )
    if values.ndim == 2:
        values = values[None]
    frames = da.asarray(values).rechunk((1, *values.shape[1:]))
    return _array(frames, Metadata(), name, (), values.dtype.itemsize * 8)


def _join(files: tuple[Path, ...]) -> tuple[Any, Metadata, int, tuple[Path, ...]]:
    layouts: dict[Path, TiffLayout] = {}
    seen: set[Path] = set()
    for path in files:
        # one file of an OME set stands for all of its files
        if path.resolve() not in seen:
            layouts[path] = read_layout(path)
            seen.update(a.path.resolve() for a in layouts[path].addresses)
    first = layouts[files[0]]
    for path, layout in layouts.items():
        if layout.frame_shape != first.frame_shape:
            raise StackError(
                f"{path}: its frames are {_size(layout)} px and those of {files[0].name} are "
                f"{_size(first)} px; frames of one stack must have the same size."
            )
        if layout.file_dtype != first.file_dtype:
            raise StackError(
                f"{path}: its pixels are {np.dtype(layout.file_dtype).name} and those of "
                f"{files[0].name} are {np.dtype(first.file_dtype).name}; save all frames of one "
                "stack alike."
            )
    addresses = tuple(a for layout in layouts.values() for a in layout.addresses)
    source = FrameFiles(addresses, first.frame_shape, first.file_dtype)
    frames = da.from_array(source, chunks=(1, *first.frame_shape), asarray=False)
    named = {path.resolve(): path for path in reversed([*files, *(a.path for a in addresses)])}
    paths = tuple(reversed(named.values()))
    notes = tuple(dict.fromkeys(n for layout in layouts.values() for n in layout.metadata.notes))
    return (
        frames,
        replace(first.metadata, notes=notes),
        max(x.bits for x in layouts.values()),
        paths,
    )


def _size(layout: TiffLayout) -> str:
    return f"{layout.frame_shape[0]}x{layout.frame_shape[1]}"


def _home(files: tuple[Path, ...]) -> Path:
    """Return what stands for the stack among files: itself, or the folder of a sequence."""
    return files[0].absolute() if len(files) == 1 else files[0].absolute().parent


def _name(home: Path) -> str:
    single = home
    for suffix in (".zarr", ".tif", ".tiff", ".btf", ".ome"):
        if single.name.lower().endswith(suffix):
            single = single.with_name(single.name[: -len(suffix)])
    return single.name or "stack"


def _array(
    frames: Any, metadata: Metadata, name: str, paths: tuple[Path, ...], bits: int
) -> xr.DataArray:
    return xr.DataArray(
        frames,
        dims=("t", "y", "x"),
        coords={"t": np.arange(frames.shape[0], dtype=np.int64)},
        name=name,
        attrs={
            "name": name,
            "paths": tuple(str(p) for p in paths),
            "pixel_um": metadata.pixel_um,
            "frame_interval_s": metadata.frame_interval_s,
            "bits": bits,
            "notes": metadata.notes,
        },
    )
