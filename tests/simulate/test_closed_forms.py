"""Zeros found on the formula against published closed forms; lengths scaled to pixels."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from hologyre.grid import Window
from hologyre.simulate.truth import find_zeros, true_tracks
from hologyre.simulate.waves import BesselVortex, HalfPlane, ThreeWaves, VortexBeam

# Newton's method ends at a step of 1e-11 finest lengths; all closed forms are met to rounding.
TIGHT = 1e-7
AROUND = Window(-120.3, 120.2, -120.1, 120.4)
W0 = 100.0


def beam(
    positive: list[complex], negative: list[complex] | None = None, zeta: float = 0.0
) -> VortexBeam:
    """Return a beam of waist W0 with zeros at these x + iy, in waists."""

    def places(zeros: list[complex]) -> list[tuple[float, float]]:
        return [(W0 * z.imag, W0 * z.real) for z in zeros]

    return VortexBeam.hosting(
        places(positive), places(negative or []), waist_px=W0, centre_px=(0.0, 0.0), zeta=zeta
    )


def found(zeros: pd.DataFrame, scale: float) -> list[tuple[float, float, int]]:
    """Return (x, y, charge) in units of `scale`, sorted."""
    rows = zip(zeros["x_px"] / scale, zeros["y_px"] / scale, zeros["charge"], strict=True)
    return sorted((float(x), float(y), int(q)) for x, y, q in rows)


@pytest.mark.parametrize("charge", [1, -1])
@pytest.mark.parametrize(("zeta", "y"), [(0.25, 0.075), (0.5, 0.15), (1.0, 0.3), (1.5, 0.45)])
def test_off_axis_vortex_moves_on_a_straight_line(zeta: float, y: float, charge: int) -> None:
    # x0 = 0.3 w0: zero at (x0, s x0 zeta); G. Indebetouw, J. Mod. Opt. 40, 73 (1993), the closed
    # form re-derived.
    host = beam([0.3], zeta=zeta) if charge > 0 else beam([], [0.3], zeta=zeta)
    ((x_found, y_found, q),) = found(find_zeros(host, AROUND), W0)
    assert (x_found, y_found) == pytest.approx((0.3, charge * y), abs=TIGHT)
    assert q == charge


def test_like_charges_turn_and_spread_together() -> None:
    # +-a (1 + i zeta), a = 0.4 w0, zeta = 1; G. Indebetouw, J. Mod. Opt. 40, 73 (1993).
    zeros = found(find_zeros(beam([0.4, -0.4], zeta=1.0), AROUND), W0)
    np.testing.assert_allclose(zeros, [(-0.4, -0.4, 1), (0.4, 0.4, 1)], atol=TIGHT)


def test_any_like_charges_scale_by_one_complex_number() -> None:
    # Each zero u_j of a polynomial of like charges goes to u_j (1 + i zeta).
    start = [0.31 + 0.12j, -0.25 + 0.4j, 0.05 - 0.37j]
    there = sorted(((u * (1 + 0.7j)).real, (u * (1 + 0.7j)).imag, 1) for u in start)
    zeros = found(find_zeros(beam(start, zeta=0.7), AROUND), W0)
    np.testing.assert_allclose(zeros, there, atol=TIGHT)


@pytest.mark.parametrize("part", [0.0, 0.5, 0.9, 0.99])
@pytest.mark.parametrize(("a", "meeting"), [(0.3, 0.225), (0.4, 0.533333333)])
def test_dipole_closes_as_the_square_root_of_the_distance(
    a: float, meeting: float, part: float
) -> None:
    # zeta_a = 2 a^2 / (w0 sqrt(w0^2 - 4 a^2)); y = zeta (a - w0^2 / (2 a)),
    # x^2 = a^2 + zeta^2 w0^2 (1 - w0^2 / (4 a^2)).
    # G. Indebetouw, J. Mod. Opt. 40, 73 (1993); I. Freund, JOSA B 12, 1215 (1995) (pages from
    # memory), closed form re-derived.
    zeta = part * meeting
    y = zeta * (a - 1 / (2 * a))
    x = np.sqrt(a**2 + zeta**2 * (1 - 1 / (4 * a**2)))
    zeros = found(find_zeros(beam([a], [-a], zeta=zeta), AROUND), W0)
    np.testing.assert_allclose(zeros, [(-x, y, -1), (x, y, 1)], atol=TIGHT)


@pytest.mark.parametrize(
    ("part", "separation"),
    [(0.0, 0.8), (0.2, 0.78384), (0.4, 0.73321), (0.6, 0.64), (0.8, 0.48)],
)
def test_separation_of_a_dipole(part: float, separation: float) -> None:
    zeros = found(find_zeros(beam([0.4], [-0.4], zeta=part * 0.533333333), AROUND), W0)
    # Published to five decimals.
    assert zeros[1][0] - zeros[0][0] == pytest.approx(separation, abs=6e-6)


def test_no_vortex_is_left_beyond_the_annihilation() -> None:
    assert len(find_zeros(beam([0.4], [-0.4], zeta=1.01 * 0.533333333), AROUND)) == 0


@pytest.mark.parametrize(
    ("eps", "m", "root"),
    [
        (0.01, 3, 0.754293),
        (0.01, 4, 1.274568),
        (0.01, 5, 1.745770),
        (0.01, 6, 2.107851),
        (0.1, 1, 0.199008),
        (0.1, 2, 0.839982),
        (0.1, 3, 1.439696),
        (0.1, 4, 1.899361),
    ],
)
def test_background_unfolds_a_vortex_into_unit_charges_on_a_ring(
    eps: float, m: int, root: float
) -> None:
    # Roots of |J_m(k r)| = eps |J_0(k r)|, computed apart by root finding; phi = (2j + 1) pi / m.
    k = 1 / 40
    wave = BesselVortex(m, 2 * np.pi / k, (0.0, 0.0), background=eps)
    reach = 2.3 / k
    zeros = find_zeros(wave, Window(-reach, reach, -reach, reach))
    radius = k * np.hypot(zeros["y_px"], zeros["x_px"])
    ring = zeros[np.abs(radius - root) < 1e-5]
    assert len(ring) == m
    assert (ring["charge"] == 1).all()
    angle = np.sort(np.mod(np.arctan2(ring["y_px"], ring["x_px"]), 2 * np.pi))
    np.testing.assert_allclose(angle, (2 * np.arange(m) + 1) * np.pi / m, atol=1e-6)


@pytest.mark.parametrize(
    ("m", "radii"),
    [
        (7, (2.316219, 2.617797, 3.023979)),
        (8, (2.388058, 2.423755, 3.992601)),
        (10, (2.404532, 2.405120, 5.051447)),
    ],
)
def test_two_more_rings_appear_near_the_zero_of_the_background(
    m: int, radii: tuple[float, float, float]
) -> None:
    # eps = 0.01; J_0 vanishes at 2.404826: +m, -m, +m vortices on three rings.
    k = 1 / 40
    wave = BesselVortex(m, 2 * np.pi / k, (0.0, 0.0), background=0.01)
    reach = 5.2 / k
    zeros = find_zeros(wave, Window(-reach, reach, -reach, reach))
    found_radii = k * np.hypot(zeros["y_px"], zeros["x_px"])
    for radius, charge in zip(radii, (1, -1, 1), strict=True):
        ring = zeros[np.abs(found_radii - radius) < 1e-5]
        assert len(ring) == m
        assert (ring["charge"] == charge).all()


def test_wavevector_of_a_bessel_vortex_is_its_charge_over_the_radius() -> None:
    # psi = J_m(k r) exp(i m phi): azimuthal m / r, beyond k where k r < m. m = 3.
    k, m = 0.05, 3
    wave = BesselVortex(m, 2 * np.pi / k, (0.0, 0.0))
    kr = np.array([0.5, 1.0, 2.0, 2.9, 3.1, 5.0])
    angle = 0.7
    y, x = kr / k * np.sin(angle), kr / k * np.cos(angle)
    jet = wave.jet(y, x, 0.0)
    wy, wx = (jet.dy / jet.value).imag, (jet.dx / jet.value).imag
    azimuthal = -np.sin(angle) * wx + np.cos(angle) * wy
    radial = np.cos(angle) * wx + np.sin(angle) * wy
    np.testing.assert_allclose(azimuthal / k, [6, 3, 1.5, 1.0345, 0.9677, 0.6], atol=5e-5)
    np.testing.assert_allclose(radial, 0, atol=1e-12)


def test_whole_bessel_vortex_is_one_zero_of_its_charge() -> None:
    zeros = find_zeros(BesselVortex(-3, 200.0, (4.0, -7.0)), Window(-60, 60, -60, 60))
    assert zeros["charge"].tolist() == [-3]
    # A triple zero: Newton's steps shrink by a third only and end at the cube root of rounding.
    np.testing.assert_allclose(zeros[["y_px", "x_px"]], [[4.0, -7.0]], atol=1e-3)


# 30-digit evaluation of Sommerfeld's solution at normal incidence, (x, y) in wavelengths.
HALF_PLANE = {
    "E": [
        (0.466295653478, 0.510308836756, 1),
        (1.04784661912, 0.496181833194, -1),
        (0.615777125748, 1.01263538982, 1),
        (1.570268, 0.502200, 1),
        (1.322645, 0.994728, -1),
        (0.733945, 1.513771, 1),
    ],
    "H": [
        (0.302515545318, 0.280597274683, 1),
        (0.858848455576, 0.230848402936, -1),
        (0.479199850972, 0.77669340892, 1),
        (1.358610, 0.265331, 1),
        (1.178723, 0.733083, -1),
        (0.609624, 1.275176, 1),
    ],
}


@pytest.mark.parametrize("polarisation", ["E", "H"])
def test_zeros_before_a_half_plane(polarisation: str) -> None:
    # A. Sommerfeld, Math. Ann. 47, 317 (1896).
    wavelength = 100.0
    wave = HalfPlane(wavelength, (0.0, 0.0), polarisation)  # type: ignore[arg-type]
    zeros = find_zeros(wave, Window(5.0, 170.0, -30.0, 190.0))
    by_place = found(zeros, wavelength)
    for x, y, charge in HALF_PLANE[polarisation]:
        near = [z for z in by_place if np.hypot(z[0] - x, z[1] - y) < 1e-6]
        assert [z[2] for z in near] == [charge], (x, y)
    for x, y, _ in HALF_PLANE[polarisation][:3]:
        distance = min(np.hypot(z[0] - x, z[1] - y) for z in by_place)
        assert distance < 2e-11


def test_field_vanishes_on_the_screen_for_e_and_its_slope_for_h() -> None:
    x = np.linspace(1.0, 300.0, 50)
    electric = HalfPlane(100.0, (0.0, 0.0), "E", angle_rad=1.1)
    np.testing.assert_allclose(electric.field(0.0, x, 0.0), 0, atol=1e-13)
    magnetic = HalfPlane(100.0, (0.0, 0.0), "H", angle_rad=1.1)
    np.testing.assert_allclose(magnetic.gradient(0.0, x, 0.0)[0], 0, atol=1e-13)


def supercells(k: float) -> Window:
    """Return a rectangle of 36 unit cells of three waves with the first one along x."""
    wide, high = 2 * np.pi / (1.5 * k), 2 * np.pi / (np.sqrt(0.75) * k)
    return Window(0.37, 0.37 + 3 * high, 0.29, 0.29 + 6 * wide)


@pytest.mark.parametrize(
    ("third", "pairs"),
    [(0.2, 36), (0.5, 36), (1.0, 36), (1.9, 36), (1.99, 36), (2.01, 0), (2.2, 0)],
)
def test_three_waves_have_one_pair_a_cell_while_they_form_a_triangle(
    third: float, pairs: int
) -> None:
    # Unit cell 4 pi^2 / |(k2 - k1) x (k3 - k1)| = 15.19525 / k^2.
    k = 2 * np.pi / 24
    window = supercells(k)
    area = (window.y_max - window.y_min) * (window.x_max - window.x_min)
    assert area == pytest.approx(36 * 15.19525 / k**2, rel=1e-6)
    zeros = find_zeros(ThreeWaves(24.0, third=third), window)
    assert (zeros["charge"] == 1).sum() == pairs
    assert (zeros["charge"] == -1).sum() == pairs


def test_three_waves_vanish_where_their_phases_close_the_triangle() -> None:
    # (k2 - k1).r = +-2 acos(a3 / 2) and (k3 - k1).r = pi +- acos(a3 / 2), modulo 2 pi.
    third = 1.3
    wave = ThreeWaves(24.0, angle_rad=0.4, third=third)
    zeros = find_zeros(wave, Window(0.2, 60.1, 0.3, 70.4))
    k = wave.wavevectors
    spots = zeros[["y_px", "x_px"]].to_numpy()
    half = np.arccos(third / 2)
    second, last = spots @ (k[1] - k[0]), spots @ (k[2] - k[0])
    residuals = [
        np.abs(np.exp(1j * second) - np.exp(2j * sign * half))
        + np.abs(np.exp(1j * last) + np.exp(1j * sign * half))
        for sign in (1, -1)
    ]
    np.testing.assert_allclose(np.minimum(*residuals), 0, atol=1e-10)


@pytest.mark.parametrize(
    ("start", "rate", "kind"), [(1.83, 0.05, "pair_death"), (2.17, -0.05, "pair_birth")]
)
def test_all_pairs_die_or_are_born_when_the_third_wave_passes_two(
    start: float, rate: float, kind: str
) -> None:
    wave = ThreeWaves(24.0, angle_rad=0.3, third=start, third_rate=rate)
    truth = true_tracks(wave, Window(0.0, 60.0, 0.0, 60.0), 6)
    pairs = truth.events[truth.events["kind"] == kind]
    assert len(pairs) > 10
    # t = 0.17 / 0.05; the turn is known to the root of rounding.
    np.testing.assert_allclose(pairs["time_s"], 3.4, atol=1e-6)
    assert set(truth.events["kind"]) <= {kind, "entry", "exit"}
    counts = truth.tracks.groupby("frame").size()
    full = counts.index <= 3 if kind == "pair_death" else counts.index >= 4
    assert full.all()
