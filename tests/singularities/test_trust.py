from __future__ import annotations

from functools import cache

import numpy as np
import pandas as pd
import pytest
import scipy.fft
from scipy.spatial import cKDTree
from scipy.stats import rankdata

from hologyre.grid import Field, Grid, Window
from hologyre.singularities.locate import locate_singularities
from hologyre.singularities.trust import WITHIN_PX

BOX = 512


def band_field(weight: np.ndarray, shortest_px: float, rng: np.random.Generator) -> np.ndarray:
    """Coefficients of a circular Gaussian field of unit mean intensity with this power."""
    draw = rng.standard_normal((2, *weight.shape))
    return (draw[0] + 1j * draw[1]) * np.sqrt(weight / (2 * weight.sum()))


def on_band(coefficients: np.ndarray, shortest_px: float) -> Field:
    half = coefficients.shape[0] // 2
    count = scipy.fft.next_fast_len(2 * half + 2)
    spectrum = np.zeros((count, count), dtype=complex)
    k = np.arange(-half, half + 1) % count
    spectrum[k[:, None], k] = coefficients
    step = BOX / count
    grid = Grid((BOX, BOX), (step, step), (0.0, 0.0), Window(0.0, BOX - 1.0, 0.0, BOX - 1.0))
    values = scipy.fft.ifft2(spectrum, norm="forward")
    return Field(values, grid, (0.0, 0.0), 1 / shortest_px)


def powers(kind: str, shortest_px: float) -> np.ndarray:
    half = int(BOX / shortest_px)
    k = np.arange(-half, half + 1) * shortest_px / BOX
    r = np.hypot(k[:, None], k)
    shape = {
        "disc": np.ones_like(r),
        "ring": np.exp(-(((r - 0.93) * half) ** 2) / 2),
        "gauss": np.exp(-(r**2) * 4.5),
        "annulus": (r > 0.6) * 1.0,
        "cone": np.maximum(1 - r, 0.0),
    }[kind]
    return shape * (r <= 1)


@cache
def noisy_zeros(kind: str, shortest_px: float, noise: float, seeds: int) -> pd.DataFrame:
    """Zeros of noisy speckle, whether the clean field has each within reach, and how far."""
    tables = []
    weight, flat = powers(kind, shortest_px), powers("disc", shortest_px)
    for seed in range(seeds):
        rng = np.random.default_rng(1000 + seed)
        clean = band_field(weight, shortest_px, rng)
        dirty = clean + noise * band_field(flat, shortest_px, rng)
        truth = locate_singularities(on_band(clean, shortest_px))
        found = locate_singularities(on_band(dirty, shortest_px), noise=noise**2, margin_px=8)
        away = np.empty(len(found))
        for sign in (1, -1):
            rows = np.flatnonzero(found.charge == sign)
            tree = cKDTree(truth.loc[truth.charge == sign, ["y_px", "x_px"]])
            away[rows] = tree.query(found.iloc[rows][["y_px", "x_px"]])[0]
        tables.append(found.assign(away_px=away, real=away < WITHIN_PX))
    return pd.concat(tables, ignore_index=True)


def area_under_curve(score: pd.Series, real: pd.Series) -> float:
    """Probability that a real zero scores above an unreal one."""
    rank, count = rankdata(score), int(real.sum())
    return float((rank[real].sum() - count * (count + 1) / 2) / count / (len(real) - count))


def test_trust_is_calibrated_on_any_spectrum_and_noise() -> None:
    """Nothing in it is fitted: what is tested is the model of noise on a fold."""
    scenes = [
        ("disc", 24.0, 0.05, 3),
        ("disc", 18.0, 0.2, 3),
        ("ring", 24.0, 0.15, 3),
        ("annulus", 20.0, 0.1, 3),
        ("annulus", 30.0, 0.3, 4),
        ("cone", 16.0, 0.12, 3),
        ("gauss", 20.0, 0.06, 4),
        ("cone", 24.0, 0.2, 4),
    ]
    zeros = pd.concat([noisy_zeros(*scene) for scene in scenes], ignore_index=True)
    assert len(zeros) > 20000
    tenth = np.minimum((zeros.trust * 10).astype(int), 9)
    table = zeros.groupby(tenth).agg(
        said=("trust", "mean"), so=("real", "mean"), n=("real", "size")
    )
    # Three points, and two standard errors of the count in that tenth.
    room = 0.03 + 2 * np.sqrt(table.said * (1 - table.said) / table.n)
    assert ((table.so - table.said).abs() < room).all(), table
    assert zeros.trust.mean() == pytest.approx(zeros.real.mean(), abs=0.01)


@pytest.mark.parametrize(("kind", "least"), [("disc", 0.92), ("ring", 0.95)])
def test_trust_tells_zeros_born_of_noise(kind: str, least: float) -> None:
    """Noise a tenth of the field; born of noise is what has no like zero of the object nearby.

    Drawing the noise again and following each zero through it, at a thousand times the cost,
    reaches 0.92 on the disc: the rest is not in the data.
    """
    zeros = noisy_zeros(kind, 24.0, 0.1, 5)
    born = zeros.away_px > 0.3 * 24
    assert born.sum() > 100
    chosen = zeros[born | zeros.real]
    trusted = area_under_curve(chosen.trust, chosen.real)
    assert trusted > least
    assert trusted > area_under_curve(chosen.robustness, chosen.real)


def test_without_noise_given_there_is_no_trust() -> None:
    clean = band_field(powers("disc", 24.0), 24.0, np.random.default_rng(3))
    assert locate_singularities(on_band(clean, 24.0)).trust.isna().all()


def test_a_field_free_of_noise_is_trusted() -> None:
    clean = band_field(powers("disc", 24.0), 24.0, np.random.default_rng(3))
    assert (locate_singularities(on_band(clean, 24.0), noise=0.0).trust == 1).all()


def test_trust_does_not_depend_on_the_fields_units() -> None:
    field = on_band(band_field(powers("disc", 24.0), 24.0, np.random.default_rng(4)), 24.0)
    plain = locate_singularities(field, noise=0.01)
    scaled = locate_singularities(field.with_values(50 * field.values), noise=25.0)
    np.testing.assert_allclose(plain.trust, scaled.trust, atol=1e-6)
