"""Work off the GUI thread, with progress in the activity dock, that can be cancelled."""

from __future__ import annotations

from collections.abc import Callable, Generator
from functools import partial
from typing import Any, TypeVar

from napari.qt.threading import GeneratorWorker, create_worker
from napari.utils.notifications import show_error
from napari.utils.progress import cancelable_progress
from psygnal import Signal

T = TypeVar("T")
#: What a task runs: it yields after each piece of work and returns the outcome.
Work = Generator[Any, None, T]


class Cancelled(Exception):
    """Raised in work that cannot yield where it is, to end it."""


class WorkError(Exception):
    """Work that failed for a reason nobody thought of."""


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

    stepped = Signal()

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
        self.steps = 0
        self.total = total
        self._work = work
        self._on_step = on_step
        self._on_done = on_done
        self._on_end = on_end
        self._bar: _Bar | None = None
        call = _Titled(self._guarded)
        call.title = title
        self._worker: GeneratorWorker = create_worker(
            call, _start_thread=False, _worker_class=_Worker
        )
        self._worker.yielded.connect(self._step)
        self._worker.returned.connect(self._done)
        self._worker.finished.connect(self._end)

    def start(self) -> None:
        """Begin."""
        self._bar = _Bar(total=self.total, desc=self.title, cancel_callback=self.cancel)
        self._worker.start()

    def cancel(self) -> None:
        """Stop at the next step; what was finished stays."""
        self.cancelled = True
        self._worker.quit()

    def _guarded(self) -> Work[Any]:
        try:
            return (yield from self._work())
        except Cancelled:
            return None
        except (ValueError, OSError) as error:
            return _Refused(str(error))
        except RuntimeError as error:
            # superqt takes these for a sign that the worker is gone, and would never tell the end
            raise WorkError(str(error)) from error

    def _step(self, value: Any) -> None:
        if self._stopped():
            return
        self.steps += 1
        if self._on_step is not None:
            self._on_step(value)
        self.stepped.emit()
        if self._bar is not None:
            self._bar.reach(self.steps)

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


class _Worker(GeneratorWorker):
    """A worker that closes its generator, in its own thread, when it is stopped."""

    def work(self) -> Any:
        try:
            return super().work()
        finally:
            self._gen.close()


class _Titled(partial[Work[Any]]):
    """A call that prints as its title, as napari does when a window with work is closed."""

    title = ""

    def __str__(self) -> str:
        return self.title


class _Refused:
    """Why the work could not be done, in a sentence for the user."""

    def __init__(self, reason: str) -> None:
        self.reason = reason


class _Bar(cancelable_progress):
    """A progress bar whose button calls the task's `cancel` at once."""

    _moving = False

    def reach(self, steps: int) -> None:
        """Show so many steps as done.

        Drawing the bar handles waiting events, the next step's among them; these must not draw
        it again, or steps would pile up and end in reverse order.
        """
        if self._moving or not self.total:
            return
        self._moving = True
        self.update(min(steps, self.total) - self.n)
        self._moving = False

    def cancel(self) -> None:
        super().cancel()
        if self.cancel_callback is not None:
            self.cancel_callback()
