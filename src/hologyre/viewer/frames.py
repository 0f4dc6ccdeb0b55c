"""One cache of frames, by recipe and frame, that every layer of a session reads from."""

from __future__ import annotations

import threading
from collections import OrderedDict
from collections.abc import Callable, Hashable
from concurrent.futures import Future
from typing import Any, TypeVar
from uuid import uuid4

import dask.array as da
import numpy as np
from numpy.typing import DTypeLike, NDArray

T = TypeVar("T")
_KEEP_BYTES = 1 << 30


class FrameCache:
    """The frames computed last, each computed once even when several threads ask for it.

    Parameters
    ----------
    keep_bytes : int
        The least recently used values beyond this size are dropped.
    """

    def __init__(self, keep_bytes: int = _KEEP_BYTES) -> None:
        self._keep_bytes = keep_bytes
        self._entries: OrderedDict[Hashable, tuple[Future[Any], int]] = OrderedDict()
        self._bytes = 0
        self._lock = threading.Lock()

    def get(self, key: Hashable, make: Callable[[], T]) -> T:
        """Return the value kept under `key`; make it, or wait for whoever is making it.

        A failure is raised to everyone who waits for it and is not kept.
        """
        with self._lock:
            entry = self._entries.get(key)
            if entry is None:
                future: Future[T] = Future()
                self._entries[key] = (future, 0)
            else:
                self._entries.move_to_end(key)
        if entry is not None:
            return entry[0].result()
        try:
            value = make()
        except BaseException as error:
            with self._lock:
                self._entries.pop(key, None)
            future.set_exception(error)
            raise
        self._keep(key, future, _size(value))
        future.set_result(value)
        return value

    def peek(self, key: Hashable) -> Any | None:
        """Return the value kept under `key` if it is ready, else None."""
        with self._lock:
            entry = self._entries.get(key)
            if entry is None or not entry[0].done():
                return None
            self._entries.move_to_end(key)
            return entry[0].result()

    def put(self, key: Hashable, value: Any) -> None:
        """Keep a value that was made elsewhere, unless there is one already."""
        self.get(key, lambda: value)

    def __len__(self) -> int:
        return len(self._entries)

    def _keep(self, key: Hashable, future: Future[Any], size: int) -> None:
        with self._lock:
            self._entries[key] = (future, size)
            self._entries.move_to_end(key)
            self._bytes += size
            for old in list(self._entries):
                if self._bytes <= self._keep_bytes:
                    break
                if old != key and self._entries[old][0].done():
                    self._bytes -= self._entries.pop(old)[1]


def lazy_frames(
    frame: Callable[[int], NDArray[Any]], shape: tuple[int, int, int], dtype: DTypeLike
) -> da.Array:
    """Return a (t, y, x) dask array that calls ``frame(t)`` for each frame, one a chunk."""
    source = _Frames(frame, shape, np.dtype(dtype))
    return da.from_array(
        source,
        chunks=(1, *shape[1:]),
        name=f"hologyre-{uuid4().hex}",
        asarray=False,
        meta=np.empty((0, 0, 0), dtype),
        inline_array=True,
    )


class _Frames:
    """What dask needs of an array: shape, type and slices of whole frames."""

    def __init__(
        self, frame: Callable[[int], NDArray[Any]], shape: tuple[int, int, int], dtype: np.dtype
    ) -> None:
        self._frame = frame
        self.shape = shape
        self.dtype = dtype
        self.ndim = 3

    def __getitem__(self, index: tuple[Any, ...]) -> NDArray[Any]:
        # dask folds a frame number into the slice, so that it may be a number here
        first, *within = index
        if isinstance(first, slice):
            numbers = range(*first.indices(self.shape[0]))
            frames = np.stack([self._frame(t) for t in numbers])[(slice(None), *within)]
        else:
            frames = self._frame(int(first))[tuple(within)]
        return frames.astype(self.dtype, copy=False)


def _size(value: Any) -> int:
    """Count the bytes of the arrays in a value, a tuple of values or a small object."""
    if isinstance(value, np.ndarray):
        return value.nbytes
    if isinstance(value, tuple | list):
        return sum(_size(part) for part in value)
    return sum(_size(part) for part in getattr(value, "__dict__", {}).values())
