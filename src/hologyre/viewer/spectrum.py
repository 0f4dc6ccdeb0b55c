"""The spectrum of a hologram, with the carrier and its band drawn on it to be seen and moved."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from matplotlib import colormaps
from numpy.typing import NDArray
from qtpy.QtCore import QPointF, QRectF, QSize, Qt, Signal
from qtpy.QtGui import QColor, QImage, QMouseEvent, QPainter, QPaintEvent, QPen
from qtpy.QtWidgets import QSizePolicy, QWidget
from scipy import fft

_MARGIN = 22
_GRAB = 9.0
_BACKGROUND = QColor(0, 0, 0)
_BAND = QColor("#56B4E9")
_ORDER = QColor("#E69F00")
_TEXT = QColor("#888888")
_PALETTE = [
    0xFF000000 | (int(r) << 16) | (int(g) << 8) | int(b)
    for r, g, b, _ in (colormaps["gray"](np.arange(256)) * 255).round()
]


@dataclass(frozen=True)
class Band:
    """A sideband: its centre (the carrier) and radius, cycles per pixel."""

    fy: float
    fx: float
    radius: float


def spectrum_picture(frame: NDArray[np.generic], *, size: int = 384) -> NDArray[np.uint8]:
    """Return the log power spectrum of a frame as a grey picture.

    Parameters
    ----------
    frame : (y, x) array
        A hologram. Pixels that are not finite count as the mean.
    size : int
        Rows and columns of the picture at most. Each holds the strongest of the frequencies it
        stands for, so that a narrow sideband is not lost.

    Returns
    -------
    (rows, columns) uint8 array
        Frequencies from -0.5 (included) to 0.5 cycles/px along both axes, zero at the middle.
        The grey scale runs from the median of the log power to its maximum off the centre.
    """
    values = np.asarray(frame, dtype=np.float32)
    finite = np.isfinite(values)
    mean = values[finite].mean() if finite.any() else np.float32(0)
    values = np.where(finite, values - mean, np.float32(0))
    ny, nx = values.shape
    taper = np.hanning(ny + 2)[1:-1, None] * np.hanning(nx + 2)[None, 1:-1]
    half = fft.rfft2(values * taper.astype(np.float32))
    power = half.real**2 + half.imag**2
    mirrored = power[-np.arange(ny) % ny][:, 1 : (nx + 1) // 2][:, ::-1]
    full = np.fft.fftshift(np.hstack([power, mirrored]))
    picture = np.log(_strongest(full, size) + np.finfo(np.float32).tiny)
    low, high = np.median(picture), picture.max()
    scaled = np.clip((picture - low) / max(high - low, 1e-6), 0, 1) * 255
    return scaled.astype(np.uint8)


def _strongest(power: NDArray[np.float32], size: int) -> NDArray[np.float32]:
    """Shrink by taking the largest value of each block; the blocks need not be equal."""
    for axis, count in enumerate(power.shape):
        if count > size:
            starts = np.arange(size) * count // size
            power = np.maximum.reduceat(power, starts, axis=axis)
    return power


class SpectrumView(QWidget):
    """Shows a spectrum; the band can be dragged by its centre or its rim.

    The widget only reports what is done to the band (`band_moved` at each step, `band_chosen` at
    release); it is whoever listens that decides what becomes of it.
    """

    band_moved = Signal(object)
    band_chosen = Signal(object)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._picture = QImage()
        self._band: Band | None = None
        self._grabbed: str | None = None
        self._note = ""
        self.setMouseTracking(True)
        policy = QSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Preferred)
        policy.setHeightForWidth(True)
        self.setSizePolicy(policy)
        self.setMinimumSize(180, 180)
        self.setToolTip(
            "Power spectrum of the current frame, logarithmic; frequencies in cycles/px.\n"
            "Blue: the sideband that is read. Grey dashes: its mirror image.\n"
            "Orange: where the zero order may reach.\n"
            "Drag the blue cross to move the carrier, the blue rim to change the radius."
        )

    @property
    def band(self) -> Band | None:
        """The band that is drawn."""
        return self._band

    def show_picture(self, picture: NDArray[np.uint8] | None, note: str = "") -> None:
        """Show a spectrum as `spectrum_picture` makes it; a note is written if there is none."""
        self._note = note
        if picture is None:
            self._picture = QImage()
        else:
            rows, columns = picture.shape
            data = np.ascontiguousarray(picture)
            image = QImage(data.tobytes(), columns, rows, columns, QImage.Format.Format_Indexed8)
            image.setColorTable(_PALETTE)
            self._picture = image.copy()
        self.update()

    def show_band(self, band: Band | None) -> None:
        """Draw the carrier and its band; None draws nothing."""
        self._band = band
        self.update()

    def sizeHint(self) -> QSize:
        """Return a square."""
        return QSize(300, 300)

    def heightForWidth(self, width: int) -> int:
        """Keep the picture square, up to a height that leaves room for the form below it."""
        return min(width, 340)

    def position_of(self, fy: float, fx: float) -> QPointF:
        """Return where on the widget a frequency lies."""
        frame = self._frame()
        return QPointF(
            frame.left() + (fx + 0.5) * frame.width(), frame.top() + (fy + 0.5) * frame.height()
        )

    def frequency_at(self, position: QPointF) -> tuple[float, float]:
        """Return the frequency (fy, fx) at a point of the widget, kept inside the spectrum."""
        frame = self._frame()
        fy = (position.y() - frame.top()) / frame.height() - 0.5
        fx = (position.x() - frame.left()) / frame.width() - 0.5
        return float(np.clip(fy, -0.5, 0.5)), float(np.clip(fx, -0.5, 0.5))

    def mousePressEvent(self, event: QMouseEvent) -> None:
        """Take hold of the band's centre or rim."""
        if event.button() == Qt.MouseButton.LeftButton:
            self._grabbed = self._part_at(event.position())

    def mouseMoveEvent(self, event: QMouseEvent) -> None:
        """Move what is held, or show what could be."""
        if self._grabbed is None:
            part = self._part_at(event.position())
            cursor = {
                "centre": Qt.CursorShape.OpenHandCursor,
                "rim": Qt.CursorShape.SizeAllCursor,
            }
            self.setCursor(cursor.get(part or "", Qt.CursorShape.ArrowCursor))
            return
        band, (fy, fx) = self._band, self.frequency_at(event.position())
        if band is None:
            return
        if self._grabbed == "centre":
            band = replace(band, fy=fy, fx=fx)
        else:
            band = replace(band, radius=float(max(np.hypot(fy - band.fy, fx - band.fx), 0.005)))
        self.show_band(band)
        self.band_moved.emit(band)

    def mouseReleaseEvent(self, event: QMouseEvent) -> None:
        """Let go."""
        if self._grabbed is not None and self._band is not None:
            self.band_chosen.emit(self._band)
        self._grabbed = None

    def paintEvent(self, event: QPaintEvent) -> None:
        """Draw the spectrum, its axes and the band."""
        painter = QPainter(self)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        painter.setRenderHint(QPainter.RenderHint.SmoothPixmapTransform)
        frame = self._frame()
        painter.fillRect(frame, _BACKGROUND)
        if self._picture.isNull():
            painter.setPen(_TEXT)
            flags = Qt.AlignmentFlag.AlignCenter | Qt.TextFlag.TextWordWrap
            painter.drawText(frame.adjusted(12, 12, -12, -12), int(flags), self._note)
        else:
            painter.drawImage(frame, self._picture)
            self._draw_axes(painter, frame)
        if self._band is not None and not self._picture.isNull():
            painter.setClipRect(frame)
            self._draw_band(painter, self._band)
        painter.end()

    def _draw_axes(self, painter: QPainter, frame: QRectF) -> None:
        painter.setPen(_TEXT)
        font = painter.font()
        font.setPointSizeF(7.5)
        painter.setFont(font)
        below = frame.bottom() + 2
        for value, text in ((-0.5, "-0.5"), (0.0, "fx = 0 cycles/px"), (0.5, "0.5")):
            x = frame.left() + (value + 0.5) * frame.width()
            box = QRectF(x - 60, below, 120, _MARGIN - 4)
            align = Qt.AlignmentFlag.AlignHCenter
            if value < 0:
                box.moveLeft(frame.left())
                align = Qt.AlignmentFlag.AlignLeft
            elif value > 0:
                box.moveRight(frame.right())
                align = Qt.AlignmentFlag.AlignRight
            painter.drawText(box, int(align), text)
        painter.save()
        painter.translate(frame.left() - 4, frame.center().y())
        painter.rotate(-90)
        box = QRectF(-70, -_MARGIN + 6, 140, _MARGIN - 6)
        painter.drawText(box, int(Qt.AlignmentFlag.AlignCenter), "fy (down)")
        painter.restore()

    def _draw_band(self, painter: QPainter, band: Band) -> None:
        unit = self._frame().width()
        centre, mirror = self.position_of(band.fy, band.fx), self.position_of(-band.fy, -band.fx)
        radius = band.radius * unit
        painter.setBrush(Qt.BrushStyle.NoBrush)
        painter.setPen(QPen(_ORDER, 1.4, Qt.PenStyle.DotLine))
        painter.drawEllipse(self.position_of(0.0, 0.0), 2 * radius, 2 * radius)
        painter.setPen(QPen(_TEXT, 1.2, Qt.PenStyle.DashLine))
        painter.drawEllipse(mirror, radius, radius)
        painter.setPen(QPen(_BAND, 1.8))
        painter.drawEllipse(centre, radius, radius)
        painter.drawLine(centre - QPointF(5, 0), centre + QPointF(5, 0))
        painter.drawLine(centre - QPointF(0, 5), centre + QPointF(0, 5))

    def _part_at(self, position: QPointF) -> str | None:
        if self._band is None:
            return None
        offset = position - self.position_of(self._band.fy, self._band.fx)
        distance = float(np.hypot(offset.x(), offset.y()))
        if distance <= _GRAB:
            return "centre"
        if abs(distance - self._band.radius * self._frame().width()) <= _GRAB / 1.5:
            return "rim"
        return None

    def _frame(self) -> QRectF:
        """Return the square that holds the spectrum."""
        side = max(min(self.width() - _MARGIN, self.height() - _MARGIN), 1)
        left = (self.width() - side + _MARGIN) / 2
        return QRectF(left, 2.0, float(side), float(side))
