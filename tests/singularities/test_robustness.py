from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pandas as pd
import pytest
from scipy.spatial import cKDTree

from hologyre.fields.interpolate import resample
from hologyre.grid import Field, Window
from hologyre.simulate.waves import VortexBeam
from hologyre.singularities.locate import locate_singularities

CENTRE, WAIST, FRAME = (80.3, 75.2), 20.0, (160, 150)


def dipole(a: float) -> np.ndarray:
    """(u - a)(conj(u) + a) exp(-|u|^2), lengths in waists."""
    return VortexBeam.hosting(
        [(CENTRE[0], CENTRE[1] + a * WAIST)],
        [(CENTRE[0], CENTRE[1] - a * WAIST)],
        waist_px=WAIST,
        centre_px=CENTRE,
    ).on_frame(FRAME, 0)


@pytest.mark.parametrize("a", [0.001, 0.01, 0.03, 0.1, 0.2, 0.4])
def test_a_pair_meets_at_the_saddle_between_its_zeros(a: float) -> None:
    """On the axis E is real and largest half-way, a^2; away from it |E| grows."""
    found = locate_singularities(dipole(a))
    assert sorted(found.charge) == [-1, 1]
    # Levels come off the interpolant, whose own error is some 1e-12 of the beam's 0.4.
    np.testing.assert_allclose(found.robustness, a**2, rtol=1e-9, atol=1e-12)


def test_a_lone_vortex_lasts_until_it_meets_the_border() -> None:
    """u exp(-|u|^2) falls off again, so that {|E| <= r} comes in from the frame's border."""
    beam = VortexBeam.hosting([CENTRE], waist_px=WAIST, centre_px=CENTRE).on_frame(FRAME, 0)
    found = locate_singularities(beam)
    # The ridge between, where r exp(-r^2) is largest, is a circle: it has no one saddle, and the
    # level is read on the lattice's edges.
    np.testing.assert_allclose(found.robustness, np.exp(-0.5) / np.sqrt(2), rtol=5e-3)


def plain_merge_tree(values: np.ndarray) -> pd.DataFrame:
    """Every plaquette of a fine grid, every edge by its chord, no shortcuts."""
    ny, nx = values.shape
    turn = [np.angle(np.roll(values, -1, k)[:-1, :-1] / values[:-1, :-1]) for k in (0, 1)]
    right = np.angle(values[1:, 1:] / values[:-1, 1:])
    below = np.angle(values[1:, 1:] / values[1:, :-1])
    winding = np.rint((turn[1] + right - below - turn[0]) / (2 * np.pi)).astype(int)

    def chord(a: np.ndarray, b: np.ndarray) -> np.ndarray:
        step = b - a
        t = np.clip(-(a.conj() * step).real / np.abs(step) ** 2, 0, 1)
        return np.abs(a + t * step)

    cells = np.pad(np.arange((ny - 1) * (nx - 1)).reshape(ny - 1, nx - 1), 1, constant_values=-1)
    cells[cells < 0] = (ny - 1) * (nx - 1)
    across = chord(values[:, :-1], values[:, 1:])
    down = chord(values[:-1], values[1:])
    level = np.concatenate([across.ravel(), down.ravel()])
    one = np.concatenate([cells[:-1, 1:-1].ravel(), cells[1:-1, :-1].ravel()])
    other = np.concatenate([cells[1:, 1:-1].ravel(), cells[1:-1, 1:].ravel()])
    charge = np.append(winding.ravel(), 0)
    outside = charge.size - 1
    parent = list(range(charge.size))
    alive = {int(c): [int(c)] for c in np.flatnonzero(charge)}
    ends: dict[int, float] = {}

    def root(c: int) -> int:
        while parent[c] != c:
            parent[c] = parent[parent[c]]
            c = parent[c]
        return c

    for k in np.argsort(level):
        p, q = root(int(one[k])), root(int(other[k]))
        if p == q:
            continue
        if p == outside:
            p, q = q, p
        parent[p] = q
        charge[q] += charge[p]
        members = alive.pop(p, []) + alive.pop(q, [])
        if q == outside or charge[q] == 0:
            ends.update(dict.fromkeys(members, float(level[k])))
        elif members:
            alive[q] = members
    where = np.array(list(ends))
    return pd.DataFrame(
        {
            "row": where // (nx - 1) + 0.5,
            "column": where % (nx - 1) + 0.5,
            "charge": winding.ravel()[where],
            "level": list(ends.values()),
        }
    )


def test_levels_agree_with_a_plain_tree_on_a_fine_grid(periodic: Callable[..., Field]) -> None:
    field = periodic(shortest_px=24.0, box_px=240.0, seed=2, valid=Window(0.0, 120.0, 0.0, 140.0))
    fine = resample(field, 0.5)
    step = fine.grid.step_px
    rows, columns = round(120 / step[0]) + 1, round(140 / step[1]) + 1
    tree = plain_merge_tree(fine.values[:rows, :columns])
    found = locate_singularities(field)
    places = tree[["row", "column"]].to_numpy() * step
    distance, index = cKDTree(places).query(found[["y_px", "x_px"]].to_numpy())
    assert (distance < 0.5).all()
    np.testing.assert_array_equal(tree.charge.to_numpy()[index], found.charge)
    # Chords a 48th of a wavelength long are off by some 0.002 of the field's mean amplitude; the
    # outermost cells of the coarse lattice end beyond the fine one.
    error = np.abs(tree.level.to_numpy()[index] - found.robustness)
    assert np.median(error) < 1e-3
    assert (error < 0.01).mean() > 0.9


def test_a_change_below_the_robustness_removes_no_zero(periodic: Callable[..., Field]) -> None:
    """Adding a constant of modulus r cannot empty a charged part of {|E| <= r}."""
    field = periodic(seed=4)
    found = locate_singularities(field)
    level = float(found.robustness.quantile(0.3))
    strong = found[found.robustness > 1.01 * level]
    for angle in (0.0, 2.1, 4.2):
        changed = field.with_values(field.values + level * np.exp(1j * angle))
        assert len(locate_singularities(changed)) >= 0.9 * len(strong)


def test_robustness_is_carried_in_units_of_the_noise(periodic: Callable[..., Field]) -> None:
    found = locate_singularities(periodic(seed=4), noise=0.0025)
    np.testing.assert_allclose(found.robustness_snr, found.robustness / 0.05)


def test_scaling_the_field_scales_the_robustness(periodic: Callable[..., Field]) -> None:
    field = periodic(seed=4)
    plain, scaled = (
        locate_singularities(f) for f in (field, field.with_values(field.values * -3.5j))
    )
    # Where |E| is least at a node of the border, rounding chooses the edge the level is read on.
    alike = np.isclose(scaled.robustness, 3.5 * plain.robustness, rtol=1e-6)
    assert alike.mean() > 0.99


@pytest.mark.parametrize(("amplitude", "above"), [(0.0, 0.0), (1.0, 0.2), (1.5, 0.0)])
def test_noise_on_a_coherent_wave_makes_no_more_robust_zeros_than_the_bound(
    amplitude: float, above: float, periodic: Callable[..., Field]
) -> None:
    """At most <k^2>/(4 pi) exp(-(A + R)^2 / s^2) zeros of robustness above R per area.

    Raising the wave to A + R by a constant cannot empty a charged part of {|E| <= R}, and zeros
    of a wave in Gaussian noise have the density with A + R for A.
    """
    count, area, density = 0, 0.0, 0.0
    for seed in range(3):
        noise = periodic(seed=seed, box_px=480.0)
        found = locate_singularities(noise.with_values(noise.values + amplitude))
        count += int((found.robustness > above).sum())
        area += 479.0**2
        density = (2 * np.pi / 24) ** 2 / 2 / (4 * np.pi) * np.exp(-((amplitude + above) ** 2))
    # Zeros come in pairs, so that counts scatter by less than sqrt(2 n).
    assert count <= density * area + 4 * np.sqrt(2 * density * area)
    if above == 0.0:
        assert count >= density * area - 4 * np.sqrt(2 * density * area)
