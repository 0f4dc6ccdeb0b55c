"""Where the frames of a TIFF lie, and whether all of them are there."""

from __future__ import annotations

import struct
from collections import Counter
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import tifffile

from hologyre.stacks.errors import StackError
from hologyre.stacks.frames import FrameAddress
from hologyre.stacks.metadata import Metadata, read_metadata

_AXIS_WORDS = {
    "T": "time", "Z": "z", "C": "channel", "I": "image", "Q": "image", "S": "colour", "R": "tile",
    "P": "position", "H": "phase", "A": "angle", "L": "wavelength", "E": "exposure",
}  # fmt: skip
_TRUNCATED = (
    "the file is cut short: {what}; copy it again from where it was recorded, or let the "
    "recording finish."
)


@dataclass(frozen=True)
class TiffLayout:
    """Frames of one TIFF file, in order, with what the file says about them."""

    addresses: tuple[FrameAddress, ...]
    frame_shape: tuple[int, int]
    file_dtype: str
    bits: int
    metadata: Metadata


def read_layout(path: Path) -> TiffLayout:
    """Find the frames of a TIFF, ImageJ, OME-TIFF or BigTIFF file without reading them.

    Raises
    ------
    StackError
        If the file is empty, not a TIFF, cut short, in colour, or holds more than one axis
        besides y and x.
    """
    size = path.stat().st_size
    if size == 0:
        raise StackError(f"{path}: the file is empty (0 bytes); copy or export it again.")
    try:
        with tifffile.TiffFile(path) as tif:
            return _layout(tif, path, size)
    except StackError:
        raise
    except tifffile.TiffFileError as error:
        raise StackError(_unreadable(path, error)) from error
    except (struct.error, IndexError, KeyError, TypeError, ValueError) as error:
        what = _TRUNCATED.format(what="its page directory cannot be read")
        raise StackError(f"{path}: {what}") from error


def _unreadable(path: Path, error: Exception) -> str:
    with path.open("rb") as file:
        start = file.read(16)
    if start[:4] in (b"II*\0", b"MM\0*", b"II+\0", b"MM\0+"):
        return f"{path}: " + _TRUNCATED.format(what="its page directory cannot be read")
    return (
        f"{path}: this is not a TIFF file (it begins with {start!r}); save the images as TIFF, "
        "ImageJ TIFF or OME-TIFF."
    )


def _layout(tif: tifffile.TiffFile, path: Path, size: int) -> TiffLayout:
    directories = _directories(tif, path, size)
    for page in tif.pages:
        _require_whole(page, path, size)
    first = tif.pages.first
    if first.samplesperpixel > 1 or first.photometric == tifffile.PHOTOMETRIC.RGB:
        raise StackError(
            f"{path}: holds colour frames ({first.samplesperpixel} samples a pixel) and a hologram "
            "has one; keep the colour of the laser, for example in ImageJ with Image > Color > "
            "Split Channels, and save it as a grey TIFF."
        )
    series = _one_series(tif, path)
    _one_axis(series, path)
    frame_shape = (int(series.shape[-2]), int(series.shape[-1]))
    count = int(np.prod(series.shape[:-2], dtype=np.int64))
    file_dtype = np.dtype(series.dtype).newbyteorder(tif.byteorder)
    _require_number(file_dtype, path)
    frame_bytes = frame_shape[0] * frame_shape[1] * file_dtype.itemsize
    if series.dataoffset is not None and len(series.pages) < count:
        # one page stands for many frames that follow each other
        if series.dataoffset + count * frame_bytes > size:
            what = f"it should hold {count} frames and ends before the last"
            raise StackError(f"{path}: {_TRUNCATED.format(what=what)}")
        addresses = tuple(
            FrameAddress(path, series.dataoffset + n * frame_bytes, True) for n in range(count)
        )
    else:
        addresses = tuple(_address(page, path, frame_bytes) for page in series.pages)
    _require_promised(tif, path, len(addresses), len(directories))
    bits = first.bitspersample if isinstance(first.bitspersample, int) else file_dtype.itemsize * 8
    return TiffLayout(addresses, frame_shape, file_dtype.str, int(bits), read_metadata(tif))


def _directories(tif: tifffile.TiffFile, path: Path, size: int) -> list[int]:
    """Follow the chain of page directories; a link beyond the end means a file cut short."""
    form, handle = tif.tiff, tif.filehandle
    handle.seek(form.offsetsize if form.offsetsize == 4 else 8)
    found: list[int] = []
    (offset,) = struct.unpack(form.offsetformat, handle.read(form.offsetsize))
    while offset:
        handle.seek(offset)
        counted = handle.read(form.tagnosize) if offset < size else b""
        if len(counted) == form.tagnosize:
            (tags,) = struct.unpack(form.tagnoformat, counted)
            handle.seek(offset + form.tagnosize + tags * form.tagsize)
            link = handle.read(form.offsetsize)
        else:
            link = b""
        if len(link) < form.offsetsize or offset in found[-1:]:
            what = f"page {len(found) + 1} lies beyond its end"
            raise StackError(f"{path}: {_TRUNCATED.format(what=what)}")
        found.append(offset)
        (offset,) = struct.unpack(form.offsetformat, link)
    return found


def _require_whole(page: Any, path: Path, size: int) -> None:
    offsets, counts = page.dataoffsets, page.databytecounts
    if not offsets or len(offsets) != len(counts):
        raise StackError(f"{path}: page {page.index + 1} says not where its pixels are; "
                         "export the stack again.")  # fmt: skip
    if max(o + c for o, c in zip(offsets, counts, strict=True)) > size:
        what = f"the pixels of page {page.index + 1} lie beyond its end"
        raise StackError(f"{path}: {_TRUNCATED.format(what=what)}")


def _one_series(tif: tifffile.TiffFile, path: Path) -> Any:
    if len(tif.series) == 1:
        return tif.series[0]
    sizes = Counter(f"{s.shape[-2]}x{s.shape[-1]}" for s in tif.series)
    if len(sizes) > 1:
        listed = ", ".join(sizes)
        raise StackError(
            f"{path}: holds frames of different sizes ({listed} px); save the hologram's frames "
            "alone."
        )
    raise StackError(
        f"{path}: holds {len(tif.series)} separate image series; save the one wanted as a file of "
        "its own."
    )


def _one_axis(series: Any, path: Path) -> None:
    """Require y and x last and at most one more axis, which is taken for time."""
    if len(series.shape) < 2 or not series.axes.endswith("YX"):
        raise StackError(
            f"{path}: its axes are {series.axes or 'none'} and y, x must come last; save it as a "
            "t-y-x stack of grey frames."
        )
    extra = [
        (_AXIS_WORDS.get(a, a), int(n))
        for a, n in zip(series.axes[:-2], series.shape[:-2], strict=True)
        if n > 1
    ]
    told = " and ".join(f"{n} along {word}" for word, n in extra)
    if any(word == "channel" for word, _ in extra):
        raise StackError(
            f"{path}: holds several channels ({told}); save the hologram's channel alone."
        )
    if len(extra) > 1:
        raise StackError(
            f"{path}: has {told} where one axis of time is expected; save one time-lapse as a file "
            "of its own."
        )


def _address(page: Any, path: Path, frame_bytes: int) -> FrameAddress:
    if page is None:
        raise StackError(
            f"{path}: some of the frames its OME description names are in files that are missing; "
            "put all files of the set in one folder."
        )
    handle = page.parent.filehandle
    home = Path(handle.path)
    if home != path:
        _require_whole(page, home, handle.size)
    whole = (
        page.is_contiguous
        and page.compression == tifffile.COMPRESSION.NONE
        and sum(page.databytecounts) == frame_bytes
    )
    return FrameAddress(home, page.dataoffsets[0] if whole else page.offset, bool(whole))


def _require_promised(tif: tifffile.TiffFile, path: Path, frames: int, pages: int) -> None:
    """Compare with the number of frames an ImageJ description promises."""
    meta = tif.imagej_metadata or {}
    promised = int(meta.get("images", 0) or 0)
    if frames < promised and pages < promised:
        what = f"it should hold {promised} frames and only {frames} are there"
        raise StackError(f"{path}: {_TRUNCATED.format(what=what)}")


def _require_number(dtype: np.dtype[Any], path: Path) -> None:
    if dtype.kind not in "uif" or dtype.itemsize > 8:
        raise StackError(
            f"{path}: its pixels are {dtype.name} and grey numbers are expected; "
            "save it as 8-bit, 16-bit or 32-bit grey."
        )
