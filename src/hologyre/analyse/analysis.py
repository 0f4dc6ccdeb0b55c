"""The whole analysis of a stack as one value."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import Any, overload

import dask.array as da
import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import ArrayLike, NDArray

from hologyre.analyse.frame import field_of
from hologyre.analyse.iterate import iter_frames
from hologyre.analyse.motion import frame_table, join_singularities, link
from hologyre.analyse.planning import Plan, plan
from hologyre.fields.interpolate import on_pixels
from hologyre.grid import Field
from hologyre.phase.unwrap import Unwrapped, unwrap
from hologyre.recipe import PhaseSettings, Recipe
from hologyre.stacks import as_stack
from hologyre.survey import survey

Progress = Callable[[int, int], None]


@dataclass(frozen=True, eq=False)
class LazyFields(Sequence[Field]):
    """The fields of the frames that were measured, each read again from the stack when asked for.

    Parameters
    ----------
    frames : tuple of int
        Frame number of each.
    plan : Plan
        What reads them.
    """

    frames: tuple[int, ...]
    plan: Plan

    def __len__(self) -> int:
        return len(self.frames)

    @overload
    def __getitem__(self, index: int) -> Field: ...
    @overload
    def __getitem__(self, index: slice) -> LazyFields: ...
    def __getitem__(self, index: int | slice) -> Field | LazyFields:
        if isinstance(index, slice):
            return LazyFields(self.frames[index], self.plan)
        return field_of(self.plan, self.frames[index])

    def __iter__(self) -> Iterator[Field]:
        return (field_of(self.plan, frame) for frame in self.frames)


@dataclass(frozen=True, eq=False)
class Analysis:
    """What `analyse` finds in a stack.

    Parameters
    ----------
    stack : DataArray (t, y, x)
        The holograms, lazy.
    recipe : Recipe
        As used; nothing in it is "auto".
    fields : sequence of Field
        Complex fields of the frames that were measured, lazy, kept on their band.
    singularities, trajectories, events, frames : DataFrame
        Columns as in `hologyre.tables`.
    """

    stack: xr.DataArray
    recipe: Recipe
    fields: Sequence[Field]
    singularities: pd.DataFrame
    trajectories: pd.DataFrame
    events: pd.DataFrame
    frames: pd.DataFrame

    @property
    def measured(self) -> tuple[int, ...]:
        """Numbers of the frames `fields` holds."""
        return tuple(self.frames["frame"][self.frames["status"] == "done"].tolist())

    @property
    def phase(self) -> xr.DataArray:
        """Wrapped phase on the hologram's pixels, rad in (-pi, pi], (t, y, x), lazy."""
        return self._by_frame(wrapped_phase, "phase")

    @property
    def unwrapped(self) -> xr.DataArray:
        """Unwrapped phase on the hologram's pixels, rad, (t, y, x), lazy.

        `unwrap_field` gives one frame's with the cuts it took.
        """
        settings = self.recipe.phase

        def unwrapped(field: Field) -> NDArray[np.float32]:
            return np.asarray(unwrap_field(field, settings).phase, dtype=np.float32)

        return self._by_frame(unwrapped, "unwrapped")

    def _by_frame(self, of: Callable[[Field], NDArray[np.float32]], name: str) -> xr.DataArray:
        done = np.array(self.measured, dtype=np.int64)
        fields, shape = self.fields, (self.stack.sizes["y"], self.stack.sizes["x"])

        def block(index: NDArray[np.int64]) -> NDArray[np.float32]:
            return of(fields[int(index[0, 0, 0])])[None]

        numbers = da.arange(len(done), chunks=1, dtype=np.int64)[:, None, None]
        values = da.map_blocks(
            block, numbers, dtype=np.float32, chunks=((1,) * len(done), *((n,) for n in shape))
        )
        return xr.DataArray(values, dims=("t", "y", "x"), coords={"t": done}, name=name)


def analyse(
    stack: xr.DataArray | ArrayLike,
    recipe: Recipe | None = None,
    *,
    workers: int = 1,
    progress: Progress | None = None,
) -> Analysis:
    """Analyse a whole stack: fields, phase singularities, their tracks and events.

    Parameters
    ----------
    stack : DataArray from `open_stack`, or (t, y, x) or (y, x) real array
        Holograms.
    recipe : Recipe, optional
        Nothing in it may be "auto". Without one the stack is surveyed first.
    workers : int
        Threads that work on frames side by side. Results do not depend on it.
    progress : callable, optional
        Called with (frames finished, frames in all) after each frame.

    Returns
    -------
    Analysis

    Raises
    ------
    SurveyError
        If there is no recipe and no frame has fringes.
    RecipeError
        If the recipe has anything "auto" left or does not fit the stack.
    """
    stack = as_stack(stack)
    planned = plan(stack, survey(stack) if recipe is None else recipe)
    tables: list[pd.DataFrame] = []
    rows: list[dict[str, Any]] = []
    measured: list[int] = []
    for result in iter_frames(planned, workers=workers):
        # fields are let go: memory does not grow with the stack
        tables.append(result.singularities)
        rows.append(result.row)
        if result.status == "done":
            measured.append(result.frame)
        if progress is not None:
            progress(len(rows), len(planned.all_frames))
    done = tuple(measured)
    singularities = join_singularities(tables)
    fields = LazyFields(done, planned)
    motion = link(planned, singularities, fields, done)
    return Analysis(
        stack,
        planned.recipe,
        fields,
        singularities,
        motion.trajectories,
        motion.events,
        frame_table(rows, motion),
    )


def wrapped_phase(field: Field) -> NDArray[np.float32]:
    """Return a field's phase on the hologram's pixels, rad in (-pi, pi], NaN where not valid."""
    phase = np.angle(on_pixels(field)).astype(np.float32)
    phase[phase <= -np.float32(np.pi)] = np.float32(np.pi)
    phase[~_valid_pixels(field)] = np.nan
    return phase


def unwrap_field(
    field: Field,
    settings: PhaseSettings,
    *,
    barriers: Sequence[NDArray[np.floating]] | None = None,
    bridges: Sequence[NDArray[np.floating]] | None = None,
    used: NDArray[np.bool_] | None = None,
) -> Unwrapped:
    """Unwrap a field's phase on the hologram's pixels as a recipe says.

    Parameters
    ----------
    field : Field
        One frame.
    settings : PhaseSettings
    barriers, bridges : sequence of (n, 2) float arrays, optional
        Lines (y_px, x_px) along which cuts cost nothing, or that no cut may cross, as
        `hologyre.edits.barriers` and `hologyre.edits.bridges` give them.
    used : (y, x) bool array, optional
        Pixels to use, as `hologyre.edits.used_pixels` gives them; all without it.

    Returns
    -------
    Unwrapped
        NaN where the field is not valid and where pixels are not used.

    Raises
    ------
    ValueError
        If `used` is not of the frame's shape or leaves no pixel, or a line has fewer than two
        vertices.
    ShutInError
        If bridges leave a residue no way out. It is a ValueError.
    """
    phase, valid = wrapped_phase(field), _valid_pixels(field)
    if used is not None:
        if used.shape != valid.shape:
            raise ValueError(f"used: expected shape {valid.shape}, got {used.shape}")
        valid &= used
        if not valid.any():
            raise ValueError("used: expected at least one pixel of the field's valid part")
    weight = None
    if settings.weight == "amplitude":
        amplitude = np.abs(on_pixels(field))
        weight = np.where(valid, amplitude / amplitude[valid].max(), 0)
    return unwrap(
        phase,
        weight=weight,
        valid=None if valid.all() else valid,
        barriers=barriers,
        bridges=bridges,
    )


def _valid_pixels(field: Field) -> NDArray[np.bool_]:
    ny, nx = field.grid.frame_shape
    y, x = np.arange(ny, dtype=np.float64), np.arange(nx, dtype=np.float64)
    return field.grid.valid.contains(y[:, None], x)
