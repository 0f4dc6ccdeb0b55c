"""Open images: TIFF, OME-TIFF, OME-Zarr and sequences of files; lazy and picklable."""

from __future__ import annotations

from hologyre.stacks.checksum import fingerprint
from hologyre.stacks.errors import StackError
from hologyre.stacks.open import as_stack, open_stack

__all__ = ["StackError", "as_stack", "fingerprint", "open_stack"]
