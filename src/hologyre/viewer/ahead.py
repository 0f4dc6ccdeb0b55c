"""Frames computed ahead of the time slider, off the GUI thread."""

from __future__ import annotations

from collections.abc import Callable, Generator, Sequence

from napari.qt.threading import GeneratorWorker, create_worker

Step = Callable[[], object]


class Ahead:
    """Does small pieces of work in the background, always those asked for last.

    A new request replaces what was not yet begun of the one before.

    Parameters
    ----------
    on_step : callable
        Called on the GUI thread after each piece.
    """

    def __init__(self, on_step: Callable[[], None]) -> None:
        self._on_step = on_step
        self._waiting: Sequence[Step] = ()
        self._worker: GeneratorWorker | None = None

    def ask(self, steps: Sequence[Step]) -> None:
        """Do these next, in order, and drop what was asked before."""
        self._waiting = steps
        if self._worker is not None:
            self._worker.quit()
        else:
            self._begin()

    def stop(self) -> None:
        """Drop everything."""
        self.ask(())

    def _begin(self) -> None:
        steps, self._waiting = self._waiting, ()
        if not steps:
            return
        self._worker = create_worker(_each, steps, _start_thread=False)
        self._worker.yielded.connect(self._told)
        self._worker.finished.connect(self._ended)
        self._worker.start()

    def _told(self) -> None:
        if self._worker is not None and not self._worker.abort_requested:
            self._on_step()

    def _ended(self) -> None:
        self._worker = None
        self._begin()


def _each(steps: Sequence[Step]) -> Generator[None, None, None]:
    for step in steps:
        step()
        yield
