from __future__ import annotations

import hashlib
from pathlib import Path

import pytest

from hologyre.stacks import fingerprint


def test_fingerprint_is_the_sha256_of_all_bytes_in_order(tmp_path: Path) -> None:
    first, second = tmp_path / "a", tmp_path / "b"
    first.write_bytes(b"one")
    second.write_bytes(b"two")
    expected = hashlib.sha256(b"onetwo").hexdigest()
    assert fingerprint([first, second]) == f"sha256:{expected}"
    assert fingerprint([tmp_path]) == f"sha256:{expected}"
    assert fingerprint([second, first]) != f"sha256:{expected}"


def test_large_input_is_told_by_size_and_time(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("hologyre.stacks.checksum._HASH_BYTES", 2)
    path = tmp_path / "a"
    path.write_bytes(b"one")
    before = fingerprint([path])
    assert before.startswith("stat:")
    path.write_bytes(b"other")
    assert fingerprint([path]) != before
