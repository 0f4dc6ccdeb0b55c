"""What all docks share: the session they speak to, one prominent action, a line that tells."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

from napari import Viewer
from qtpy.QtCore import QEvent, Qt
from qtpy.QtWidgets import (
    QDockWidget,
    QFileDialog,
    QFrame,
    QHBoxLayout,
    QLabel,
    QProgressBar,
    QPushButton,
    QScrollArea,
    QSizePolicy,
    QVBoxLayout,
    QWidget,
)

from hologyre.recipe import Recipe
from hologyre.results import OutputError
from hologyre.stacks import StackError
from hologyre.viewer.exporting import Table, export_all, export_table
from hologyre.viewer.opening import candidate_layer, current_session, show_stack, use_layer
from hologyre.viewer.session import Session

WARN = "color: #D55E00;"


class SessionDock(QWidget):
    """A dock that speaks to the session of the selected layer.

    Subclasses fill `body` and implement `show_session`. They keep nothing: what is shown comes
    from the session each time it changes.

    Parameters
    ----------
    napari_viewer : Viewer
        The viewer the dock belongs to.
    """

    title = ""
    help_text = ""
    action = ""
    action_tip = ""
    needs_session = True
    has_settings = True

    def __init__(self, napari_viewer: Viewer) -> None:
        super().__init__()
        # plugins get a proxy, whose layers are other objects each time they are asked for
        self.viewer: Viewer = getattr(napari_viewer, "__wrapped__", napari_viewer)
        self._bound: Session | None = None
        self.header = QLabel()
        self.header.setStyleSheet("font-weight: bold;")
        self.use_button = QPushButton("Use the selected layer")
        self.use_button.clicked.connect(self._use_selected)
        self.body = QWidget()
        self.rows = QVBoxLayout(self.body)
        self.rows.setContentsMargins(0, 0, 6, 0)
        self.rows.setSpacing(8)
        self.action_button = QPushButton(self.action)
        self.action_button.setStyleSheet("font-weight: bold; padding: 5px;")
        self.action_button.clicked.connect(lambda: self.act())
        self.cancel_button = QPushButton("Cancel")
        self.cancel_button.clicked.connect(self._cancel)
        self._bar = QProgressBar()
        self.footer = QHBoxLayout()
        self.message = _line()
        self._lay_out()
        self._attach()

    def session(self) -> Session | None:
        """Return the session the dock speaks to now."""
        return current_session(self.viewer)

    def show_session(self, session: Session) -> None:
        """Show recipe and tables of a session."""
        raise NotImplementedError

    def act(self) -> None:
        """Do the dock's one action."""
        self.with_session(self.run)

    def run(self, session: Session) -> None:
        """Do the dock's one action on a session."""

    def blocked(self, session: Session) -> str:
        """Return why the action cannot be done now, or nothing."""
        return ""

    def say(self, text: str, *, warning: bool = False) -> None:
        """Write a sentence under the action."""
        self.message.setText(text)
        self.message.setStyleSheet(WARN if warning else "")
        self.message.setVisible(bool(text))

    def set_recipe(self, recipe: Recipe) -> None:
        """Give the session a new recipe."""
        session = self.session()
        if session is not None:
            self.say("")
            session.recipe = recipe

    def with_session(self, do: Callable[[Session], object]) -> None:
        """Do something with the session, unless there is none or work is running on it."""
        session = self.session()
        if session is not None and session.task is None:
            self.say("")
            do(session)

    def event(self, event: QEvent) -> bool:
        """Take a short title when docked; let go of everything when the dock is closed."""
        if event.type() == QEvent.Type.ParentChange:
            parent = self.parent()
            if parent is None:
                self._release()
                # napari only forgets what was in a closed dock; Qt would keep it for good
                self.deleteLater()
            elif isinstance(parent, QDockWidget):
                # the tabs of all docks have no room for the plugin's name
                parent.setWindowTitle(self.title)
        return super().event(event)

    def _lay_out(self) -> None:
        guide = _line(self.help_text)
        guide.setStyleSheet("font-style: italic;")
        scroll = QScrollArea()
        scroll.setWidget(self.body)
        scroll.setWidgetResizable(True)
        scroll.setFrameShape(QFrame.Shape.NoFrame)
        scroll.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        buttons = QHBoxLayout()
        buttons.addWidget(self.action_button, 1)
        buttons.addWidget(self.cancel_button)
        outer = QVBoxLayout(self)
        outer.setContentsMargins(8, 6, 8, 8)
        outer.setSpacing(6)
        for widget in (self.header, guide, self.use_button, scroll):
            outer.addWidget(widget)
        outer.addWidget(self._bar)
        outer.addLayout(buttons)
        outer.addLayout(self.footer)
        outer.addWidget(self.message)
        outer.setStretch(3, 1)
        self.setSizePolicy(QSizePolicy.Policy.Preferred, QSizePolicy.Policy.Expanding)
        self.setMinimumWidth(350)
        self.say("")

    def _attach(self) -> None:
        layers = self.viewer.layers
        for emitter in (layers.selection.events.active, layers.events.removed):
            emitter.connect(self._refresh)
        layers.events.inserted.connect(self._refresh, position="last")
        self._refresh()

    def _release(self) -> None:
        layers = self.viewer.layers
        for emitter in (layers.selection.events.active, layers.events.removed):
            emitter.disconnect(self._refresh)
        layers.events.inserted.disconnect(self._refresh)
        self._bind(None)

    def _bind(self, session: Session | None) -> None:
        if session is self._bound:
            return
        for bound, connect in ((self._bound, False), (session, True)):
            if bound is None:
                continue
            for signal in (bound.recipe_changed, bound.tables_changed, bound.task_changed):
                if connect:
                    signal.connect(self._show)
                else:
                    signal.disconnect(self._show)
        self._bound = session
        self.say("")

    def _refresh(self, event: Any = None) -> None:
        self._bind(self.session())
        self._show()

    def _show(self) -> None:
        session = self._bound
        candidate = candidate_layer(self.viewer) if session is None else None
        self.use_button.setVisible(candidate is not None)
        running = session is not None and session.task is not None
        self.body.setEnabled(session is not None and not (running and self.has_settings))
        self._bar.setVisible(running)
        self.cancel_button.setVisible(running)
        if session is None:
            self.header.setText("No hologram stack selected")
            if candidate is not None:
                self.use_button.setText(f"Use “{candidate.name}” as hologram stack")
            self._allow("open a hologram stack, or select its layer, first")
            return
        self.header.setText(session.name)
        if session.task is not None:
            self._allow(f"{session.task.title.lower()}")
            session.task.stepped.connect(self._show_progress, unique=True)
            self._show_progress()
        else:
            self._allow(self.blocked(session))
        self.show_session(session)

    def _show_progress(self) -> None:
        task = self._bound.task if self._bound is not None else None
        if task is not None:
            self._bar.setFormat(task.title)
            self._bar.setRange(0, task.total)
            self._bar.setValue(task.steps)

    def _allow(self, reason: str) -> None:
        """Enable the action, or disable it and tell why."""
        if not self.needs_session:
            reason = ""
        self.action_button.setEnabled(not reason)
        self.action_button.setToolTip(f"Not now: {reason}." if reason else self.action_tip)

    def _use_selected(self) -> None:
        layer = candidate_layer(self.viewer)
        if layer is not None:
            use_layer(self.viewer, layer)
            self._refresh()

    def _cancel(self) -> None:
        session = self.session()
        if session is not None and session.task is not None:
            session.task.cancel()


def _line(text: str = "") -> QLabel:
    label = QLabel(text)
    label.setWordWrap(True)
    label.setTextInteractionFlags(Qt.TextInteractionFlag.TextSelectableByMouse)
    return label


def titled(title: str, *parts: QWidget) -> QWidget:
    """Return the widgets one below the other under a small title."""
    holder = QWidget()
    layout = QVBoxLayout(holder)
    layout.setContentsMargins(0, 0, 0, 0)
    layout.setSpacing(4)
    label = QLabel(title)
    label.setStyleSheet("font-weight: bold;")
    layout.addWidget(label)
    for part in parts:
        layout.addWidget(part)
    return holder


def button(text: str, tip: str, clicked: Callable[[], None]) -> QPushButton:
    """Return a button of the second rank."""
    made = QPushButton(text)
    made.setToolTip(tip)
    made.clicked.connect(lambda: clicked())
    return made


def side_by_side(*parts: QWidget) -> QWidget:
    """Return the widgets next to each other."""
    holder = QWidget()
    layout = QHBoxLayout(holder)
    layout.setContentsMargins(0, 0, 0, 0)
    layout.setSpacing(6)
    for part in parts:
        layout.addWidget(part)
    return holder


def open_dialog(dock: SessionDock) -> None:
    """Ask for the files of a stack and open it."""
    paths, _ = QFileDialog.getOpenFileNames(
        dock, "Open a hologram stack", "", "Images (*.tif *.tiff *.btf);;All files (*)"
    )
    if not paths:
        return
    try:
        show_stack(dock.viewer, paths if len(paths) > 1 else paths[0])
    except StackError as error:
        dock.say(str(error), warning=True)


def export_button(dock: SessionDock, table: Table) -> QPushButton:
    """Return a button that exports one table of the dock's session."""

    def export() -> None:
        session = dock.session()
        if session is None:
            return
        path, _ = QFileDialog.getSaveFileName(
            dock, f"Export {table}", f"{table}.csv", "Tables (*.csv)"
        )
        if path:
            _write(dock, lambda: export_table(session, table, Path(path)))

    return button(f"Export {table}…", f"Write the table of {table} as CSV.", export)


def export_all_button(dock: SessionDock) -> QPushButton:
    """Return a button that exports all tables and the recipe into a folder."""

    def export() -> None:
        session = dock.session()
        folder = QFileDialog.getExistingDirectory(dock, "Export all tables into a folder")
        if session is not None and folder:
            _write(dock, lambda: export_all(session, Path(folder))[0].parent)

    return button("Export all…", "Write all tables as CSV, and the recipe, into a folder.", export)


def _write(dock: SessionDock, write: Callable[[], Path]) -> None:
    try:
        written = write()
    except (OSError, OutputError) as error:
        dock.say(str(error), warning=True)
    else:
        dock.say(f"Written: {written}")
