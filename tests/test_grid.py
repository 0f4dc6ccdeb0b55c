"""Positions on the hologram's own pixels, whatever sampling a field is kept at."""

import numpy as np
import pytest

from hologyre import Field, Grid
from hologyre.grid import Window


def test_first_pixel_centre_is_the_origin():
    grid = Grid.pixels((3, 5))
    np.testing.assert_array_equal(grid.y_px(3), [0, 1, 2])
    np.testing.assert_array_equal(grid.x_px(5), [0, 1, 2, 3, 4])
    assert grid.valid == Window(0, 2, 0, 4)


def test_samples_and_pixels_are_inverse():
    grid = Grid((64, 80), (2.5, 3.25), (-4.0, 1.5), Window(0, 63, 0, 79))
    rng = np.random.default_rng(1)
    row, column = rng.uniform(0, 30, (2, 20))
    again = grid.to_samples(*grid.to_px(row, column))
    np.testing.assert_allclose(again, (row, column), rtol=0, atol=1e-12)


def test_window_counts_its_border_as_inside_and_keeps_the_margin():
    window = Window(0, 10, 0, 20)
    y, x = np.array([0.0, 10.0, 10.1, 5.0]), np.array([0.0, 20.0, 5.0, 2.0])
    np.testing.assert_array_equal(window.contains(y, x), [True, True, False, True])
    np.testing.assert_array_equal(window.contains(y, x, 3.0), [False, False, False, False])


def test_period_is_samples_times_step():
    field = Field(
        np.zeros((4, 6, 8), complex), Grid((30, 40), (5.0, 5.0), (0, 0), Window(0, 29, 0, 39))
    )
    assert field.shape == (6, 8)
    assert field.period_px == (30.0, 40.0)


@pytest.mark.parametrize("values", [np.zeros((4, 4)), np.zeros(4, complex)])
def test_field_refuses_what_is_not_a_complex_image(values):
    with pytest.raises(TypeError, match="values: expected a complex array"):
        Field(values, Grid.pixels((4, 4)))
