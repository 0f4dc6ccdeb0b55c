"""From camera pixels to the object."""

import pytest

from hologyre import Optics


def test_object_pixel_is_camera_pixel_over_magnification():
    assert Optics(camera_pixel_um=6.5, magnification=20).pixel_um == pytest.approx(0.325)
    assert Optics(camera_pixel_um=6.5).pixel_um is None


def test_band_radius_is_the_aperture_over_the_wavelength():
    # Coherent cut-off NA / wavelength: Goodman, Introduction to Fourier Optics (from memory).
    optics = Optics(wavelength_nm=500, camera_pixel_um=5, magnification=50, numerical_aperture=0.5)
    assert optics.cutoff_per_px == pytest.approx(0.1)


@pytest.mark.parametrize(
    ("name", "value"),
    [("wavelength_nm", 0.0), ("magnification", -1.0), ("frame_interval_s", float("nan"))],
)
def test_values_that_are_not_positive_are_refused_by_name(name, value):
    with pytest.raises(ValueError, match=f"{name}: expected a positive number, got"):
        Optics(**{name: value})


def test_aperture_above_the_index_is_refused():
    with pytest.raises(ValueError, match=r"numerical_aperture: 1\.2 must be below"):
        Optics(numerical_aperture=1.2)
