"""Frames that wait in files: an array read one frame at a time."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import tifffile
from numpy.typing import NDArray

from hologyre.stacks.errors import StackError


@dataclass(frozen=True)
class FrameAddress:
    """Where one frame lies: a file and an offset in it.

    Parameters
    ----------
    path : Path
        The file.
    offset : int
        Of the samples themselves if `raw`, else of the page's directory.
    raw : bool
        Whether the samples lie there one after another, neither packed nor compressed.
    """

    path: Path
    offset: int
    raw: bool


@dataclass(frozen=True, eq=False)
class FrameFiles:
    """A (t, y, x) array whose frames are read from TIFF files when asked for.

    It holds no open file, so that it pickles and may be read from any thread or process.

    Parameters
    ----------
    addresses : tuple of FrameAddress
        One a frame.
    frame_shape : (int, int)
        Rows and columns.
    file_dtype : str
        Type of a sample in the file, byte order included.
    """

    addresses: tuple[FrameAddress, ...]
    frame_shape: tuple[int, int]
    file_dtype: str

    @property
    def shape(self) -> tuple[int, int, int]:
        """Frames, rows, columns."""
        return (len(self.addresses), *self.frame_shape)

    @property
    def dtype(self) -> np.dtype[Any]:
        """Type of a sample, in the machine's own byte order."""
        return np.dtype(self.file_dtype).newbyteorder("=")

    @property
    def ndim(self) -> int:
        """Three."""
        return 3

    def __dask_tokenize__(self) -> tuple[Any, ...]:
        stamps = {a.path: a.path.stat().st_mtime_ns for a in self.addresses}
        return (self.addresses, self.frame_shape, self.file_dtype, sorted(stamps.items()))

    def __getitem__(self, key: Any) -> NDArray[Any]:
        frames, rows, columns = key
        chosen = self.addresses[frames]
        if isinstance(chosen, FrameAddress):
            return self._read(chosen)[rows, columns]
        out = np.empty((len(chosen), *self.frame_shape), self.dtype)
        for slot, address in zip(out, chosen, strict=True):
            slot[...] = self._read(address)
        return out[:, rows, columns]

    def _read(self, address: FrameAddress) -> NDArray[Any]:
        try:
            if address.raw:
                values = np.fromfile(
                    address.path,
                    np.dtype(self.file_dtype),
                    count=self.frame_shape[0] * self.frame_shape[1],
                    offset=address.offset,
                ).reshape(self.frame_shape)
            else:
                values = _read_page(address).reshape(self.frame_shape)
        except (OSError, ValueError, RuntimeError) as error:
            raise StackError(
                f"{address.path}: a frame could not be read ({error}); the file has changed or is "
                "damaged, copy it again from where it was recorded."
            ) from error
        return values.astype(self.dtype, copy=False)


def _read_page(address: FrameAddress) -> NDArray[Any]:
    with tifffile.TiffFile(address.path) as tif:
        tif.filehandle.seek(address.offset)
        page = tifffile.TiffPage(tif, index=0)
        # one worker: frames are what is read in parallel
        return np.asarray(page.asarray(maxworkers=1))
