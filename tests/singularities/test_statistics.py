from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose

from hologyre.fields.interpolate import on_pixels
from hologyre.grid import Field, Window
from hologyre.singularities.locate import locate_singularities
from hologyre.singularities.statistics import measure_density, measure_neighbours
from hologyre.singularities.statistics_fields import (
    measure_contrast,
    measure_intensities,
    measure_spectrum,
    measure_wavevectors,
)
from hologyre.singularities.statistics_pairs import measure_charge_variance, measure_pairs
from hologyre.singularities.theory import charge_variance, pair_line, zero_density
from hologyre.singularities.theory_laws import (
    core_axis_ratio_cdf,
    intensity_exceedance,
    wavevector_exceedance,
)
from hologyre.singularities.theory_spectrum import Spectrum

SHORTEST = 8.0
K = 2 * np.pi / SHORTEST


class Speckle(NamedTuple):
    """Frames of one simulated spectrum and their zeros."""

    field: Field
    table: pd.DataFrame
    window: Window


@pytest.fixture(scope="module")
def speckle(periodic: Callable[..., Field]) -> dict[str, Speckle]:
    """Four frames each of 320 x 320 px: 19,600 zeros of rings, 9,800 of discs, 4,200 of gauss."""
    made = {}
    for spectrum in ("ring", "disc", "gauss"):
        fields = [periodic(spectrum, SHORTEST, 320.0, seed) for seed in range(4)]
        tables = [locate_singularities(f).assign(frame=n) for n, f in enumerate(fields)]
        stack = fields[0].with_values(np.stack([f.values for f in fields]))
        window = fields[0].grid.valid
        made[spectrum] = Speckle(stack, pd.concat(tables, ignore_index=True), window)
    return made


def scattered(n_frames: int, density: float, window: Window, seed: int) -> pd.DataFrame:
    """Place independent points of random charge."""
    rng = np.random.default_rng(seed)
    area = (window.y_max - window.y_min) * (window.x_max - window.x_min)
    counts = rng.poisson(density * area, n_frames)
    return pd.DataFrame(
        {
            "frame": np.repeat(np.arange(n_frames), counts),
            "y_px": rng.uniform(window.y_min, window.y_max, counts.sum()),
            "x_px": rng.uniform(window.x_min, window.x_max, counts.sum()),
            "charge": rng.choice([-1, 1], counts.sum()),
        }
    )


# Long and thin, so that most points feel the border.
NARROW = Window(10.0, 40.0, -5.0, 295.0)


@pytest.mark.parametrize("spectrum", ["ring", "disc", "gauss"])
def test_density_of_located_zeros_is_that_of_the_measured_spectrum(
    speckle: dict[str, Speckle], spectrum: str
) -> None:
    field, table, window = speckle[spectrum]
    theory = zero_density(measure_spectrum(field))
    found = measure_density(table, window)
    assert found.low < found.value < found.high
    # Three standard errors, and what the window widens the spectrum by (0.1 % of a disc's <k^2>).
    assert abs(found.value - theory) < 3 * found.standard_error + 0.002 * theory


@pytest.mark.parametrize("blocks", ["tiles", "frames"])
def test_density_of_scattered_points_has_the_error_of_a_poisson_count(blocks: str) -> None:
    window = Window(0.0, 100.0, 0.0, 100.0)
    ratios = []
    for seed in range(20):
        found = measure_density(scattered(30, 0.01, window, seed), window, blocks=blocks, rng=seed)
        ratios.append(found.standard_error / np.sqrt(found.value / (30 * 100.0**2)))
    # 25 or 30 blocks tell a standard deviation to 15 %, 20 times: 3.3 %.
    assert np.mean(ratios) == pytest.approx(1.0, abs=0.1)


def test_no_singularity_leaves_room_for_three_point_seven() -> None:
    # Garwood, Biometrika 28, 437 (1936): 3.689 at 97.5 % for a count of 0.
    table = pd.DataFrame({c: pd.Series(dtype=float) for c in ("frame", "y_px", "x_px", "charge")})
    found = measure_density(table, Window(0.0, 10.0, 0.0, 10.0), frames=[0, 1])
    assert (found.value, found.low) == (0.0, 0.0)
    assert found.high * 200 == pytest.approx(3.689, abs=1e-3)


def test_frames_without_singularities_count() -> None:
    window = Window(0.0, 10.0, 0.0, 10.0)
    table = scattered(1, 2.0, window, 0)
    alone = measure_density(table, window).value
    assert measure_density(table, window, frames=range(4)).value == pytest.approx(alone / 4)


def test_singularities_outside_the_window_are_left_out() -> None:
    window = Window(0.0, 10.0, 0.0, 20.0)
    table = scattered(2, 1.0, window, 0)
    half = Window(0.0, 10.0, 0.0, 10.0)
    count = int((table["x_px"] <= 10).sum())
    assert measure_density(table, half).value == pytest.approx(count / 200)


@pytest.mark.parametrize(
    ("spectrum", "opposite", "distance"), [("ring", 0.790, 0.669), ("disc", 0.891, 0.574)]
)
def test_nearest_neighbours_are_mostly_opposite(
    speckle: dict[str, Speckle], spectrum: str, opposite: float, distance: float
) -> None:
    # From 1e5 zeros of an independent simulation, +-0.003; 'about 90 %' in speckle: Shvartsman
    # and Freund, Phys. Rev. Lett. 72, 1008 (1994).
    _, table, window = speckle[spectrum]
    found = measure_neighbours(table, window)
    density = measure_density(table, window).value
    # Three standard errors of some 0.004 of this sample and those of the reference.
    assert found.opposite.value == pytest.approx(opposite, abs=0.016)
    assert found.opposite.standard_error < 0.006
    assert found.mean_distance_px.value * np.sqrt(density) == pytest.approx(distance, abs=0.008)


def test_nearest_neighbours_of_scattered_points_are_free_of_the_border() -> None:
    # Mean distance 1 / (2 sqrt d) in the plane (Clark and Evans, Ecology 35, 445, 1954); without
    # correction this window gives 8 % more.
    found = measure_neighbours(scattered(200, 0.01, NARROW, 1), NARROW, blocks="frames")
    for estimate, truth in ((found.mean_distance_px, 5.0), (found.opposite, 0.5)):
        assert estimate.value == pytest.approx(truth, abs=3.5 * estimate.standard_error)
        # 18,000 points, many of them each other's neighbour: 0.5 / sqrt(9,000) of a fraction.
        assert estimate.standard_error < 0.013 * truth
    below = found.distances.query("distance_px < 4")["weight"].sum()
    assert below == pytest.approx(1 - np.exp(-np.pi * 0.01 * 16), abs=0.015)


def test_a_lonely_singularity_has_no_neighbour() -> None:
    table = pd.DataFrame({"frame": [0], "y_px": [5.0], "x_px": [5.0], "charge": [1]})
    found = measure_neighbours(table, Window(0.0, 10.0, 0.0, 10.0))
    assert np.isnan(found.opposite.value)
    assert found.distances.empty


def test_neighbours_are_never_of_another_frame() -> None:
    table = pd.DataFrame(
        {"frame": [3, 7, 3], "y_px": [50.0, 50.1, 54.0], "x_px": 50.0, "charge": [1, -1, 1]}
    )
    found = measure_neighbours(table, Window(0.0, 100.0, 0.0, 100.0))
    assert_allclose(found.distances["distance_px"], 4.0)
    assert found.distances["frame"].tolist() == [3, 3]
    assert found.opposite.value == 0.0


@pytest.mark.parametrize("spectrum", ["ring", "disc", "gauss"])
def test_pair_correlations_of_located_zeros_lie_on_the_theory_line(
    speckle: dict[str, Speckle], spectrum: str
) -> None:
    # Berry and Dennis, Proc. R. Soc. Lond. A 456, 2059 (2000).
    field, table, window = speckle[spectrum]
    edges = np.arange(0.0, 24.1, 1.0)
    found, line = measure_pairs(table, window, edges), pair_line(measure_spectrum(field), edges)
    for name in ("g", "g_charge", "g_like", "g_opposite"):
        away = (found[name] - line[name]) / found[f"{name}_error"]
        # Of 24 bins none as far as 4.5 of its errors, known to a quarter; 1.4 together.
        assert np.abs(away).max() < 4.5
        assert np.sqrt((away**2).mean()) < 1.4


def test_pair_correlation_of_a_ring_is_measured_within_two_hundredths(
    speckle: dict[str, Speckle],
) -> None:
    _, table, window = speckle["ring"]
    edges = np.arange(0.0, 24.1, 1.0)
    found, line = measure_pairs(table, window, edges), pair_line(Spectrum.ring(K), edges)
    # 19,600 zeros: bins of 1 px hold 7,000 pairs and more from 2 px on.
    assert_allclose(found["g"][2:], line["g"][2:], atol=0.04)
    assert_allclose(found["g_charge"][2:], line["g_charge"][2:], atol=0.04)
    assert found["g"].argmax() == line["g"].argmax()


def test_scattered_points_are_uncorrelated_up_to_the_windows_side() -> None:
    edges = np.array([0.0, 2, 6, 12, 20, 29])
    deviations = []
    for seed in range(12):
        table = scattered(60, 0.01, NARROW, seed)
        found = measure_pairs(table, NARROW, edges)
        deviations.append(
            [(found[n] - t) / found[f"{n}_error"] for n, t in (("g", 1), ("g_charge", 0))]
        )
    away = np.array(deviations)
    # Means of 12 are within 0.29, three and a half of it; the errors themselves within a third.
    assert np.abs(away.mean(axis=0)).max() < 1.0
    assert np.sqrt((away**2).mean()) == pytest.approx(1.0, abs=0.33)


def test_pairs_count_as_a_brute_force_sum_over_pairs() -> None:
    window, edges = Window(0.0, 30.0, 0.0, 20.0), np.array([1.0, 4.0, 7.5])
    table = scattered(2, 0.05, window, 4)
    found = measure_pairs(table, window, edges)
    sums, pairs = np.zeros((2, 2)), np.zeros(2)
    for _, frame in table.groupby("frame"):
        rows = frame[["y_px", "x_px", "charge"]].to_numpy()
        for i, (y, x, q) in enumerate(rows):
            for j, (other_y, other_x, other_q) in enumerate(rows):
                distance = np.hypot(y - other_y, x - other_x)
                bin_ = np.searchsorted(edges, distance, side="right") - 1
                if i == j or bin_ not in (0, 1):
                    continue
                weight = 1 / ((30 - abs(y - other_y)) * (20 - abs(x - other_x)))
                sums[:, bin_] += weight, weight * q * other_q
                pairs[bin_] += 0.5
    n = len(table)
    scale = (2 * 600) ** 2 / (2 * n * (n - 1)) / (np.pi * np.diff(edges**2))
    assert_allclose(found[["g", "g_charge"]].to_numpy().T, sums * scale, rtol=1e-12)
    assert found["pairs"].tolist() == pairs.tolist()


def test_pair_statistics_are_the_same_for_the_conjugate_field_elsewhere_in_any_order() -> None:
    window, edges = Window(0.0, 60.0, 0.0, 80.0), [0.0, 3.0, 8.0]
    table = scattered(3, 0.03, window, 2)
    moved = table.assign(
        y_px=table["y_px"] + 7.25, x_px=table["x_px"] - 3.5, charge=-table["charge"]
    ).sample(frac=1.0, random_state=1)
    shifted = Window(7.25, 67.25, -3.5, 76.5)
    pd.testing.assert_frame_equal(
        measure_pairs(moved, shifted, edges), measure_pairs(table, window, edges), rtol=1e-9
    )
    pd.testing.assert_frame_equal(
        measure_charge_variance(moved, shifted, [5.0]),
        measure_charge_variance(table, window, [5.0]),
        rtol=1e-9,
    )


def test_a_table_is_left_as_it_was() -> None:
    window = Window(0.0, 60.0, 0.0, 60.0)
    table = scattered(2, 0.03, window, 2)
    before = table.copy()
    measure_pairs(table, window, [0.0, 5.0])
    measure_neighbours(table, window)
    measure_charge_variance(table, window, [5.0])
    pd.testing.assert_frame_equal(table, before)


@pytest.mark.parametrize("spectrum", ["ring", "disc"])
def test_charge_in_discs_varies_as_screened_charges_do(
    speckle: dict[str, Speckle], spectrum: str
) -> None:
    field, table, window = speckle[spectrum]
    radii = SHORTEST * np.array([0.5, 1, 2, 3.5])
    found = measure_charge_variance(table, window, radii)
    theory = charge_variance(measure_spectrum(field), radii)
    assert (np.abs(found["variance"] - theory) < 3.5 * found["variance_error"]).all()
    # The smaller discs are many: within 5 %, where random charges would vary 1.9 to 3.5 times more.
    assert_allclose(found["variance"][:2], theory[:2], rtol=0.05)
    assert (found["mean_count"] > 1.8 * found["variance"]).all()


def test_scattered_charges_vary_as_their_number() -> None:
    window = Window(0.0, 150.0, 0.0, 150.0)
    found = measure_charge_variance(scattered(40, 0.02, window, 5), window, [4.0, 12.0])
    assert_allclose(found["mean_count"], np.pi * np.array([16, 144]) * 0.02, rtol=0.03)
    away = (found["variance"] - found["mean_count"]) / found["variance_error"]
    assert (np.abs(away) < 3.5).all()
    # A normal charge in n discs a radius apart: sqrt(2 / n) and a little more, as they overlap.
    relative = found["variance_error"] / found["variance"] / np.sqrt(2 / found["discs"])
    assert ((relative > 0.9) & (relative < 2.0)).all()


@pytest.mark.parametrize(("spectrum", "kurtosis"), [("ring", 1.0), ("disc", 4 / 3)])
def test_the_measured_spectrum_has_the_moments_of_the_simulated_one(
    speckle: dict[str, Speckle], spectrum: str, kurtosis: float
) -> None:
    found = measure_spectrum(speckle[spectrum].field)
    square = K**2 if spectrum == "ring" else K**2 / 2
    # Four frames of a disc tell <k^2> to 0.3 %; the window adds 0.1 %.
    assert found.mean_square_k == pytest.approx(square, rel=0.01)
    assert found.kurtosis == pytest.approx(kurtosis, rel=0.01)


def test_a_tilt_moves_no_power_about_the_mean(periodic: Callable[..., Field]) -> None:
    field = periodic("disc", SHORTEST, 128.0, 1)
    y, x = np.arange(128.0)[:, np.newaxis], np.arange(128.0)
    tilted = on_pixels(field) * np.exp(2j * np.pi * (0.31 * y - 0.22 * x))
    # The Field's power is cut beyond its radius, where the window left 1e-3 of <k^2>.
    expected = measure_spectrum(field).mean_square_k
    assert measure_spectrum(tilted).mean_square_k == pytest.approx(expected, rel=2e-3)


@pytest.mark.parametrize(("spectrum", "fraction"), [("ring", 1 / 3), ("disc", 1 / 5)])
def test_wavevectors_superoscillate_over_a_third_of_a_ring_and_a_fifth_of_a_disc(
    speckle: dict[str, Speckle], spectrum: str, fraction: float
) -> None:
    # Dennis, Hamilton and Courtial, Opt. Lett. 33, 2976 (2008).
    field = speckle[spectrum].field
    found = measure_wavevectors(field, [2 * K, K, K / 2])
    theory = wavevector_exceedance(measure_spectrum(field), found["k_per_px"])
    assert_allclose(found["exceedance"], theory, atol=0.005)
    assert found["exceedance"][1] == pytest.approx(fraction, abs=0.005)
    assert (found["exceedance_error"] < 0.004).all()


def test_wavevectors_about_the_mean_do_not_feel_a_tilt(periodic: Callable[..., Field]) -> None:
    pixels = on_pixels(periodic("disc", 16.0, 128.0, 1))
    y, x = np.arange(128.0)[:, np.newaxis], np.arange(128.0)
    tilted = pixels * np.exp(0.05j * y - 0.08j * x)
    limits = np.array([0.2, 0.4])
    plain = measure_wavevectors(pixels, limits, about="mean")["exceedance"]
    again = measure_wavevectors(tilted, limits, about="mean")["exceedance"]
    # Central differences of a tilted wave err by its curvature: some 1 % of wavevectors.
    assert_allclose(again, plain, atol=0.01)
    assert abs(measure_wavevectors(tilted, limits)["exceedance"][0] - plain[0]) > 0.02


def test_intensities_of_speckle_fall_off_exponentially_with_contrast_1(
    speckle: dict[str, Speckle],
) -> None:
    # Goodman, Speckle Phenomena in Optics (2007).
    field = speckle["disc"].field
    contrast = measure_contrast(field)
    assert contrast.value == pytest.approx(1.0, abs=3 * contrast.standard_error)
    assert contrast.standard_error < 0.01
    found = measure_intensities(field, [1.0, 3.0, 0.2])
    theory = intensity_exceedance([1.0, 3.0, 0.2])
    assert (np.abs(found["exceedance"] - theory) < 4 * found["exceedance_error"]).all()
    assert_allclose(found["exceedance"], theory, atol=0.004)


def test_an_even_field_has_no_contrast() -> None:
    assert measure_contrast(np.full((16, 16), 2j)).value == 0.0


def test_axis_ratios_of_located_cores_follow_the_law(speckle: dict[str, Speckle]) -> None:
    # Berry and Dennis (2000): for any isotropic spectrum.
    for sample in speckle.values():
        ratio = np.sort(sample.table["axis_ratio"].to_numpy())
        steps = np.abs(core_axis_ratio_cdf(ratio) - np.arange(ratio.size) / ratio.size)
        # Kolmogorov: 1.95 / sqrt(n) is passed once in a thousand, were all independent.
        assert steps.max() < 1.95 / np.sqrt(ratio.size)


TABLE = scattered(1, 0.1, Window(0.0, 50.0, 0.0, 50.0), 0)
FIFTY = Window(0.0, 50.0, 0.0, 50.0)
SMALL = np.ones((4, 20), dtype=np.complex128)
EVEN = np.ones((16, 16), dtype=np.complex128)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: measure_density(TABLE.drop(columns="charge"), FIFTY), "charge is missing"),
        (lambda: measure_density(TABLE.iloc[:0], FIFTY), "frames: expected at least one frame"),
        (lambda: measure_density(TABLE, Window(0, 0, 0, 9)), "window: expected a finite area"),
        (lambda: measure_density(TABLE, FIFTY, blocks="rows"), "blocks: expected one of tiles"),
        (lambda: measure_density(TABLE, FIFTY, blocks="frames"), "at least 2 frames, got 1"),
        (lambda: measure_pairs(TABLE, FIFTY, [1, 60]), "edges_px: expected less than the window"),
        (lambda: measure_charge_variance(TABLE, FIFTY, [6]), "radii_px: expected radii above 0"),
        (lambda: measure_wavevectors(EVEN, [1], about="top"), "about: expected one of carrier"),
        (lambda: measure_wavevectors(EVEN, [-1]), "k_per_px: expected finite values"),
        (lambda: measure_contrast(SMALL), "field: expected at least 8 x 8 valid pixels"),
        (lambda: measure_spectrum(0 * EVEN), "field: expected finite values that are not all"),
        (lambda: measure_intensities(0 * EVEN, [1]), "field: expected some light"),
    ],
)
def test_an_argument_without_sense_is_named(call: Callable[[], object], message: str) -> None:
    with pytest.raises(ValueError, match=message):
        call()


@pytest.mark.parametrize("measure", [measure_spectrum, measure_contrast])
def test_a_real_image_is_no_field(measure: Callable[[object], object]) -> None:
    with pytest.raises(TypeError, match="field: expected a Field or a complex array"):
        measure(np.ones((16, 16)))
