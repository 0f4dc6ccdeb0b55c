"""The list of tracks, as Qt shows it."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from qtpy.QtCore import QAbstractTableModel, QModelIndex, Qt

from hologyre.motion import summarise_tracks

_COLUMNS = (
    ("track", "track", "number of the trajectory"),
    ("charge", "charge", "topological charge"),
    ("first_frame", "first", "first frame"),
    ("rows", "frames", "frames it was seen in"),
    ("path_px", "path/px", "length of the path, noise included, px"),
    ("displacement_px", "net/px", "distance from the first to the last place, px"),
)


class TrackModel(QAbstractTableModel):
    """Rows of `hologyre.motion.summarise_tracks`, sorted by a column, text only on screen."""

    def __init__(self) -> None:
        super().__init__()
        self._trajectories: pd.DataFrame | None = None
        self._rows = pd.DataFrame(columns=[name for name, _, _ in _COLUMNS])
        self._by, self._ascending = "rows", False

    def show_trajectories(self, trajectories: pd.DataFrame) -> bool:
        """List the tracks of a table; tell whether it is another table than before."""
        if trajectories is self._trajectories:
            return False
        self.beginResetModel()
        self._trajectories = trajectories
        self._rows = summarise_tracks(trajectories) if len(trajectories) else self._rows.iloc[:0]
        self._sort()
        self.endResetModel()
        return True

    def track_at(self, row: int) -> int:
        """Return the number of the track in a row."""
        return int(self._rows["track"].iloc[row])

    def row_of(self, track: int) -> int | None:
        """Return the row of a track, or None."""
        found = np.flatnonzero(self._rows["track"] == track)
        return int(found[0]) if found.size else None

    def rowCount(self, parent: QModelIndex | None = None) -> int:
        """Return the number of tracks."""
        return 0 if parent is not None and parent.isValid() else len(self._rows)

    def columnCount(self, parent: QModelIndex | None = None) -> int:
        """Return the number of columns."""
        return len(_COLUMNS)

    def data(self, index: QModelIndex, role: int = Qt.ItemDataRole.DisplayRole) -> Any:
        """Return the text of a cell."""
        if role == Qt.ItemDataRole.TextAlignmentRole:
            return int(Qt.AlignmentFlag.AlignRight | Qt.AlignmentFlag.AlignVCenter)
        if role != Qt.ItemDataRole.DisplayRole:
            return None
        name = _COLUMNS[index.column()][0]
        value = self._rows[name].iloc[index.row()]
        if name == "charge":
            return f"{int(value):+d}"
        return f"{value:.1f}" if name.endswith("_px") else str(int(value))

    def headerData(
        self, section: int, orientation: Qt.Orientation, role: int = Qt.ItemDataRole.DisplayRole
    ) -> Any:
        """Return the names of the columns, and what they mean."""
        if orientation == Qt.Orientation.Horizontal:
            if role == Qt.ItemDataRole.DisplayRole:
                return _COLUMNS[section][1]
            if role == Qt.ItemDataRole.ToolTipRole:
                return _COLUMNS[section][2]
        return None

    def sort(self, column: int, order: Qt.SortOrder = Qt.SortOrder.AscendingOrder) -> None:
        """Sort by a column."""
        self._by = _COLUMNS[column][0]
        self._ascending = order == Qt.SortOrder.AscendingOrder
        self.layoutAboutToBeChanged.emit()
        kept = self.persistentIndexList()
        tracks = [self.track_at(index.row()) for index in kept]
        self._sort()
        moved = [
            self.index(self.row_of(track) or 0, index.column())
            for track, index in zip(tracks, kept, strict=True)
        ]
        self.changePersistentIndexList(kept, moved)
        self.layoutChanged.emit()

    def _sort(self) -> None:
        self._rows = self._rows.sort_values(
            self._by, ascending=self._ascending, kind="stable", ignore_index=True
        )
