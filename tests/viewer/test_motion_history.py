from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest

from hologyre.optics import Optics
from hologyre.tables import EVENTS, TRAJECTORIES, conform
from hologyre.viewer.colouring import Spread
from hologyre.viewer.history import (
    nearest_track,
    step_event,
    threads,
    track_panels,
    track_sentence,
)

PIXELS = Optics()
MICRONS = Optics(camera_pixel_um=0.5, magnification=1.0, frame_interval_s=2.0)


def trajectories(**more: Any) -> pd.DataFrame:
    """A pair born after frame 0 that parts by 4 px a frame, and a third, still track."""
    rows = [(0, f, 10.0, 20.0 + 2 * f, 1) for f in (1, 2, 3)]
    rows += [(1, f, 10.0, 20.0 - 2 * f, -1) for f in (1, 2, 3)]
    rows += [(2, f, 50.0, 50.0, 1) for f in (0, 1, 2, 3)]
    table = pd.DataFrame(rows, columns=["track", "frame", "y_px", "x_px", "charge"])
    return conform(table.assign(singularity=range(len(table)), **more), TRAJECTORIES)


def events() -> pd.DataFrame:
    rows = [
        (0, "pair_birth", 0, 1, 10.0, 20.0, "0;1"),
        (1, "entry", 0, 1, 0.0, 3.0, "7"),
        (2, "exit", 2, 3, 0.0, 3.0, "7"),
        (3, "unexplained", 2, 3, np.nan, np.nan, "8"),
    ]
    names = ["event", "kind", "frame_before", "frame_after", "y_px", "x_px", "tracks"]
    return conform(pd.DataFrame(rows, columns=names), EVENTS)


def test_speed_is_in_pixels_a_frame_where_the_optics_are_unknown() -> None:
    speed = track_panels(trajectories(), events(), 0, PIXELS)[0]
    assert speed.title == "speed (px/frame)"
    np.testing.assert_allclose(speed.curves[0].y, 2.0)


def test_speed_is_in_micrometres_a_second_where_the_optics_tell() -> None:
    speed = track_panels(trajectories(), events(), 0, MICRONS)[0]
    assert speed.title == "speed (µm/s)"
    # 2 px a frame, 0.5 µm a pixel, 2 s a frame
    np.testing.assert_allclose(speed.curves[0].y, 0.5)


def test_the_separation_to_the_partner_of_the_birth_is_a_curve() -> None:
    panel = track_panels(trajectories(), events(), 1, PIXELS)[-1]
    assert panel.title.startswith("separation")
    np.testing.assert_array_equal(panel.curves[0].x, [1, 2, 3])
    np.testing.assert_allclose(panel.curves[0].y, [4, 8, 12])


def test_a_track_without_partner_has_no_separation() -> None:
    titles = [p.title for p in track_panels(trajectories(), events(), 2, PIXELS)]
    assert titles == ["speed (px/frame)"]


def test_robustness_is_shown_where_it_is_known_and_over_the_noise_if_possible() -> None:
    known = trajectories(robustness=3.0)
    assert track_panels(known, events(), 0, PIXELS)[0].title == "robustness (counts)"
    known = trajectories(robustness=3.0, robustness_snr=9.0)
    first = track_panels(known, events(), 0, PIXELS)[0]
    assert first.title == "robustness (× noise)"
    np.testing.assert_allclose(first.curves[0].y, 9.0)


def test_the_life_of_a_track_is_told_with_its_partner() -> None:
    told = track_sentence(trajectories(), events(), 0)
    assert "begins in frame 1 in a pair with 1" in told
    assert "ends in frame 3 with the record" in told


def test_steps_go_through_all_events_that_have_a_place_and_end_there() -> None:
    seen, frame, last = [], 0, None
    while (found := step_event(events(), frame, last, "next")) is not None:
        seen.append(found.event)
        frame, last = found.frame, found.event
    # an exit is shown where it was last seen
    assert seen == [0, 1, 2]
    assert (frame, found) == (2, None)


def test_steps_back_give_the_same_events_in_reverse() -> None:
    seen, frame, last = [], 9, None
    while (found := step_event(events(), frame, last, "previous")) is not None:
        seen.append(found.event)
        frame, last = found.frame, found.event
    assert seen == [2, 1, 0]


def test_steps_go_on_from_the_frame_the_slider_was_moved_to() -> None:
    found = step_event(events(), 1, 2, "next")
    assert found is not None
    assert found.event == 0


def test_steps_can_keep_to_one_kind_of_event() -> None:
    found = step_event(events(), 0, None, "next", kind="exit")
    assert found is not None
    assert (found.kind, found.tracks, found.frame) == ("exit", (7,), 2)
    assert step_event(events(), 0, None, "next", kind="merge") is None


@pytest.mark.parametrize(("x_px", "track"), [(23.0, 0), (17.0, 1), (40.0, None)])
def test_a_click_finds_the_nearest_track_of_the_frame_within_reach(
    x_px: float, track: int | None
) -> None:
    assert nearest_track(trajectories(), 1, 10.0, x_px, within_px=5.0) == track


def test_threads_of_a_pair_meet_where_it_was_born() -> None:
    vertices, charge = threads(trajectories(), events(), PIXELS)
    starts = [vertices[vertices[:, 0] == track][0] for track in (0, 1)]
    for start in starts:
        np.testing.assert_allclose(start[1:], [0.5, 10.0, 20.0])
    assert len(vertices) == len(charge) == len(trajectories()) + 2


def test_colours_span_the_values_and_leave_unknown_ones_grey() -> None:
    values = np.append(np.linspace(0, 1, 99), np.nan)
    colours = Spread(values).map(values)
    assert len(np.unique(colours[:-1], axis=0)) > 80
    np.testing.assert_allclose(colours[-1], (0.5, 0.5, 0.5, 1.0))
