"""Work off the GUI thread, with progress in the activity dock, that can be cancelled."""

from __future__ import annotations

from collections.abc import Callable, Generator
from typing import Any, TypeVar

from napari.qt.threading import GeneratorWorker, create_worker
from napari.utils.notifications import show_error
from napari.utils.progress import cancelable_progress

T = TypeVar("T")
#: What a task runs: it yields after each piece of work and returns the outcome.
Work = Generator[Any, None, T]


class Task:
    """A piece of work that runs in a thread of its own.

    Callbacks run on the GUI thread, and none runs any more once the task is cancelled.

    Parameters
    ----------
    title : str
        What is being done, as the activity dock shows it.
    work : generator function
        Yields after each step; each yield is a place where it can be cancelled. A ValueError or
        OSError raised in it is a sentence for the user.
    total : int
        Number of yields to expect; 0 if unknown.
    on_step, on_done : callable, optional
        Get what the work yields and what it returns.
    on_end : callable, optional
        Called last, whatever the outcome.
    """

    def __init__(
        self,
        title: str,
        work: Callable[[], Work[T]],
        *,
        total: int = 0,
        on_step: Callable[[Any], None] | None = None,
        on_done: Callable[[T], None] | None = None,
        on_end: Callable[[], None] | None = None,
    ) -> None:
        self.title = title
        self.cancelled = False
        self._work = work
        self._on_step = on_step
        self._on_done = on_done
        self._on_end = on_end
        self._bar: _Bar | None = None
        self._total = total
        self._worker: GeneratorWorker = create_worker(self._guarded, _start_thread=False)
        self._worker.yielded.connect(self._step)
        self._worker.returned.connect(self._done)
        self._worker.finished.connect(self._end)

    def start(self) -> None:
        """Begin."""
        self._bar = _Bar(total=self._total, desc=self.title, cancel_callback=self.cancel)
        self._worker.start()

    def cancel(self) -> None:
        """Stop at the next step; what was finished stays."""
        self.cancelled = True
        self._worker.quit()

    def _guarded(self) -> Work[Any]:
        try:
            return (yield from self._work())
        except (ValueError, OSError) as error:
            return _Refused(str(error))

    def _step(self, value: Any) -> None:
        if self._stopped():
            return
        if self._bar is not None:
            self._bar.increment_with_overflow()
        if self._on_step is not None:
            self._on_step(value)

    def _done(self, value: Any) -> None:
        if self._stopped():
            return
        if isinstance(value, _Refused):
            show_error(value.reason)
        elif self._on_done is not None:
            self._on_done(value)

    def _end(self) -> None:
        if self._bar is not None:
            self._bar.close()
        if self._on_end is not None:
            self._on_end()

    def _stopped(self) -> bool:
        # closing the window stops the worker without asking the task
        return self.cancelled or bool(self._worker.abort_requested)


class _Refused:
    """Why the work could not be done, in a sentence for the user."""

    def __init__(self, reason: str) -> None:
        self.reason = reason


class _Bar(cancelable_progress):
    """A progress bar whose button calls the task's `cancel` at once."""

    def cancel(self) -> None:
        super().cancel()
        if self.cancel_callback is not None:
            self.cancel_callback()
