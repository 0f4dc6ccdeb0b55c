"""A camera that turns an object field into off-axis holograms."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hologyre.simulate.wave import ComplexArray, FloatArray, require_positive

# One independent stream of random numbers for each purpose, so that frames and blanks can be
# made again one by one.
_HOT, _VIBRATION, _FRAME, _DARK, _REFERENCE, _EMPTY = range(6)


@dataclass(frozen=True)
class Aberration:
    """Phase of the object beam's imaging error over the frame, rad.

    With (Y, X) the position from the frame's middle in halves of its longer side, the phase is
    ``tilt_y Y + tilt_x X + defocus (X^2 + Y^2) + astigmatism (X^2 - Y^2) + oblique 2 X Y``.
    """

    tilt_y_rad: float = 0.0
    tilt_x_rad: float = 0.0
    defocus_rad: float = 0.0
    astigmatism_rad: float = 0.0
    oblique_rad: float = 0.0

    def phase(self, shape: tuple[int, int]) -> FloatArray:
        """Return the phase on the pixels of a frame, rad."""
        y, x = _centred(shape)
        return (
            self.tilt_y_rad * y
            + self.tilt_x_rad * x
            + self.defocus_rad * (x**2 + y**2)
            + self.astigmatism_rad * (x**2 - y**2)
            + self.oblique_rad * 2 * x * y
        )


@dataclass(frozen=True)
class Dust:
    """A speck out of focus: rings around it in the amplitude of both beams.

    A Gaussian absorber of 1/e radius `radius_px` and depth `depth`, seen after a free path of
    `blur` of its Rayleigh ranges: amplitude factor |1 - depth exp(-r^2 / (q radius^2)) / q|,
    q = 1 + i blur.
    """

    centre_px: tuple[float, float]
    radius_px: float
    depth: float = 0.5
    blur: float = 3.0

    def transmission(self, shape: tuple[int, int]) -> FloatArray:
        """Return the amplitude transmission on the pixels of a frame."""
        square = (np.arange(shape[0])[:, np.newaxis] - self.centre_px[0]) ** 2 + (
            np.arange(shape[1]) - self.centre_px[1]
        ) ** 2
        q = 1 + 1j * self.blur
        return np.abs(1 - self.depth / q * np.exp(-square / (q * self.radius_px**2)))


@dataclass(frozen=True)
class Camera:
    """Settings of a hologram camera and its reference beam.

    Parameters
    ----------
    carrier_per_px : (float, float)
        Fringe frequency (fy, fx), cycles/px, any real numbers; the object field multiplies
        ``exp(+2 pi i (fy y + fx x))`` in the hologram.
    visibility : float
        ``2 sqrt(Io Ir) / (Io + Ir)`` of the beams' mean intensities over the first frame, the
        reference being the stronger one; 0 < visibility <= 1.
    coherence : float
        Further factor of the fringes' contrast (vibration during the exposure, bandwidth).
    full_well_e : float
        Full well, electrons; the top of the digital scale.
    read_noise_e : float
        Standard deviation of the read noise, electrons.
    bits : int
        Bits of a pixel, 8 to 16; more than 8 are kept in uint16, at its low end.
    black_level : float
        Counts added to every pixel before rounding, so that read noise is not cut at 0.
    exposure : float
        Part of the full well that `exposure_quantile` of the first frame's pixels stay below.
        More than 1 saturates.
    exposure_quantile : float
        See `exposure`.
    shot_noise : bool
        False for an unlimited number of photons.
    envelope_px : float, optional
        1/e radius of the reference beam's amplitude, a Gaussian; None for a plane wave.
    envelope_centre : (float, float)
        Its centre (y, x) as parts of the frame.
    aberration : Aberration
        Phase error of the object beam.
    drift_rad_per_frame : float
        Slow drift of the phase between the beams.
    vibration_rad : float
        Standard deviation of the phase's jump in each frame.
    vibration_per_px : float
        Standard deviation of the carrier's jump in each frame, along y and x, cycles/px.
    dust : tuple of Dust
        Specks in both beams.
    hot_pixels : int
        Number of hot pixels, at random places, with a steady 0.3 to 1.2 full wells more.

    Raises
    ------
    ValueError
        If a setting is out of range.
    """

    carrier_per_px: tuple[float, float] = (0.13, 0.19)
    visibility: float = 0.8
    coherence: float = 1.0
    full_well_e: float = 1e4
    read_noise_e: float = 5.0
    bits: int = 8
    black_level: float = 0.0
    exposure: float = 0.9
    exposure_quantile: float = 0.999
    shot_noise: bool = True
    envelope_px: float | None = None
    envelope_centre: tuple[float, float] = (0.5, 0.5)
    aberration: Aberration = field(default_factory=Aberration)
    drift_rad_per_frame: float = 0.0
    vibration_rad: float = 0.0
    vibration_per_px: float = 0.0
    dust: tuple[Dust, ...] = ()
    hot_pixels: int = 0

    def __post_init__(self) -> None:
        for name in ("visibility", "coherence", "exposure_quantile"):
            value = getattr(self, name)
            if not 0 < value <= 1:
                raise ValueError(f"{name}: expected more than 0 and at most 1, got {value!r}")
        require_positive("full_well_e", self.full_well_e)
        require_positive("exposure", self.exposure)
        if self.envelope_px is not None:
            require_positive("envelope_px", self.envelope_px)
        for name in ("read_noise_e", "black_level", "vibration_rad", "vibration_per_px"):
            value = getattr(self, name)
            if not 0 <= value < float("inf"):
                raise ValueError(f"{name}: expected 0 or more, got {value!r}")
        if not 8 <= self.bits <= 16:
            raise ValueError(f"bits: expected 8 to 16, got {self.bits!r}")
        if self.hot_pixels < 0:
            raise ValueError(f"hot_pixels: expected 0 or more, got {self.hot_pixels!r}")

    @property
    def top(self) -> int:
        """Highest count."""
        return (1 << self.bits) - 1

    @property
    def dtype(self) -> type[np.uint8] | type[np.uint16]:
        """Type of the recorded pixels."""
        return np.uint8 if self.bits == 8 else np.uint16


@dataclass(frozen=True, eq=False)
class Setup:
    """A camera set up before an object: whatever stays the same through a stack.

    Made by `set_up`. All methods are functions of the frame's number and the seed alone: any
    frame can be made again without those before it.

    Attributes
    ----------
    camera : Camera
        Its settings.
    seed : int
        Seed of noise, vibration and hot pixels.
    reference : (y, x) float array
        Amplitude of the reference beam in the plane of the camera, without dust.
    object_gain : float
        The object field is multiplied by this.
    counts_per_unit : float
        Counts for an intensity of 1.
    dust : (y, x) float array
        Amplitude transmission of the dust.
    hot_counts : (y, x) float array
        Counts the hot pixels add.
    """

    camera: Camera
    seed: int
    reference: FloatArray
    object_gain: float
    counts_per_unit: float
    dust: FloatArray
    hot_counts: FloatArray

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns of a frame."""
        return self.reference.shape[0], self.reference.shape[1]

    def field(self, object_field: ArrayLike, frame: int = 0) -> ComplexArray:
        """Return the field held by the hologram's fringes, in counts.

        The noise-free hologram is a smooth part plus ``2 Re(field exp(2 pi i (fy y + fx x)))``:
        what a perfect demodulation yields, aberration, drift and vibration included.
        """
        scale = (
            (self.counts_per_unit * self.camera.coherence * self.object_gain)
            * self.dust**2
            * self.reference
        )
        return scale * np.exp(1j * self.phase(frame)) * self._checked(object_field)

    def phase(self, frame: int) -> FloatArray:
        """Return the phase put on the object beam in a frame: aberration, drift, vibration."""
        camera = self.camera
        jump, tilt_y, tilt_x = np.random.default_rng(
            [self.seed, _VIBRATION, frame]
        ).standard_normal(3)
        y, x = np.indices(self.shape)
        phase = camera.aberration.phase(self.shape)
        phase += camera.drift_rad_per_frame * frame + camera.vibration_rad * jump
        phase += 2 * np.pi * camera.vibration_per_px * (tilt_y * y + tilt_x * x)
        return phase

    def expected(self, object_field: ArrayLike, frame: int = 0) -> FloatArray:
        """Return the hologram in counts without noise, rounding or saturation, float64."""
        fy, fx = self.camera.carrier_per_px
        y, x = np.indices(self.shape)
        fringes = self.field(object_field, frame) * np.exp(2j * np.pi * (fy * y + fx * x))
        beams = self.reference**2 + np.abs(self.object_gain * self._checked(object_field)) ** 2
        smooth = self.counts_per_unit * self.dust**2 * beams
        return smooth + 2 * fringes.real + self.hot_counts + self.camera.black_level

    def record(self, object_field: ArrayLike, frame: int = 0) -> NDArray[np.unsignedinteger]:
        """Return one recorded hologram, with noise, saturation and rounding."""
        return self._expose(self.expected(object_field, frame), _FRAME, frame)

    def dark(self, frame: int = 0) -> NDArray[np.unsignedinteger]:
        """Return a frame without light."""
        return self._expose(self.hot_counts + self.camera.black_level, _DARK, frame)

    def reference_alone(self, frame: int = 0) -> NDArray[np.unsignedinteger]:
        """Return a frame with the reference beam alone."""
        light = self.counts_per_unit * (self.dust * self.reference) ** 2
        return self._expose(light + self.hot_counts + self.camera.black_level, _REFERENCE, frame)

    def empty(self, frame: int = 0) -> NDArray[np.unsignedinteger]:
        """Return a hologram with both beams and no object: a plane wave as bright as the object."""
        plane = np.full(self.shape, _beam_ratio(self.camera.visibility) / self.object_gain)
        return self._expose(self.expected(plane, frame), _EMPTY, frame)

    def _checked(self, object_field: ArrayLike) -> ComplexArray:
        values = np.asarray(object_field, dtype=np.complex128)
        if values.shape != self.shape:
            raise ValueError(f"object_field: expected shape {self.shape}, got {values.shape}")
        return values

    def _expose(self, counts: FloatArray, purpose: int, frame: int) -> NDArray[np.unsignedinteger]:
        """Return expected counts as the camera reads them."""
        camera = self.camera
        rng = np.random.default_rng([self.seed, purpose, frame])
        counts_per_electron = camera.top / camera.full_well_e
        electrons = np.maximum((counts - camera.black_level) / counts_per_electron, 0.0)
        if camera.shot_noise:
            electrons = rng.poisson(electrons).astype(np.float64)
        electrons = np.minimum(electrons, camera.full_well_e)
        electrons += camera.read_noise_e * rng.standard_normal(self.shape)
        read = np.rint(electrons * counts_per_electron + camera.black_level)
        return np.clip(read, 0, camera.top).astype(camera.dtype)


def set_up(camera: Camera, object_field: ArrayLike, *, seed: int) -> Setup:
    """Set a camera up before an object: beam ratio, exposure, dust and hot pixels.

    Parameters
    ----------
    camera : Camera
        Settings.
    object_field : (y, x) complex array
        Object field of the first frame, in any unit; it rules exposure and beam ratio.
    seed : int
        Seed of everything random.

    Returns
    -------
    Setup
        The camera ready for every frame of the stack.

    Raises
    ------
    ValueError
        If the field is not a 2-D array of finite values with some light in it.
    """
    values = np.asarray(object_field, dtype=np.complex128)
    if values.ndim != 2 or values.size == 0:
        raise ValueError(f"object_field: expected a 2-D array, got shape {values.shape}")
    power = np.mean(np.abs(values) ** 2)
    if not 0 < power < float("inf"):
        raise ValueError(f"object_field: expected finite light, got a mean intensity of {power}")
    shape = (values.shape[0], values.shape[1])
    reference = np.ones(shape)
    if camera.envelope_px is not None:
        off_y = np.arange(shape[0]) - camera.envelope_centre[0] * (shape[0] - 1)
        off_x = np.arange(shape[1]) - camera.envelope_centre[1] * (shape[1] - 1)
        square = off_y[:, np.newaxis] ** 2 + off_x**2
        reference = np.exp(-square / camera.envelope_px**2)
        reference /= np.sqrt(np.mean(reference**2))
    dust = np.ones(shape)
    for speck in camera.dust:
        dust *= speck.transmission(shape)
    plain = Setup(
        camera=camera,
        seed=seed,
        reference=reference,
        object_gain=float(_beam_ratio(camera.visibility) / np.sqrt(power)),
        counts_per_unit=1.0,
        dust=dust,
        hot_counts=np.zeros(shape),
    )
    light = plain.expected(values) - camera.black_level
    bright = float(np.quantile(light, camera.exposure_quantile))
    return Setup(
        camera=camera,
        seed=seed,
        reference=reference,
        object_gain=plain.object_gain,
        counts_per_unit=camera.exposure * camera.top / bright,
        dust=dust,
        hot_counts=_hot_counts(camera, shape, seed),
    )


def record(object_field: ArrayLike, camera: Camera, *, seed: int) -> NDArray[np.unsignedinteger]:
    """Record holograms of an object field.

    Parameters
    ----------
    object_field : (y, x) or (t, y, x) complex array
        The field; the first frame rules exposure and beam ratio.
    camera : Camera
        Settings.
    seed : int
        Seed of everything random.

    Returns
    -------
    uint8 or uint16 array
        Holograms, of the field's shape.
    """
    values = np.asarray(object_field, dtype=np.complex128)
    if values.ndim == 2:
        return set_up(camera, values, seed=seed).record(values)
    if values.ndim != 3 or values.shape[0] == 0:
        raise ValueError(
            f"object_field: expected (y, x) or (t, y, x) with frames, got shape {values.shape}"
        )
    setup = set_up(camera, values[0], seed=seed)
    return np.stack([setup.record(one, frame) for frame, one in enumerate(values)])


def _beam_ratio(visibility: float) -> float:
    """Return the amplitudes' ratio rho of V = 2 rho / (1 + rho^2), the reference stronger."""
    return float((1 - np.sqrt(1 - visibility**2)) / visibility)


def _hot_counts(camera: Camera, shape: tuple[int, int], seed: int) -> FloatArray:
    """Return what the hot pixels add, in counts."""
    hot = np.zeros(shape)
    rng = np.random.default_rng([seed, _HOT])
    count = min(camera.hot_pixels, hot.size)
    places = rng.choice(hot.size, size=count, replace=False)
    hot.flat[places] = camera.top * rng.uniform(0.3, 1.2, size=count)
    return hot


def _centred(shape: tuple[int, int]) -> tuple[FloatArray, FloatArray]:
    """Return positions from the middle (column of y, row of x) in halves of the longer side."""
    half = max(1.0, (max(shape) - 1) / 2)
    y = (np.arange(shape[0], dtype=np.float64) - (shape[0] - 1) / 2) / half
    x = (np.arange(shape[1], dtype=np.float64) - (shape[1] - 1) / 2) / half
    return y[:, np.newaxis], x[np.newaxis, :]
