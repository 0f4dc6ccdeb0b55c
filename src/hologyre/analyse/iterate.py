"""Frame after frame, in order, by one worker or many."""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Generator, Iterable, Sequence
from concurrent.futures import Future, ThreadPoolExecutor
from functools import partial
from typing import TYPE_CHECKING, Any

import xarray as xr
from numpy.typing import ArrayLike
from threadpoolctl import threadpool_limits

from hologyre.analyse.frame import FrameResult, measure
from hologyre.analyse.planning import Plan, plan
from hologyre.recipe import Recipe

if TYPE_CHECKING:
    from distributed import Client

FrameResults = Generator[FrameResult, None, None]


def iter_frames(
    stack: xr.DataArray | ArrayLike | Plan,
    recipe: Recipe | None = None,
    *,
    frames: Iterable[int] | None = None,
    workers: int = 1,
    client: Client | None = None,
) -> FrameResults:
    """Analyse frame by frame, in order; closing the iterator cancels what is left.

    Parameters
    ----------
    stack : DataArray from `open_stack`, real array, or Plan
        Holograms.
    recipe : Recipe
        Resolved, as by `hologyre.survey`; not with a Plan.
    frames : iterable of int, optional
        Only these frame numbers of those the recipe chooses.
    workers : int
        Threads that work on frames side by side. Results do not depend on it.
    client : distributed.Client, optional
        Compute on this dask cluster instead, as by `connect`.

    Yields
    ------
    FrameResult

    Raises
    ------
    RecipeError
        If the recipe has anything "auto" left or does not fit the stack.
    """
    if isinstance(stack, Plan):
        planned = stack
    elif recipe is None:
        raise TypeError("recipe: expected a Recipe, got None; make one with hologyre.survey")
    else:
        planned = plan(stack, recipe)
    if workers < 1:
        raise ValueError(f"workers: expected 1 or more, got {workers!r}")
    wanted = planned.all_frames
    if frames is not None:
        chosen = set(frames)
        wanted = tuple(frame for frame in wanted if frame in chosen)
    work = partial(measure, planned)
    if client is not None:
        return _on_cluster(work, wanted, client)
    results = _in_threads(work, wanted, workers) if workers > 1 else _in_turn(work, wanted)
    return _on_one_thread_each(results)


class ClusterError(ValueError):
    """A dask scheduler that cannot be used; one sentence that says why."""


def connect(address: str) -> Client:
    """Connect to a dask scheduler, as ``tcp://host:8786``; close the client when done.

    Raises
    ------
    ClusterError
        If the package distributed is missing or no scheduler answers.
    """
    try:
        from distributed import Client
    except ModuleNotFoundError as error:
        raise ClusterError(
            f"{address}: computing on a cluster needs {error.name}, which is not installed; run: "
            "pip install 'hologyre[cluster]'."
        ) from error
    try:
        return Client(address, set_as_default=False)
    except (OSError, ValueError, ImportError) as error:
        raise ClusterError(
            f"{address}: no dask scheduler answers at this address ({error}); give it as "
            "tcp://host:port."
        ) from error


def _on_one_thread_each(results: FrameResults) -> FrameResults:
    # threads of the linear algebra inside threads by frame get in each other's way
    with threadpool_limits(1, user_api="blas"):
        yield from results


def _in_turn(work: Callable[[int], FrameResult], frames: Sequence[int]) -> FrameResults:
    for frame in frames:
        yield work(frame)


def _in_threads(
    work: Callable[[int], FrameResult], frames: Sequence[int], workers: int
) -> FrameResults:
    pool = ThreadPoolExecutor(workers, thread_name_prefix="hologyre-frame")
    try:
        yield from _ordered(lambda frame: pool.submit(work, frame), frames, 2 * workers)
    finally:
        pool.shutdown(wait=True, cancel_futures=True)


def _on_cluster(
    work: Callable[[int], FrameResult], frames: Sequence[int], client: Client
) -> FrameResults:
    ahead = 2 * max(1, sum(client.nthreads().values()))
    yield from _ordered(lambda frame: client.submit(work, frame, pure=False), frames, ahead)


def _ordered(submit: Callable[[int], Any], frames: Sequence[int], ahead: int) -> FrameResults:
    """Keep a few frames under way and give them back in order."""
    waiting: deque[Future[FrameResult]] = deque()
    try:
        for frame in frames:
            waiting.append(submit(frame))
            if len(waiting) >= ahead:
                yield waiting.popleft().result()
        while waiting:
            yield waiting.popleft().result()
    finally:
        for future in waiting:
            future.cancel()
