from __future__ import annotations

from typing import Any

import pytest
from qtpy.QtCore import Qt

from hologyre.recipe import Recipe
from hologyre.viewer.docks.field import FieldDock
from hologyre.viewer.docks.motion import MotionDock
from hologyre.viewer.docks.overview import OverviewDock
from hologyre.viewer.docks.phase import PhaseDock
from hologyre.viewer.docks.singularities import SingularitiesDock
from hologyre.viewer.docks.stack import StackDock
from hologyre.viewer.forms import RecipeForm, label_of, section_paths, tip_of

SETTABLE_ELSEWHERE = {"stack.left_out"}


@pytest.fixture
def typed(qtbot: Any) -> Any:
    """Type a text into the editor of a setting and leave it."""

    def type_into(form: RecipeForm, path: str, text: str) -> None:
        line = form.editors[path].line
        line.clear()
        qtbot.keyClicks(line, text)
        qtbot.keyClick(line, Qt.Key.Key_Return)

    return type_into


def form_of(qtbot: Any, *sections: str) -> tuple[RecipeForm, list[Recipe], list[str]]:
    form = RecipeForm([p for p in section_paths(*sections) if p not in SETTABLE_ELSEWHERE])
    qtbot.addWidget(form)
    changed: list[Recipe] = []
    refused: list[str] = []
    form.changed.connect(changed.append)
    form.refused.connect(refused.append)
    return form, changed, refused


def test_what_is_typed_makes_a_new_recipe_and_leaves_the_old_one(qtbot: Any, typed: Any) -> None:
    form, changed, _ = form_of(qtbot, "carrier")
    old = Recipe()
    form.show_recipe(old)
    typed(form, "carrier.radius", "0.05")
    assert [r.carrier.radius for r in changed] == [0.05]
    assert old.carrier.radius == "auto"


def test_an_emptied_field_means_auto_again(qtbot: Any, typed: Any) -> None:
    form, changed, _ = form_of(qtbot, "carrier")
    form.show_recipe(Recipe().with_settings({"carrier.radius": 0.05}))
    typed(form, "carrier.radius", "")
    assert changed[-1].carrier.radius == "auto"


def test_a_value_the_recipe_refuses_is_told_and_changes_nothing(qtbot: Any, typed: Any) -> None:
    form, changed, refused = form_of(qtbot, "carrier")
    form.show_recipe(Recipe())
    typed(form, "carrier.radius", "7")
    assert changed == []
    assert len(refused) == 1
    assert refused[0].startswith("carrier.radius: expected")


def test_letters_in_a_number_are_refused_by_the_setting_s_name(qtbot: Any, typed: Any) -> None:
    form, changed, refused = form_of(qtbot, "optics")
    form.show_recipe(Recipe())
    typed(form, "optics.wavelength_nm", "green")
    assert changed == []
    assert "optics.wavelength_nm" in refused[0]
    assert "'green'" in refused[0]


def test_showing_a_recipe_tells_nobody(qtbot: Any) -> None:
    form, changed, refused = form_of(qtbot, *Recipe.model_fields)
    form.show_recipe(Recipe().with_settings({"motion.max_gap": 5, "optics.wavelength_nm": 633}))
    assert changed == refused == []


def test_several_numbers_are_read_as_one_setting(qtbot: Any, typed: Any) -> None:
    form, changed, _ = form_of(qtbot, "stack")
    form.show_recipe(Recipe())
    typed(form, "stack.region", "0, 64, 10, 90")
    assert changed[-1].stack.region == (0, 64, 10, 90)


def test_a_choice_is_made_by_the_user_alone(qtbot: Any) -> None:
    form, changed, _ = form_of(qtbot, "phase")
    form.show_recipe(Recipe())
    box = form.editors["phase.weight"].box
    box.activated.emit(box.findData("amplitude"))
    assert changed[-1].phase.weight == "amplitude"


def test_every_setting_of_the_recipe_can_be_set_in_some_dock(make_napari_viewer: Any) -> None:
    viewer = make_napari_viewer()
    shown: set[str] = set()
    for kind in (StackDock, FieldDock, PhaseDock, SingularitiesDock, MotionDock, OverviewDock):
        dock = kind(viewer)
        for form in dock.findChildren(RecipeForm):
            shown |= set(form.editors)
        dock.deleteLater()
    assert shown | SETTABLE_ELSEWHERE >= set(section_paths(*Recipe.model_fields))


def test_every_setting_has_a_tip_and_its_unit_in_the_label() -> None:
    for path in section_paths(*Recipe.model_fields):
        assert tip_of(path).endswith("."), path
    assert label_of("optics.wavelength_nm") == ("Wavelength", "nm")
    assert label_of("motion.max_gap") == ("Max gap", "")
