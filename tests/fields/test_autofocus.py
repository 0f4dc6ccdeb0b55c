from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from hologyre.fields.autofocus import autofocus
from hologyre.fields.bands import Band
from hologyre.fields.interpolate import on_pixels
from hologyre.fields.refocus import refocus
from hologyre.fields.transform import band_spectrum
from hologyre.grid import Field
from hologyre.optics import Optics

LIGHT = Optics(wavelength_nm=500, camera_pixel_um=5.0, magnification=20.0)
APERTURE = 0.3
DEPTH_UM = 0.5 / APERTURE**2
N = 192


def object_field(kind: str, seed: int = 0) -> Field:
    """Small discs that absorb or delay, through the objective's aperture, in focus."""
    rng = np.random.default_rng(seed)
    y, x = np.mgrid[:N, :N]
    discs = np.zeros((N, N))
    for cy, cx in rng.uniform(50, N - 50, (12, 2)):
        discs += 1 / (1 + np.exp((np.hypot(y - cy, x - cx) - 5) / 0.7))
    transmission: Any = np.exp(-0.7 * discs) if kind == "amplitude" else np.exp(0.6j * discs)
    band = Band((N, N), (N, N), (0.0, 0.0), APERTURE / 0.5 * 0.25)
    spectrum = band_spectrum(transmission.real, band) + 1j * band_spectrum(transmission.imag, band)
    return band.field(np.asarray(spectrum * band.weights(), dtype=complex), "band")


@pytest.mark.parametrize("measure", ["modulus", "tamura"])
@pytest.mark.parametrize("kind", ["amplitude", "phase"])
@pytest.mark.parametrize("distance", [23.7, -11.2])
def test_the_distance_is_found_to_a_tenth_of_the_depth_of_field(
    measure: Any, kind: Any, distance: float
) -> None:
    away = refocus(object_field(kind), -distance, optics=LIGHT, edges="periodic")
    focus = autofocus(away, (-40, 45), optics=LIGHT, measure=measure, kind=kind, steps=35)
    assert float(focus.distance_um) == pytest.approx(distance, abs=0.1 * DEPTH_UM)
    assert not focus.at_end
    assert focus.curve.shape == focus.curve_um.shape == (35,)
    assert np.argmax(focus.curve) == np.argmin(np.abs(focus.curve_um - distance))


def test_every_frame_has_its_own_distance_or_all_share_one() -> None:
    fields = [
        refocus(object_field("phase", s), -z, optics=LIGHT, edges="periodic")
        for s, z in ((0, 9.0), (1, 12.0))
    ]
    stack = fields[0].with_values(np.stack([f.values for f in fields]))
    each = autofocus(stack, (0, 25), optics=LIGHT, steps=21)
    assert each.distance_um == pytest.approx([9, 12], abs=0.2 * DEPTH_UM)
    assert each.curve.shape == (2, 21)
    together = autofocus(stack, (0, 25), optics=LIGHT, steps=21, frames="together")
    assert 8.5 < float(together.distance_um) < 12.5


def test_a_range_that_ends_before_the_focus_is_told() -> None:
    away = refocus(object_field("phase"), -30.0, optics=LIGHT, edges="periodic")
    assert autofocus(away, (0, 20), optics=LIGHT, steps=11).at_end


def test_the_field_is_left_as_it_is() -> None:
    field = object_field("phase")
    before = on_pixels(field).copy()
    autofocus(field, (-5, 5), optics=LIGHT, steps=5)
    assert np.array_equal(on_pixels(field), before)


@pytest.mark.parametrize(
    ("range_um", "options", "message"),
    [
        ((5, 5), {}, r"range_um: expected first < last, got \(5, 5\)"),
        ((0, 5), {"steps": 3}, "steps: expected at least 5, got 3"),
        ((0, 5), {"measure": "edge"}, "measure: expected modulus or tamura"),
        ((0, 5), {"kind": "both"}, "kind: expected amplitude or phase"),
        ((0, 5), {"frames": "some"}, "frames: expected each or together"),
    ],
)
def test_wrong_options_are_named(range_um: Any, options: dict[str, Any], message: str) -> None:
    with pytest.raises(ValueError, match=message):
        autofocus(object_field("phase"), range_um, optics=LIGHT, **options)
