"""What is the same for every frame of an analysis."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import xarray as xr
from numpy.typing import ArrayLike, NDArray

from hologyre.fields.blanks import Blanks
from hologyre.fields.carrier import Carrier
from hologyre.optics import Optics
from hologyre.recipe import Recipe, RecipeError
from hologyre.stacks import StackError, as_stack, open_stack
from hologyre.survey import carrier_of, chosen_frames


@dataclass(frozen=True, eq=False)
class Plan:
    """All that is the same for every frame of an analysis; pickles, to be sent to workers."""

    stack: xr.DataArray
    recipe: Recipe
    carrier: Carrier
    optics: Optics
    blanks: Blanks | None
    left_out: dict[int, str]
    frames: tuple[int, ...]

    @property
    def frame_shape(self) -> tuple[int, int]:
        """Rows and columns of the hologram."""
        return self.stack.sizes["y"], self.stack.sizes["x"]

    @property
    def all_frames(self) -> tuple[int, ...]:
        """Frames to measure and frames left out, in order."""
        return tuple(sorted([*self.frames, *self.left_out]))


def plan(stack: xr.DataArray | ArrayLike, recipe: Recipe) -> Plan:
    """Make ready what every frame needs.

    Raises
    ------
    RecipeError
        If the recipe has anything "auto" left or does not fit the stack.
    StackError
        If a blank frame cannot be read.
    """
    stack = as_stack(stack)
    undecided = recipe.undecided()
    if undecided:
        raise RecipeError(
            f'{", ".join(undecided)}: still "auto"; give values, or let hologyre.survey decide.'
        )
    optics = recipe.optics.values()
    if recipe.refocus.distance_um and (optics.wavelength_nm is None or optics.pixel_um is None):
        raise RecipeError(
            "refocus.distance_um: refocusing needs optics.wavelength_nm and optics.pixel_um; give "
            "both, or set the distance to 0."
        )
    frames, left_out = chosen_frames(stack, recipe)
    return Plan(
        stack,
        recipe,
        carrier_of(recipe),
        optics,
        _blanks(recipe, (stack.sizes["y"], stack.sizes["x"])),
        left_out,
        tuple(frames),
    )


def _blanks(recipe: Recipe, frame_shape: tuple[int, int]) -> Blanks | None:
    read: dict[str, NDArray[Any]] = {}
    region = recipe.stack.region or (0, frame_shape[0], 0, frame_shape[1])
    for kind in ("dark", "reference", "empty"):
        path = getattr(recipe.stack, kind)
        if path is None:
            continue
        frames = open_stack(path)
        if (frames.sizes["y"], frames.sizes["x"]) != frame_shape:
            raise StackError(
                f"{path}: the {kind} frame is {frames.sizes['y']}x{frames.sizes['x']} px and the "
                f"stack {frame_shape[0]}x{frame_shape[1]} px; record both with the same region."
            )
        # several are averaged, which lowers their noise
        mean = frames.data.mean(axis=0).compute()
        read[kind] = mean[region[0] : region[1], region[2] : region[3]]
    return Blanks(**read) if read else None
