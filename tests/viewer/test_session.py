from __future__ import annotations

from copy import deepcopy
from typing import Any

import numpy as np
import pytest
import xarray as xr

from hologyre.recipe import Recipe
from hologyre.stacks import StackError
from hologyre.viewer.opening import candidate_layer, current_session, show_stack, use_layer
from hologyre.viewer.session import Session, role_of, session_of


def test_a_change_of_recipe_is_told_and_the_same_recipe_is_not(stack: xr.DataArray) -> None:
    session, told = Session(stack, name="a"), []
    session.recipe_changed.connect(lambda: told.append(session.recipe))
    session.recipe = Recipe()
    changed = session.recipe.with_settings({"motion.max_gap": 7})
    session.recipe = changed
    assert told == [changed]


def test_optics_come_from_the_file_where_the_recipe_leaves_them_open(
    stack_file: Any, stack: xr.DataArray
) -> None:
    opened = stack.assign_attrs(pixel_um=0.25, frame_interval_s=0.5)
    session = Session(opened, name="a")
    assert session.optics.pixel_um == pytest.approx(0.25)
    assert session.optics.frame_interval_s == 0.5
    session.recipe = Recipe().with_settings(
        {"optics.camera_pixel_um": 6.0, "optics.magnification": 10.0}
    )
    assert session.optics.pixel_um == pytest.approx(0.6)


def test_a_copy_of_a_layer_s_metadata_is_the_same_session(stack: xr.DataArray) -> None:
    session = Session(stack, name="a")
    assert deepcopy({"hologyre": session})["hologyre"] is session


def test_a_session_is_found_from_its_layer_after_renaming(
    make_napari_viewer: Any, stack_file: Any
) -> None:
    viewer = make_napari_viewer()
    session = show_stack(viewer, stack_file)
    viewer.layers[0].name = "something else"
    assert current_session(viewer) is session
    assert role_of(viewer.layers[0]) == "stack"


def test_an_opened_stack_is_placed_by_the_file_s_own_sizes(
    make_napari_viewer: Any, stack_file: Any
) -> None:
    viewer = make_napari_viewer()
    show_stack(viewer, stack_file)
    layer = viewer.layers[0]
    np.testing.assert_allclose(layer.scale, (0.5, 0.25, 0.25))
    assert [str(u) for u in layer.units] == ["second", "micrometer", "micrometer"]
    assert layer.axis_labels == ("t", "y", "x")
    assert viewer.dims.current_step[0] == 0


def test_any_image_layer_of_numbers_can_become_a_stack(
    make_napari_viewer: Any, holograms: Any
) -> None:
    viewer = make_napari_viewer()
    layer = viewer.add_image(np.array(holograms), name="mine")
    assert candidate_layer(viewer) is layer
    assert current_session(viewer) is None
    session = use_layer(viewer, layer)
    assert current_session(viewer) is session
    assert session.name == "mine"
    assert session.stack.sizes["t"] == len(holograms)
    assert candidate_layer(viewer) is None


def test_a_single_frame_becomes_a_stack_of_one(make_napari_viewer: Any, holograms: Any) -> None:
    viewer = make_napari_viewer()
    layer = viewer.add_image(np.array(holograms[0]))
    session = use_layer(viewer, layer)
    assert session.stack.shape == (1, *holograms[0].shape)
    assert layer.ndim == 3


@pytest.mark.parametrize("shape", [(4, 4, 3), (2, 2, 8, 8)])
def test_colour_and_four_axes_are_no_stack(make_napari_viewer: Any, shape: tuple[int, ...]) -> None:
    viewer = make_napari_viewer()
    viewer.add_image(np.zeros(shape), rgb=shape[-1] == 3)
    assert candidate_layer(viewer) is None


def test_the_only_session_is_meant_when_another_kind_of_layer_is_selected(
    make_napari_viewer: Any, stack_file: Any
) -> None:
    viewer = make_napari_viewer()
    session = show_stack(viewer, stack_file)
    viewer.add_points(np.zeros((1, 3)))
    assert current_session(viewer) is session
    show_stack(viewer, stack_file)
    viewer.layers.selection.active = viewer.layers[1]
    assert session_of(viewer.layers[1]) is None
    assert current_session(viewer) is None


def test_the_selected_layer_decides_between_two_stacks(
    make_napari_viewer: Any, stack_file: Any
) -> None:
    viewer = make_napari_viewer()
    first, second = show_stack(viewer, stack_file), show_stack(viewer, stack_file)
    assert current_session(viewer) is second
    viewer.layers.selection.active = viewer.layers[0]
    assert current_session(viewer) is first


def test_a_file_that_is_no_stack_is_refused_and_adds_nothing(
    make_napari_viewer: Any, tmp_path: Any
) -> None:
    path = tmp_path / "notes.tif"
    path.write_text("no picture")
    viewer = make_napari_viewer()
    with pytest.raises(StackError, match=r"notes\.tif"):
        show_stack(viewer, path)
    assert len(viewer.layers) == 0
