"""The list of what deserves a look, as Qt shows it."""

from __future__ import annotations

from typing import Any

import pandas as pd
from qtpy.QtCore import QAbstractTableModel, QModelIndex, Qt

_COLUMNS = (("done", ""), ("frame", "frame"), ("what", "what"), ("reason", "why"))


class ItemModel(QAbstractTableModel):
    """Rows of `hologyre.edits.review`, made to text only when they are on screen."""

    def __init__(self) -> None:
        super().__init__()
        self._items = self.none()

    @staticmethod
    def none() -> pd.DataFrame:
        """Return a list without items."""
        return pd.DataFrame(columns=[*(name for name, _ in _COLUMNS), "score"])

    def show_items(self, items: pd.DataFrame) -> None:
        """Show other items, or the same with other marks."""
        if 0 < len(items) == len(self._items):
            self._items = items
            last = self.index(len(items) - 1, len(_COLUMNS) - 1)
            self.dataChanged.emit(self.index(0, 0), last)
            return
        self.beginResetModel()
        self._items = items
        self.endResetModel()

    def rowCount(self, parent: QModelIndex | None = None) -> int:
        """Return the number of items."""
        return 0 if parent is not None and parent.isValid() else len(self._items)

    def columnCount(self, parent: QModelIndex | None = None) -> int:
        """Return the number of columns."""
        return len(_COLUMNS)

    def data(self, index: QModelIndex, role: int = Qt.ItemDataRole.DisplayRole) -> Any:
        """Return the text of a cell, or all of the item as its tip."""
        item = self._items.iloc[index.row()]
        name = _COLUMNS[index.column()][0]
        if role == Qt.ItemDataRole.DisplayRole:
            return ("✓" if item["done"] else "") if name == "done" else str(item[name])
        if role == Qt.ItemDataRole.ToolTipRole:
            return f"{item['reason']} (score {item['score']:.2f})"
        return None

    def headerData(
        self, section: int, orientation: Qt.Orientation, role: int = Qt.ItemDataRole.DisplayRole
    ) -> Any:
        """Return the names of the columns."""
        if role == Qt.ItemDataRole.DisplayRole and orientation == Qt.Orientation.Horizontal:
            return _COLUMNS[section][1]
        return None
