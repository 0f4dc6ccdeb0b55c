"""Small editors for one setting each: they show a value and tell when the user chose another."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

from qtpy.QtCore import Qt, Signal
from qtpy.QtGui import QFocusEvent, QKeyEvent
from qtpy.QtWidgets import (
    QCheckBox,
    QComboBox,
    QFileDialog,
    QHBoxLayout,
    QLineEdit,
    QPlainTextEdit,
    QPushButton,
    QWidget,
)


class Editor(QWidget):
    """An editor of one value; `chosen` is emitted when the user has set another one."""

    chosen = Signal(object)

    def show_value(self, value: Any) -> None:
        """Show a value without telling anyone."""
        raise NotImplementedError

    def show_problem(self, problem: bool) -> None:
        """Mark the editor as holding a value that was refused, or take the mark away."""
        self.setStyleSheet(
            "QLineEdit, QPlainTextEdit { border: 1px solid #D55E00; }" if problem else ""
        )

    def _fill(self, *parts: QWidget) -> None:
        layout = QHBoxLayout(self)
        layout.setContentsMargins(0, 0, 0, 0)
        layout.setSpacing(4)
        for part in parts:
            layout.addWidget(part)
        self.setFocusProxy(parts[0])


class NumberEditor(Editor):
    """Numbers as text, one or several separated by commas.

    An empty line stands for `blank` ("auto" where the setting can be found from the data, None
    where it is not known); the placeholder says which. Words the setting takes may be typed.
    """

    def __init__(
        self, *, blank: Any = None, words: Sequence[str] = (), whole: bool = False, count: int = 1
    ) -> None:
        super().__init__()
        self._blank = blank
        self._words = tuple(words)
        self._whole = whole
        self._count = count
        self._shown = ""
        self.line = QLineEdit()
        self.line.setMinimumWidth(60)
        self.line.setPlaceholderText("auto" if blank == "auto" else "not set")
        self.line.editingFinished.connect(self._finish)
        self._fill(self.line)

    def show_value(self, value: Any) -> None:
        """Show a number, a tuple of numbers or, if it is the blank value, an empty line."""
        if value == self._blank or value is None:
            self._shown = ""
        elif isinstance(value, str):
            self._shown = value
        elif isinstance(value, tuple | list):
            self._shown = ", ".join(_number(part) for part in value)
        else:
            self._shown = _number(value)
        self.line.setText(self._shown)
        self.line.setCursorPosition(0)

    def _finish(self) -> None:
        text = self.line.text().strip()
        if text == self._shown:
            return
        self._shown = text
        self.chosen.emit(self._parse(text))

    def _parse(self, text: str) -> Any:
        """Read what was typed; what is not a number is passed on for the recipe to refuse."""
        if text in ("", str(self._blank)):
            return self._blank
        if text in self._words:
            return text
        parts = [part.strip() for part in text.split(",")]
        try:
            numbers = tuple(int(p) if self._whole else float(p) for p in parts)
        except ValueError:
            return text
        return numbers[0] if self._count == 1 and len(numbers) == 1 else numbers


class TextEditor(Editor):
    """One line of text; an empty line stands for `blank`."""

    def __init__(self, *, blank: Any = "") -> None:
        super().__init__()
        self._blank = blank
        self._shown = ""
        self.line = QLineEdit()
        self.line.editingFinished.connect(self._finish)
        self._fill(self.line)

    def show_value(self, value: Any) -> None:
        """Show a text."""
        self._shown = "" if value is None or value == self._blank else str(value)
        self.line.setText(self._shown)

    def _finish(self) -> None:
        text = self.line.text().strip()
        if text != self._shown:
            self._shown = text
            self.chosen.emit(text or self._blank)


class NotesEditor(Editor):
    """Several lines of text, taken over when the user leaves them."""

    def __init__(self) -> None:
        super().__init__()
        self._shown = ""
        self.text = _LeavingTextEdit()
        self.text.setFixedHeight(54)
        self.text.setTabChangesFocus(True)
        self.text.left.connect(self._finish)
        self._fill(self.text)

    def show_value(self, value: Any) -> None:
        """Show a text."""
        self._shown = str(value or "")
        if self._shown != self.text.toPlainText():
            self.text.setPlainText(self._shown)

    def _finish(self) -> None:
        text = self.text.toPlainText()
        if text != self._shown:
            self._shown = text
            self.chosen.emit(text)


class ChoiceEditor(Editor):
    """One of a few named values."""

    def __init__(self, values: Sequence[Any], labels: Sequence[str] | None = None) -> None:
        super().__init__()
        self.box = QComboBox()
        self.box.setSizeAdjustPolicy(
            QComboBox.SizeAdjustPolicy.AdjustToMinimumContentsLengthWithIcon
        )
        self.box.setMinimumContentsLength(6)
        for value, label in zip(values, labels or [str(v) for v in values], strict=True):
            self.box.addItem(label, value)
        # `activated` comes from the user only
        self.box.activated.connect(lambda row: self.chosen.emit(self.box.itemData(row)))
        self._fill(self.box)

    def show_value(self, value: Any) -> None:
        """Choose a value."""
        self.box.setCurrentIndex(self.box.findData(value))


class SwitchEditor(Editor):
    """On or off."""

    def __init__(self) -> None:
        super().__init__()
        self.box = QCheckBox()
        self.box.clicked.connect(lambda on: self.chosen.emit(bool(on)))
        self._fill(self.box)

    def show_value(self, value: Any) -> None:
        """Show on or off."""
        self.box.setChecked(bool(value))


class FileEditor(Editor):
    """The path of an image, typed or picked; an empty line stands for none."""

    def __init__(self, *, title: str = "Choose an image") -> None:
        super().__init__()
        self._title = title
        self._shown = ""
        self.line = QLineEdit()
        self.line.setPlaceholderText("none")
        self.line.editingFinished.connect(self._finish)
        button = QPushButton("…")
        button.setFixedWidth(28)
        button.setToolTip(title)
        button.clicked.connect(self._pick)
        self._fill(self.line, button)

    def show_value(self, value: Any) -> None:
        """Show a path."""
        self._shown = "" if value is None else str(value)
        self.line.setText(self._shown)
        self.line.setToolTip(self._shown)

    def _pick(self) -> None:
        start = str(Path(self._shown).parent) if self._shown else ""
        path, _ = QFileDialog.getOpenFileName(
            self, self._title, start, "Images (*.tif *.tiff *.btf);;All files (*)"
        )
        if path:
            self._shown = path
            self.line.setText(path)
            self.chosen.emit(path)

    def _finish(self) -> None:
        text = self.line.text().strip()
        if text != self._shown:
            self._shown = text
            self.chosen.emit(text or None)


class _LeavingTextEdit(QPlainTextEdit):
    """A text that tells when the focus leaves it or Ctrl+Enter is pressed."""

    left = Signal()

    def focusOutEvent(self, event: QFocusEvent) -> None:
        super().focusOutEvent(event)
        self.left.emit()

    def keyPressEvent(self, event: QKeyEvent) -> None:
        enter = event.key() in (Qt.Key.Key_Return, Qt.Key.Key_Enter)
        if enter and event.modifiers() & Qt.KeyboardModifier.ControlModifier:
            self.left.emit()
            return
        super().keyPressEvent(event)


def _number(value: float) -> str:
    return str(value) if isinstance(value, int) else f"{value:.6g}"
