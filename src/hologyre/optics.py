"""What turns camera pixels and frames into micrometres, radians and seconds."""

from __future__ import annotations

from dataclasses import dataclass, fields


@dataclass(frozen=True)
class Optics:
    """Wavelength, camera, magnification, medium and frame timing; None where unknown.

    Parameters
    ----------
    wavelength_nm : float, optional
        Wavelength in vacuum, nm.
    camera_pixel_um : float, optional
        Pitch of the camera's pixels, um.
    magnification : float, optional
        Lateral magnification from object to camera. Imaging is taken as telecentric.
    medium_index : float
        Refractive index of the medium the object lies in.
    numerical_aperture : float, optional
        Numerical aperture of the objective.
    frame_interval_s : float, optional
        Time between frames, s.

    Raises
    ------
    ValueError
        If a value is not positive, or the numerical aperture exceeds the index.
    """

    wavelength_nm: float | None = None
    camera_pixel_um: float | None = None
    magnification: float | None = None
    medium_index: float = 1.0
    numerical_aperture: float | None = None
    frame_interval_s: float | None = None

    def __post_init__(self) -> None:
        for entry in fields(self):
            value = getattr(self, entry.name)
            if value is not None and not 0 < value < float("inf"):
                msg = f"{entry.name}: expected a positive number, got {value!r}"
                raise ValueError(msg)
        if self.numerical_aperture is not None and self.numerical_aperture >= self.medium_index:
            msg = (
                f"numerical_aperture: {self.numerical_aperture} must be below the index of the "
                f"medium, {self.medium_index}"
            )
            raise ValueError(msg)

    @property
    def pixel_um(self) -> float | None:
        """Size of a hologram pixel in object space, um; None if unknown."""
        if self.camera_pixel_um is None or self.magnification is None:
            return None
        return self.camera_pixel_um / self.magnification

    @property
    def cutoff_per_px(self) -> float | None:
        """Band radius NA/wavelength in cycles per hologram pixel; None if unknown."""
        if self.numerical_aperture is None or self.wavelength_nm is None or self.pixel_um is None:
            return None
        return self.numerical_aperture / (self.wavelength_nm * 1e-3) * self.pixel_um
