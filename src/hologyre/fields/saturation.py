"""Pixels that say nothing: saturated or masked ones."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

_FULL_SCALES = tuple(2**bits - 1 for bits in (8, 10, 12, 14, 16))
_FEWEST = 3
_CROWDED = 5


def saturation_level(frame: NDArray[Any]) -> float | None:
    """Return the count at which a frame saturates, or None if it does not seem to.

    It is the largest count, when that is the full scale of an 8, 10, 12, 14 or 16-bit
    camera, or when it is crowded: a camera that clips below full scale piles up there what
    should have lain above, more than there is in any count just under it.
    """
    top = frame.max()
    at_top = int(np.count_nonzero(frame == top))
    if frame.dtype.kind in "ui" and int(top) in _FULL_SCALES:
        return float(top)
    if at_top < _FEWEST or at_top == frame.size:
        return None
    depth = max(0.1 * float(np.std(frame[::4, ::4], dtype=np.float64)), 1.0)
    nearby = int(np.count_nonzero(frame > top - depth)) - at_top
    # Counts that are no whole numbers hardly ever meet twice.
    expected = nearby / depth if float(top).is_integer() else 0.0
    return float(top) if at_top > _FEWEST + _CROWDED * expected else None


def usable_pixels(
    frame: NDArray[Any],
    valid: NDArray[np.bool_] | None = None,
    saturation: float | None = None,
) -> NDArray[np.bool_] | None:
    """Return True where a pixel can be used, or None when all can.

    Parameters
    ----------
    frame : (y, x) real array
        Counts as the camera gave them.
    valid : (y, x) bool array, optional
        Pixels to use; others are left out.
    saturation : float, optional
        Counts at or above it are left out; by default the level the frame itself shows.
        Infinity switches the search off.
    """
    level = saturation_level(frame) if saturation is None else saturation
    usable = None if level is None or level == np.inf else frame < level
    if valid is not None:
        usable = valid if usable is None else usable & valid
    return None if usable is None or usable.all() else usable
