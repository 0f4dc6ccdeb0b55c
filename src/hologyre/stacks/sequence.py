"""From what a person names (a file, a pattern, a folder, a list) to the files meant."""

from __future__ import annotations

import re
from collections.abc import Iterable
from pathlib import Path

from hologyre.stacks.errors import StackError

TIFF_SUFFIXES = frozenset({".tif", ".tiff", ".btf", ".tf8", ".tf2"})


def natural_key(path: Path) -> tuple[tuple[int, int, str], ...]:
    """Return a key that sorts ``frame9`` before ``frame10``."""
    parts = re.split(r"(\d+)", str(path))
    return tuple((1, int(p), p) if p.isdecimal() else (0, 0, p.lower()) for p in parts)


def is_zarr(path: Path) -> bool:
    """Tell whether the path is a folder that holds a zarr array or group."""
    return path.is_dir() and any(
        (path / name).exists() for name in ("zarr.json", ".zgroup", ".zarray")
    )


def files_of(source: str | Path | Iterable[str | Path]) -> tuple[Path, ...]:
    """Return the files a source stands for, in the order of their frames.

    Parameters
    ----------
    source : path, pattern or list of paths
        A file; a pattern with ``*``, ``?`` or ``[...]``; a folder of TIFF images; or a
        list of files, whose order is kept. Patterns and folders are sorted naturally.

    Raises
    ------
    StackError
        If nothing is there.
    """
    if not isinstance(source, str | Path):
        listed = tuple(Path(entry) for entry in source)
        if not listed:
            raise StackError("The list of images is empty; name at least one file.")
        for path in listed:
            _require(path)
        return listed
    path = Path(source)
    if path.exists():
        return _folder(path) if path.is_dir() and not is_zarr(path) else (path,)
    if re.search(r"[*?\[]", str(source)):
        found = sorted((p for p in _glob(path) if p.is_file()), key=natural_key)
        if not found:
            raise StackError(f"{source}: no file matches this pattern; check the folder's name.")
        return tuple(found)
    _require(path)
    return (path,)


def _require(path: Path) -> None:
    if not path.exists():
        raise StackError(f"{path}: there is no such file; check the name.")


def _glob(pattern: Path) -> Iterable[Path]:
    if pattern.is_absolute():
        return Path(pattern.anchor).glob(str(pattern.relative_to(pattern.anchor)))
    return Path().glob(str(pattern))


def _folder(folder: Path) -> tuple[Path, ...]:
    found = [p for p in folder.iterdir() if p.is_file() and p.suffix.lower() in TIFF_SUFFIXES]
    if not found:
        raise StackError(
            f"{folder}: this folder holds no TIFF image; name the image file, or a pattern such "
            f"as '{folder}/*.tif'."
        )
    return tuple(sorted(found, key=natural_key))
