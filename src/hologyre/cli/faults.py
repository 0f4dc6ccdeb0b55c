"""What goes wrong for a reason the user can mend, and how it is told."""

from __future__ import annotations

import sys

DONE, FAILED, UNUSABLE, INTERRUPTED = 0, 1, 2, 130


class UsageFault(ValueError):
    """Options that do not fit together or name what is not there."""


def complain(sentence: str) -> None:
    """Tell one sentence on stderr."""
    sys.stderr.write(f"hologyre: {sentence}\n")


def is_expected(error: ValueError) -> bool:
    """Tell whether an error speaks of the input, the recipe, a log or the output folder."""
    from hologyre.analyse import ClusterError
    from hologyre.edits import LogError
    from hologyre.recipe import RecipeError
    from hologyre.results import OutputError
    from hologyre.stacks import StackError
    from hologyre.survey import SurveyError

    inputs = RecipeError | LogError | StackError | SurveyError
    return isinstance(error, inputs | UsageFault | OutputError | ClusterError)
