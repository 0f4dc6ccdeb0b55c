"""Small plots one below the other, over one horizontal axis, in the colours of the theme."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from qtpy.QtCore import QPointF, QRectF, QSize, Qt, Signal
from qtpy.QtGui import QColor, QFontMetricsF, QMouseEvent, QPainter, QPaintEvent, QPen, QPolygonF
from qtpy.QtWidgets import QSizePolicy, QWidget

_LEFT, _RIGHT, _BELOW, _TITLE = 46.0, 10.0, 18.0, 15.0
_PANEL_HEIGHT = 66
_FEW = 60


@dataclass(frozen=True, eq=False)
class Curve:
    """One line of a plot; it is broken where values are not finite."""

    x: NDArray[np.float64]
    y: NDArray[np.float64]
    colour: str


@dataclass(frozen=True)
class Panel:
    """A plot: its title, with the unit, and its curves."""

    title: str
    curves: tuple[Curve, ...]
    from_zero: bool = True


class PanelPlot(QWidget):
    """Shows panels over a common axis, and a marker that follows where the viewer stands.

    A click or drag emits `picked` with the place on the horizontal axis, and `chosen` with the
    last one at release.
    """

    picked = Signal(float)
    chosen = Signal(float)

    def __init__(self, axis: str, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._axis = axis
        self._panels: tuple[Panel, ...] = ()
        self._note = ""
        self._marker: float | None = None
        self.setSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Fixed)
        self.setMinimumWidth(160)

    @property
    def panels(self) -> tuple[Panel, ...]:
        """What is shown."""
        return self._panels

    @property
    def marker(self) -> float | None:
        """Where the marker stands."""
        return self._marker

    def show_panels(self, panels: Sequence[Panel], note: str = "") -> None:
        """Show these; a note is written if there are none."""
        self._panels = tuple(panels)
        self._note = note
        self.updateGeometry()
        self.update()

    def show_marker(self, x: float | None) -> None:
        """Move the marker; None takes it away."""
        if x != self._marker:
            self._marker = x
            self.update()

    def sizeHint(self) -> QSize:
        """Take room for the panels there are."""
        count = len(self._panels)
        return QSize(300, int(count * _PANEL_HEIGHT + _BELOW) if count else 36)

    def mousePressEvent(self, event: QMouseEvent) -> None:
        """Tell the place that was clicked."""
        if event.button() == Qt.MouseButton.LeftButton:
            self._tell(event, self.picked.emit)

    def mouseMoveEvent(self, event: QMouseEvent) -> None:
        """Tell the place that is dragged to."""
        if event.buttons() & Qt.MouseButton.LeftButton:
            self._tell(event, self.picked.emit)

    def mouseReleaseEvent(self, event: QMouseEvent) -> None:
        """Tell the place where a drag ends."""
        if event.button() == Qt.MouseButton.LeftButton:
            self._tell(event, self.chosen.emit)

    def paintEvent(self, event: QPaintEvent) -> None:
        """Draw the panels, or the note."""
        painter = QPainter(self)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        ink = self.palette().windowText().color()
        font = painter.font()
        font.setPointSizeF(7.5)
        painter.setFont(font)
        if not self._panels:
            painter.setPen(_faded(ink, 0.7))
            flags = Qt.AlignmentFlag.AlignCenter | Qt.TextFlag.TextWordWrap
            painter.drawText(QRectF(self.rect()), int(flags), self._note)
        for number, panel in enumerate(self._panels):
            self._draw_panel(painter, panel, self._box(number), ink)
        if self._panels:
            self._draw_axis(painter, ink)
        painter.end()

    def _draw_panel(self, painter: QPainter, panel: Panel, box: QRectF, ink: QColor) -> None:
        painter.setPen(ink)
        heading = QRectF(box.left(), box.top() - _TITLE, box.width(), _TITLE)
        painter.drawText(heading, int(Qt.AlignmentFlag.AlignLeft), panel.title)
        painter.setPen(QPen(_faded(ink, 0.35), 1.0))
        painter.drawRect(box)
        low, high = _range([c.y for c in panel.curves], from_zero=panel.from_zero)
        painter.setPen(_faded(ink, 0.8))
        metrics = QFontMetricsF(painter.font())
        for value, top in ((high, box.top()), (low, box.bottom() - metrics.height())):
            place = QRectF(0, top, _LEFT - 5, metrics.height())
            painter.drawText(place, int(Qt.AlignmentFlag.AlignRight), f"{value:.3g}")
        first, last = self._span()
        if self._marker is not None and first <= self._marker <= last:
            x = box.left() + (self._marker - first) / (last - first) * box.width()
            painter.setPen(QPen(_faded(ink, 0.6), 1.0, Qt.PenStyle.DashLine))
            painter.drawLine(QPointF(x, box.top()), QPointF(x, box.bottom()))
        painter.save()
        painter.setClipRect(box.adjusted(-3, -3, 3, 3))
        for curve in panel.curves:
            across = box.left() + (curve.x - first) / (last - first) * box.width()
            up = box.bottom() - 2 - (curve.y - low) / (high - low) * (box.height() - 4)
            _draw_curve(painter, across, up, QColor(curve.colour))
        painter.restore()

    def _draw_axis(self, painter: QPainter, ink: QColor) -> None:
        box = self._box(len(self._panels) - 1)
        first, last = self._span()
        painter.setPen(_faded(ink, 0.8))
        under = QRectF(box.left(), box.bottom() + 2, box.width(), _BELOW)
        painter.drawText(under, int(Qt.AlignmentFlag.AlignLeft), f"{first:.4g}")
        painter.drawText(under, int(Qt.AlignmentFlag.AlignHCenter), self._axis)
        painter.drawText(under, int(Qt.AlignmentFlag.AlignRight), f"{last:.4g}")

    def _box(self, number: int) -> QRectF:
        height = (self.height() - _BELOW) / max(len(self._panels), 1)
        top = number * height + _TITLE
        return QRectF(_LEFT, top, self.width() - _LEFT - _RIGHT, height - _TITLE - 5)

    def _span(self) -> tuple[float, float]:
        places = [c.x for panel in self._panels for c in panel.curves]
        first, last = _range(places, from_zero=False)
        return first, last

    def _tell(self, event: QMouseEvent, emit: Callable[[float], object]) -> None:
        if self._panels:
            box, (first, last) = self._box(0), self._span()
            share = (event.position().x() - box.left()) / box.width()
            emit(first + float(np.clip(share, 0, 1)) * (last - first))


def _draw_curve(
    painter: QPainter, x: NDArray[np.float64], y: NDArray[np.float64], colour: QColor
) -> None:
    good = np.isfinite(x) & np.isfinite(y)
    painter.setPen(QPen(colour, 1.6))
    painter.setBrush(Qt.BrushStyle.NoBrush)
    for run in np.split(np.arange(len(x)), np.flatnonzero(np.diff(good)) + 1):
        if len(run) > 1 and good[run[0]]:
            painter.drawPolyline(QPolygonF([QPointF(x[i], y[i]) for i in run]))
    if good.sum() <= _FEW:
        painter.setPen(Qt.PenStyle.NoPen)
        painter.setBrush(colour)
        for i in np.flatnonzero(good):
            painter.drawEllipse(QPointF(x[i], y[i]), 2.0, 2.0)


def _range(values: list[NDArray[np.float64]], *, from_zero: bool) -> tuple[float, float]:
    """Return the least and the largest finite value, never the same."""
    together = np.concatenate([*values, np.zeros(1 if from_zero else 0)])
    together = together[np.isfinite(together)]
    low, high = (float(together.min()), float(together.max())) if together.size else (0.0, 1.0)
    return (low, high) if high > low else (low, low + 1.0)


def _faded(colour: QColor, alpha: float) -> QColor:
    faded = QColor(colour)
    faded.setAlphaF(alpha)
    return faded
