"""Accuracy of the whole chain on simulated holograms, over noise and ways to meet the edges.

Run with ``python -m pytest tests/benchmarks/bench_accuracy.py -s``; prints the table of
docs/accuracy.md. Every frame is a simulation: random waves of a disc spectrum with a shortest
wavelength of 24 px, not periodic in the frame, through the camera model at 8 bits.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import get_args

import numpy as np
import pandas as pd
import pytest
from scipy.spatial import cKDTree

import hologyre
from hologyre.fields.demodulate import Edges
from hologyre.grid import Window
from hologyre.simulate.camera import Camera, set_up
from hologyre.simulate.random_waves import RandomWaves
from hologyre.simulate.truth import find_zeros

SHORTEST_PX = 24.0
SHAPE = (400, 400)
FRAMES = 10
GATE_PX = 3.0
NOISE = [
    (full_well, visibility) for full_well in (1e3, 1e4, 5e4) for visibility in (0.2, 0.5, 0.8, 1.0)
]


@dataclass(frozen=True)
class Score:
    """Zeros found against the truth, inside a margin from the border."""

    errors: np.ndarray
    recall: float
    precision: float
    wrong_charges: int

    def line(self) -> str:
        """Return one row of the table."""
        middle, late = np.quantile(self.errors, [0.5, 0.9])
        rmse = np.sqrt(np.mean(self.errors**2))
        return (
            f"{self.recall:7.4f} {self.precision:9.4f} {middle:8.3f} {late:8.3f} {rmse:8.3f} "
            f"{self.wrong_charges:6d} {len(self.errors):6d}"
        )


def judge(found: pd.DataFrame, truth: pd.DataFrame, margin_px: float) -> Score:
    """Match zeros frame by frame to their nearest truth within the gate, and back."""
    inner = Window(0, SHAPE[0] - 1, 0, SHAPE[1] - 1)
    errors, missed, false, wrong = [], 0, 0, 0
    for frame, true in truth.groupby("frame"):
        got = found[found["frame"] == frame]
        places, known = got[["y_px", "x_px"]].to_numpy(), true[["y_px", "x_px"]].to_numpy()
        counted = inner.contains(known[:, 0], known[:, 1], margin_px)
        distance, nearest = cKDTree(places).query(known[counted])
        hit = distance < GATE_PX
        errors.append(distance[hit])
        missed += int((~hit).sum())
        charge = true["charge"].to_numpy()[counted][hit]
        wrong += int((got["charge"].to_numpy()[nearest[hit]] != charge).sum())
        counted = inner.contains(places[:, 0], places[:, 1], margin_px)
        distance, _ = cKDTree(known).query(places[counted])
        false += int((distance >= GATE_PX).sum())
    all_errors = np.concatenate(errors)
    hits = len(all_errors)
    return Score(all_errors, hits / (hits + missed), hits / (hits + false), wrong)


def holograms(full_well: float, visibility: float, frames: int, seed: int):
    """Simulate unrelated frames and their true zeros."""
    camera = Camera(full_well_e=full_well, visibility=visibility)
    axis = np.arange(SHAPE[0], dtype=float)
    window = Window(0, SHAPE[0] - 1, 0, SHAPE[1] - 1)
    stack, truth = [], []
    for frame in range(frames):
        wave = RandomWaves("disc", SHORTEST_PX, seed=seed + frame)
        field = wave.on_grid(axis, axis, 0.0)
        stack.append(set_up(camera, field, seed=seed + frame).record(field))
        truth.append(find_zeros(wave, window).assign(frame=frame))
    return np.stack(stack), pd.concat(truth, ignore_index=True)


@pytest.mark.parametrize("edges", get_args(Edges))
def bench_zeros_over_noise(edges: Edges):
    print(f"\nedges={edges}: zeros one wavelength from the border")
    print("full well  visib.  recall precision   median   90th %     RMSE charge  zeros")
    for full_well, visibility in NOISE:
        stack, truth = holograms(full_well, visibility, FRAMES, seed=1000)
        recipe = hologyre.Recipe().with_settings({"field.edges": edges})
        result = hologyre.analyse(stack, hologyre.survey(stack, recipe))
        score = judge(result.singularities, truth, SHORTEST_PX)
        print(f"{full_well:9.0f} {visibility:7.2f} {score.line()}")
        assert score.recall > 0.9
