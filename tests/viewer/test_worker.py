from __future__ import annotations

import threading
import time
from collections.abc import Callable
from typing import Any

import pytest
from napari.utils.notifications import notification_manager

from hologyre.viewer.worker import Cancelled, Task, Work, WorkError


@pytest.fixture
def run(qtbot: Any, make_napari_viewer: Any) -> Callable[..., tuple[Task, list[Any]]]:
    make_napari_viewer()

    def start(work: Callable[[], Work[Any]], *, stop_after: int = 0) -> tuple[Task, list[Any]]:
        told: list[Any] = []

        def step(value: Any) -> None:
            told.append(("step", value, threading.current_thread() is threading.main_thread()))
            if stop_after and len(told) == stop_after:
                task.cancel()

        ended: list[bool] = []
        task = Task(
            "Testing",
            work,
            total=3,
            on_step=step,
            on_done=lambda value: told.append(("done", value)),
            on_end=lambda: ended.append(True),
        )
        task.start()
        qtbot.waitUntil(lambda: bool(ended), timeout=10_000)
        return task, told

    return start


def test_work_runs_off_the_gui_thread_and_tells_on_it(run: Any) -> None:
    threads: list[bool] = []

    def work() -> Work[str]:
        threads.append(threading.current_thread() is threading.main_thread())
        yield 1
        yield 2
        return "finished"

    _, told = run(work)
    assert threads == [False]
    assert told == [("step", 1, True), ("step", 2, True), ("done", "finished")]


def test_cancelled_work_stops_and_tells_nothing_more(run: Any) -> None:
    reached: list[int] = []

    def work() -> Work[None]:
        for step in range(1000):
            reached.append(step)
            yield step
            time.sleep(0.002)

    task, told = run(work, stop_after=2)
    assert task.cancelled
    assert len(told) == 2
    assert len(reached) < 1000


def test_cancelled_work_closes_what_it_has_open(run: Any) -> None:
    closed: list[bool] = []

    def work() -> Work[None]:
        try:
            while True:
                yield 0
                time.sleep(0.002)
        finally:
            closed.append(True)

    run(work, stop_after=1)
    assert closed == [True]


def test_work_that_ends_itself_is_no_error(run: Any) -> None:
    def work() -> Work[None]:
        yield 0
        raise Cancelled

    _, told = run(work)
    assert ("done", None) in told or told == [("step", 0, True)]


def test_an_expected_failure_is_one_sentence_for_the_user(run: Any) -> None:
    def work() -> Work[None]:
        yield 0
        raise ValueError("no fringes were found")

    before = len(notification_manager.records)
    _, told = run(work)
    assert told == [("step", 0, True)]
    messages = [record.message for record in notification_manager.records[before:]]
    assert messages == ["no fringes were found"]


def test_an_unexpected_failure_ends_the_task_and_is_not_hidden(run: Any, qtbot: Any) -> None:
    def work() -> Work[None]:
        yield 0
        raise RuntimeError("cannot happen")

    with qtbot.captureExceptions() as exceptions:
        run(work)
    assert WorkError in [kind for kind, _, _ in exceptions]
