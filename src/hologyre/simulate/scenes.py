"""Named scenes made ready and written down: a stack with its truth."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hologyre.grid import Grid
from hologyre.simulate.camera import Setup, set_up
from hologyre.simulate.scene_catalogue import SCENES, Scene, Shape
from hologyre.simulate.scene_files import SceneFiles, file_names, refuse_existing, write_files
from hologyre.simulate.truth import true_tracks
from hologyre.simulate.wave import ComplexArray, Wave

__all__ = ["SCENES", "Scene", "SceneFiles", "Staged", "stage", "write_scene"]


@dataclass(frozen=True, eq=False)
class Staged:
    """A scene made ready: frames can be taken in any order.

    Attributes
    ----------
    name : str
        Name of the scene.
    scene : Scene
        The scene.
    wave : Wave
        Its wave.
    setup : Setup
        The camera before it.
    frames : int
        Number of frames.
    """

    name: str
    scene: Scene
    wave: Wave
    setup: Setup
    frames: int

    def field(self, frame: int) -> ComplexArray:
        """Return the object field on the pixels of a frame."""
        return self.wave.on_frame(self.setup.shape, float(frame))

    def hologram(self, frame: int) -> NDArray[np.unsignedinteger]:
        """Return the recorded hologram of a frame."""
        return self.setup.record(self.field(frame), frame)


def stage(
    name: str, *, seed: int = 0, frames: int | None = None, shape: Shape | None = None
) -> Staged:
    """Make a scene ready for taking frames.

    Parameters
    ----------
    name : str
        One of `SCENES`.
    seed : int
        Seed of everything random.
    frames : int, optional
        Number of frames; the scene's own by default.
    shape : (int, int), optional
        Rows and columns; the scene's own by default.

    Raises
    ------
    ValueError
        If there is no such scene, or frames, shape or seed are out of range.
    """
    if name not in SCENES:
        raise ValueError(f"name: expected one of {', '.join(SCENES)}, got {name!r}")
    scene = SCENES[name]
    count = scene.frames if frames is None else frames
    size = scene.shape if shape is None else (int(shape[0]), int(shape[1]))
    if count < 1:
        raise ValueError(f"frames: expected 1 or more, got {count!r}")
    if min(size) < 32:
        raise ValueError(f"shape: expected at least 32 rows and columns, got {size!r}")
    if seed < 0:
        raise ValueError(f"seed: expected 0 or more, got {seed!r}")
    wave = scene.wave(size, seed)
    setup = set_up(scene.camera(size), wave.on_frame(size, 0.0), seed=seed)
    return Staged(name, scene, wave, setup, count)


def write_scene(
    name: str,
    out_dir: str | Path,
    *,
    seed: int = 0,
    frames: int | None = None,
    shape: Shape | None = None,
    progress: Callable[[float], None] | None = None,
) -> SceneFiles:
    """Write a scene's stack and its truth into a folder.

    Files: the stack as TIFF, truth_singularities.csv, truth_trajectories.csv, truth_events.csv,
    scene.json with every setting, README.md. The same name, seed, frames and shape give the same
    pixels and tables.

    Parameters
    ----------
    name : str
        One of `SCENES`.
    out_dir : path
        Folder; made if missing.
    seed, frames, shape
        As for `stage`.
    progress : callable, optional
        Called with the part done, 0 to 1.

    Returns
    -------
    SceneFiles
        Paths of what was written.

    Raises
    ------
    ValueError
        If there is no such scene, or frames, shape or seed are out of range.
    FileExistsError
        If one of the files is there already; nothing is written then.
    """
    staged = stage(name, seed=seed, frames=frames, shape=shape)
    paths = file_names(name, Path(out_dir))
    refuse_existing(paths)
    optics = staged.scene.optics
    truth = true_tracks(
        staged.wave,
        Grid.pixels(staged.setup.shape).valid,
        staged.frames,
        frame_interval_s=optics.frame_interval_s or 1.0,
        pixel_um=optics.pixel_um,
        progress=progress,
    )
    stack = np.stack([staged.hologram(frame) for frame in range(staged.frames)])
    write_files(
        paths,
        name=name,
        description=staged.scene.description,
        stack=stack,
        truth=truth,
        wave=staged.wave,
        setup=staged.setup,
        optics=optics,
        how=_how(name, seed, frames, shape),
    )
    return paths


def _how(name: str, seed: int, frames: int | None, shape: Shape | None) -> str:
    """Return the line that makes a scene again: the command, or Python where it says more."""
    if frames is None and shape is None:
        return f"hologyre simulate {name} --out DIR" + (f" --seed {seed}" if seed else "")
    options = f"seed={seed}, frames={frames}, shape={shape}"
    return f'hologyre.simulate.scenes.write_scene("{name}", "DIR", {options})'
