"""The three kinds of blank frame, and what each takes out of a hologram."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray


@dataclass(frozen=True, eq=False)
class Blanks:
    """Blank frames taken with the same camera settings as the stack.

    Parameters
    ----------
    dark : (y, x) real array, optional
        Both beams blocked. Subtracted from every hologram and from the other blanks: takes
        out the camera's offset and its fixed pattern.
    reference : (y, x) real array, optional
        Reference beam alone. Subtracted, after its own dark: takes out ``|R|^2``, dust rings
        and envelope included. The object's own ``|O|^2`` stays.
    empty : (y, x) real array, optional
        Both beams, no object. Its field is divided out: takes out the aberration of the
        optics and the phase of the reference. Where it is dark there is nothing to divide by.

    Raises
    ------
    ValueError
        If a frame is not 2-D, holds NaN or infinity, or differs in shape from another.
    """

    dark: NDArray[Any] | None = None
    reference: NDArray[Any] | None = None
    empty: NDArray[Any] | None = None

    def __post_init__(self) -> None:
        shapes = {}
        for entry in fields(self):
            frame = getattr(self, entry.name)
            if frame is None:
                continue
            frame = np.asarray(frame)
            if frame.ndim != 2 or np.iscomplexobj(frame):
                msg = f"{entry.name}: expected a real (y, x) frame, got {_describe(frame)}"
                raise ValueError(msg)
            if not np.isfinite(frame).all():
                raise ValueError(f"{entry.name}: holds NaN or infinity")
            shapes[entry.name] = frame.shape
        if len(set(shapes.values())) > 1:
            raise ValueError(f"blank frames differ in shape: {shapes}")

    def check_shape(self, frame_shape: tuple[int, int]) -> None:
        """Raise ValueError if the blanks are not of the hologram's shape."""
        for entry in fields(self):
            frame = getattr(self, entry.name)
            if frame is not None and np.shape(frame) != frame_shape:
                msg = (
                    f"blanks.{entry.name}: shape {np.shape(frame)} differs from the "
                    f"hologram's {frame_shape}"
                )
                raise ValueError(msg)

    def subtrahend(self) -> NDArray[np.float64] | None:
        """Return what is subtracted from a hologram, or None for nothing.

        Dark and reference together amount to the reference frame as recorded, since its own
        dark is in it.
        """
        if self.reference is not None:
            return np.asarray(self.reference, dtype=np.float64)
        if self.dark is not None:
            return np.asarray(self.dark, dtype=np.float64)
        return None


def _describe(frame: ArrayLike) -> str:
    array = np.asarray(frame)
    return f"{array.dtype} of shape {array.shape}"
