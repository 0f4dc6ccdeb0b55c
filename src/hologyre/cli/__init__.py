"""The command ``hologyre``."""

from __future__ import annotations

import logging
import signal
import sys
from collections.abc import Sequence
from types import FrameType

from hologyre.cli.commands import app
from hologyre.cli.faults import DONE, FAILED, UNUSABLE, complain, is_expected

__all__ = ["main"]


def main(arguments: Sequence[str] | None = None) -> None:
    """Run the command and exit: 0 done, 1 failed, 2 unusable input, 130 interrupted."""
    # a cluster asks to stop by SIGTERM: what is finished is kept then, too
    signal.signal(signal.SIGTERM, _interrupt)
    # the reader's remarks on odd files reach the user as our own sentences or not at all
    logging.getLogger("tifffile").addHandler(logging.NullHandler())
    logging.getLogger("tifffile").propagate = False
    sys.exit(_status(arguments))


def _interrupt(number: int, frame: FrameType | None) -> None:
    raise KeyboardInterrupt


def _status(arguments: Sequence[str] | None) -> int:
    try:
        app(args=None if arguments is None else list(arguments), prog_name="hologyre")
    except SystemExit as end:
        return end.code if isinstance(end.code, int) else DONE
    except ValueError as error:
        if not is_expected(error):
            raise
        complain(str(error))
        return UNUSABLE
    except OSError as error:
        complain(f"{error.filename or 'input or output'}: {error.strerror or error}.")
        return FAILED
    return DONE
