from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest
from pandas.testing import assert_frame_equal

from hologyre.optics import Optics
from hologyre.tables import EVENTS, SINGULARITIES, TRAJECTORIES, conform, empty
from hologyre.viewer.layers import (
    placement,
    points_from_events,
    points_from_singularities,
    singularities_from_points,
    tracks_from_trajectories,
    trajectories_from_tracks,
    vectors_from_wavevector,
)


def singularities() -> pd.DataFrame:
    rng = np.random.default_rng(1)
    rows: dict[str, Any] = {
        "frame": [0, 0, 3],
        "time_s": [0.0, 0.0, 1.5],
        "y_px": rng.random(3) * 99,
        "x_px": rng.random(3) * 99,
        "y_um": rng.random(3),
        "charge": [1, -1, 1],
        "trust": [0.9, np.nan, 0.4],
        "origin": ["found", "found", "placed"],
        "singularity": [7, 3, 12],
    }
    return conform(pd.DataFrame(rows), SINGULARITIES)


def trajectories() -> pd.DataFrame:
    found = pd.concat([singularities()] * 2, ignore_index=True)
    found = found.assign(
        track=[4, 1, 4, 2, 2, 1], frame=[0, 0, 3, 5, 6, 1], link=["", "", "thread", "", "hand", ""]
    )
    return conform(found, TRAJECTORIES)


def event(kind: str, before: int, after: int, tracks: str, y: float = 1.0) -> dict[str, Any]:
    return {
        "event": 0,
        "kind": kind,
        "frame_before": before,
        "frame_after": after,
        "y_px": y,
        "x_px": 2.0,
        "tracks": tracks,
    }


def events(*rows: dict[str, Any]) -> pd.DataFrame:
    return conform(pd.DataFrame(list(rows)), EVENTS) if rows else empty(EVENTS)


def test_points_and_their_features_give_back_the_table_of_singularities() -> None:
    table = singularities()
    data, features = points_from_singularities(table)
    assert_frame_equal(singularities_from_points(data, features), table)


def test_points_lie_at_frame_row_and_column_of_the_singularities() -> None:
    table = singularities()
    data, features = points_from_singularities(table)
    np.testing.assert_array_equal(data, table[["frame", "y_px", "x_px"]].to_numpy())
    assert features["singularity"].tolist() == [7, 3, 12]


def test_an_empty_table_of_singularities_comes_back_empty_with_its_types() -> None:
    data, features = points_from_singularities(empty(SINGULARITIES))
    assert data.shape == (0, 3)
    assert_frame_equal(
        singularities_from_points(data, features),
        empty(SINGULARITIES),
        check_index_type=False,
    )


def test_tracks_and_their_features_give_back_the_trajectories_in_order() -> None:
    table = trajectories()
    data, features, _ = tracks_from_trajectories(table, events())
    back = trajectories_from_tracks(data, features)
    ordered = table.sort_values(["track", "frame"], ignore_index=True)
    assert_frame_equal(back, ordered)


def test_tables_given_to_layers_are_not_changed() -> None:
    table, before = trajectories(), trajectories()
    tracks_from_trajectories(table, events())
    points_from_singularities(table[singularities().columns])
    assert_frame_equal(table, before)


def test_a_merge_makes_a_track_the_child_of_those_that_end_in_it() -> None:
    joined = events(event("merge", 3, 5, "1;4;2"))
    _, _, graph = tracks_from_trajectories(trajectories(), joined)
    assert graph == {2: [1, 4]}


def test_a_pair_birth_makes_no_track_the_child_of_another() -> None:
    born = events(event("pair_birth", 4, 5, "2;4"))
    _, _, graph = tracks_from_trajectories(trajectories(), born)
    assert graph == {}


@pytest.mark.parametrize(
    ("kind", "frame"), [("pair_birth", 9), ("entry", 9), ("pair_death", 8), ("exit", 8)]
)
def test_an_event_is_shown_where_its_tracks_are_seen(kind: str, frame: int) -> None:
    data, features = points_from_events(events(event(kind, 8, 9, "1;2")))
    assert data.tolist() == [[frame, 1.0, 2.0]]
    assert features["tracks"].tolist() == ["1;2"]


def test_an_event_without_a_place_is_not_shown() -> None:
    data, features = points_from_events(events(event("unexplained", 0, 1, "3", y=float("nan"))))
    assert len(data) == len(features) == 0


def test_layers_are_placed_in_micrometres_and_seconds_where_the_optics_are_known() -> None:
    place = placement(Optics(camera_pixel_um=5.0, magnification=20.0, frame_interval_s=0.1))
    assert place.of(3) == {
        "scale": (0.1, 0.25, 0.25),
        "translate": (0.0, 0.0, 0.0),
        "units": ("s", "um", "um"),
        "axis_labels": ("t", "y", "x"),
    }
    assert place.of(2)["scale"] == (0.25, 0.25)
    assert place.of(2)["axis_labels"] == ("y", "x")


def test_layers_are_placed_in_pixels_and_frames_where_nothing_is_known() -> None:
    place = placement(Optics())
    assert place.scale == (1.0, 1.0, 1.0)
    assert place.units == ("pixel", "pixel", "pixel")


def test_arrows_point_along_the_wavevector_and_stay_within_their_spacing() -> None:
    rng = np.random.default_rng(3)
    wavevector = rng.standard_cauchy((2, 60, 96))
    arrows = vectors_from_wavevector(wavevector, along_side=12)
    at = arrows[:, 0].astype(int)
    here = wavevector[:, at[:, 0], at[:, 1]].T
    cross = arrows[:, 1, 0] * here[:, 1] - arrows[:, 1, 1] * here[:, 0]
    dot = (arrows[:, 1] * here).sum(axis=1)
    np.testing.assert_allclose(cross, 0, atol=1e-9 * np.abs(here).max())
    assert (dot > 0).all()
    # 96 px over 12 arrows
    assert np.hypot(*arrows[:, 1].T).max() <= 8 + 1e-9


def test_no_arrow_stands_where_the_wavevector_is_not_finite() -> None:
    wavevector = np.full((2, 48, 48), np.nan)
    wavevector[:, :24] = 1.0
    arrows = vectors_from_wavevector(wavevector, along_side=12)
    assert len(arrows) == 72
    assert (arrows[:, 0, 0] < 24).all()
