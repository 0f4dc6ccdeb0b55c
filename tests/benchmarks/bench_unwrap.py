"""Speed of unwrapping against path following, its growth with the frame, and its memory.

Run with ``python -m pytest tests/benchmarks/bench_unwrap.py -s`` and OMP_NUM_THREADS=1. Every
phase is a simulation: random waves of a disc spectrum, not periodic in the frame. Times are
processor time; ratios are medians of runs that take turns with the reference,
`skimage.restoration.unwrap_phase`, which gives no optimum.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
import tracemalloc
from collections.abc import Callable
from functools import partial
from pathlib import Path

import numpy as np
import pytest
import scipy.fft
from skimage.restoration import unwrap_phase

from hologyre.phase.edges import edges_along
from hologyre.phase.residues import residues
from hologyre.phase.unwrap import Unwrapped, unwrap

ROUNDS = 7


def speckle(size: int, shortest_px: float) -> tuple[np.ndarray, np.ndarray]:
    """Return phase and amplitude, the largest 1, of a square frame."""
    rng = np.random.default_rng(int(shortest_px))
    whole = scipy.fft.next_fast_len(size * 5 // 4)
    f = scipy.fft.fftfreq(whole)
    inside = np.hypot(f[:, None], f) <= 1.0 / shortest_px
    spectrum = np.zeros((whole, whole), np.complex64)
    count = np.count_nonzero(inside)
    spectrum[inside] = rng.normal(size=count) + 1j * rng.normal(size=count)
    field = scipy.fft.ifft2(spectrum)[:size, :size]
    amplitude = np.abs(field)
    return np.angle(field).astype(np.float64), amplitude / amplitude.max()


def seconds(work: Callable[[], object]) -> float:
    start = time.process_time()
    work()
    return time.process_time() - start


def _repeat(phase: np.ndarray, weight: np.ndarray | None, times: int) -> None:
    for _ in range(times):
        unwrap(phase, weight=weight)


@pytest.fixture(scope="module", autouse=True)
def compiled() -> None:
    phase, amplitude = speckle(64, 12.0)
    unwrap(phase)
    unwrap(phase, weight=amplitude)


@pytest.mark.parametrize("shortest_px", [12.0, 40.0])
def test_exact_cuts_take_a_fraction_of_the_time_of_path_following(shortest_px: float) -> None:
    phase, amplitude = speckle(1024, shortest_px)
    ratios = []
    for _ in range(ROUNDS):
        uniform = seconds(lambda: unwrap(phase))
        reference = seconds(lambda: unwrap_phase(phase))
        weighted = seconds(lambda: unwrap(phase, weight=amplitude))
        ratios.append((reference, uniform / reference, weighted / reference))
    reference, uniform, weighted = np.median(ratios, axis=0)
    count = np.count_nonzero(residues(phase))
    print(
        f"\n1024 x 1024, speckle {shortest_px:.0f} px, {count} residues: path following "
        f"{reference:.3f} s; exact, uniform {uniform:.2f}, by amplitude {weighted:.2f} of it"
    )
    assert uniform <= 0.3
    assert weighted <= 0.5


@pytest.mark.parametrize("weighting", ["uniform", "amplitude"])
@pytest.mark.parametrize("shortest_px", [12.0, 40.0])
def test_time_grows_near_linearly_with_the_pixels(shortest_px: float, weighting: str) -> None:
    frames = {size: speckle(size, shortest_px) for size in (512, 1024, 2048, 4096)}
    times: dict[int, list[float]] = {size: [] for size in frames}
    for _ in range(3):
        for size, (phase, amplitude) in frames.items():
            weight = amplitude if weighting == "amplitude" else None
            repeats = max(1, 1024 // size) ** 2
            work = partial(_repeat, phase, weight, repeats)
            taken = seconds(work)
            times[size].append(taken / repeats / size**2)
    per_pixel = {size: 1e9 * min(t) for size, t in times.items()}
    told = ", ".join(f"{size}: {ns:.0f}" for size, ns in per_pixel.items())
    print(f"\nspeckle {shortest_px:.0f} px, {weighting}, ns per pixel: {told}")
    assert per_pixel[4096] <= 2.0 * per_pixel[512]


def test_memory_is_linear_in_the_pixels() -> None:
    peaks = {}
    for size in (512, 1024, 2048):
        phase, amplitude = speckle(size, 20.0)
        tracemalloc.start()
        result: Unwrapped | None = unwrap(phase, weight=amplitude)
        peaks[size] = tracemalloc.get_traced_memory()[1] / size**2
        tracemalloc.stop()
        del result
    told = ", ".join(f"{size}: {peak:.0f}" for size, peak in peaks.items())
    print(f"\nbytes per pixel at the peak: {told}")
    assert peaks[2048] <= 1.1 * peaks[512]


@pytest.mark.parametrize("shortest_px", [12.0, 24.0, 40.0])
def test_a_frame_is_solved_again_at_once_when_a_bridge_is_drawn(shortest_px: float) -> None:
    phase, amplitude = speckle(512, shortest_px)
    line = np.array([(100.0, 80.0), (300.0, 330.0), (420.0, 350.0)])

    def again() -> Unwrapped:
        return unwrap(phase, weight=amplitude, bridges=edges_along(line, phase.shape))

    taken = float(np.median([seconds(again) for _ in range(ROUNDS)]))
    print(f"\n512 x 512, speckle {shortest_px:.0f} px, one bridge: {1e3 * taken:.0f} ms")
    assert taken < 0.2


def test_first_call_costs_a_compilation_once_per_machine(tmp_path: Path) -> None:
    code = (
        "import numpy as np, time, hologyre.phase.unwrap as u; t = time.perf_counter();"
        "p = np.random.default_rng(0).uniform(-3, 3, (64, 64)); u.unwrap(p, weight=p * 0 + 1);"
        "print(time.perf_counter() - t)"
    )
    costs = {}
    for cache in ("fresh", "kept"):
        out = subprocess.run(
            [sys.executable, "-c", code],
            env={**os.environ, "NUMBA_CACHE_DIR": str(tmp_path)},
            capture_output=True,
            text=True,
            check=True,
        )
        costs[cache] = float(out.stdout)
    print(f"\nfirst call: {costs['fresh']:.1f} s compiling, {costs['kept']:.2f} s from the cache")
    assert costs["kept"] < 0.2 * costs["fresh"]
