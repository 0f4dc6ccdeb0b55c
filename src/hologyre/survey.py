"""Look at a stack and decide what its recipe leaves open."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import ArrayLike, NDArray

from hologyre.fields.carrier import Carrier, NoFringes, find_carrier
from hologyre.fields.demodulate import demodulate
from hologyre.fields.saturation import saturation_level
from hologyre.motion.assign import border_of, step_law
from hologyre.motion.tracks import checked
from hologyre.recipe import Recipe, RecipeError, frame_slice
from hologyre.singularities.locate import locate_singularities
from hologyre.stacks import StackError, as_stack

_SAMPLED = 5
_FOLLOWED = 4
# with more of its pixels at the top a frame says too little about the field
_MOST_SATURATED = 0.2
_MOST_MISSING = 0.1


class SurveyError(ValueError):
    """A stack in which nothing can be measured; one sentence that says why."""


@dataclass(frozen=True)
class FrameFault:
    """Why a frame cannot be used; false when it can."""

    reason: str = ""

    def __bool__(self) -> bool:
        return bool(self.reason)


def survey(stack: xr.DataArray | ArrayLike, recipe: Recipe | None = None) -> Recipe:
    """Return the recipe with everything that was "auto" decided.

    Five frames spread through the stack are looked at; the carrier is that of the frame in
    the middle of what they show, so that one odd frame does no harm.

    Parameters
    ----------
    stack : DataArray from `open_stack`, or (t, y, x) or (y, x) real array
        Holograms.
    recipe : Recipe, optional
        What is already decided stays as it is.

    Returns
    -------
    Recipe
        Nothing in it is "auto". The same stack and recipe always give the same.

    Raises
    ------
    SurveyError
        If no frame can be used, or none has fringes.
    RecipeError
        If the recipe asks for frames or pixels the stack does not have.
    """
    stack = as_stack(stack)
    recipe = Recipe() if recipe is None else recipe
    frames, _ = chosen_frames(stack, recipe)
    samples = _samples(stack, recipe, frames)
    decided: dict[str, Any] = {}
    if recipe.optics.pixel_um == "auto":
        known = recipe.optics.values().pixel_um or stack.attrs.get("pixel_um")
        decided["optics.pixel_um"] = known or "unknown"
    if recipe.optics.frame_interval_s == "auto":
        decided["optics.frame_interval_s"] = stack.attrs.get("frame_interval_s") or "unknown"
    if recipe.stack.saturation == "auto":
        decided["stack.saturation"] = _saturation(samples, stack)
    recipe = recipe.with_settings(decided)
    recipe = recipe.with_settings(_carrier_settings(recipe, samples, stack))
    return recipe.with_settings(_motion_settings(recipe, stack, frames))


def chosen_frames(stack: xr.DataArray, recipe: Recipe) -> tuple[list[int], dict[int, str]]:
    """Return the frame numbers the recipe asks for, and the reasons of those it leaves out.

    Raises
    ------
    RecipeError
        If no frame remains, or frames or pixels are asked for that the stack does not have.
    """
    count = stack.sizes["t"]
    left_out = {entry.frame: entry.reason for entry in recipe.stack.left_out}
    strange = [frame for frame in left_out if frame >= count]
    if strange:
        raise RecipeError(
            f"stack.left_out: frame {strange[0]} is not in the stack, whose frames are 0 to "
            f"{count - 1}."
        )
    ranged = range(count)[frame_slice(recipe.stack.frames)]
    kept = [frame for frame in ranged if frame not in left_out]
    if not kept:
        why = "all of these frames are left out" if len(ranged) else "the range holds none of them"
        raise RecipeError(
            f"stack.frames: {recipe.stack.frames} of frames 0 to {count - 1}: {why}; widen it."
        )
    region = recipe.stack.region
    if region is not None and (region[1] > stack.sizes["y"] or region[3] > stack.sizes["x"]):
        raise RecipeError(
            f"stack.region: {list(region)} reaches beyond the frame of {stack.sizes['y']}x"
            f"{stack.sizes['x']} px."
        )
    return kept, {frame: left_out[frame] for frame in ranged if frame in left_out}


def read_counts(stack: xr.DataArray, frame: int, recipe: Recipe) -> NDArray[Any]:
    """Read one frame, cut to the recipe's region."""
    region = recipe.stack.region
    lazy = stack.data[frame]
    if region is not None:
        lazy = lazy[region[0] : region[1], region[2] : region[3]]
    # one thread: parallel work is by frame
    return np.asarray(lazy.compute(scheduler="synchronous"))


def finite_pixels(counts: NDArray[Any]) -> NDArray[np.bool_] | None:
    """Return True where a frame holds a number, or None when it does everywhere."""
    if counts.dtype.kind != "f":
        return None
    finite: NDArray[np.bool_] = np.isfinite(counts)
    return None if finite.all() else finite


def without_gaps(counts: NDArray[Any]) -> NDArray[Any]:
    """Return the frame with its median in place of what is not a number."""
    finite = finite_pixels(counts)
    return counts if finite is None else np.where(finite, counts, np.median(counts[finite]))


def frame_fault(counts: NDArray[Any], saturation: float | None) -> FrameFault:
    """Tell whether a frame is plainly unusable: NaN, constant, or too much of it saturated."""
    finite = finite_pixels(counts)
    if finite is not None:
        bad = counts.size - int(np.count_nonzero(finite))
        if bad > _MOST_MISSING * counts.size:
            return FrameFault(f"{bad} of {counts.size} pixels are NaN or infinite")
        counts = counts[finite]
    if counts.min() == counts.max():
        return FrameFault(f"all pixels have the same value, {counts.flat[0]}")
    if saturation is not None:
        share = float(np.mean(counts >= saturation))
        if share > _MOST_SATURATED:
            return FrameFault(f"{100 * share:.0f} % of the pixels are saturated")
    return FrameFault()


def saturation_of(recipe: Recipe) -> float | None:
    """Return the count at which pixels saturate, None when the recipe says there is none."""
    level = recipe.stack.saturation
    return None if isinstance(level, str) else level


def carrier_of(recipe: Recipe) -> Carrier:
    """Return the carrier of a resolved recipe.

    Raises
    ------
    RecipeError
        If part of it is still "auto".
    """
    carrier = recipe.carrier
    if carrier.fy == "auto" or carrier.fx == "auto" or carrier.radius == "auto":
        raise RecipeError('carrier: still "auto"; survey the stack first.')
    return Carrier(carrier.fy, carrier.fx, carrier.radius)


def _samples(
    stack: xr.DataArray, recipe: Recipe, frames: Sequence[int]
) -> list[tuple[int, NDArray[Any]]]:
    """Return usable frames spread through the stack, others in place of unusable ones."""
    picked = np.unique(np.linspace(0, len(frames) - 1, _SAMPLED).round().astype(int))
    first_look = [frames[i] for i in picked]
    found: list[tuple[int, NDArray[Any]]] = []
    faults: dict[str, list[int]] = {}
    for frame in [*first_look, *(f for f in frames if f not in first_look)]:
        if len(found) >= min(_SAMPLED, len(frames)) or (found and frame not in first_look):
            break
        try:
            counts = read_counts(stack, frame, recipe)
        except StackError as error:
            fault = FrameFault(str(error))
        else:
            level = recipe.stack.saturation
            fault = frame_fault(
                counts, saturation_level(counts) if level == "auto" else saturation_of(recipe)
            )
        if fault:
            faults.setdefault(fault.reason, []).append(frame)
        else:
            found.append((frame, counts))
    if not found:
        told = max(faults, key=lambda reason: len(faults[reason]))
        raise SurveyError(
            f"{_name(stack)}: none of its {len(frames)} frames can be used (frame "
            f"{faults[told][0]}: {told}); check the recording."
        )
    return sorted(found, key=lambda sample: sample[0])


def _name(stack: xr.DataArray) -> str:
    paths: tuple[str, ...] = tuple(stack.attrs.get("paths", ()))
    return str(paths[0]) if len(paths) == 1 else str(stack.attrs.get("name", "stack"))


def _saturation(samples: Sequence[tuple[int, NDArray[Any]]], stack: xr.DataArray) -> float | str:
    levels = [saturation_level(counts) for _, counts in samples]
    seen = [level for level in levels if level is not None]
    if seen:
        return max(seen)
    # frames not looked at may still reach the top of an 8-bit scale
    return 255.0 if stack.dtype == np.uint8 else "none"


def _carrier_settings(
    recipe: Recipe, samples: Sequence[tuple[int, NDArray[Any]]], stack: xr.DataArray
) -> dict[str, float]:
    given = recipe.carrier
    if "auto" not in (given.fy, given.fx, given.radius):
        return {}
    radius = None if given.radius == "auto" else given.radius
    if radius is None:
        radius = recipe.optics.values().cutoff_per_px
    found: list[Carrier] = []
    why: list[str] = []
    for frame, counts in samples:
        carrier = find_carrier(without_gaps(counts), radius=radius, conjugate=given.conjugate)
        if isinstance(carrier, NoFringes):
            why.append(f"frame {frame}: {carrier.reason}")
        else:
            found.append(carrier)
    if not found:
        raise SurveyError(
            f"{_name(stack)}: no fringes were found ({why[0]}); give carrier.fy, carrier.fx and "
            "carrier.radius in a recipe if they are there."
        )
    middle = np.median([(c.fy, c.fx) for c in found], axis=0)
    nearest = min(found, key=lambda c: float(np.hypot(c.fy - middle[0], c.fx - middle[1])))
    return {
        "carrier.fy": nearest.fy if given.fy == "auto" else given.fy,
        "carrier.fx": nearest.fx if given.fx == "auto" else given.fx,
        "carrier.radius": float(np.median([c.radius for c in found]))
        if given.radius == "auto"
        else given.radius,
    }


def _motion_settings(
    recipe: Recipe, stack: xr.DataArray, frames: Sequence[int]
) -> dict[str, float]:
    """Measure how far singularities move from one frame to the next."""
    if recipe.motion.max_step_px != "auto":
        return {}
    carrier, shape = carrier_of(recipe), (0, 0)
    tables: list[pd.DataFrame] = []
    middle = max(0, len(frames) // 2 - _FOLLOWED // 2)
    for frame in frames[middle : middle + _FOLLOWED]:
        counts = read_counts(stack, frame, recipe)
        if not frame_fault(counts, saturation_of(recipe)):
            field = demodulate(counts, carrier, valid=finite_pixels(counts))
            shape = field.grid.frame_shape
            tables.append(locate_singularities(field).assign(frame=frame))
    if len(tables) < 2:
        return {"motion.max_step_px": 1 / carrier.radius}
    table = checked(pd.concat(tables, ignore_index=True))
    return {"motion.max_step_px": step_law(table, border_of(table, shape, 0.0), "auto")[1]}
