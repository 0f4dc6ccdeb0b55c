"""Forms over sections of the recipe, built from the recipe's own types and descriptions."""

from __future__ import annotations

import types
from collections.abc import Mapping, Sequence
from typing import Annotated, Any, Literal, Union, get_args, get_origin

from qtpy.QtCore import Qt, Signal
from qtpy.QtWidgets import QFormLayout, QLabel, QSizePolicy, QWidget

from hologyre.recipe import Recipe, RecipeError
from hologyre.viewer.editors import (
    ChoiceEditor,
    Editor,
    NumberEditor,
    SwitchEditor,
    TextEditor,
)

_UNITS = {
    "nm": "nm",
    "um": "µm",
    "s": "s",
    "px": "px",
    "rad": "rad",
}


class RecipeForm(QWidget):
    """Edits some settings of a recipe.

    It shows the recipe it is given; when the user sets something it emits `changed` with a new
    recipe, and changes nothing itself. A value the recipe refuses is marked and told by
    `refused`.

    Parameters
    ----------
    paths : sequence of str
        Settings by path, as ``"carrier.radius"``, in the order shown.
    labels : mapping, optional
        Labels by path, for settings whose name does not say enough.
    editors : mapping, optional
        Editors by path, for settings that need one of their own.
    """

    changed = Signal(object)
    refused = Signal(str)

    def __init__(
        self,
        paths: Sequence[str],
        *,
        labels: Mapping[str, str] | None = None,
        editors: Mapping[str, Editor] | None = None,
    ) -> None:
        super().__init__()
        self._recipe = Recipe()
        self.editors: dict[str, Editor] = {}
        layout = QFormLayout(self)
        layout.setContentsMargins(0, 0, 0, 0)
        layout.setVerticalSpacing(4)
        layout.setHorizontalSpacing(8)
        layout.setFieldGrowthPolicy(QFormLayout.FieldGrowthPolicy.AllNonFixedFieldsGrow)
        layout.setLabelAlignment(Qt.AlignmentFlag.AlignLeft | Qt.AlignmentFlag.AlignVCenter)
        for path in paths:
            editor = (editors or {}).get(path) or editor_for(path)
            name, unit = label_of(path)
            name = (labels or {}).get(path, name)
            label = QLabel(f"{name} ({unit})" if unit else name)
            label.setBuddy(editor)
            tip = tip_of(path)
            label.setToolTip(tip)
            editor.setToolTip(tip)
            editor.setSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Preferred)
            editor.chosen.connect(lambda value, path=path: self._choose(path, value))
            layout.addRow(label, editor)
            self.editors[path] = editor

    def show_recipe(self, recipe: Recipe) -> None:
        """Show the values of a recipe."""
        self._recipe = recipe
        for path, editor in self.editors.items():
            section, name = path.split(".")
            editor.show_value(getattr(getattr(recipe, section), name))
            editor.show_problem(False)

    def _choose(self, path: str, value: Any) -> None:
        try:
            recipe = self._recipe.with_settings({path: value})
        except RecipeError as error:
            self.editors[path].show_problem(True)
            self.refused.emit(str(error))
            return
        self.editors[path].show_problem(False)
        if recipe != self._recipe:
            self._recipe = recipe
            self.changed.emit(recipe)


def section_paths(*sections: str) -> list[str]:
    """Return the paths of all settings of the sections, in the recipe's order."""
    return [
        f"{section}.{name}"
        for section in sections
        for name in type(getattr(Recipe(), section)).model_fields
    ]


def label_of(path: str) -> tuple[str, str]:
    """Return a label and a unit made from a setting's name."""
    name = path.rpartition(".")[2]
    stem, _, last = name.rpartition("_")
    unit = _UNITS.get(last, "") if stem else ""
    words = (stem if unit else name).replace("_", " ")
    return words[:1].upper() + words[1:], unit


def tip_of(path: str) -> str:
    """Return what the recipe says about a setting, as a sentence."""
    section, name = path.split(".")
    text = type(getattr(Recipe(), section)).model_fields[name].description or ""
    return text[:1].upper() + text[1:] + ("" if text.endswith(".") or not text else ".")


def editor_for(path: str) -> Editor:
    """Return the editor that fits the type of a setting.

    Raises
    ------
    TypeError
        If no editor fits; the form must be given one.
    """
    section, name = path.split(".")
    kinds = _kinds(type(getattr(Recipe(), section)).model_fields[name].annotation)
    names = [value for kind in kinds for value in get_args(kind) if get_origin(kind) is Literal]
    rest = [kind for kind in kinds if get_origin(kind) is not Literal and kind is not type(None)]
    if not rest:
        return ChoiceEditor(names)
    blank = "auto" if "auto" in names else None
    if rest == [bool]:
        return SwitchEditor()
    if rest == [str]:
        return TextEditor(blank=None if type(None) in kinds else "")
    if rest in ([int], [float]):
        return NumberEditor(blank=blank, words=names, whole=rest == [int])
    if len(rest) == 1 and get_origin(rest[0]) is tuple and set(get_args(rest[0])) <= {int, float}:
        members = get_args(rest[0])
        return NumberEditor(blank=blank, words=names, whole=members[0] is int, count=len(members))
    raise TypeError(f"{path}: no editor for {rest}")


def _kinds(annotation: Any) -> list[Any]:
    """Take unions and annotations apart."""
    origin = get_origin(annotation)
    if origin is Annotated:
        return _kinds(get_args(annotation)[0])
    if origin in (Union, types.UnionType):
        return [kind for part in get_args(annotation) for kind in _kinds(part)]
    return [annotation]
