"""The Review dock: go through what deserves a look, and put it right by hand."""

from __future__ import annotations

from collections.abc import Callable
from functools import partial
from pathlib import Path

from napari import Viewer
from qtpy.QtCore import QModelIndex, Qt
from qtpy.QtWidgets import (
    QAbstractItemView,
    QApplication,
    QCheckBox,
    QComboBox,
    QFileDialog,
    QFrame,
    QHBoxLayout,
    QHeaderView,
    QInputDialog,
    QLabel,
    QProgressBar,
    QPushButton,
    QTableView,
    QVBoxLayout,
    QWidget,
)

from hologyre.edits import NAME, LogError
from hologyre.viewer.docks.base import (
    WARN,
    SessionDock,
    button,
    export_all_button,
    side_by_side,
    titled,
)
from hologyre.viewer.gestures import Gestures, gestures_of
from hologyre.viewer.review_deeds import KEYS, Review, review_of
from hologyre.viewer.review_list import ItemModel
from hologyre.viewer.session import Session
from hologyre.viewer.styles import Role

_REASONS = ("made by noise", "outside the object", "dust or a defect", "seen in other frames")
_NAPARI_KEYS = (("P", "place"), ("S", "select, drag to move"), ("Del", "delete"),
                ("Ctrl+Z", "undo"), ("Ctrl+Shift+Z", "redo"))  # fmt: skip


class ReviewDock(SessionDock):
    """Singularities, tracks and events put right by hand, worst first."""

    title = "Review"
    help_text = (
        "Place, drag and delete singularities with napari's point tools; they snap to the zeros "
        "of the field."
    )
    action = "Start editing"
    action_tip = "Show the singularities of the current frame for editing, and list what is weak."
    has_settings = False

    def __init__(self, napari_viewer: Viewer) -> None:
        self.model = ItemModel()
        self.list = QTableView()
        self.told = QLabel()
        self.progress = QProgressBar()
        self.asking = QFrame()
        self.reason = QComboBox()
        self._review: Review | None = None
        self._focus: QWidget | None = None
        super().__init__(napari_viewer)

    def show_session(self, session: Session) -> None:
        """Say where the edits are kept."""
        editing = session.editing
        count = len(editing.log.standing)
        where = editing.log.path or "memory only; choose where to keep them"
        bad = [editing.trouble] if editing.trouble else []
        corrections = editing.corrections
        if corrections is not None and corrections.misfits:
            bad.append(f"{len(corrections.misfits)} edits fit no longer and are passed over.")
        self.told.setText("\n".join([f"{count} edits, kept in {where}", *bad]))
        self.told.setStyleSheet(WARN if bad else "")
        ready = not self.blocked(session)
        for widget in (self.list, self._steps, self.export_button):
            widget.setEnabled(ready)

    def blocked(self, session: Session) -> str:
        """Singularities must be there to be edited."""
        if session.editing.found.found_with is None:
            return "find or follow the singularities first"
        return ""

    def run(self, session: Session) -> None:
        """Begin to edit."""
        review = self._reviewed()
        if review is not None:
            review.begin()
            self._show_list()

    def _lay_out(self) -> None:
        self.told.setWordWrap(True)
        self.told.setTextInteractionFlags(Qt.TextInteractionFlag.TextSelectableByMouse)
        self._lay_out_list()
        self._lay_out_question()
        self.every_frame = QCheckBox("New regions hold in every frame")
        self.every_frame.setChecked(True)
        self.keep_button = button(
            "Keep edits in…", "Choose the file the edits are written to.", self._keep
        )
        self.end_button = button(
            "Stop editing",
            "Take the layers for editing away; all edits stay.",
            lambda: self._with(lambda gestures: gestures.end()),
        )
        regions = side_by_side(
            button("Region to analyse", "Draw a polygon; what lies outside is left out.",
                   lambda: self._draw_on("analysed")),
            button("Region to leave out", "Draw a polygon around what is not to count.",
                   lambda: self._draw_on("left_out")),
        )  # fmt: skip
        keys = QLabel(_keys_text())
        keys.setWordWrap(True)
        for part in (
            self.asking,
            self.list,
            self.progress,
            self._steps,
            titled("Keys on the picture", keys),
            titled("Regions", regions, self.every_frame),
            self.told,
        ):
            self.rows.addWidget(part)
        super()._lay_out()
        self.export_button = export_all_button(self)
        for widget in (self.end_button, self.keep_button, self.export_button):
            self.footer.addWidget(widget)

    def _lay_out_list(self) -> None:
        self.list.setModel(self.model)
        self.list.setSelectionBehavior(QAbstractItemView.SelectionBehavior.SelectRows)
        self.list.setSelectionMode(QAbstractItemView.SelectionMode.SingleSelection)
        # keys stay with the picture
        self.list.setFocusPolicy(Qt.FocusPolicy.NoFocus)
        self.list.verticalHeader().hide()
        self.list.verticalHeader().setDefaultSectionSize(20)
        header = self.list.horizontalHeader()
        header.setSectionResizeMode(QHeaderView.ResizeMode.Fixed)
        for column, width in enumerate((22, 48, 80)):
            self.list.setColumnWidth(column, width)
        header.setStretchLastSection(True)
        self.list.setWordWrap(False)
        self.list.setMinimumHeight(150)
        self.list.clicked.connect(self._clicked)
        self.progress.setFormat("%v of %m done")
        self._steps = side_by_side(
            button("Previous (B)", KEYS["previous"].does, lambda: self._act("previous")),
            button("Next (N)", KEYS["next"].does, lambda: self._act("next")),
            button("Confirm (C)", KEYS["confirm"].does, lambda: self._act("confirm")),
            button("Reject (X)", KEYS["reject"].does, lambda: self._act("reject")),
        )

    def _lay_out_question(self) -> None:
        self.question = QLabel()
        self.question.setWordWrap(True)
        self.question.setStyleSheet(WARN)
        self.reason.setEditable(True)
        self.reason.addItems(_REASONS)
        self.reason.setToolTip("The reason is written into the log and listed in the audit.")
        self.reason.setCurrentText("")
        edit = self.reason.lineEdit()
        if edit is not None:
            edit.setPlaceholderText("reason")
            edit.returnPressed.connect(lambda: self._answer(0))
        self._choices = QHBoxLayout()
        self.asking.setFrameShape(QFrame.Shape.StyledPanel)
        box = QVBoxLayout(self.asking)
        box.addWidget(self.question)
        box.addWidget(self.reason)
        box.addLayout(self._choices)
        self.asking.hide()

    def _bind(self, session: Session | None) -> None:
        old = self._bound
        super()._bind(session)
        if session is old:
            return
        if old is not None:
            old.told.disconnect(self._repeat)
            old.editing.changed.disconnect(self._follow_edits)
        self._let_go()
        if session is not None:
            session.told.connect(self._repeat)
            session.editing.changed.connect(self._follow_edits)
            self._take_up()

    def _reviewed(self) -> Review | None:
        """Return the review of the session, and listen to it from now on."""
        if self._review is None:
            session = self.session()
            review = None if session is None else review_of(self.viewer, session)
            if review is not None:
                self._review = review
                review.changed.connect(self._show_list)
                review.renaming.connect(self._rename)
                review.gestures.asked.connect(self._ask)
        return self._review

    def _take_up(self) -> None:
        """Go on with a review that was begun in a dock closed since."""
        session = self._bound
        if session is not None and session.display is not None and session.display.gestures:
            self._reviewed()
            self._show_list()
            self._ask()

    def _let_go(self) -> None:
        if self._review is not None:
            self._review.changed.disconnect(self._show_list)
            self._review.renaming.disconnect(self._rename)
            self._review.gestures.asked.disconnect(self._ask)
            self._review = None
        self._show_list()
        self.asking.hide()

    def _repeat(self, text: str, warning: bool) -> None:
        self.say(text, warning=warning)

    def _follow_edits(self, frames: object = None) -> None:
        if self._bound is not None:
            self.show_session(self._bound)

    def _show_list(self) -> None:
        review = self._review
        if review is None:
            self.model.show_items(self.model.none())
            self.progress.setVisible(False)
            return
        self.model.show_items(review.items)
        done, total = review.progress
        self.progress.setVisible(total > 0)
        self.progress.setRange(0, max(total, 1))
        self.progress.setValue(done)
        if review.row >= 0:
            self.list.selectRow(review.row)
            self.list.scrollTo(self.model.index(review.row, 0))

    def _clicked(self, index: QModelIndex) -> None:
        if self._review is not None:
            self._review.go_to(index.row())

    def _act(self, name: str) -> None:
        review = self._reviewed()
        if review is None:
            return
        if not review.gestures.reviewing:
            review.begin()
        getattr(review, name)()

    def _ask(self) -> None:
        question = None if self._review is None else self._review.gestures.question
        while self._choices.count():
            old = self._choices.takeAt(0).widget()
            if old is not None:
                old.deleteLater()
        self.asking.setVisible(question is not None)
        if question is None:
            if self._focus is not None:
                self._focus.setFocus()
                self._focus = None
            return
        self.question.setText(question.text)
        for number, (label, _) in enumerate(question.choices):
            self._choices.addWidget(_choice(label, partial(self._answer, number)))
        self._choices.addWidget(_choice("Leave it", self._drop))
        if self._focus is None:
            self._focus = QApplication.focusWidget()
        self.reason.setFocus()
        edit = self.reason.lineEdit()
        if edit is not None:
            edit.selectAll()

    def _answer(self, choice: int) -> None:
        reason = self.reason.currentText()
        if not reason.strip():
            self.say("Give a reason; it is listed in the audit.", warning=True)
        elif self._review is not None:
            self._review.gestures.answer(choice, reason)

    def _drop(self) -> None:
        self._with(lambda gestures: gestures.ask(None))

    def _rename(self, track: int) -> None:
        number, chosen = QInputDialog.getInt(
            self, "Rename track", f"New number of track {track}", track, 0, 2**31 - 1
        )
        if chosen and self._review is not None:
            self._review.rename_to(number)

    def _draw_on(self, role: Role) -> None:
        def draw(gestures: Gestures) -> None:
            gestures.every_frame = self.every_frame.isChecked()
            gestures.draw_on(role)

        self._with(draw)

    def _with(self, do: Callable[[Gestures], object]) -> None:
        session = self.session()
        gestures = None if session is None else gestures_of(self.viewer, session)
        if gestures is not None:
            do(gestures)

    def _keep(self) -> None:
        session = self.session()
        path, _ = QFileDialog.getSaveFileName(
            self, "Keep edits in", NAME, "Edits (*.jsonl)",
            options=QFileDialog.Option.DontConfirmOverwrite,
        )  # fmt: skip
        if session is None or not path:
            return
        try:
            session.editing.keep_in(Path(path))
        except LogError as error:
            self.say(str(error), warning=True)
        else:
            session.tables_changed.emit()


def _choice(label: str, act: Callable[[], None]) -> QPushButton:
    made = QPushButton(label)
    made.clicked.connect(lambda: act())
    return made


def _keys_text() -> str:
    ours = [(key.shown, key.does) for key in KEYS.values()]
    return "&nbsp; ".join(f"<b>{key}</b>&nbsp;{does}" for key, does in (*_NAPARI_KEYS, *ours))
