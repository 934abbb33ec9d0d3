"""The line on top: state, time, flap rate, mean angle, body, what is run, disk, link."""

from __future__ import annotations

import math

from PySide6.QtCore import QRectF, QSize, Qt
from PySide6.QtGui import QColor, QFontMetrics, QFontMetricsF, QPainter, QPaintEvent
from PySide6.QtWidgets import QHBoxLayout, QSizePolicy, QVBoxLayout, QWidget

from rig.desk.model.run_model import PHASES, RunModel
from rig.desk.model.wording import PHASE_SHAPES, disk_words, link_words, lost_share, said
from rig.desk.theme import Theme
from rig.desk.widgets.shapes import ElidedLabel, ShapeMark, draw_shape, rounded, sized
from rig.desk.widgets.style import set_kind, set_shown

NOTHING = "–"
PLATE_SIZE = 1.1
#: Phases that ask for more attention than a run that runs.
ALERTING = ("stopping", "turning", "waiting", "failed")


class PhasePlate(QWidget):
    """Shape and word of the run's state, or REPLAY, on a ground of its own."""

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = theme
        self._shape, self._word, self._tone = "ring", "no run", "calm"
        self.setSizePolicy(QSizePolicy.Policy.Fixed, QSizePolicy.Policy.Preferred)
        self.setAccessibleName("state of the run")

    @property
    def word(self) -> str:
        return self._word

    @property
    def shape(self) -> str:
        return self._shape

    def set_theme(self, theme: Theme) -> None:
        self._theme = theme
        self.update()

    def tell(self, shape: str, word: str, tone: str) -> None:
        """`tone` is calm, busy, alert or replay."""
        if (shape, word, tone) != (self._shape, self._word, self._tone):
            self._shape, self._word, self._tone = shape, word, tone
            self.setAccessibleDescription(word)
            self.update()

    def sizeHint(self) -> QSize:
        metrics = QFontMetrics(sized(self.font(), PLATE_SIZE, bold=True))
        # Room for every state, so that nothing moves when it changes.
        wide = max(metrics.horizontalAdvance(word) for word in PHASES.values())
        return QSize(wide + metrics.capHeight() + round(1.5 * metrics.height()), 2 * metrics.height())

    def minimumSizeHint(self) -> QSize:
        return self.sizeHint()

    def paintEvent(self, event: QPaintEvent) -> None:
        theme = self._theme
        ground, ink = {
            "calm": (theme.raised, theme.ink),
            "busy": (theme.accent, theme.accent_ink),
            "alert": (theme.alert, theme.alert_ink),
            "replay": (theme.ink, theme.panel),
        }[self._tone]
        painter = QPainter(self)
        font = sized(self.font(), PLATE_SIZE, bold=True)
        metrics = QFontMetricsF(font)
        rect = QRectF(self.rect()).adjusted(0.0, 2.0, 0.0, -2.0)
        rounded(painter, rect, QColor(ground))
        side = metrics.capHeight() + 2.0
        mark = QRectF(0.55 * metrics.height(), rect.center().y() - 0.5 * side, side, side)
        draw_shape(painter, self._shape, mark, QColor(ink), QColor(ground))
        painter.setFont(font)
        painter.setPen(QColor(ink))
        text = rect.adjusted(mark.right() + 0.35 * metrics.height(), 0.0, 0.0, 0.0)
        painter.drawText(text, int(Qt.AlignmentFlag.AlignVCenter | Qt.AlignmentFlag.AlignLeft), self._word)
        painter.end()


class Cell(QWidget):
    """A small caption over a value, which may have a shape before it.

    `room` is a text the value's width is kept for, so that digits do not push their neighbours about. Only a cell
    that `shrinks` shortens its text.
    """

    def __init__(
        self,
        theme: Theme,
        caption: str,
        room: str,
        parent: QWidget | None = None,
        *,
        shape: bool = False,
        shrinks: bool = False,
    ) -> None:
        super().__init__(parent)
        self._theme = theme
        self._room = room
        self._alert = False
        self._shrinks = shrinks
        self.caption = ElidedLabel()
        self.caption.tell(caption)
        set_kind(self.caption, "faint")
        self.value = ElidedLabel()
        self.value.tell(NOTHING)
        self.mark = ShapeMark(theme) if shape else None
        row = QHBoxLayout()
        row.setContentsMargins(0, 0, 0, 0)
        row.setSpacing(5)
        if self.mark is not None:
            row.addWidget(self.mark)
        row.addWidget(self.value, 1)
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 0, 0, 0)
        column.setSpacing(0)
        column.addWidget(self.caption)
        column.addLayout(row)
        self.setSizePolicy(QSizePolicy.Policy.Preferred, QSizePolicy.Policy.Preferred)
        self._fit()

    def _fit(self) -> None:
        self.caption.setFont(sized(self.font(), 0.8))
        self.value.setFont(sized(self.font(), 1.05))

    def wanted(self) -> int:
        """Width in which nothing is shortened."""
        values = QFontMetrics(self.value.font())
        captions = QFontMetrics(self.caption.font())
        mark = self.mark.sizeHint().width() + 5 if self.mark is not None else 0
        told = max(values.horizontalAdvance(text) for text in (self._room, self.value.full_text))
        return max(told + mark, captions.horizontalAdvance(self.caption.full_text)) + 4

    def sizeHint(self) -> QSize:
        return QSize(self.wanted(), super().sizeHint().height())

    def minimumSizeHint(self) -> QSize:
        least = 5 * self.fontMetrics().height() if self._shrinks else self.wanted()
        return QSize(min(self.wanted(), least), super().minimumSizeHint().height())

    def set_theme(self, theme: Theme) -> None:
        self._theme = theme
        if self.mark is not None:
            self.mark.show_shape(self.mark.shape, theme.alert if self._alert else theme.ink)

    def tell(self, value: str, shape: str = "", hint: str = "", *, alert: bool = False) -> None:
        """Show a value."""
        self._alert = alert
        if value != self.value.full_text:
            before = self.wanted()
            self.value.tell(value, hint)
            if self.wanted() != before:  # most values change many times a second and fit where they stand
                self.updateGeometry()
        self.value.tell(value, hint)
        self.value.setAccessibleName(f"{self.caption.full_text}: {value}")
        set_kind(self.value, "alerting" if alert else "")
        if self.mark is not None and shape:
            self.mark.show_shape(shape, self._theme.alert if alert else self._theme.ink)
            set_shown(self.mark, True)
        elif self.mark is not None:
            set_shown(self.mark, False)


class StatusLine(QWidget):
    """One row over the whole width."""

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._replay = False
        self._link: tuple[float | None, float | None] = (None, None)
        self._model: RunModel | None = None
        self.setAccessibleName("status")
        self.phase = PhasePlate(theme)
        self.time = Cell(theme, "run time", "0000.0 s")
        self.flap = Cell(theme, "flap rate", "00.00 Hz")
        self.angle = Cell(theme, "mean angle", "-00.00°")
        self.body = Cell(theme, "body", "friction holds")
        self.names = Cell(theme, "rig", "first-sweep", shrinks=True)
        self.disk = Cell(theme, "disk", "888 GB free", shape=True)
        self.link = Cell(theme, "link", "steady, 888 ms, none lost", shape=True)
        row = QHBoxLayout(self)
        row.setContentsMargins(8, 4, 8, 4)
        row.setSpacing(round(0.8 * self.fontMetrics().height()))
        row.addWidget(self.phase)
        for cell in self.cells:
            row.addWidget(cell, 1 if cell is self.names else 0)
        self.setSizePolicy(QSizePolicy.Policy.Preferred, QSizePolicy.Policy.Fixed)

    @property
    def cells(self) -> tuple[Cell, ...]:
        return (self.time, self.flap, self.angle, self.body, self.names, self.disk, self.link)

    def set_theme(self, theme: Theme) -> None:
        self.phase.set_theme(theme)
        for cell in self.cells:
            cell.set_theme(theme)

    def set_names(self, rig: str, protocol: str, where: str = "") -> None:
        """Names of rig and protocol; `where` (a bench, a file) goes into the tool tip."""
        self.names.caption.tell(f"rig {rig}" if rig else "rig")
        self.names.tell(protocol or NOTHING, hint=where)
        self.names.updateGeometry()

    def set_link(self, age_ms: float | None, rows_per_s: float | None = None) -> None:
        """Age of the last sample and the nominal rate of rows; None: no link."""
        self._link = (age_ms, rows_per_s)
        self._show_link()

    def set_replay(self, on: bool) -> None:
        """A recorded run is shown: no word about a drive, a disk or a link."""
        self._replay = on
        set_shown(self.disk, not on)
        set_shown(self.link, not on)
        if on:
            self.phase.tell("right_hollow", "REPLAY", "replay")
        elif self._model is not None:
            self._show_phase(self._model)

    def refresh(self, model: RunModel) -> None:
        self._model = model
        begun = model.origin_tick is not None
        if not self._replay:
            self._show_phase(model)
        self.time.tell(f"{model.time_s:.1f} s" if begun else NOTHING)
        self.flap.tell(NOTHING if model.flap_hz is None else f"{model.flap_hz:.2f} Hz")
        angle = model.mean_angle_rad
        known = angle is not None and math.isfinite(angle)
        self.angle.tell(f"{math.degrees(angle):.2f}°" if known and angle is not None else NOTHING)
        self.body.tell(said(model.body) if model.body else NOTHING)
        told, low = disk_words(model.free_bytes)
        self.disk.tell(told, "warning" if low else "", alert=low)
        self._show_link()

    def _show_phase(self, model: RunModel) -> None:
        tone = "busy" if model.phase == "running" else "alert" if model.phase in ALERTING else "calm"
        self.phase.tell(PHASE_SHAPES[model.phase], model.word, tone)

    def _show_link(self) -> None:
        age_ms, rows_per_s = self._link
        model = self._model
        share, lost = (lost_share(model), model.lost_rows) if model is not None else (0.0, 0)
        shape, word, details = link_words(age_ms, share, lost)
        self.link.caption.tell("link" if rows_per_s is None else f"link, {rows_per_s:g} rows/s")
        hint = (
            "" if age_ms is None else f"the newest row is {age_ms:.0f} ms old; {lost} rows lost in this run"
        )
        bad = word in ("silent", "losing rows", "late")
        self.link.tell(f"{word}, {details}" if details else word, shape, hint, alert=bad)
