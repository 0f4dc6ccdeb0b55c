"""What is wrong with fringes, and what a microscopist can do about it."""

from __future__ import annotations

import numpy as np

WEAK = 0.15
"""Visibility under which fringes are called weak."""
_FINE = 0.45
"""Carrier along an axis above which fringes may be finer than they seem, cycles/px."""
_SATURATED = 1e-4


def remarks(
    carrier: tuple[float, float],
    radius: float,
    visibility: float,
    saturated: float,
    filled: bool,
) -> tuple[str, ...]:
    """Return one sentence for each thing that is wrong.

    Parameters
    ----------
    carrier : (float, float)
        fy and fx, cycles/px.
    radius : float
        Radius of the sideband, cycles/px.
    visibility : float
        Visibility of the fringes.
    saturated : float
        Part of the pixels that are saturated.
    filled : bool
        True for speckle, which fills its sideband to the rim.
    """
    notes = []
    length = float(np.hypot(*carrier))
    highest = max(abs(carrier[0]), abs(carrier[1]))
    if filled and length <= 3 * radius:
        notes.append(
            f"the sideband (radius {radius:.3f} cycles/px) overlaps the zero order: the carrier "
            f"of {length:.3f} cycles/px must exceed three radii, {3 * radius:.3f}; tilt the "
            "reference more, magnify more or close the aperture"
        )
    if highest + radius > 0.5:
        notes.append(
            f"the sideband is clipped at Nyquist (0.5 cycles/px): it reaches "
            f"{highest + radius:.3f}; tilt the reference less, magnify more or close the aperture"
        )
    elif highest > _FINE:
        notes.append(
            f"the fringes are barely sampled, {1 / length:.1f} px each: they may be finer than "
            "they seem (undersampled); tilt the reference less and see whether they get coarser"
        )
    if visibility < WEAK:
        notes.append(
            f"the fringes are weak (visibility {visibility:.2f}): balance the beams, check "
            "polarisation and path difference"
        )
    if saturated > _SATURATED:
        notes.append(f"{saturated:.2%} of the pixels are saturated: shorten the exposure")
    return tuple(notes)
