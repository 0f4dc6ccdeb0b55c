"""The error a stack that cannot be used raises."""

from __future__ import annotations


class StackError(ValueError):
    """Images that cannot be used; one sentence naming the file, the value and the remedy."""
