from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from qtpy.QtCore import QPoint, Qt

from hologyre.viewer.spectrum import Band, SpectrumView, spectrum_picture


def fringes(shape: tuple[int, int], fy: float, fx: float) -> np.ndarray:
    y, x = np.indices(shape)
    return 100 + 50 * np.cos(2 * np.pi * (fy * y + fx * x))


@pytest.mark.parametrize("shape", [(128, 128), (96, 130), (101, 77)])
def test_fringes_make_a_bright_spot_at_their_frequency_and_its_mirror(
    shape: tuple[int, int],
) -> None:
    fy, fx = 16 / shape[0], -12 / shape[1]
    picture = spectrum_picture(fringes(shape, fy, fx))
    assert picture.shape == shape
    centre = np.array(shape) // 2
    for sign in (1, -1):
        spot = centre + sign * np.array([16, -12])
        assert picture[tuple(spot)] == 255


def test_a_narrow_spot_survives_when_the_picture_is_made_smaller() -> None:
    picture = spectrum_picture(fringes((512, 400), 0.25, 0.25), size=128)
    assert picture.shape == (128, 128)
    assert picture[96, 96] > 250


def test_pixels_that_are_not_finite_do_not_spoil_the_spectrum() -> None:
    frame = fringes((128, 128), 0.125, 0.25)
    frame[3, 4] = np.nan
    assert spectrum_picture(frame)[64 + 16, 64 + 32] > 240


@pytest.fixture
def view(qtbot: Any) -> SpectrumView:
    widget = SpectrumView()
    qtbot.addWidget(widget)
    widget.resize(300, 300)
    widget.show()
    widget.show_picture(np.zeros((128, 128), np.uint8))
    widget.show_band(Band(0.1, 0.2, 0.06))
    return widget


def drag(
    qtbot: Any, view: SpectrumView, start: tuple[float, float], end: tuple[float, float]
) -> None:
    first, last = (view.position_of(*f).toPoint() for f in (start, end))
    qtbot.mousePress(view, Qt.MouseButton.LeftButton, pos=first)
    qtbot.mouseMove(view, QPoint((first.x() + last.x()) // 2, (first.y() + last.y()) // 2))
    qtbot.mouseMove(view, last)
    qtbot.mouseRelease(view, Qt.MouseButton.LeftButton, pos=last)


def test_dragging_the_cross_moves_the_carrier(qtbot: Any, view: SpectrumView) -> None:
    with qtbot.waitSignal(view.band_chosen) as chosen:
        drag(qtbot, view, (0.1, 0.2), (-0.15, 0.25))
    band = chosen.args[0]
    # a pixel of the widget is 1/278 cycles/px
    assert (band.fy, band.fx) == pytest.approx((-0.15, 0.25), abs=0.004)
    assert band.radius == 0.06


def test_dragging_the_rim_changes_the_radius(qtbot: Any, view: SpectrumView) -> None:
    with qtbot.waitSignal(view.band_chosen) as chosen:
        drag(qtbot, view, (0.1, 0.26), (0.1, 0.3))
    band = chosen.args[0]
    assert band.radius == pytest.approx(0.1, abs=0.004)
    assert (band.fy, band.fx) == (0.1, 0.2)


def test_a_drag_that_begins_elsewhere_changes_nothing(qtbot: Any, view: SpectrumView) -> None:
    with qtbot.assertNotEmitted(view.band_chosen):
        drag(qtbot, view, (-0.3, -0.3), (0.0, 0.0))
    assert view.band == Band(0.1, 0.2, 0.06)


def test_positions_and_frequencies_are_inverse(view: SpectrumView) -> None:
    assert view.frequency_at(view.position_of(0.12, -0.33)) == pytest.approx((0.12, -0.33))
