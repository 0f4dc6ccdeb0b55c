"""Progress of long work on stderr: a bar on a terminal, a line now and then elsewhere."""

from __future__ import annotations

import sys
import time
from types import TracebackType
from typing import Any

_EVERY_S = 10.0


class Progress:
    """Called with (done, total); a context that leaves the terminal clean."""

    def __init__(self, name: str, unit: str = "frame") -> None:
        self._name, self._unit = name, unit
        self._bar: Any = None
        self._told = time.monotonic()

    def __enter__(self) -> Progress:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        if self._bar is not None:
            self._bar.close()

    def __call__(self, done: int, total: int) -> None:
        """Show that `done` of `total` are finished."""
        if not sys.stderr.isatty():
            now = time.monotonic()
            if done and now - self._told > _EVERY_S:
                self._told = now
                sys.stderr.write(f"{self._name}: {done} of {total} {self._unit}s\n")
                sys.stderr.flush()
            return
        if self._bar is None:
            from tqdm import tqdm

            self._bar = tqdm(total=total, desc=self._name, unit=self._unit, leave=False)
        self._bar.update(done - self._bar.n)
