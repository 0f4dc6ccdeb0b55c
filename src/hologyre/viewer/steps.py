"""The steps of the work, each started off the GUI thread; earlier steps are done on the way."""

from __future__ import annotations

import os
import time
from collections.abc import Callable, Iterator
from typing import Any

import pandas as pd

from hologyre.analyse import Plan, frame_table, iter_frames, join_singularities, link
from hologyre.analyse.frame import FrameResult
from hologyre.grid import Field
from hologyre.motion import Motion
from hologyre.recipe import Recipe
from hologyre.survey import SurveyError, survey
from hologyre.tables import EVENTS, TRAJECTORIES, empty
from hologyre.viewer.session import Session, Tables
from hologyre.viewer.styles import Role
from hologyre.viewer.worker import Cancelled, Task, Work

_REDRAW_S = 0.7
_THREADS = max(1, min(4, (os.cpu_count() or 2) - 1))
_CARRIER = ("carrier.fy", "carrier.fx", "carrier.radius")


def find_carrier(session: Session) -> None:
    """Look for the carrier and whatever else is "auto", and put it into the recipe."""
    anew = session.recipe.with_settings(dict.fromkeys(_CARRIER, "auto"))

    def work() -> Work[Recipe]:
        yield
        return survey(session.stack, anew)

    def done(recipe: Recipe) -> None:
        session.recipe = recipe

    _start(session, "Finding the carrier", work, on_done=done)


def show_pictures(session: Session, *roles: Role) -> None:
    """Decide what is "auto", compute the current frame and show layers of it."""
    display = session.display
    if display is None:
        return
    frame = display.frame

    def work() -> Work[None]:
        yield
        recipe = yield from _decide(session)
        for role in roles:
            session.maps.prepare(role, recipe, frame)
            yield

    _start(session, "Computing fields", work, on_done=lambda _: display.show(*roles))


def find_singularities(session: Session) -> None:
    """Find the singularities of every frame."""
    _measure(session, "Finding singularities", linked=False)


def follow_singularities(session: Session) -> None:
    """Link the singularities of every frame; find them first if the settings have changed."""
    _measure(session, "Following singularities", linked=True)


def singularities_are_current(session: Session) -> bool:
    """Tell whether the singularities shown were found with the recipe as it is."""
    found_with = session.tables.found_with
    return found_with is not None and _found_key(found_with) == _found_key(session.recipe)


def motion_is_current(session: Session) -> bool:
    """Tell whether the trajectories shown were linked with the recipe as it is."""
    linked_with = session.tables.linked_with
    return (
        linked_with is not None
        and _found_key(linked_with) == _found_key(session.recipe)
        and linked_with.motion == session.recipe.motion
    )


def _measure(session: Session, title: str, *, linked: bool) -> None:
    display = session.display
    if display is None:
        return
    known = session.editing.found if linked and singularities_are_current(session) else None

    def work() -> Work[Tables]:
        yield
        recipe = yield from _decide(session)
        plan = session.maps.plan(recipe)
        tables = (yield from _all_frames(session, plan)) if known is None else known
        return _linked(session, plan, tables) if linked else tables

    def step(value: Any) -> None:
        if isinstance(value, Tables):
            session.tables = value
            display.show("singularities")

    def done(tables: Tables) -> None:
        session.tables = tables
        roles: tuple[Role, ...] = ("singularities", "tracks") if linked else ("singularities",)
        display.show(*(() if display.shows_picture() else ("phase",)), *roles)

    frames = session.stack.sizes["t"] if known is None else 0
    _start(session, title, work, total=frames + 2, on_step=step, on_done=done)


def _all_frames(session: Session, plan: Plan) -> Work[Tables]:
    """Measure all frames; yield partial results now and then, so that they can be seen."""
    results: list[FrameResult] = []
    shown = time.monotonic()
    frames: Iterator[FrameResult] = iter_frames(plan, workers=_THREADS)
    try:
        for result in frames:
            results.append(result)
            session.maps.keep(plan.recipe, result)
            if time.monotonic() - shown > _REDRAW_S:
                shown = time.monotonic()
                yield _collected(results)
            else:
                yield
    finally:
        close: Callable[[], None] | None = getattr(frames, "close", None)
        if close is not None:
            close()
    if all(result.status == "skipped" for result in results):
        raise SurveyError(
            f"{session.name}: none of its {len(results)} frames could be used "
            f"({results[0].reason})."
        )
    return _collected(results, plan.recipe)


def _collected(results: list[FrameResult], found_with: Recipe | None = None) -> Tables:
    """Put results together; without a recipe they count as unfinished."""
    none = Motion(empty(TRAJECTORIES), empty(EVENTS))
    return Tables(
        singularities=join_singularities(result.singularities for result in results),
        frames=frame_table((result.row for result in results), none),
        found_with=found_with,
    )


def _linked(session: Session, plan: Plan, found: Tables) -> Tables:
    frames = found.frames
    measured = frames.loc[frames["status"] == "done", "frame"].tolist()
    motion = link(plan, found.singularities, _fields(session, plan, measured), measured)
    return Tables(
        singularities=found.singularities,
        frames=frame_table(_rows(frames), motion),
        trajectories=motion.trajectories,
        events=motion.events,
        found_with=found.found_with,
        linked_with=plan.recipe,
    )


def _fields(session: Session, plan: Plan, frames: list[int]) -> Iterator[Field]:
    for frame in frames:
        if session.task is not None and session.task.cancelled:
            raise Cancelled
        field = session.maps.field(plan.recipe, frame)
        if isinstance(field, Field):
            yield field


def _rows(frames: pd.DataFrame) -> Iterator[dict[str, Any]]:
    return (dict(zip(frames.columns, row, strict=True)) for row in frames.itertuples(index=False))


def _decide(session: Session) -> Work[Recipe]:
    recipe = session.recipe
    if recipe.undecided():
        recipe = survey(session.stack, recipe)
        yield recipe
    return recipe


def _found_key(recipe: Recipe) -> Recipe:
    """Return the recipe without what singularities do not depend on."""
    plain = Recipe()
    stack = recipe.stack.model_copy(update={"notes": ""})
    return recipe.model_copy(update={"stack": stack, "phase": plain.phase, "motion": plain.motion})


def _start(
    session: Session,
    title: str,
    work: Callable[[], Work[Any]],
    *,
    total: int = 0,
    on_step: Callable[[Any], None] | None = None,
    on_done: Callable[[Any], None] | None = None,
) -> None:
    def step(value: Any) -> None:
        if isinstance(value, Recipe):
            session.recipe = value
        elif on_step is not None:
            on_step(value)

    def end() -> None:
        session.task = None

    if session.task is not None:
        raise RuntimeError(f"{session.name}: {session.task.title.lower()} already")
    task = Task(title, work, total=total, on_step=step, on_done=on_done, on_end=end)
    session.task = task
    task.start()
