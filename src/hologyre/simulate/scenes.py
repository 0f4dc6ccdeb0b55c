"""Named scenes: a wave, a camera and optics that make a stack with truth."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hologyre.grid import Grid
from hologyre.optics import Optics
from hologyre.simulate.beams import VortexBeam
from hologyre.simulate.camera import Aberration, Camera, Dust, Setup, set_up
from hologyre.simulate.phase_object import PhaseBump, ThroughPhaseObject
from hologyre.simulate.plane_waves import ThreeWaves
from hologyre.simulate.random_waves import RandomWaves
from hologyre.simulate.scene_files import SceneFiles, file_names, refuse_existing, write_files
from hologyre.simulate.truth import true_tracks
from hologyre.simulate.wave import ComplexArray, Wave

Shape = tuple[int, int]

# A long-distance objective of 50x on 3.45 um pixels, its aperture stop closed to 0.32: the
# shortest wavelength is 24 px.
_SHORTEST_PX = 24.0
_SPECKLE_OPTICS = Optics(
    wavelength_nm=532.0,
    camera_pixel_um=3.45,
    magnification=50.0,
    numerical_aperture=0.532 / (_SHORTEST_PX * 3.45 / 50.0),
    frame_interval_s=2.0,
)
_BEAM_OPTICS = Optics(
    wavelength_nm=632.8, camera_pixel_um=5.0, magnification=1.0, frame_interval_s=0.5
)


@dataclass(frozen=True)
class Scene:
    """A scene by name.

    Attributes
    ----------
    description : str
        One line.
    frames : int
        Frames unless told otherwise.
    shape : (int, int)
        Rows and columns unless told otherwise.
    optics : Optics
        What turns pixels and frames into lengths and times.
    wave : callable
        Makes the wave from shape and seed.
    camera : callable
        Makes the camera from the shape.
    """

    description: str
    frames: int
    shape: Shape
    optics: Optics
    wave: Callable[[Shape, int], Wave]
    camera: Callable[[Shape], Camera]


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
    if seed == 0 and frames is None and shape is None:
        return f"hologyre simulate {name} --out DIR"
    options = f"seed={seed}, frames={frames}, shape={shape}"
    return f'hologyre.simulate.scenes.write_scene("{name}", "DIR", {options})'


def _film(shape: Shape, seed: int) -> Wave:
    return RandomWaves(
        "disc",
        _SHORTEST_PX,
        spread_rad_per_frame=0.1,
        seed=seed,
        count=200,
        slowing_frames=25.0,
    )


def _film_camera(shape: Shape) -> Camera:
    ny, nx = shape
    return Camera(
        carrier_per_px=(0.2189, 0.0411),
        visibility=0.8,
        full_well_e=1e4,
        read_noise_e=8.0,
        black_level=3.0,
        envelope_px=1.1 * max(shape),
        envelope_centre=(0.46, 0.55),
        aberration=Aberration(
            tilt_y_rad=0.7,
            tilt_x_rad=-0.4,
            defocus_rad=1.5,
            astigmatism_rad=0.5,
            oblique_rad=-0.3,
        ),
        drift_rad_per_frame=0.04,
        vibration_rad=0.12,
        vibration_per_px=5e-5,
        dust=(
            Dust((0.22 * ny, 0.71 * nx), radius_px=7.0, depth=0.35, blur=3.0),
            Dust((0.63 * ny, 0.18 * nx), radius_px=10.0, depth=0.3, blur=4.0),
            Dust((0.84 * ny, 0.58 * nx), radius_px=5.0, depth=0.3, blur=2.5),
        ),
        hot_pixels=3,
    )


def _still_speckle(shape: Shape, seed: int) -> Wave:
    return RandomWaves("disc", _SHORTEST_PX, seed=seed, count=200)


def _weak_camera(shape: Shape) -> Camera:
    return Camera(
        carrier_per_px=(0.1237, 0.1853),
        visibility=0.2,
        full_well_e=1e4,
        read_noise_e=8.0,
        black_level=3.0,
        envelope_px=1.1 * max(shape),
    )


def _hosting(
    shape: Shape,
    positive: tuple[tuple[float, float], ...],
    negative: tuple[tuple[float, float], ...] = (),
    zeta: float = 0.0,
    zeta_rate: float = 0.0,
) -> VortexBeam:
    """Return a beam in the middle of the frame; places as parts of its waist from the axis."""
    waist = 0.3 * min(shape)
    centre = ((shape[0] - 1) / 2, (shape[1] - 1) / 2)

    def places(parts: tuple[tuple[float, float], ...]) -> list[tuple[float, float]]:
        return [(centre[0] + waist * y, centre[1] + waist * x) for y, x in parts]

    return VortexBeam.hosting(
        places(positive),
        places(negative),
        waist_px=waist,
        centre_px=centre,
        zeta=zeta,
        zeta_rate=zeta_rate,
    )


def _vortex_beams(shape: Shape, seed: int) -> Wave:
    return _hosting(
        shape,
        positive=((0.55, 0.5), (-0.65, 0.2), (0.05, -0.75)),
        negative=((0.5, -0.4), (-0.15, 0.05)),
        zeta=-0.4,
        zeta_rate=1 / 30,
    )


def _charge_two(shape: Shape, seed: int) -> Wave:
    return _hosting(shape, positive=((0.07, -0.11), (0.07, -0.11)))


def _three_waves(shape: Shape, seed: int) -> Wave:
    return ThreeWaves(_SHORTEST_PX, angle_rad=0.37, third=1.55, third_rate=0.037)


def _cell(shape: Shape, seed: int) -> Wave:
    ny, nx = shape
    size = min(shape)
    host = _hosting(
        shape,
        positive=((-0.45, 0.38), (0.52, -0.2)),
        negative=((0.18, 0.61), (-0.3, -0.55)),
        zeta=-0.2,
        zeta_rate=0.02,
    )
    creep = (0.15, 0.3)
    return ThroughPhaseObject(
        host,
        (
            PhaseBump((0.5 * ny, 0.47 * nx), (0.22 * size, 0.3 * size), 2.4, 2, creep),
            PhaseBump((0.47 * ny, 0.51 * nx), (0.09 * size, 0.11 * size), 1.3, 1, creep),
            PhaseBump((0.58 * ny, 0.36 * nx), (0.035 * size, 0.035 * size), 0.6, 1, creep),
        ),
    )


def _bench_camera(shape: Shape) -> Camera:
    return Camera(
        carrier_per_px=(-0.1141, 0.2033),
        visibility=0.8,
        full_well_e=1e4,
        read_noise_e=5.0,
        black_level=3.0,
        envelope_px=1.3 * max(shape),
        aberration=Aberration(tilt_y_rad=0.3, defocus_rad=0.6),
        drift_rad_per_frame=0.03,
        vibration_rad=0.05,
    )


def _deep_camera(shape: Shape) -> Camera:
    return Camera(carrier_per_px=(0.1519, 0.1687), full_well_e=2e4, bits=12, black_level=20.0)


SCENES: dict[str, Scene] = {
    "drying-film": Scene(
        "a developed speckle field seen through a film that dries: it slows down and settles",
        40,
        (384, 384),
        _SPECKLE_OPTICS,
        _film,
        _film_camera,
    ),
    "vortex-beams": Scene(
        "a Gaussian beam hosting three positive and two negative vortices, through its waist",
        25,
        (256, 256),
        _BEAM_OPTICS,
        _vortex_beams,
        _bench_camera,
    ),
    "three-waves": Scene(
        "three plane waves, one of them growing until every vortex pair dies at once",
        20,
        (192, 192),
        _BEAM_OPTICS,
        _three_waves,
        _deep_camera,
    ),
    "cell-in-beam": Scene(
        "a cell creeping through a beam that holds four vortices",
        20,
        (256, 256),
        _SPECKLE_OPTICS,
        _cell,
        _bench_camera,
    ),
    "charge-two": Scene(
        "one frame of a beam with a vortex of charge two",
        1,
        (256, 256),
        _BEAM_OPTICS,
        _charge_two,
        _bench_camera,
    ),
    "weak-fringes": Scene(
        "one frame of speckle whose fringes are weak: visibility 0.2",
        1,
        (256, 256),
        _SPECKLE_OPTICS,
        _still_speckle,
        _weak_camera,
    ),
}
