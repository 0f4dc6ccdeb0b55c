from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import tifffile
from numpy.typing import NDArray

from hologyre.simulate.camera import Camera, record
from hologyre.simulate.random_waves import RandomWaves

FRAMES, SIDE = 6, 128


@pytest.fixture(scope="session")
def holograms() -> NDArray[Any]:
    """A simulation: six 8-bit frames of moving speckle, 20 px shortest wavelength."""
    wave = RandomWaves("disc", 20.0, spread_rad_per_frame=0.1, seed=4)
    fields = np.stack([wave.on_frame((SIDE, SIDE), float(t)) for t in range(FRAMES)])
    frames = record(fields, Camera(carrier_per_px=(0.13, 0.19)), seed=2)
    frames.setflags(write=False)
    return frames


@pytest.fixture(scope="session")
def stack_file(holograms: NDArray[Any], tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The simulation as an ImageJ stack with its pixel size and frame interval."""
    path = tmp_path_factory.mktemp("stack") / "speckle.tif"
    write_stack(path, holograms)
    return path


def write_stack(path: Path, frames: NDArray[Any]) -> None:
    tifffile.imwrite(
        path, frames, imagej=True, resolution=(1 / 0.25, 1 / 0.25),
        metadata={"axes": "TYX", "unit": "um", "finterval": 0.5},
    )  # fmt: skip
