"""What layers show of a frame: field, amplitude, phase, cuts, wavevector, each computed once."""

from __future__ import annotations

from collections.abc import Callable, Hashable
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from hologyre.analyse import (
    FrameResult,
    Inspection,
    Plan,
    field_of,
    inspect,
    plan,
    unwrap_field,
    wrapped_phase,
)
from hologyre.fields.carrier import Carrier, find_carrier
from hologyre.fields.interpolate import on_pixels
from hologyre.fields.wavevector import local_wavevector
from hologyre.grid import Field
from hologyre.phase.unwrap import ShutInError, Unwrapped
from hologyre.recipe import Recipe
from hologyre.viewer.barriers import NO_LINES, Lines, residue_points, unwrap_along
from hologyre.viewer.frames import FrameCache
from hologyre.viewer.spectrum import spectrum_picture

_KEPT_AS = {"cuts": "unwrapped", "jumps": "unwrapped", "wavevectors": "wavevector"}
_BY_CUTS = ("unwrapped", "cuts", "jumps")


@dataclass(frozen=True)
class Skipped:
    """Why a frame has nothing to show; false."""

    reason: str

    def __bool__(self) -> bool:
        return False


class FrameMaps:
    """Quantities of single frames of a stack, for any recipe, kept in one cache.

    Every method may be called from any thread. Pictures are on the hologram's pixels; a frame
    that cannot be used, and pixels outside the region, are NaN.

    Parameters
    ----------
    stack : DataArray
        Holograms (t, y, x).
    """

    def __init__(self, stack: xr.DataArray) -> None:
        self._stack = stack
        self._cache = FrameCache()
        self.lines: Callable[[int], Lines] = lambda _: NO_LINES

    @property
    def shape(self) -> tuple[int, int, int]:
        """Frames, rows and columns."""
        return self._stack.sizes["t"], self._stack.sizes["y"], self._stack.sizes["x"]

    def key(self, quantity: str, recipe: Recipe) -> Hashable:
        """Return what a quantity depends on: recipes alike in it give the same."""
        if quantity == "spectrum":
            return ()
        stack = recipe.stack.model_copy(update={"notes": "", "frames": ":", "left_out": ()})
        settings = (stack, recipe.carrier, recipe.field, recipe.refocus, recipe.optics)
        return (*settings, recipe.phase) if quantity in _BY_CUTS else settings

    def entry(self, quantity: str, recipe: Recipe, frame: int) -> Hashable:
        """Return what a quantity of one frame depends on, lines drawn by hand among it."""
        name = _KEPT_AS.get(quantity, quantity)
        lines = self.lines(frame) if name == "unwrapped" else NO_LINES
        return (name, self.key(name, recipe), frame, lines)

    def hologram(self, frame: int) -> NDArray[Any]:
        """Return the counts of a frame."""
        return np.asarray(self._stack.data[frame])

    def spectrum(self, recipe: Recipe, frame: int) -> NDArray[np.uint8]:
        """Return the picture of a frame's spectrum, which does not depend on the recipe."""
        return self._get("spectrum", recipe, frame, lambda _, t: spectrum_picture(self.hologram(t)))

    def carrier(self, recipe: Recipe, frame: int) -> Carrier | Skipped:
        """Return the carrier found in one frame."""
        return self._get("carrier", recipe, frame, self._find_carrier)

    def plan(self, recipe: Recipe) -> Plan:
        """Return what all frames of an analysis share."""
        return self._cache.get(("plan", recipe), lambda: plan(self._stack, recipe))

    def inspection(self, recipe: Recipe, frame: int) -> Inspection | Skipped:
        """Return how well a frame can be measured, in words."""
        return self._get("inspection", recipe, frame, self._inspect)

    def keep(self, recipe: Recipe, result: FrameResult) -> None:
        """Keep the field of a frame that was analysed, so that it is not read again."""
        if result.field is not None:
            self._cache.put(self.entry("field", recipe, result.frame), result.field)

    def field(self, recipe: Recipe, frame: int) -> Field | Skipped:
        """Return the complex field of a frame, on its band."""
        return self._get("field", recipe, frame, self._read)

    def amplitude(self, recipe: Recipe, frame: int) -> NDArray[np.float32]:
        """Return the field's modulus, counts."""
        return self._get("amplitude", recipe, frame, self._amplitude)

    def phase(self, recipe: Recipe, frame: int) -> NDArray[np.float32]:
        """Return the wrapped phase, rad."""
        return self._get("phase", recipe, frame, self._phase)

    def unwrapped(self, recipe: Recipe, frame: int) -> NDArray[np.float32]:
        """Return the unwrapped phase, rad, its median within half a turn of zero.

        The whole turns taken off say nothing, and frames become comparable.
        """
        found = self.unwrapping(recipe, frame)
        if isinstance(found, Skipped):
            return self._blank()
        turns = np.round(np.nanmedian(found.phase[::4, ::4]) / (2 * np.pi))
        return (found.phase - 2 * np.pi * turns).astype(np.float32)

    def unwrapping(self, recipe: Recipe, frame: int) -> Unwrapped | Skipped:
        """Return the unwrapped phase with its cuts."""
        return self._get("unwrapped", recipe, frame, self._unwrap)

    def jumps(self, recipe: Recipe, frame: int) -> NDArray[np.float32]:
        """Return for each pixel the most turns it jumps by towards a neighbour."""
        found = self.unwrapping(recipe, frame)
        if isinstance(found, Skipped):
            return self._blank()
        return found.cuts.jump_map().astype(np.float32)

    def residues(self, recipe: Recipe, frame: int) -> tuple[NDArray[np.float64], NDArray[np.int8]]:
        """Return places (n, 2) and charges of the residues of a frame's phase."""
        return self._get("residues", recipe, frame, lambda r, t: residue_points(self.phase(r, t)))

    def wavevector(self, recipe: Recipe, frame: int) -> NDArray[np.float32] | Skipped:
        """Return the local wavevector (2, y, x), rad/px."""
        return self._get("wavevector", recipe, frame, self._wavevector)

    def prepare(self, quantity: str, recipe: Recipe, frame: int) -> None:
        """Compute a quantity, so that it is ready when it is asked for."""
        makers: dict[str, Callable[[Recipe, int], object]] = {
            "amplitude": self.amplitude,
            "phase": self.phase,
            "spectrum": self.spectrum,
            "carrier": self.carrier,
            "inspection": self.inspection,
            "unwrapped": self.unwrapping,
            "cuts": self.unwrapping,
            "jumps": self.unwrapping,
            "residues": self.residues,
            "wavevectors": self.wavevector,
        }
        makers[quantity](recipe, frame)

    def ready(self, quantity: str, recipe: Recipe, frame: int) -> Any | None:
        """Return a quantity if it is computed already, else None."""
        return self._cache.peek(self.entry(quantity, recipe, frame))

    def _find_carrier(self, recipe: Recipe, frame: int) -> Carrier | Skipped:
        radius = recipe.carrier.radius
        try:
            found = find_carrier(
                self.hologram(frame),
                radius=None if radius == "auto" else radius,
                conjugate=recipe.carrier.conjugate,
            )
        except ValueError as error:
            return Skipped(str(error))
        return found if isinstance(found, Carrier) else Skipped(found.reason)

    def _inspect(self, recipe: Recipe, frame: int) -> Inspection | Skipped:
        try:
            return inspect(self._stack, recipe, frame=frame)
        except ValueError as error:
            return Skipped(str(error))

    def _read(self, recipe: Recipe, frame: int) -> Field | Skipped:
        try:
            return field_of(self.plan(recipe), frame)
        except ValueError as error:
            return Skipped(str(error))

    def _amplitude(self, recipe: Recipe, frame: int) -> NDArray[np.float32]:
        field = self.field(recipe, frame)
        if isinstance(field, Skipped):
            return self._blank()
        amplitude = np.abs(on_pixels(field)).astype(np.float32, copy=False)
        amplitude[~_valid(field)] = np.nan
        return amplitude

    def _phase(self, recipe: Recipe, frame: int) -> NDArray[np.float32]:
        field = self.field(recipe, frame)
        return self._blank() if isinstance(field, Skipped) else wrapped_phase(field)

    def _unwrap(self, recipe: Recipe, frame: int) -> Unwrapped | Skipped:
        field = self.field(recipe, frame)
        if isinstance(field, Skipped):
            return field
        lines = self.lines(frame)
        if not lines:
            return unwrap_field(field, recipe.phase)
        try:
            return unwrap_along(field, recipe.phase, lines)
        except ShutInError as error:
            return Skipped(str(error))

    def _wavevector(self, recipe: Recipe, frame: int) -> NDArray[np.float32] | Skipped:
        field = self.field(recipe, frame)
        if isinstance(field, Skipped):
            return field
        wavevector = local_wavevector(field).astype(np.float32, copy=False)
        wavevector[:, ~_valid(field)] = np.nan
        return wavevector

    def _get(
        self, name: str, recipe: Recipe, frame: int, make: Callable[[Recipe, int], Any]
    ) -> Any:
        return self._cache.get(self.entry(name, recipe, frame), lambda: make(recipe, frame))

    def _blank(self) -> NDArray[np.float32]:
        return np.full(self.shape[1:], np.nan, np.float32)


def _valid(field: Field) -> NDArray[np.bool_]:
    """Return the pixels of the part of a field that was measured."""
    ny, nx = field.grid.frame_shape
    y, x = np.arange(ny, dtype=np.float64), np.arange(nx, dtype=np.float64)
    return field.grid.valid.contains(y[:, None], x)
