from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import xarray as xr

from hologyre.analyse import analyse
from hologyre.recipe import Recipe
from hologyre.viewer.display import Display
from hologyre.viewer.opening import stack_layer
from hologyre.viewer.session import Session, Tables, role_of, session_of
from hologyre.viewer.styles import NEGATIVE, POSITIVE, STYLES


@pytest.fixture(scope="session")
def tables(stack: xr.DataArray, recipe: Recipe) -> Tables:
    found = analyse(stack, recipe)
    return Tables(
        singularities=found.singularities,
        frames=found.frames,
        trajectories=found.trajectories,
        events=found.events,
        found_with=recipe,
        linked_with=recipe,
    )


@pytest.fixture
def open_session(make_napari_viewer: Any, stack: xr.DataArray, recipe: Recipe) -> Any:
    def make(viewer: Any = None, name: str = "film") -> tuple[Any, Session, Display]:
        viewer = viewer or make_napari_viewer()
        session = Session(stack, name=name, recipe=recipe)
        data, options, _ = stack_layer(session)
        viewer.add_image(data, **options)
        return viewer, session, Display(viewer, session)

    return make


def test_every_layer_lies_in_the_same_place_units_and_axes(
    open_session: Any, tables: Tables
) -> None:
    viewer, session, display = open_session()
    session.tables = tables
    display.show(*STYLES)
    assert {role_of(layer) for layer in viewer.layers} == {"stack", *STYLES}
    for layer in viewer.layers:
        assert layer.axis_labels == ("t", "y", "x")[-layer.ndim :], layer.name
        np.testing.assert_allclose(layer.scale, (0.5, 0.25, 0.25)[-layer.ndim :])
        assert [str(u) for u in layer.units[-2:]] == ["micrometer", "micrometer"]
        np.testing.assert_array_equal(layer.translate, 0)


def test_changed_optics_move_every_layer_and_no_data(open_session: Any, tables: Tables) -> None:
    viewer, session, display = open_session()
    session.tables = tables
    display.show("phase", "singularities", "tracks")
    before = display.layer("singularities").data.copy()
    session.recipe = session.recipe.with_settings({"optics.pixel_um": 2.0})
    for layer in viewer.layers:
        np.testing.assert_allclose(layer.scale, (0.5, 2.0, 2.0))
    np.testing.assert_array_equal(display.layer("singularities").data, before)


def test_of_the_pictures_only_the_last_shown_is_visible(open_session: Any) -> None:
    _, _, display = open_session()
    display.show("amplitude", "phase")
    assert not display.is_visible("amplitude")
    assert display.is_visible("phase")
    display.show("amplitude")
    assert display.is_visible("amplitude")
    assert not display.is_visible("phase")


def test_a_picture_comes_under_what_is_drawn_on_it(open_session: Any, tables: Tables) -> None:
    viewer, session, display = open_session()
    session.tables = tables
    display.show("singularities")
    display.show("phase")
    display.show("unwrapped", "cuts")
    assert [role_of(x) for x in viewer.layers] == [
        "stack",
        "phase",
        "unwrapped",
        "singularities",
        "cuts",
    ]


def test_showing_layers_leaves_the_selection_alone(open_session: Any) -> None:
    viewer, _, display = open_session()
    viewer.layers.selection.active = viewer.layers[0]
    display.show("phase", "cuts", "wavevectors")
    assert viewer.layers.selection.active is viewer.layers[0]


def test_charge_is_told_by_symbol_and_by_colour(open_session: Any, tables: Tables) -> None:
    _, session, display = open_session()
    session.tables = tables
    display.show("singularities")
    layer = display.layer("singularities")
    charge = layer.features["charge"].to_numpy()
    assert {+1, -1} <= set(charge)
    for sign, symbol, colour in ((1, "triangle_up", POSITIVE), (-1, "triangle_down", NEGATIVE)):
        rows = charge == sign
        assert {str(s) for s in layer.symbol[rows]} == {symbol}
        rgb = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
        np.testing.assert_allclose(layer.face_color[rows][:, :3], [rgb] * rows.sum(), atol=1e-6)


def test_cuts_and_wavevectors_follow_the_time_slider(open_session: Any, qtbot: Any) -> None:
    _, session, display = open_session()
    display.show("cuts", "wavevectors")
    for frame in (0, 4):
        display.go_to(frame)
        assert display.frame == frame
        qtbot.waitUntil(
            lambda: (
                len(display.layer("cuts").data) > 0 and len(display.layer("wavevectors").data) > 0
            ),
            timeout=20_000,
        )
        wanted = session.maps.unwrapping(session.recipe, frame).cuts.polylines
        shown = display.layer("cuts").data
        assert len(shown) == len(wanted)
        assert all(np.array_equal(a, b) for a, b in zip(shown, wanted, strict=True))
        assert {str(t) for t in display.layer("cuts").shape_type} == {"path"}


def test_pictures_follow_a_change_of_the_band_and_not_of_the_notes(open_session: Any) -> None:
    _, session, display = open_session()
    display.show("phase")
    before = display.layer("phase").data
    session.recipe = session.recipe.with_settings({"stack.notes": "wet"})
    assert display.layer("phase").data is before
    session.recipe = session.recipe.with_settings({"carrier.radius": 0.03})
    assert display.layer("phase").data is not before
    np.testing.assert_array_equal(
        np.asarray(display.layer("phase").data[2]), session.maps.phase(session.recipe, 2)
    )


def test_pictures_stay_while_the_recipe_is_undecided(open_session: Any) -> None:
    _, session, display = open_session()
    display.show("phase")
    before = display.layer("phase").data
    session.recipe = session.recipe.with_settings({"carrier.radius": "auto"})
    display.go_to(3)
    assert display.layer("phase").data is before
    assert np.isfinite(np.asarray(before[3])).all()


def test_a_deleted_layer_comes_back_only_when_asked_for(open_session: Any, tables: Tables) -> None:
    viewer, session, display = open_session()
    session.tables = tables
    display.show("phase", "singularities", "tracks", "cuts")
    for role in ("singularities", "tracks", "cuts", "phase"):
        viewer.layers.remove(display.layer(role))
    session.tables = Tables()
    display.go_to(2)
    session.recipe = session.recipe.with_settings({"carrier.radius": 0.03})
    assert [role_of(x) for x in viewer.layers] == ["stack"]
    session.tables = tables
    display.show("singularities")
    assert len(display.layer("singularities").data) == len(tables.singularities)


def test_new_tables_replace_what_the_layers_show(open_session: Any, tables: Tables) -> None:
    _, session, display = open_session()
    session.tables = tables
    display.show("singularities", "tracks", "events")
    session.tables = Tables(
        singularities=tables.singularities[:5],
        trajectories=tables.trajectories[:4],
        events=tables.events[:1],
    )
    assert len(display.layer("singularities").data) == 5
    assert display.layer("singularities").features["singularity"].tolist() == (
        tables.singularities["singularity"][:5].tolist()
    )
    assert len(display.layer("tracks").data) == 4
    assert len(display.layer("events").data) == 1
    session.tables = Tables()
    assert len(display.layer("singularities").data) == 0
    assert display.layer("tracks") is None


def test_the_slider_speaks_to_each_of_two_stacks_in_its_own_frames(open_session: Any) -> None:
    viewer, first, display = open_session()
    _, second, other = open_session(viewer, "second")
    second.recipe = second.recipe.with_settings({"optics.frame_interval_s": 1.0})
    display.go_to(4)
    assert display.frame == 4
    assert other.frame == 2
    display.show("phase")
    assert session_of(display.layer("phase")) is first
    assert other.layer("phase") is None


def test_removing_the_last_layer_of_a_session_cancels_its_work(open_session: Any) -> None:
    viewer, session, display = open_session()

    class Work:
        cancelled = False

        def cancel(self) -> None:
            self.cancelled = True

    display.show("phase")
    session.task = Work()  # type: ignore[assignment]
    viewer.layers.remove(display.layer("stack"))
    assert not session.task.cancelled
    viewer.layers.remove(display.layer("phase"))
    assert session.task.cancelled
