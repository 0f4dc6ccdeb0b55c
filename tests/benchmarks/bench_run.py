"""Pace and memory of a whole ``run``, figure and files included.

Run with ``python -m pytest tests/benchmarks/bench_run.py -s``. Each run is a process of its own,
with one thread for BLAS. Ratios are to one bare real FFT of the same frame in the same session,
float32, one worker. The stack is a simulation: moving speckle, 24 px shortest wavelength.
"""

from __future__ import annotations

import json
import os
import statistics
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
import scipy.fft
import tifffile

from hologyre.simulate.camera import Camera, record
from hologyre.simulate.random_waves import RandomWaves

CHILD = """
import json, sys
from pathlib import Path
from hologyre.report import overview_png
from hologyre.results import run
from hologyre.stacks import open_stack
summary = run(open_stack(sys.argv[1]), sys.argv[2], workers=int(sys.argv[3]), draw=overview_png)
seconds = json.loads((summary.folder / "run.json").read_text())["seconds"]
# the high-water mark of this process alone; getrusage would count the parent's
status = dict(line.split(":", 1) for line in Path("/proc/self/status").read_text().splitlines())
peak = int(status["VmHWM"].split()[0]) / 1024
print(json.dumps({"seconds": seconds, "peak_mib": peak, "frames": summary.frames}))
"""


@pytest.fixture(scope="module")
def stacks(tmp_path_factory: pytest.TempPathFactory) -> dict[tuple[int, int], Path]:
    """Stacks by side and number of frames; the longer one goes to and fro through the shorter."""
    folder = tmp_path_factory.mktemp("bench")
    made = {}
    for side, count, times in ((512, 10, 1), (512, 10, 8), (1024, 8, 1)):
        wave = RandomWaves("disc", 24.0, spread_rad_per_frame=0.1, seed=1)
        fields = np.stack([wave.on_frame((side, side), float(t)) for t in range(count)])
        frames = record(fields, Camera(), seed=1)
        frames = np.concatenate([frames[:: 1 if n % 2 == 0 else -1] for n in range(times)])
        path = folder / f"{side}-{len(frames)}.tif"
        tifffile.imwrite(path, frames, photometric="minisblack")
        made[side, len(frames)] = path
    return made


def one_run(stack: Path, out: Path, workers: int) -> dict:
    environment = os.environ | {"OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1"}
    done = subprocess.run(
        [sys.executable, "-c", CHILD, str(stack), str(out), str(workers)],
        capture_output=True, text=True, check=True, env=environment,
    )  # fmt: skip
    return json.loads(done.stdout)


def bare_fft_s(side: int) -> float:
    frame = np.random.default_rng(0).random((side, side), dtype=np.float32)
    times = []
    for _ in range(25):
        began = time.perf_counter()
        scipy.fft.rfft2(frame, workers=1)
        times.append(time.perf_counter() - began)
    return statistics.median(times)


@pytest.mark.parametrize(("side", "count"), [(512, 10), (512, 80), (1024, 8)])
@pytest.mark.parametrize("workers", [1, 2])
def test_pace_of_a_run(
    stacks: dict[tuple[int, int], Path], tmp_path: Path, side: int, count: int, workers: int
) -> None:
    result = one_run(stacks[side, count], tmp_path / "out", workers)
    seconds, bare = result["seconds"], bare_fft_s(side)
    frame_s = seconds["frames"] / count
    whole = sum(seconds.values())
    print(
        f"\n{side}x{side}, {count} frames, {workers} workers: {1 / frame_s:.1f} frames/s "
        f"({frame_s / bare:.0f} bare FFTs a frame); whole run {count / whole:.1f} frames/s, "
        + ", ".join(f"{name} {value:.1f} s" for name, value in seconds.items())
        + f"; peak {result['peak_mib']:.0f} MiB"
    )


def test_peak_memory_does_not_grow_with_the_stack(
    stacks: dict[tuple[int, int], Path], tmp_path: Path
) -> None:
    short, long = (
        one_run(stacks[512, count], tmp_path / str(count), 1)["peak_mib"] for count in (10, 80)
    )
    print(f"\npeak memory: {short:.0f} MiB for 10 frames, {long:.0f} MiB for 80")
    # 70 frames of 512x512 as complex64 would be 147 MiB; tables grow a little
    assert long < short + 60
