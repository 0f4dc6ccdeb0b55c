"""What tells one stack from another, so that a run is not continued with other images."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable
from pathlib import Path

# reading more than this only to name the input would take longer than the check is worth
_HASH_BYTES = 2**31


def fingerprint(paths: Iterable[str | Path]) -> str:
    """Return a short name of the files' content.

    Up to 2 GiB it is the SHA-256 of the bytes in the order given (``sha256:...``); above,
    of names, sizes and times of change (``stat:...``). Folders count with all their files.
    """
    files: list[Path] = []
    for entry in map(Path, paths):
        files += sorted(p for p in entry.rglob("*") if p.is_file()) if entry.is_dir() else [entry]
    digest = hashlib.sha256()
    if sum(p.stat().st_size for p in files) <= _HASH_BYTES:
        for path in files:
            with path.open("rb") as file:
                while block := file.read(1 << 20):
                    digest.update(block)
        return f"sha256:{digest.hexdigest()}"
    for path in files:
        stat = path.stat()
        digest.update(f"{path.name}\0{stat.st_size}\0{stat.st_mtime_ns}\0".encode())
    return f"stat:{digest.hexdigest()}"
