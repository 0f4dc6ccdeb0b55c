"""How long an edit takes on the tables, and a snap in a frame.

Run by ``pytest -s tests/benchmarks/bench_edits.py`` with OMP_NUM_THREADS=1. Times are judged by
that of one complex Fourier transform of a frame of 1024 x 1024 pixels in the same run.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
import scipy.fft

from hologyre.edits import kinds
from hologyre.edits.corrections import Corrections
from hologyre.edits.found import Found, found_of
from hologyre.edits.log import Log
from hologyre.edits.snap import snap
from hologyre.grid import Field, Grid, Window
from hologyre.motion import Motion
from hologyre.simulate.waves import RandomWaves
from hologyre.tables import EVENTS, SINGULARITIES, TRAJECTORIES, conform

FRAMES, PER_FRAME, SIDE = 20, 5000, 1024


@pytest.fixture(scope="module")
def found() -> Found:
    """A simulation: 5,000 tracks over 20 frames, 10^5 singularities, a pair event for each ten."""
    rng = np.random.default_rng(0)
    frame, track = (v.ravel() for v in np.indices((FRAMES, PER_FRAME)))
    start = rng.uniform(0.0, SIDE - 1.0, (PER_FRAME, 2))
    place = np.clip(start[track] + rng.normal(0.0, 0.3, (len(track), 2)), 0.0, SIDE - 1.0)
    table = conform(
        pd.DataFrame(
            {
                "frame": frame, "time_s": 0.1 * frame, "y_px": place[:, 0], "x_px": place[:, 1],
                "charge": np.where(track % 2, 1, -1), "sigma_y_px": 0.02, "sigma_x_px": 0.02,
                "origin": "found", "singularity": np.arange(len(track)),
            }
        ),
        SINGULARITIES,
    )  # fmt: skip
    link = np.where(frame > 0, "thread", "")
    trajectories = conform(table.assign(track=track, link=link), TRAJECTORIES).sort_values(
        ["track", "frame"], ignore_index=True
    )
    trajectories = trajectories[(trajectories["track"] % 10 > 1) | (trajectories["frame"] < 10)]
    table = table[table["singularity"].isin(trajectories["singularity"])]
    ended = np.arange(0, PER_FRAME, 10)
    events = conform(
        pd.DataFrame(
            {
                "event": np.arange(len(ended)), "kind": "pair_death", "frame_before": 9,
                "frame_after": 10, "y_px": start[ended, 0], "x_px": start[ended, 1],
                "tracks": [f"{n};{n + 1}" for n in ended],
            }
        ),
        EVENTS,
    )  # fmt: skip
    motion = Motion(trajectories, events)
    return found_of(table, motion, frames=range(FRAMES), frame_shape=(SIDE, SIDE))


def _edits(found: Found, rng: np.random.Generator) -> dict[str, Callable[[], kinds.Edit]]:
    def spot(last: int = FRAMES) -> dict[str, Any]:
        row = int(rng.integers(0, np.searchsorted(found.frame, last)))
        return {
            "frame": int(found.frame[row]),
            "where": (float(found.y_px[row]), float(found.x_px[row])),
            "charge": int(found.charge[row]),
            "reason": "measured here",
        }

    def place() -> kinds.Edit:
        y, x = rng.uniform(0.0, SIDE - 1.0, 2).tolist()
        return kinds.Place(frame=int(rng.integers(FRAMES)), where=(y, x), charge=1, winding=1)

    def move() -> kinds.Edit:
        at = spot()
        to = (at["where"][0] + 0.2, at["where"][1])
        return kinds.Move(**at, to=to, winding=at["charge"])

    return {
        "place": place,
        "move": move,
        "delete": lambda: kinds.Delete(**spot()),
        "flip charge": lambda: kinds.FlipCharge(**spot()),
        "confirm": lambda: kinds.Confirm(**spot()),
        "delete track": lambda: kinds.DeleteTrack(**spot(), track=0),
        "rename track": lambda: kinds.RenameTrack(**spot(), track=0, new_track=6000),
    }


def _do_next(corrections: Corrections, edits: Iterator[kinds.Edit]) -> None:
    # rows that an edit has taken out are gone for the next
    while not corrections.do(next(edits)):
        pass


def _snap_next(field: Field, places: Iterator[list[float]]) -> None:
    y, x = next(places)
    snap(field, y, x)


def _median_ms(work: Callable[[], object], times: int = 30) -> tuple[float, float]:
    taken = []
    for _ in range(times):
        began = time.perf_counter()
        work()
        taken.append(1e3 * (time.perf_counter() - began))
    return float(np.median(taken)), float(np.max(taken))


def _frame_transform_ms() -> float:
    frame = np.ones((SIDE, SIDE), np.complex128)
    return _median_ms(lambda: scipy.fft.fft2(frame), 5)[0]


def bench_an_edit_on_the_tables(found: Found) -> None:
    """Each kind of edit applied, taken back, and the frame's rows read; the log in memory."""
    corrections = Corrections(found)
    limit = _frame_transform_ms()
    print(f"\n{len(found.table)} rows; a transform of a frame takes {limit:.1f} ms")
    for name, make in _edits(found, np.random.default_rng(1)).items():
        done, worst = _median_ms(partial(_do_next, corrections, iter([make() for _ in range(90)])))
        print(f"{name:>14}: {done:6.2f} ms (worst {worst:.2f})")
        assert done < limit
    for name, work in {
        "undo": corrections.undo,
        "redo": corrections.redo,
        "frame": lambda: corrections.frame(7),
    }.items():
        done, worst = _median_ms(work)
        print(f"{name:>14}: {done:6.2f} ms (worst {worst:.2f})")
        assert done < limit

    def whole() -> object:
        corrections.undo()
        return corrections.tables

    done, _ = _median_ms(whole, 5)
    opened, _ = _median_ms(lambda: Corrections(found), 3)
    print(f"    all tables: {done:6.1f} ms;  opening: {opened:.1f} ms")


def bench_an_edit_written_to_the_disk(tmp_path: Path) -> None:
    """A line appended and synced: what the disk takes, whatever the tables."""
    log = Log(tmp_path / "edits.jsonl")
    edit = kinds.Delete(frame=0, where=(1.0, 2.0), charge=1)
    done, worst = _median_ms(lambda: log.append(edit))
    print(f"\nwritten and synced: {done:.2f} ms (worst {worst:.2f})")


def bench_a_snap_in_a_frame_of_1024() -> None:
    """A click's zero, on fields kept on their band and on the hologram's own pixels."""
    limit = _frame_transform_ms()
    for shortest, samples in ((10.0, 2.2), (5.0, 2.2), (8.0, 8.0)):
        wave = RandomWaves("disc", shortest, box_px=float(SIDE), seed=1)
        count = int(np.ceil(samples * SIDE / shortest))
        at = np.arange(count) * SIDE / count
        window = Window(0.0, SIDE - 1.0, 0.0, SIDE - 1.0)
        grid = Grid((SIDE, SIDE), (SIDE / count, SIDE / count), (0.0, 0.0), window)
        values = wave.on_grid(at, at, 0.0).astype(np.complex64)
        field = Field(values, grid, (0.0, 0.0), 1 / shortest)
        rng = np.random.default_rng(2)
        snap(field, 500.0, 500.0)
        places = iter(rng.uniform(0, SIDE - 1, (40, 2)).tolist())
        done, worst = _median_ms(partial(_snap_next, field, places))
        print(f"\n{count} x {count} samples: {done:.2f} ms (worst {worst:.2f})")
        assert done < limit
