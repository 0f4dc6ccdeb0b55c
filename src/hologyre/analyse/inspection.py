"""What one frame of a stack says about how well it can be measured, in words."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import xarray as xr
from numpy.typing import ArrayLike

from hologyre.analyse.frame import mean_power, measure
from hologyre.analyse.planning import Plan, plan
from hologyre.fields.carrier import Carrier, find_carrier
from hologyre.recipe import Recipe
from hologyre.stacks import as_stack
from hologyre.survey import read_counts, survey, without_gaps

_HIGH_NOISE_RAD = 0.15


@dataclass(frozen=True)
class Inspection:
    """What was seen in one frame.

    Parameters
    ----------
    name : str
        The stack's name.
    frames, frame_shape, dtype
        Number of frames, rows and columns, type of a pixel.
    pixel_um, frame_interval_s : float or None
        None where unknown.
    frame : int
        The frame looked at.
    fy_per_px, fx_per_px, radius_per_px : float
        Carrier and radius of the sideband, cycles/px.
    fringe_px, finest_px : float
        Pixels in a fringe, and in the shortest wavelength the band can hold.
    radius_limit_per_px : float
        Radius the band may have before it meets the zero order or the edge of the spectrum.
    visibility, saturated : float
        Visibility of the fringes; share of saturated pixels, NaN where the level is not known.
    phase_noise_rad : float
        Typical noise of the phase where the field is as strong as its mean.
    singularities : int
        Found in this frame.
    warnings : tuple of str
        What should be looked to.
    """

    name: str
    frames: int
    frame_shape: tuple[int, int]
    dtype: str
    pixel_um: float | None
    frame_interval_s: float | None
    frame: int
    fy_per_px: float
    fx_per_px: float
    radius_per_px: float
    fringe_px: float
    finest_px: float
    radius_limit_per_px: float
    visibility: float
    saturated: float
    phase_noise_rad: float
    singularities: int
    warnings: tuple[str, ...]

    def sentences(self) -> tuple[str, ...]:
        """Return the findings as lines a microscopist acts on."""
        ny, nx = self.frame_shape
        pixel = "pixel size unknown"
        if self.pixel_um is not None:
            pixel = f"{self.pixel_um:.4g} um per pixel in the object"
        interval = "frame interval unknown"
        if self.frame_interval_s is not None:
            interval = f"{self.frame_interval_s:.4g} s between frames"
        count = f"{self.frames} frame{'s' if self.frames != 1 else ''}"
        return (
            f"{self.name}: {count} of {ny}x{nx} px, {self.dtype}; {pixel}; {interval}.",
            f"Frame {self.frame}: {self.summary()}.",
            f"The band's radius is {self.radius_per_px:.3f} cycles/px, detail down to "
            f"{self.finest_px:.1f} px; it may reach {self.radius_limit_per_px:.2f} before it meets "
            f"{self._neighbour()}.",
            f"{self.singularities} singularities are found in this frame.",
            *(f"Warning: {warning}." for warning in self.warnings),
        )

    def summary(self) -> str:
        """Return carrier, visibility, saturation and noise in one line."""
        saturated = "saturation unknown"
        if not math.isnan(self.saturated):
            saturated = f"{100 * self.saturated:.2g} % of pixels saturated"
        noise = "phase noise unknown"
        if not math.isnan(self.phase_noise_rad):
            noise = f"phase noise about {1000 * self.phase_noise_rad:.0f} mrad"
        return (
            f"carrier {self.fy_per_px:.3f}, {self.fx_per_px:.3f} cycles/px (y, x), "
            f"{self.fringe_px:.1f} px per fringe; visibility {self.visibility:.2g}; {saturated}; "
            f"{noise}"
        )

    def as_dict(self) -> dict[str, Any]:
        """Return the findings as plain values, NaN as None."""
        return {
            name: None if isinstance(value, float) and math.isnan(value) else value
            for name, value in vars(self).items()
        }

    def _neighbour(self) -> str:
        third = math.hypot(self.fy_per_px, self.fx_per_px) / 3
        return "the zero order" if third <= self.radius_limit_per_px else "the spectrum's edge"


def inspect(
    stack: xr.DataArray | ArrayLike, recipe: Recipe | None = None, *, frame: int | None = None
) -> Inspection:
    """Look at one frame and say how well it can be measured.

    Parameters
    ----------
    stack : DataArray from `open_stack`, or real array
        Holograms.
    recipe : Recipe, optional
        What it leaves "auto" is surveyed.
    frame : int, optional
        Frame number; by default the middle one of those that can be used.

    Returns
    -------
    Inspection

    Raises
    ------
    SurveyError
        If no frame can be used or none has fringes.
    ValueError
        If `frame` is given and cannot be used.
    """
    stack = as_stack(stack)
    return inspect_plan(plan(stack, survey(stack, recipe)), frame)


def inspect_plan(planned: Plan, frame: int | None = None) -> Inspection:
    """Look at one frame of a stack that is surveyed; as `inspect`."""
    stack, carrier = planned.stack, planned.carrier
    middle = len(planned.frames) // 2
    tried = [frame] if frame is not None else [*planned.frames[middle:], *planned.frames[:middle]]
    result = next((r for r in (measure(planned, t) for t in tried) if r.field is not None), None)
    if result is None or result.field is None:
        raise ValueError(f"frame: {tried[0]} cannot be used: {measure(planned, tried[0]).reason}")
    row = result.row
    found = find_carrier(
        without_gaps(read_counts(stack, result.frame, planned.recipe)),
        conjugate=planned.recipe.carrier.conjugate,
    )
    limit = min(carrier.frequency / 3, 0.5 - abs(carrier.fy), 0.5 - abs(carrier.fx))
    noise = row.get("noise", math.nan) / math.sqrt(2 * mean_power(result.field))
    told = list(stack.attrs.get("notes", ()))
    if isinstance(found, Carrier):
        told += found.notes
    if carrier.radius > limit and not (isinstance(found, Carrier) and found.radius > limit):
        told.append(
            f"the band's radius {carrier.radius:.3f} overlaps its neighbours: take at most "
            f"{limit:.3f}"
        )
    if noise > _HIGH_NOISE_RAD:
        told.append(
            f"the phase noise of {noise:.2f} rad is high: expose longer or balance the beams"
        )
    return Inspection(
        name=str(stack.attrs.get("name", "stack")),
        frames=stack.sizes["t"],
        frame_shape=planned.frame_shape,
        dtype=str(stack.dtype),
        pixel_um=planned.optics.pixel_um,
        frame_interval_s=planned.optics.frame_interval_s,
        frame=result.frame,
        fy_per_px=carrier.fy,
        fx_per_px=carrier.fx,
        radius_per_px=carrier.radius,
        fringe_px=1 / carrier.frequency,
        finest_px=1 / carrier.radius,
        radius_limit_per_px=limit,
        visibility=row["visibility"],
        saturated=row.get("saturated", math.nan),
        phase_noise_rad=noise,
        singularities=len(result.singularities),
        warnings=tuple(dict.fromkeys(told)),
    )
