"""Stacks kept as zarr arrays or OME-Zarr images."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import dask.array as da
import zarr

from hologyre.stacks.errors import StackError
from hologyre.stacks.metadata import Metadata

_UM_PER = {"micrometer": 1.0, "nanometer": 1e-3, "millimeter": 1e3, "meter": 1e6}
_S_PER = {"second": 1.0, "millisecond": 1e-3, "microsecond": 1e-6, "minute": 60.0, "hour": 3600.0}


def read_zarr(path: Path) -> tuple[Any, Metadata]:
    """Open a zarr array or the finest level of an OME-Zarr image as a (t, y, x) dask array.

    Raises
    ------
    StackError
        If there is no array of numbers with y and x last and at most one more axis.
    """
    try:
        node = zarr.open(path, mode="r")
    except (ValueError, KeyError, FileNotFoundError, zarr.errors.BaseZarrError) as error:
        raise StackError(f"{path}: this zarr store cannot be opened ({error}).") from error
    metadata = Metadata()
    if isinstance(node, zarr.Group):
        attributes = dict(node.attrs)
        multiscales = dict(attributes.get("ome", attributes)).get("multiscales")
        if not multiscales:
            raise StackError(
                f"{path}: this zarr group is not an OME-Zarr image; name the array inside it."
            )
        finest = multiscales[0]["datasets"][0]
        node, metadata = node[finest["path"]], _metadata(multiscales[0], finest)
        names = [axis["name"] for axis in multiscales[0]["axes"]]
    else:
        names = ["t", "z", "y", "x"][-node.ndim :]
    if node.dtype.kind not in "uif":
        raise StackError(f"{path}: its samples are {node.dtype}; grey numbers are expected.")
    extra = [(name, n) for name, n in zip(names, node.shape, strict=False) if n > 1][:-2]
    if node.ndim < 2 or any(name == "c" for name, _ in extra) or len(extra) > 1:
        raise StackError(
            f"{path}: its shape is {node.shape} ({', '.join(names)}) and one axis of time before y "
            "and x is expected; save one channel and one plane."
        )
    frames = da.from_zarr(node).reshape((-1, *node.shape[-2:]))
    return frames.rechunk((1, *node.shape[-2:])), metadata


def _metadata(multiscale: dict[str, Any], dataset: dict[str, Any]) -> Metadata:
    scale: dict[str, tuple[float, Any]] = {}
    for step in dataset.get("coordinateTransformations", ()):
        if step.get("type") == "scale":
            for axis, value in zip(multiscale["axes"], step["scale"], strict=False):
                scale[axis["name"]] = (float(value), axis.get("unit"))
    y, x, t = (scale.get(name, (0.0, None)) for name in "yxt")
    pixel = x[0] * _UM_PER[x[1]] if x == y and x[1] in _UM_PER else None
    interval = t[0] * _S_PER[t[1]] if t[1] in _S_PER and t[0] > 0 else None
    return Metadata(pixel, interval)
