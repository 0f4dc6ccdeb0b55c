"""Vortex lines through refocused planes."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from hologyre.grid import Field, Grid, Window
from hologyre.motion import vortex_lines
from hologyre.simulate.waves import RandomWaves, VortexBeam

WAIST_PX = 40.0
WINDOW = Window(0.0, 159.0, 0.0, 159.0)


def beam_planes(wave: VortexBeam, zetas: np.ndarray) -> list[Field]:
    """A beam in planes of growing zeta = z / z_R, sampled over a period of 480 px."""
    grid = Grid((160, 160), (8.0, 8.0), (-160.0, -160.0), WINDOW)
    axis = grid.y_px(60)
    planes = (replace(wave, zeta=float(zeta)).on_grid(axis, axis, 0.0) for zeta in zetas)
    return [Field(values, grid, (0.0, 0.0), 1 / 24) for values in planes]


def inner(lines):
    """The lines that come near the beam's axis, without what wanders far out in the dark."""
    near = lines.points[np.hypot(lines.points["y_px"] - 80, lines.points["x_px"] - 80) < 40]
    return near.groupby("line").filter(lambda rows: len(rows) > 3)


def test_an_off_axis_vortex_runs_along_its_published_straight_line():
    # A vortex at (x0, 0) in the waist of a Gaussian beam lies at (x0, s x0 zeta): G. Indebetouw,
    # J. Mod. Opt. 40, 73 (1993).
    x0 = 0.3 * WAIST_PX
    wave = VortexBeam.hosting([(80.0, 80.0 + x0)], waist_px=WAIST_PX, centre_px=(80.0, 80.0))
    zetas = np.linspace(0.0, 1.0, 11)
    found = vortex_lines(beam_planes(wave, zetas), 100.0 * zetas, pixel_um=1.0)
    points = inner(found)
    assert points["line"].nunique() == 1
    line = found.lines.set_index("line").loc[points["line"].iloc[0]]
    assert (line["start"], line["end"], line["closed"]) == ("first plane", "last plane", False)
    # interpolation between planes 0.1 z_R apart
    np.testing.assert_allclose(points["x_px"], 80.0 + x0, atol=0.01)
    np.testing.assert_allclose(points["y_px"], 80.0 + x0 * points["z_um"] / 100.0, atol=0.01)
    assert line["length_um"] == pytest.approx(np.hypot(100.0, x0), rel=1e-4)


def test_a_dipole_is_one_hairpin_that_turns_where_the_pair_annihilates():
    # zeta_a = 2 a^2 / (w0 sqrt(w0^2 - 4 a^2)) = 0.533333 for a = 0.4 w0 (as above)
    a = 0.4 * WAIST_PX
    wave = VortexBeam.hosting(
        [(80.0, 80.0 + a)], [(80.0, 80.0 - a)], waist_px=WAIST_PX, centre_px=(80.0, 80.0)
    )
    zetas = np.linspace(-0.8, 0.8, 17)
    found = vortex_lines(beam_planes(wave, zetas), 100.0 * zetas, pixel_um=1.0)
    points = inner(found)
    # created at -zeta_a and annihilated at +zeta_a: a closed loop
    assert points["line"].nunique() == 1
    line = found.lines.set_index("line").loc[points["line"].iloc[0]]
    assert line["closed"]
    assert line["z_max_um"] == pytest.approx(53.3333, abs=0.3)
    assert line["z_min_um"] == pytest.approx(-53.3333, abs=0.3)
    zeta = points["z_um"] / 100.0
    expected = np.sqrt(np.maximum(0.4**2 + zeta**2 * (1 - 1 / (4 * 0.4**2)), 0.0)) * WAIST_PX
    np.testing.assert_allclose(np.abs(points["x_px"] - 80.0), expected, atol=0.3)
    # it runs up where the charge is positive, at x > 80
    up = np.diff(points["z_um"]) > 0
    middle = (points["x_px"].to_numpy()[1:] + points["x_px"].to_numpy()[:-1]) / 2
    assert (up == (middle > 80.0))[np.abs(middle - 80.0) > 2.0].all()


@pytest.fixture(scope="module")
def speckle_volume():
    wave = RandomWaves("disc", 16.0, seed=3, box_px=96.0)
    step = 96.0 / 24
    grid = Grid((96, 96), (step, step), (0.0, 0.0), Window(0.0, 95.0, 0.0, 95.0))
    values = wave.on_grid(grid.y_px(24), grid.x_px(24), 0.0)
    spectrum = np.fft.fft2(values)
    f = np.fft.fftfreq(24, step)
    square = f[:, None] ** 2 + f**2
    # the transfer function of free space in its paraxial form, wavelength 0.5 px
    z = np.arange(24) * 20.0
    planes = [
        Field(np.fft.ifft2(spectrum * np.exp(-1j * np.pi * 0.5 * d * square)), grid, (0, 0), 1 / 16)
        for d in z
    ]
    return planes, z


def test_lines_of_speckle_end_only_on_the_border_of_the_volume(speckle_volume):
    planes, z = speckle_volume
    found = vortex_lines(planes, z, pixel_um=1.0)
    ends = set(found.lines["start"]) | set(found.lines["end"])
    assert ends <= {"", "border", "first plane", "last plane"}
    assert len(found.lines) > 10


def test_every_point_of_a_line_is_a_zero(speckle_volume):
    planes, z = speckle_volume
    points = vortex_lines(planes, z, pixel_um=1.0).points.iloc[::7]
    spectrum = np.fft.fft2(planes[0].values) / 24**2
    f = np.fft.fftfreq(24, 4.0)
    for row in points.itertuples():
        waves = np.exp(2j * np.pi * row.y_px * f)[:, None] * np.exp(2j * np.pi * row.x_px * f)
        turned = np.exp(-1j * np.pi * 0.5 * row.z_um * (f[:, None] ** 2 + f**2))
        # mean intensity is 1; planes are a tenth of a depth of field apart
        assert abs((spectrum * waves * turned).sum()) < 0.02


@pytest.mark.parametrize(
    ("z", "pixel", "message"),
    [
        ([0.0, 1.0, 3.0], 1.0, "z_um: expected equal increasing steps"),
        ([0.0], 1.0, "z_um: expected at least two depths"),
        ([0.0, 1.0, 2.0], 0.0, "pixel_um: expected a positive number"),
        ([0.0, 1.0], 1.0, "z_um: 2 depths for more planes"),
        ([0.0, 1.0, 2.0, 3.0], 1.0, "z_um: 4 depths for 3 planes"),
    ],
)
def test_bad_input_is_named(speckle_volume, z, pixel, message):
    with pytest.raises(ValueError, match=message):
        vortex_lines(speckle_volume[0][:3], z, pixel_um=pixel)
