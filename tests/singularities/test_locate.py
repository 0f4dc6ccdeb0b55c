from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pandas as pd
import pytest

from hologyre.fields.interpolate import evaluate
from hologyre.grid import Field, Grid, Window
from hologyre.simulate.truth import find_zeros
from hologyre.simulate.waves import BesselVortex, HalfPlane, RandomWaves, ThreeWaves, VortexBeam
from hologyre.singularities.locate import locate_singularities
from hologyre.tables import SINGULARITIES

CENTRE = (80.3, 75.2)
WAIST = 20.0
FRAME = (160, 150)
WHOLE = Window(0.0, 159.0, 0.0, 149.0)

Farthest = Callable[[pd.DataFrame, pd.DataFrame], float]


def beam(positive: list[complex], negative: list[complex], zeta: float) -> VortexBeam:
    """A beam whose zeros at the waist lie at x + iy, in waists from the axis."""
    return VortexBeam.hosting(
        [(CENTRE[0] + WAIST * u.imag, CENTRE[1] + WAIST * u.real) for u in positive],
        [(CENTRE[0] + WAIST * u.imag, CENTRE[1] + WAIST * u.real) for u in negative],
        waist_px=WAIST,
        centre_px=CENTRE,
        zeta=zeta,
    )


def in_waists(table: pd.DataFrame) -> np.ndarray:
    return np.sort_complex(
        (table.x_px - CENTRE[1] + 1j * (table.y_px - CENTRE[0])).to_numpy() / WAIST
    )


# J. Mod. Opt. 40, 73 (1993): the zero keeps to a straight line, u0 (1 + i zeta).
@pytest.mark.parametrize(("zeta", "y"), [(0.25, 0.075), (0.5, 0.15), (1.0, 0.3), (1.5, 0.45)])
def test_a_vortex_off_the_axis_of_a_beam_turns_with_the_gouy_phase(zeta: float, y: float) -> None:
    found = locate_singularities(beam([0.3 + 0j], [], zeta).on_frame(FRAME, 0))
    assert found.charge.tolist() == [1]
    np.testing.assert_allclose(in_waists(found), [0.3 + 1j * y], atol=1e-6)


# J. Mod. Opt. 40, 73 (1993).
def test_two_like_vortices_turn_as_one_rigid_pair() -> None:
    found = locate_singularities(beam([0.4 + 0j, -0.4 + 0j], [], 1.0).on_frame(FRAME, 0))
    assert found.charge.tolist() == [1, 1]
    np.testing.assert_allclose(in_waists(found), [-0.4 - 0.4j, 0.4 + 0.4j], atol=1e-6)


def test_any_like_charges_keep_their_figure() -> None:
    """Every zero u_j of an analytic polynomial goes to u_j (1 + i zeta), same source."""
    start = np.array([0.5 + 0.1j, -0.3 + 0.4j, 0.1 - 0.6j])
    found = locate_singularities(beam(list(start), [], 0.7).on_frame(FRAME, 0))
    np.testing.assert_allclose(in_waists(found), np.sort_complex(start * (1 + 0.7j)), atol=1e-6)


# J. Mod. Opt. 40, 73 (1993); J. Opt. Soc. Am. B 12, 1215 (1995): y = zeta (a - w0^2/(2a)),
# x^2 = a^2 + zeta^2 w0^2 (1 - w0^2/(4 a^2)), gone beyond zeta = 2 a^2/(w0 sqrt(w0^2 - 4 a^2)).
@pytest.mark.parametrize("part", [0.2, 0.5, 0.9, 0.99])
def test_a_vortex_dipole_closes_as_published(part: float) -> None:
    a, zeta = 0.4, part * 0.5333333333
    found = locate_singularities(beam([a + 0j], [-a + 0j], zeta).on_frame(FRAME, 0))
    x = np.sqrt(a**2 + zeta**2 * (1 - 1 / (4 * a**2)))
    y = zeta * (a - 1 / (2 * a))
    np.testing.assert_allclose(in_waists(found), [-x + 1j * y, x + 1j * y], atol=1e-6)
    assert sorted(found.charge) == [-1, 1]


def test_a_vortex_dipole_is_gone_beyond_its_annihilation() -> None:
    found = locate_singularities(
        beam([0.4 + 0j], [-0.4 + 0j], 1.01 * 0.53333333).on_frame(FRAME, 0)
    )
    assert found.empty


# kr of the first ring where |J_m| = eps |J_0|, eps = 0.01: roots of the closed form, computed
# apart; the m vortices lie at (2 j + 1) pi / m.
@pytest.mark.parametrize(("m", "kr"), [(3, 0.754293), (4, 1.274568), (5, 1.745770), (6, 2.107851)])
def test_a_background_unfolds_a_charge_m_vortex_into_m_units(m: int, kr: float) -> None:
    wavelength = 80.0
    found = locate_singularities(BesselVortex(m, wavelength, CENTRE, 0.01).on_frame(FRAME, 0))
    u = (found.x_px - CENTRE[1] + 1j * (found.y_px - CENTRE[0])).to_numpy() * 2 * np.pi / wavelength
    first = np.abs(u) < kr + 0.05
    assert found.charge[first].tolist() == [1] * m
    np.testing.assert_allclose(np.abs(u[first]), kr, atol=2e-6)
    np.testing.assert_allclose(np.abs((u[first] / kr) ** m + 1), 0, atol=1e-5)


def test_extra_rings_appear_where_the_background_is_dark() -> None:
    """m = 8, eps = 0.01: +8, -8, +8 units at kr = 2.388058, 2.423755, 3.992601, net charge 8."""
    wavelength = 140.0
    found = locate_singularities(BesselVortex(8, wavelength, CENTRE, 0.01).on_frame(FRAME, 0))
    kr = np.hypot(found.x_px - CENTRE[1], found.y_px - CENTRE[0]) * 2 * np.pi / wavelength
    inner = kr < 2.6
    np.testing.assert_allclose(np.sort(kr[inner]), np.repeat([2.388058, 2.423755], 8), atol=2e-6)
    assert found.charge[inner].sum() == 0


# Three plane waves of amplitudes (1, 1, a3): (k2-k1).r = +-2 acos(a3/2) and
# (k3-k1).r = pi +- acos(a3/2), by the triangle of their amplitudes.
@pytest.mark.parametrize("third", [0.2, 1.0, 1.9, 1.99])
def test_three_waves_have_their_zeros_where_the_amplitudes_make_a_triangle(third: float) -> None:
    wave = ThreeWaves(24, 0.3, third)
    found = locate_singularities(wave.on_frame(FRAME, 0), margin_px=6)
    k = wave.wavevectors
    r = found[["y_px", "x_px"]].to_numpy()
    angle = np.arccos(third / 2)
    sign = np.where(np.abs(np.exp(1j * (r @ (k[1] - k[0]))) - np.exp(2j * angle)) < 1e-3, 1, -1)
    np.testing.assert_allclose(
        np.exp(1j * (r @ (k[1] - k[0]))), np.exp(2j * angle * sign), atol=1e-6
    )
    np.testing.assert_allclose(
        np.exp(1j * (r @ (k[2] - k[0]))), -np.exp(1j * angle * sign), atol=1e-6
    )


def test_three_waves_have_no_zeros_once_one_outweighs_the_others() -> None:
    assert locate_singularities(ThreeWaves(24, 0.3, 2.01).on_frame(FRAME, 0)).empty


def test_three_equal_waves_hold_one_zero_of_each_charge_a_unit_cell() -> None:
    """Density 3 sqrt3 k^2 / (4 pi^2), as many of each charge: 36 cells of a periodic field."""
    # Wavevectors (ky, kx) = (0, k) and (+-k sqrt3/2, -k/2): periodic in 4 pi/(k sqrt3), 4 pi/k.
    k = 2 * np.pi / 24
    ly, lx = 6 * 2 * np.pi / (k * np.sqrt(3) / 2), 3 * 2 * np.pi / (k / 2)
    y, x = np.arange(128) * ly / 128, np.arange(64) * lx / 64
    yy, xx = np.meshgrid(y, x, indexing="ij")
    q = k * np.sqrt(3) / 2
    values = np.exp(1j * k * xx) + 2 * np.cos(q * yy) * np.exp(-0.5j * k * xx)
    # The window is one period, shifted so that no zero lies on its border.
    window = Window(1.0, 1.0 + ly, 0.7, 0.7 + lx)
    grid = Grid((int(ly), int(lx)), (ly / 128, lx / 64), (0.0, 0.0), window)
    found = locate_singularities(Field(values, grid, (0.0, 0.0), 1 / 24))
    expected = round(3 * np.sqrt(3) * k**2 / (4 * np.pi**2) * ly * lx)
    assert len(found) == expected
    assert found.charge.sum() == 0


# Zeros of Sommerfeld's half-plane field, first of 30-digit evaluations of the formula in Born
# and Wolf, Principles of Optics, section 11.5: (x, y) in wavelengths, charge.
HALF_PLANE = {
    "E": [
        (0.466295653478, 0.510308836756, 1),
        (1.04784661912, 0.496181833194, -1),
        (0.615777125748, 1.01263538982, 1),
    ],
    "H": [
        (0.302515545318, 0.280597274683, 1),
        (0.858848455576, 0.230848402936, -1),
        (0.479199850972, 0.77669340892, 1),
    ],
}


@pytest.mark.parametrize("polarisation", ["E", "H"])
def test_the_half_plane_has_its_zeros_before_the_screen(polarisation: str) -> None:
    wavelength = 60.0
    wave = HalfPlane(wavelength, (-4.0, 30.0), polarisation)
    found = locate_singularities(wave.on_frame((140, 140), 0))
    for x, y, charge in HALF_PLANE[polarisation]:
        away = np.hypot(found.x_px - 30 - wavelength * x, found.y_px + 4 - wavelength * y)
        # The screen's edge, where the field is not smooth, lies four pixels off the frame.
        assert away.min() < 2e-3
        assert found.charge[away.idxmin()] == charge


@pytest.mark.parametrize("shortest_px", [8.0, 12.0, 24.0, 64.0])
def test_every_zero_of_speckle_on_pixels_is_found_in_place(
    shortest_px: float, farthest: Farthest
) -> None:
    wave = RandomWaves("disc", shortest_px, seed=3)
    field = wave.on_frame(FRAME, 0)
    truth = find_zeros(wave, WHOLE)
    # Within eight pixels of the border the field is continued from one side only.
    assert farthest(locate_singularities(field), truth) < 2e-5
    inner = Window(8.0, FRAME[0] - 9.0, 8.0, FRAME[1] - 9.0)
    kept = truth[inner.contains(truth.y_px.to_numpy(), truth.x_px.to_numpy())]
    assert farthest(locate_singularities(field, margin_px=8.0), kept) < 1e-6


@pytest.mark.parametrize("spectrum", ["ring", "disc", "gauss"])
def test_every_zero_of_a_band_sampled_field_is_found_in_place(
    spectrum: str, periodic: Callable[..., Field], farthest: Farthest
) -> None:
    field = periodic(spectrum, 24.0, 240.0, seed=1)
    truth = find_zeros(RandomWaves(spectrum, 24.0, box_px=240.0, seed=1), field.grid.valid)
    assert farthest(locate_singularities(field), truth) < 1e-6


def test_the_sampling_of_a_field_does_not_matter(periodic: Callable[..., Field]) -> None:
    coarse = locate_singularities(periodic(seed=5, samples_per_wavelength=2.2))
    fine = locate_singularities(periodic(seed=5, samples_per_wavelength=9.7))
    np.testing.assert_allclose(coarse[["y_px", "x_px"]], fine[["y_px", "x_px"]], atol=1e-6)


def test_a_tilt_moves_no_zero(periodic: Callable[..., Field]) -> None:
    plain = periodic(seed=6, valid=Window(20.0, 200.0, 10.0, 300.0))
    tilt = (0.0013, -0.0021)
    phase = np.exp(2j * np.pi * tilt[0] * plain.grid.y_px(plain.shape[0]))[:, None] * np.exp(
        2j * np.pi * tilt[1] * plain.grid.x_px(plain.shape[1])
    )
    tilted = Field(plain.values * phase, plain.grid, tilt, plain.radius_per_px)
    columns = [
        "y_px",
        "x_px",
        "charge",
        "sigma_y_px",
        "cov_yx_px2",
        "axis_ratio",
        "orientation_rad",
    ]
    pd.testing.assert_frame_equal(
        locate_singularities(tilted, noise=0.01)[columns],
        locate_singularities(plain, noise=0.01)[columns],
        # The Jacobian is taken one Newton step before the zero.
        rtol=1e-3,
        atol=1e-5,
    )


def test_conjugation_flips_every_charge_and_moves_none(periodic: Callable[..., Field]) -> None:
    field = periodic(seed=7)
    found, mirrored = (
        locate_singularities(f) for f in (field, field.with_values(field.values.conj()))
    )
    np.testing.assert_array_equal(found.charge, -mirrored.charge)
    np.testing.assert_allclose(found[["y_px", "x_px"]], mirrored[["y_px", "x_px"]], atol=1e-7)


def test_the_field_vanishes_where_a_zero_is_found(periodic: Callable[..., Field]) -> None:
    field = periodic(seed=8)
    found = locate_singularities(field)
    value, dy, dx = evaluate(field, found.y_px, found.x_px)
    assert np.abs(value).max() < 1e-7
    np.testing.assert_array_equal(np.sign(dx.real * dy.imag - dy.real * dx.imag), found.charge)


def test_padding_is_not_searched(periodic: Callable[..., Field]) -> None:
    window = Window(30.5, 150.25, 20.0, 100.0)
    field = periodic(seed=9)
    part = locate_singularities(periodic(seed=9, valid=window))
    whole = locate_singularities(field)
    inside = window.contains(whole.y_px.to_numpy(), whole.x_px.to_numpy())
    np.testing.assert_allclose(
        part[["y_px", "x_px"]].sort_values("y_px"),
        whole.loc[inside, ["y_px", "x_px"]].sort_values("y_px"),
        atol=1e-6,
    )


def test_the_margin_leaves_out_what_is_near_the_border(periodic: Callable[..., Field]) -> None:
    field = periodic(seed=9)
    found = locate_singularities(field, margin_px=50.0)
    assert 0 < len(found) < len(locate_singularities(field))
    assert found[["y_px", "x_px"]].min().min() >= 50.0
    assert locate_singularities(field, margin_px=250.0).empty


def test_uncertainty_is_that_of_noise_through_the_jacobian(periodic: Callable[..., Field]) -> None:
    field = periodic(seed=10)
    found = locate_singularities(field, noise=0.04)
    _, dy, dx = evaluate(field, found.y_px, found.x_px)
    for row in range(0, len(found), 17):
        jacobian = np.array([[dx[row].real, dy[row].real], [dx[row].imag, dy[row].imag]])
        covariance = 0.02 * np.linalg.inv(jacobian.T @ jacobian)
        here = found.iloc[row]
        assert here.sigma_x_px == pytest.approx(np.sqrt(covariance[0, 0]), rel=1e-3)
        assert here.sigma_y_px == pytest.approx(np.sqrt(covariance[1, 1]), rel=1e-3)
        assert here.cov_yx_px2 == pytest.approx(covariance[0, 1], rel=1e-3, abs=1e-6)
        _, axes, right = np.linalg.svd(jacobian)
        assert here.axis_ratio == pytest.approx(axes[1] / axes[0], rel=1e-3)
        # The amplitude grows slowest along the core's long axis.
        assert abs(np.cos(here.orientation_rad - np.arctan2(right[1, 1], right[1, 0]))) == (
            pytest.approx(1, abs=1e-6)
        )


def test_without_noise_the_columns_of_uncertainty_are_empty(
    periodic: Callable[..., Field],
) -> None:
    found = locate_singularities(periodic())
    assert found[["sigma_y_px", "sigma_x_px", "cov_yx_px2"]].isna().all().all()
    assert found.columns.tolist() == [c.name for c in SINGULARITIES]


def test_the_field_given_is_not_changed(periodic: Callable[..., Field]) -> None:
    pixels = RandomWaves("disc", 12).on_frame((64, 64), 0)
    before = pixels.copy()
    locate_singularities(pixels)
    np.testing.assert_array_equal(pixels, before)


def test_a_dark_field_has_no_zeros() -> None:
    assert locate_singularities(np.zeros((32, 32), dtype=complex)).empty


GOOD = np.ones((16, 16), dtype=complex)


@pytest.mark.parametrize(
    ("field", "options", "error", "message"),
    [
        (GOOD.real, {}, TypeError, "field: expected a Field or a complex array"),
        ([[1j]], {}, TypeError, "field: expected a Field or a complex array"),
        (GOOD[:4], {}, ValueError, r"field: expected one frame .* got shape \(4, 16\)"),
        (GOOD[None], {}, ValueError, "field: expected one frame"),
        (GOOD * np.nan, {}, ValueError, "field: expected finite values"),
        (GOOD, {"margin_px": -1.0}, ValueError, "margin_px: expected 0 or more, got -1.0"),
        (GOOD, {"noise": -1.0}, ValueError, "noise: expected a variance of 0 or more"),
        (GOOD, {"noise": "low"}, TypeError, "noise: expected a NoiseMap"),
    ],
)
def test_unusable_input_is_named(
    field: object, options: dict, error: type[Exception], message: str
) -> None:
    with pytest.raises(error, match=message):
        locate_singularities(field, **options)
