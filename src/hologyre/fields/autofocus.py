"""The distance at which an object is in focus."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from hologyre.fields.interpolate import coefficients, from_coefficients
from hologyre.fields.refocus import padded, sideways_px, transfer_function
from hologyre.grid import Field
from hologyre.optics import Optics

Measure = Literal["modulus", "tamura"]
Kind = Literal["amplitude", "phase"]


@dataclass(frozen=True, eq=False)
class Focus:
    """Where a field is in focus.

    Parameters
    ----------
    distance_um : float array, (t,) or ()
        Best distance of each frame, or of all together.
    curve_um : (n,) float array
        Distances tried.
    curve : (n,) or (t, n) float array
        The measure at them, largest in focus.
    measure : str
        Which measure.
    at_end : bool array of the shape of `distance_um`
        True where the best distance is the first or the last tried: widen the range.
    """

    distance_um: NDArray[np.float64]
    curve_um: NDArray[np.float64]
    curve: NDArray[np.float64]
    measure: Measure
    at_end: NDArray[np.bool_]


def autofocus(
    field: Field,
    range_um: tuple[float, float],
    *,
    optics: Optics,
    measure: Measure = "modulus",
    kind: Kind = "phase",
    frames: Literal["each", "together"] = "each",
    steps: int = 41,
) -> Focus:
    """Find the distance at which an object is in focus.

    Parameters
    ----------
    field : Field, values (y, x) or (t, y, x)
        The field.
    range_um : (float, float)
        First and last distance, um, in object space.
    optics : Optics
        As for `refocus`.
    measure : "modulus" or "tamura"
        "modulus": the mean of the field's modulus, over its rms, which is least for an
        amplitude object in focus and largest for a phase object (Dubois et al., Opt. Express
        14, 5895, 2006).
        "tamura": root of the intensity's standard deviation over its mean (Memmolo et al.,
        Opt. Lett. 36, 1945, 2011), largest for an amplitude object, least for a phase object.
    kind : "amplitude" or "phase"
        What the object changes most.
    frames : "each" or "together"
        One distance per frame, or one for the stack.
    steps : int
        Distances tried; the best is refined by a second pass between its neighbours and a
        parabola.

    Returns
    -------
    Focus

    Raises
    ------
    ValueError
        If the range is empty or an option is unknown.
    """
    first, last = range_um
    if not (np.isfinite(range_um).all() and first < last):
        raise ValueError(f"range_um: expected first < last, got {range_um}")
    if steps < 5:
        raise ValueError(f"steps: expected at least 5, got {steps}")
    if measure not in ("modulus", "tamura"):
        raise ValueError(f"measure: expected modulus or tamura, got {measure!r}")
    if kind not in ("amplitude", "phase"):
        raise ValueError(f"kind: expected amplitude or phase, got {kind!r}")
    if frames not in ("each", "together"):
        raise ValueError(f"frames: expected each or together, got {frames!r}")
    reach = sideways_px(field, max(abs(first), abs(last)), optics)
    ready = padded(field, reach)
    spectrum = coefficients(ready)
    sign = 1.0 if (measure == "modulus") == (kind == "phase") else -1.0

    def curve(distances: Sequence[float] | NDArray[np.float64]) -> NDArray[np.float64]:
        values = np.stack(
            [sign * _sharpness(ready, spectrum, z, optics, measure, reach) for z in distances],
            axis=-1,
        )
        return values.mean(axis=0) if values.ndim == 2 and frames == "together" else values

    distances = np.linspace(first, last, steps)
    coarse = curve(distances)
    best = np.argmax(coarse, axis=-1)
    found = np.empty(best.shape)
    for index in np.ndindex(best.shape):
        low, high = max(int(best[index]) - 1, 0), min(int(best[index]) + 1, steps - 1)
        near = np.linspace(distances[low], distances[high], 9)
        fine = curve(near)
        found[index] = _vertex(near, fine[index] if fine.ndim == 2 else fine)
    at_end = (best == 0) | (best == steps - 1)
    return Focus(found, distances, coarse, measure, np.asarray(at_end))


def _sharpness(
    field: Field,
    spectrum: NDArray[np.complexfloating],
    distance_um: float,
    optics: Optics,
    measure: Measure,
    margin_px: float,
) -> NDArray[np.float64]:
    transfer = transfer_function(field, spectrum.shape[-2:], distance_um, optics)
    moved = from_coefficients(spectrum * transfer.astype(spectrum.dtype), field)
    window = _window(moved, margin_px)
    modulus = np.abs(moved.values[..., window[0], :][..., window[1]]).astype(np.float64)
    intensity = modulus**2
    mean = intensity.mean(axis=(-2, -1))
    if measure == "modulus":
        return np.asarray(modulus.mean(axis=(-2, -1)) / np.sqrt(mean))
    return np.asarray(np.sqrt(intensity.std(axis=(-2, -1)) / mean))


def _window(field: Field, margin_px: float) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """Tell which rows and columns of samples no light from the border reaches."""
    inside = []
    for axis, n in enumerate(field.grid.frame_shape):
        place = field.grid.origin_px[axis] + field.grid.step_px[axis] * np.arange(field.shape[axis])
        margin = min(margin_px, n / 4)
        inside.append((place >= margin) & (place <= n - 1 - margin))
    return inside[0], inside[1]


def _vertex(z: NDArray[np.float64], value: NDArray[np.float64]) -> float:
    """Return the top of a parabola through the highest values."""
    top = int(np.clip(np.argmax(value), 2, z.size - 3))
    part = slice(top - 2, top + 3)
    middle = z[top]
    a, b, _ = np.polyfit(z[part] - middle, value[part], 2)
    if a >= 0:
        return float(z[np.argmax(value)])
    return float(np.clip(middle - b / (2 * a), z[0], z[-1]))
