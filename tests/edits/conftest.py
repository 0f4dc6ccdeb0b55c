from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest

from hologyre.edits import kinds
from hologyre.edits.found import Found, found_of
from hologyre.edits.kinds import Edit
from hologyre.motion import Motion, link_singularities
from hologyre.tables import SINGULARITIES, conform

AT: dict[str, Any] = {"time": "2026-03-01T09:30:00Z"}


@pytest.fixture(scope="session")
def one_of_each() -> list[Edit]:
    """One edit of every kind."""
    here, there = (10.25, 20.5), (11.0, 21.75)
    return [
        kinds.Place(frame=3, where=here, charge=1, winding=0, reason="seen by eye", **AT),
        kinds.Move(frame=3, where=here, charge=-1, to=there, winding=-1, **AT),
        kinds.Delete(frame=3, where=here, charge=-1, author="Ada", reason="dust", **AT),
        kinds.FlipCharge(frame=3, where=here, charge=1, **AT),
        kinds.Confirm(frame=3, where=here, charge=1, **AT),
        kinds.Confirm(frame=3, where=here, charge=0, what="event", **AT),
        kinds.Reject(frame=3, where=here, charge=1, reason="noise “twins”", **AT),
        kinds.CutTrack(frame=3, where=(here, there), later_frame=4, charge=1, **AT),
        kinds.JoinTracks(frame=3, where=(here, there), later_frame=6, charge=1, **AT),
        kinds.DeleteTrack(frame=0, where=here, charge=1, track=7, **AT),
        kinds.RenameTrack(frame=0, where=here, charge=1, track=7, new_track=40, **AT),
        kinds.MarkPair(frame=5, where=(here, there), event="pair_death", **AT),
        kinds.Barrier(frame=2, where=(here, there), **AT),
        kinds.Bridge(frame=None, where=(here, there, (0.0, 0.0)), **AT),
        kinds.Region(frame=None, where=(here, there, (0.0, 0.0)), use="leave out", **AT),
    ]


SHAPE = (120, 120)


def drifting(seed: int, n_frames: int = 8, n_tracks: int = 30) -> pd.DataFrame:
    """A simulation: singularities that drift, some unseen in a frame, some pairs that die."""
    rng = np.random.default_rng(seed)
    rows = []
    for track in range(n_tracks):
        place = rng.uniform(10.0, 110.0, 2)
        drift = rng.normal(0.0, 0.6, 2)
        first, last = (0, n_frames) if track % 3 else np.sort(rng.integers(0, n_frames + 1, 2))
        for frame in range(first, last):
            if rng.random() < 0.08:
                continue
            y, x = place + drift * frame + rng.normal(0.0, 0.05, 2)
            rows.append((frame, 0.5 * frame, y, x, 0.2 * y, 0.2 * x, 1 if track % 2 else -1))
    names = ["frame", "time_s", "y_px", "x_px", "y_um", "x_um", "charge"]
    table = pd.DataFrame(rows, columns=names).sort_values(["frame", "y_px"], ignore_index=True)
    count = len(table)
    table = table.assign(
        sigma_y_px=0.02, sigma_x_px=0.03, cov_yx_px2=0.0, robustness=rng.uniform(0.1, 1.0, count),
        robustness_snr=rng.uniform(1.0, 30.0, count), trust=rng.uniform(0.5, 1.0, count),
        axis_ratio=0.5, orientation_rad=0.1, origin="found", singularity=np.arange(count),
    )  # fmt: skip
    return conform(table, SINGULARITIES)


@pytest.fixture(scope="session")
def table() -> pd.DataFrame:
    return drifting(0)


@pytest.fixture(scope="session")
def motion(table: pd.DataFrame) -> Motion:
    return link_singularities(table, frame_shape=SHAPE, frames=range(8))


@pytest.fixture(scope="session")
def found(table: pd.DataFrame, motion: Motion) -> Found:
    return found_of(table, motion, frames=range(8), frame_shape=SHAPE)
