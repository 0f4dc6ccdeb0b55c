from __future__ import annotations

import threading
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest

from hologyre.viewer.frames import FrameCache, lazy_frames


def test_a_value_is_made_once_even_when_many_threads_ask_for_it() -> None:
    cache, calls, gate = FrameCache(), [], threading.Barrier(4, timeout=5)

    def make() -> int:
        calls.append(1)
        return 5

    def ask(_: int) -> int:
        gate.wait()
        return cache.get("key", make)

    with ThreadPoolExecutor(4) as pool:
        assert list(pool.map(ask, range(4))) == [5] * 4
    assert len(calls) == 1


def test_a_failure_is_raised_and_not_kept() -> None:
    cache = FrameCache()

    def fail() -> int:
        raise ValueError("no light")

    with pytest.raises(ValueError, match="no light"):
        cache.get("key", fail)
    assert cache.get("key", lambda: 3) == 3


def test_what_was_used_longest_ago_is_dropped_first() -> None:
    cache = FrameCache(keep_bytes=2500)
    for key in "abc":
        if key == "c":
            cache.get("a", np.zeros)
        cache.get(key, lambda: np.zeros(125))
    assert cache.peek("b") is None
    assert cache.peek("a") is not None
    assert cache.peek("c") is not None


def test_a_value_larger_than_the_cache_is_still_returned() -> None:
    cache = FrameCache(keep_bytes=8)
    assert cache.get("key", lambda: np.ones(100)).sum() == 100


def test_peek_tells_none_while_a_value_is_being_made() -> None:
    cache, started, go_on = FrameCache(), threading.Event(), threading.Event()

    def make() -> int:
        started.set()
        go_on.wait(5)
        return 1

    with ThreadPoolExecutor(1) as pool:
        asked = pool.submit(cache.get, "key", make)
        started.wait(5)
        assert cache.peek("key") is None
        go_on.set()
        assert asked.result() == 1
    assert cache.peek("key") == 1


def test_a_lazy_array_computes_only_the_frame_that_is_looked_at() -> None:
    asked: list[int] = []

    def frame(t: int) -> np.ndarray:
        asked.append(t)
        return np.full((4, 5), t)

    lazy = lazy_frames(frame, (10, 4, 5), np.float32)
    assert lazy.chunks == ((1,) * 10, (4,), (5,))
    assert asked == []
    picture = np.asarray(lazy[7])
    assert asked == [7]
    assert picture.dtype == np.float32
    assert (picture == 7).all()


def test_a_lazy_array_gives_any_part_of_any_frames() -> None:
    lazy = lazy_frames(lambda t: np.arange(20).reshape(4, 5) + 100 * t, (6, 4, 5), np.int64)
    whole = np.arange(20).reshape(1, 4, 5) + 100 * np.arange(6)[:, None, None]
    np.testing.assert_array_equal(lazy[2:5, 1:3, ::2], whole[2:5, 1:3, ::2])
    np.testing.assert_array_equal(lazy[:, 3, 4], whole[:, 3, 4])
    np.testing.assert_array_equal(lazy, whole)
