"""Exact fields of simulated waves, and their true zeros as tables."""

from __future__ import annotations

from collections.abc import Callable, Iterable

import pandas as pd
import pytest

from hologyre.grid import Field, Grid, Window
from hologyre.simulate.truth import Truth, find_zeros, true_tracks
from hologyre.simulate.waves import RandomWaves, Wave


def _field_at(
    wave: Wave,
    t: float,
    period_px: tuple[float, float],
    samples: tuple[int, int],
    window: Window,
    origin_px: float = 0.0,
) -> Field:
    """One full period of a periodic wave at time t."""
    step = (period_px[0] / samples[0], period_px[1] / samples[1])
    grid = Grid(
        (int(window.y_max) + 1, int(window.x_max) + 1), step, (origin_px, origin_px), window
    )
    values = wave.on_grid(grid.y_px(samples[0]), grid.x_px(samples[1]), t)
    return Field(values, grid, (0.0, 0.0), 1 / wave.finest_px)


def _zeros_of(wave: Wave, window: Window, frames: Iterable[int]) -> pd.DataFrame:
    """The true zeros of a wave at whole times, as a table of singularities."""
    tables = [find_zeros(wave, window, float(t)).assign(frame=t) for t in frames]
    table = pd.concat(tables, ignore_index=True)
    return table.assign(singularity=range(len(table)))


class Speckle:
    """Random waves in a periodic box of 144 px, seen through a window of 96 px."""

    period_px = (144.0, 144.0)
    window = Window(0.0, 95.0, 0.0, 95.0)

    def __init__(self, spread: float, n_frames: int, seed: int = 1) -> None:
        self.wave = RandomWaves("disc", 24.0, spread, seed=seed, box_px=144.0)
        self.n_frames = n_frames
        self.truth: Truth = true_tracks(self.wave, self.window, n_frames)
        columns = ["frame", "y_px", "x_px", "charge"]
        tracks = self.truth.tracks.reset_index(drop=True)
        self.table = tracks[columns].assign(singularity=tracks.index)
        self.track = tracks["track"].to_numpy()

    def fields(self, frames: Iterable[int] | None = None) -> list[Field]:
        frames = range(self.n_frames) if frames is None else frames
        return [
            _field_at(self.wave, float(t), self.period_px, (16, 16), self.window) for t in frames
        ]

    def links(self) -> set[tuple[int, int]]:
        return _links_of(self.table.assign(track=self.track))


def _links_of(trajectories: pd.DataFrame) -> set[tuple[int, int]]:
    """The pairs of singularities that follow each other in a track."""
    rows = trajectories.sort_values(["track", "frame"])
    track, singularity = rows["track"].to_numpy(), rows["singularity"].to_numpy()
    same = track[1:] == track[:-1]
    return set(zip(singularity[:-1][same].tolist(), singularity[1:][same].tolist(), strict=True))


@pytest.fixture(scope="session")
def slow_speckle() -> Speckle:
    """Pace 0.1 rad per frame, eight frames."""
    return Speckle(0.1, 8)


@pytest.fixture(scope="session")
def fast_speckle() -> Speckle:
    """Pace 0.5 rad per frame, eight frames: zeros move a third of their spacing per frame."""
    return Speckle(0.5, 8)


@pytest.fixture(scope="session")
def field_at() -> Callable[..., Field]:
    """The function that samples one period of a wave."""
    return _field_at


@pytest.fixture(scope="session")
def zeros_of() -> Callable[..., pd.DataFrame]:
    """The function that tabulates the true zeros of a wave."""
    return _zeros_of


@pytest.fixture(scope="session")
def links_of() -> Callable[[pd.DataFrame], set[tuple[int, int]]]:
    """The function that lists the links of a table of tracks."""
    return _links_of
