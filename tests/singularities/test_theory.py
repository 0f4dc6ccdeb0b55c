from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad, trapezoid

from hologyre.simulate.waves import RandomWaves
from hologyre.singularities.locate import locate_singularities
from hologyre.singularities.theory import (
    charge_correlation,
    charge_variance,
    pair_correlation,
    pair_line,
    unscreened_charge,
    zero_density,
)
from hologyre.singularities.theory_laws import (
    core_axis_ratio_cdf,
    core_axis_ratio_pdf,
    core_eccentricity_pdf,
    core_phase,
    critical_point_densities,
    false_zero_density,
    intensity_exceedance,
    speckle_contrast,
    speed_exceedance,
    speed_pdf,
    speed_scale,
    superoscillating_fraction,
    wavevector_exceedance,
)
from hologyre.singularities.theory_spectrum import Spectrum

RING, DISC, GAUSS = Spectrum.ring(1.0), Spectrum.disc(1.0), Spectrum.gauss(1.0)
UNEVEN = Spectrum.measured([0.2, 0.5, 0.9, 1.3], [1.0, 2.0, 2.0, 0.5])
ALL = pytest.mark.parametrize(
    "spectrum", [RING, DISC, GAUSS, UNEVEN], ids=["ring", "disc", "gauss", "measured"]
)


def from_gaussian_gradients(
    spectrum: Spectrum, r: float, samples: int = 400_000
) -> tuple[float, float]:
    """Return g and g_Q by Rice's formula, gradients drawn under zeros at both ends."""
    c, slope, bend = (
        float(f(np.float64(r))) for f in (spectrum.correlation, spectrum.slope, spectrum.curvature)
    )
    rise = spectrum.mean_square_k / 2
    # One part of the field: value, d/dx, d/dy at 0 and at (r, 0); unit variance.
    own = np.diag([1.0, rise, rise])
    cross = np.array([[c, slope, 0.0], [-slope, -bend, 0.0], [0.0, 0.0, -slope / r]])
    covariance = np.block([[own, cross], [cross.T, own]])
    values, gradients = [0, 3], [1, 2, 4, 5]
    mixed = covariance[np.ix_(gradients, values)]
    known = covariance[np.ix_(values, values)]
    left = covariance[np.ix_(gradients, gradients)] - mixed @ np.linalg.solve(known, mixed.T)
    root = np.linalg.cholesky(left)
    drawn = np.random.default_rng(0).standard_normal((2, samples, 4)) @ root.T
    first = drawn[0, :, 0] * drawn[1, :, 1] - drawn[0, :, 1] * drawn[1, :, 0]
    second = drawn[0, :, 2] * drawn[1, :, 3] - drawn[0, :, 3] * drawn[1, :, 2]
    both_zero = 1 / (2 * np.pi) ** 2 / (1 - c**2)
    scale = both_zero / zero_density(spectrum) ** 2
    return float(scale * np.abs(first * second).mean()), float(scale * (first * second).mean())


# ------------------------------------------------------------------- spectrum


def test_a_ring_has_pi_zeros_per_square_wavelength() -> None:
    # Berry and Dennis, Proc. R. Soc. Lond. A 456, 2059 (2000).
    assert_allclose(zero_density(Spectrum.ring(2 * np.pi / 7)), np.pi / 49, rtol=1e-14)
    assert_allclose(zero_density(Spectrum.disc(2 * np.pi / 7)), np.pi / 98, rtol=1e-14)


def test_kurtosis_is_1_for_a_ring_4_thirds_for_a_disc_and_2_for_a_gauss() -> None:
    found = [s.kurtosis for s in (RING, DISC, GAUSS)]
    assert_allclose(found, [1, 4 / 3, 2], rtol=1e-13)


@ALL
def test_slope_and_curvature_are_the_derivatives_of_the_correlation(spectrum: Spectrum) -> None:
    r, step = np.linspace(0.3, 9, 40), 1e-4
    ahead, behind = spectrum.correlation(r + step), spectrum.correlation(r - step)
    # Differences of fourth derivatives of order 1: step^2 / 6 and, with rounding, step^2.
    assert_allclose(spectrum.slope(r), (ahead - behind) / (2 * step), atol=1e-8)
    bend = (spectrum.slope(r + step) - spectrum.slope(r - step)) / (2 * step)
    assert_allclose(spectrum.curvature(r), bend, atol=1e-8)


@ALL
def test_the_correlation_starts_at_1_with_the_curvature_of_the_mean_square_wavenumber(
    spectrum: Spectrum,
) -> None:
    assert spectrum.correlation(0.0) == pytest.approx(1.0, abs=1e-15)
    assert spectrum.slope(0.0) == 0.0
    assert spectrum.curvature(0.0) == pytest.approx(-spectrum.mean_square_k / 2, rel=1e-14)


def test_a_finely_measured_disc_is_a_disc() -> None:
    k = (np.arange(2000) + 0.5) / 2000
    measured, r = Spectrum.measured(k, k), np.linspace(0, 12, 30)
    # The midpoint rule errs by the spacing squared.
    assert_allclose(measured.correlation(r), DISC.correlation(r), atol=1e-6)
    assert_allclose(pair_correlation(measured, r), pair_correlation(DISC, r), atol=1e-5)
    assert_allclose(charge_correlation(measured, r), charge_correlation(DISC, r), atol=1e-5)


def test_equal_wavenumbers_of_a_measured_spectrum_are_put_together() -> None:
    spectrum = Spectrum.measured([2.0, 1.0, 2.0, 3.0], [1.0, 1.0, 2.0, 0.0])
    assert_allclose(spectrum.radial_per_px, [1.0, 2.0])
    assert_allclose(spectrum.radial_power, [0.25, 0.75])


@pytest.mark.parametrize(
    ("k", "power", "message"),
    [
        ([1.0, 2.0], [1.0], "one value for each"),
        ([1.0, -2.0], [1.0, 1.0], "radial_per_px: expected finite values of 0 or more"),
        ([1.0, 2.0], [1.0, np.nan], "radial_power: expected finite values"),
        ([0.0, 2.0], [1.0, 0.0], "some wavenumber above 0"),
    ],
)
def test_a_spectrum_without_sense_is_refused(
    k: list[float], power: list[float], message: str
) -> None:
    with pytest.raises(ValueError, match=message):
        Spectrum.measured(k, power)


def test_a_wavenumber_that_is_not_positive_is_refused() -> None:
    with pytest.raises(ValueError, match="wavenumber_per_px: expected a positive number, got 0"):
        Spectrum.ring(0.0)


def test_an_odd_moment_is_refused() -> None:
    with pytest.raises(ValueError, match="order: expected an even number"):
        RING.moment(3)


# --------------------------------------------------------------- correlations


def test_correlations_of_a_ring_have_the_values_of_an_independent_evaluation() -> None:
    # Berry and Dennis, Proc. R. Soc. Lond. A 456, 2059 (2000), by adaptive quadrature apart
    # from this code; six digits.
    r = [0.1, 0.5, 1, 1.5, 2, 2.5, 3, 3.5, 4, 5, 6, 7, 8, 10]
    g = [.250250, .257062, .283401, .341816, .457197, .670691, 1.007893, 1.339652, 1.355020,
         .818834, .907281, 1.200793, .934893, 1.127924]  # fmt: skip
    charge = [-.250243, -.256116, -.274845, -.306474, -.346980, -.375071, -.330688, -.150852,
              .059370, .050008, -.069818, -.001769, .032054, -.009246]  # fmt: skip
    assert_allclose(pair_correlation(RING, r), g, atol=1e-6)
    assert_allclose(charge_correlation(RING, r), charge, atol=1e-6)
    assert pair_correlation(RING, 3.76698) == pytest.approx(1.400518, abs=1e-6)


def test_correlations_of_disc_and_gauss_have_the_values_of_an_independent_evaluation() -> None:
    # As for the ring.
    g = [0.514666, 0.589316, 0.769220, 1.018768, 1.100308]
    charge = [-0.505892, -0.508429, -0.448197, -0.245652, -0.017243]
    assert_allclose(pair_correlation(DISC, [1, 2, 3, 4, 5]), g, atol=1e-6)
    assert_allclose(charge_correlation(DISC, [1, 2, 3, 4, 5]), charge, atol=1e-6)
    g, charge = (
        [0.951046, 0.914533, 0.996464, 1.001022],
        [-0.916840, -0.677394, -0.114729, -0.001975],
    )
    assert_allclose(pair_correlation(GAUSS, [0.5, 1, 2, 3]), g, atol=1e-6)
    assert_allclose(charge_correlation(GAUSS, [0.5, 1, 2, 3]), charge, atol=1e-6)


@ALL
@pytest.mark.parametrize("r", [0.4, 1.6, 3.2])
def test_correlations_agree_with_gradients_drawn_by_rices_formula(
    spectrum: Spectrum, r: float
) -> None:
    g, charge = from_gaussian_gradients(spectrum, r)
    # 4e5 draws of a product of two determinants: some 0.4 %, here 4 of them.
    assert_allclose(pair_correlation(spectrum, r), g, rtol=0.015)
    assert_allclose(charge_correlation(spectrum, r), charge, atol=0.015 * g)


@ALL
def test_like_charges_exclude_each_other_at_no_distance(spectrum: Spectrum) -> None:
    # g(0) = -g_Q(0) = (3 <k^4>/<k^2>^2 - 2) / 4, Berry and Dennis (2000), expanded here.
    limit = (3 * spectrum.kurtosis - 2) / 4
    r = np.array([0.0, 1e-200, 1e-9, 1e-5])
    assert_allclose(pair_correlation(spectrum, r), limit, rtol=1e-9)
    assert_allclose(charge_correlation(spectrum, r), -limit, rtol=1e-9)


@ALL
def test_series_and_closed_form_meet_without_a_step(spectrum: Spectrum) -> None:
    r = (1 + np.array([-1e-9, 1e-9])) / spectrum.wavenumber_per_px
    for law in (pair_correlation, charge_correlation, unscreened_charge):
        below, above = law(spectrum, r)
        # The slope moves the value by some 1e-9.
        assert below == pytest.approx(above, abs=1e-8)


@ALL
def test_distances_scale_with_the_wavenumber(spectrum: Spectrum) -> None:
    wider = Spectrum.measured([0.6, 1.5, 2.7, 3.9], [1.0, 2.0, 2.0, 0.5])
    if spectrum.kind != "measured":
        wider = Spectrum(spectrum.kind, 3.0)
    r = np.linspace(0, 8, 50)
    assert_allclose(pair_correlation(wider, r), pair_correlation(spectrum, 3 * r), rtol=1e-8)


@ALL
def test_charge_left_unscreened_is_one_plus_the_integral_of_the_charge_correlation(
    spectrum: Spectrum,
) -> None:
    r = np.linspace(0, 10, 20_001)
    ring = 2 * np.pi * r * charge_correlation(spectrum, r)
    left = 1 + zero_density(spectrum) * trapezoid(ring, r)
    assert unscreened_charge(spectrum, 10.0) == pytest.approx(left, abs=1e-6)
    assert unscreened_charge(spectrum, 0.0) == pytest.approx(1.0, rel=1e-13)


def test_charge_is_screened_at_large_distance() -> None:
    # First Stillinger-Lovett rule; Wilkinson, J. Phys. A 37, 6763 (2004). At K R = 200.
    assert 1 - unscreened_charge(RING, 200.0) == pytest.approx(0.99410063, abs=1e-8)
    assert 1 - unscreened_charge(DISC, 200.0) == pytest.approx(0.99999991, abs=1e-8)
    assert unscreened_charge(GAUSS, 200.0) == 0.0


def test_charge_variance_in_discs_has_the_values_of_an_independent_evaluation() -> None:
    # The integral over the overlap of discs, Berry and Dennis (2000), by other quadrature.
    radius = 2 * np.pi * np.array([0.5, 1, 2, 4])
    assert_allclose(charge_variance(DISC, radius), [0.658, 1.394, 2.836, 5.699], atol=6e-4)
    assert_allclose(charge_variance(RING, radius), [1.244, 2.947, 6.790, 15.359], atol=6e-4)


@ALL
def test_charge_variance_is_the_integral_over_the_overlap_of_two_discs(spectrum: Spectrum) -> None:
    radius, density = 3.7, zero_density(spectrum)

    def pairs(r: float) -> float:
        half = r / (2 * radius)
        overlap = 2 * radius**2 * (np.arccos(half) - half * np.sqrt(1 - half**2))
        return float(charge_correlation(spectrum, r) * overlap * 2 * np.pi * r)

    screened = density**2 * quad(pairs, 0, 2 * radius, epsabs=1e-9)[0]
    expected = density * np.pi * radius**2 + screened
    assert charge_variance(spectrum, radius) == pytest.approx(expected, abs=1e-7)


def test_a_pair_line_averages_over_the_area_of_the_bins() -> None:
    line = pair_line(RING, [0.0, 1.0, 3.0])
    for row in line.itertuples():
        low, high = row.r_low_px, row.r_high_px
        total = quad(lambda r: float(pair_correlation(RING, r)) * r, low, high)[0]
        assert row.g == pytest.approx(2 * total / (high**2 - low**2), abs=1e-9)
        assert row.g_like == row.g + row.g_charge
        assert row.g_opposite == row.g - row.g_charge


@pytest.mark.parametrize("edges", [[1.0], [1.0, 1.0], [2.0, 1.0], [[0.0, 1.0]]])
def test_edges_that_do_not_increase_are_refused(edges: list[float]) -> None:
    with pytest.raises(ValueError, match="edges_px: expected at least two increasing distances"):
        pair_line(RING, edges)


@pytest.mark.parametrize("law", [pair_correlation, charge_correlation, unscreened_charge])
def test_a_negative_distance_is_refused(law: type) -> None:
    with pytest.raises(ValueError, match="r_px: expected finite values of 0 or more"):
        law(RING, [1.0, -1.0])


# ------------------------------------------------------------ laws of a point


def test_the_axis_ratio_of_cores_has_its_published_law() -> None:
    # Berry and Dennis (2000): median eccentricity 0.910180, mean 0.869676, for any spectrum.
    assert core_axis_ratio_cdf(np.sqrt(2) - 1) == pytest.approx(0.5, abs=1e-14)
    mean = quad(lambda t: t * float(core_axis_ratio_pdf(t)), 0, 1)[0]
    assert mean == pytest.approx(0.429204, abs=1e-6)
    mean = quad(lambda e: e * float(core_eccentricity_pdf(e)), 0, 1)[0]
    assert mean == pytest.approx(0.869676, abs=1e-6)
    assert quad(core_axis_ratio_pdf, 0, 0.3)[0] == pytest.approx(float(core_axis_ratio_cdf(0.3)))
    assert quad(core_eccentricity_pdf, 0, 0.91018)[0] == pytest.approx(0.5, abs=1e-5)


def test_phase_around_located_cores_follows_the_law_of_their_ellipse() -> None:
    wave = RandomWaves("disc", 16.0, box_px=96.0, seed=3)
    table = locate_singularities(wave.on_frame((96, 96), 0.0), margin_px=12.0)
    azimuth, radius = np.linspace(0, 2 * np.pi, 24, endpoint=False), 1e-4
    assert len(table) > 10
    for core in table.itertuples():
        around = wave.field(
            core.y_px + radius * np.sin(azimuth), core.x_px + radius * np.cos(azimuth), 0.0
        )
        shape = (core.axis_ratio, core.orientation_rad, core.charge)
        law = core_phase(azimuth, *shape)
        turned = np.exp(1j * (np.angle(around) - law))
        # A position to 1e-7 px on a circle of 1e-4, and the field's bend over it.
        assert np.abs(turned / turned.mean() - 1).max() < 0.02


def test_speeds_of_zeros_have_half_their_number_below_the_scale() -> None:
    scale = 0.4
    assert speed_exceedance(scale, scale) == 0.5
    # Of Berry and Dennis's law: P(v > 2 w) = 1/5, P(v > 3 w) = 1/10.
    assert_allclose(speed_exceedance([2 * scale, 3 * scale], scale), [0.2, 0.1])
    below = quad(lambda v: float(speed_pdf(v, scale)), 0, 1.0)[0]
    assert below == pytest.approx(1 - float(speed_exceedance(1.0, scale)), abs=1e-10)


def test_zeros_of_a_simulated_field_move_at_the_speeds_of_the_law() -> None:
    wave = RandomWaves("disc", 8.0, spread_rad_per_frame=0.3, box_px=256.0, seed=1)
    zeros = locate_singularities(wave.on_frame((256, 256), 0.0), margin_px=4.0)
    jet = wave.jet(zeros["y_px"], zeros["x_px"], 0.0)
    det = (np.conj(jet.dx) * jet.dy).imag
    # Solves dx vx + dy vy = -dt for real vx and vy.
    along_x, along_y = (np.conj(jet.dt) * jet.dy).imag, (np.conj(jet.dx) * jet.dt).imag
    speed = np.hypot(along_x, along_y) / np.abs(det)
    power = np.abs(wave.modes.amplitude) ** 2
    spectrum = Spectrum.measured(np.hypot(wave.modes.ky, wave.modes.kx), power)
    scale = speed_scale(spectrum, wave.frequency_variance)
    # Median and shares of some 1600 zeros: w / sqrt(n) = 2.5 %, and 1 in 100; three of each.
    assert np.median(speed) == pytest.approx(scale, rel=0.075)
    assert (speed > 2 * scale).mean() == pytest.approx(0.2, abs=0.03)
    assert (speed > 3 * scale).mean() == pytest.approx(0.1, abs=0.023)


def test_a_field_of_one_frequency_stands_still() -> None:
    assert speed_scale(DISC, 0.0) == 0.0


def test_saddles_outnumber_singularities_as_published() -> None:
    # Dennis, J. Phys. A 34, L297 (2001); no extrema in a monochromatic field.
    expected = {"ring": (1.0, 0.0), "disc": (1.08866, 0.08866), "gauss": (1.41421, 0.41421)}
    for spectrum in (RING, DISC, GAUSS):
        points = critical_point_densities(spectrum)
        found = (points.saddles / points.singularities, points.extrema / points.singularities)
        assert_allclose(found, expected[spectrum.kind], atol=1e-5)


def test_a_third_of_a_ring_field_and_a_fifth_of_a_disc_field_superoscillate() -> None:
    # Dennis, Hamilton and Courtial, Opt. Lett. 33, 2976 (2008).
    assert superoscillating_fraction(RING) == pytest.approx(1 / 3, rel=1e-13)
    assert superoscillating_fraction(DISC) == pytest.approx(1 / 5, rel=1e-13)
    assert superoscillating_fraction(GAUSS) == 0.0
    assert wavevector_exceedance(DISC, np.sqrt(0.25)) == pytest.approx(0.5)


def test_speckle_has_contrast_1_and_less_with_a_background_or_over_patterns() -> None:
    # Goodman, Speckle Phenomena in Optics (2007).
    assert speckle_contrast() == 1.0
    assert speckle_contrast(patterns=4) == 0.5
    assert speckle_contrast(background_ratio=1.0) == pytest.approx(np.sqrt(3) / 2)
    assert_allclose(intensity_exceedance([1.0, 3.0]), [0.3679, 0.0498], atol=5e-5)


def test_false_zeros_fall_exponentially_with_the_light_over_the_noise() -> None:
    # Derived from Rice's formula; a disc filter of 0.05 cycles/px on 1024 x 1024 pixels.
    noise = Spectrum.disc(2 * np.pi * 0.05)
    found = false_zero_density(noise, np.sqrt([0.0, 1, 2, 4, 6]) * 0.7, 0.7) * 1024**2
    assert_allclose(found, [4122.5, 1516.6, 557.9, 75.5, 10.2], rtol=3e-3)


def test_noise_in_simulated_coherent_light_makes_the_zeros_foretold() -> None:
    counts, expected = [], 0.0
    for seed in range(5):
        wave = RandomWaves("disc", 8.0, box_px=256.0, seed=seed)
        table = locate_singularities(np.sqrt(1.5) + wave.on_frame((256, 256), 0.0))
        counts.append(len(table))
        k = np.hypot(wave.modes.ky, wave.modes.kx)
        noise = Spectrum.measured(k, np.abs(wave.modes.amplitude) ** 2)
        expected += float(false_zero_density(noise, np.sqrt(1.5), 1.0)) * 255**2
    # Some 1780 zeros, made in pairs: standard error sqrt(2 / n) = 3.4 %, three of it.
    assert sum(counts) == pytest.approx(expected, rel=0.1)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: core_axis_ratio_cdf(1.5), "axis_ratio: expected values from 0 to 1"),
        (lambda: core_eccentricity_pdf(-0.1), "eccentricity: expected values from 0 to 1"),
        (lambda: speed_pdf(1.0, 0.0), "scale: expected a positive median speed"),
        (lambda: speed_exceedance(-1.0, 1.0), "speed: expected finite values"),
        (lambda: speed_scale(RING, -1.0), "frequency_variance: expected 0 or more"),
        (lambda: speckle_contrast(patterns=0), "patterns: expected 1 or more"),
        (lambda: speckle_contrast(background_ratio=-1), "background_ratio: expected 0 or more"),
        (lambda: false_zero_density(RING, 1.0, 0.0), "noise: expected a positive number"),
    ],
)
def test_an_argument_out_of_range_is_named(call: object, message: str) -> None:
    with pytest.raises(ValueError, match=message):
        call()  # type: ignore[operator]
