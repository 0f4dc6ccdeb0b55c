"""The scenes there are: for each a wave, a camera and optics."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from hologyre.optics import Optics
from hologyre.simulate.beams import VortexBeam
from hologyre.simulate.camera import Aberration, Camera, Dust
from hologyre.simulate.phase_object import PhaseBump, ThroughPhaseObject
from hologyre.simulate.plane_waves import ThreeWaves
from hologyre.simulate.random_waves import RandomWaves
from hologyre.simulate.wave import Wave

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
