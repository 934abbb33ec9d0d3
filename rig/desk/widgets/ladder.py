"""The course of the run as a ladder. Taps can be pointed at, walked through with the arrow keys, and chosen."""

from __future__ import annotations

from collections.abc import Sequence

from PySide6.QtCore import QEvent, QPoint, QPointF, QRectF, QSize, Qt, Signal
from PySide6.QtGui import (
    QColor,
    QFocusEvent,
    QFont,
    QFontMetricsF,
    QHelpEvent,
    QKeyEvent,
    QMouseEvent,
    QPainter,
    QPaintEvent,
    QPixmap,
    QResizeEvent,
)
from PySide6.QtWidgets import QSizePolicy, QToolTip, QWidget

from rig.desk.model.ladder_model import Ladder, PlannedLevel, ladder, taps_in_order
from rig.desk.model.run_model import RunModel
from rig.desk.model.wording import OUTCOME_SHAPES, OUTCOME_WORDS
from rig.desk.theme import Theme
from rig.desk.widgets.ladder_drawing import SMALL, Drawing
from rig.desk.widgets.ladder_layout import Block, Box, Frame, Sizes, TapBox, lay_out
from rig.desk.widgets.shapes import focus_ring, sized

TOWARDS = {Qt.Key.Key_Left: -1, Qt.Key.Key_Right: 1}
CHOOSE = (Qt.Key.Key_Return, Qt.Key.Key_Enter, Qt.Key.Key_Space)


class LadderView(QWidget):
    """Rising levels on the left rail, falling ones on the right, by flap rate. Emits the number of a chosen tap."""

    tap_chosen = Signal(int)

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = theme
        self._planned: tuple[PlannedLevel, ...] = ()
        self._model = RunModel()
        self._view = ladder(self._model)
        self._blocks: list[Block] | None = None
        self._layer: QPixmap | None = None
        self._layer_key: tuple[object, ...] = ()
        self._focus_tap: int | None = None
        self._chosen: int | None = None
        self.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        self.setMouseTracking(True)
        self.setSizePolicy(QSizePolicy.Policy.Preferred, QSizePolicy.Policy.Expanding)
        self.setAccessibleName("course of the run")
        self._describe()

    # -- content ---------------------------------------------------------------------------------------

    @property
    def view(self) -> Ladder:
        return self._view

    @property
    def focus_tap(self) -> int | None:
        """The tap the arrow keys are at."""
        return self._focus_tap

    def set_theme(self, theme: Theme) -> None:
        self._theme = theme
        self.update()

    def set_planned(self, levels: Sequence[PlannedLevel]) -> None:
        """Levels as planned, in their order (`Forecast.levels`)."""
        self._planned = tuple(levels)
        self.refresh(self._model)

    def set_chosen(self, tap: int | None) -> None:
        """Mark the tap that other parts show."""
        if tap != self._chosen:
            self._chosen = tap
            self.update()

    def refresh(self, model: RunModel) -> None:
        self._model = model
        view = ladder(model, self._planned)
        if view == self._view:
            return
        same_places = (view.places, view.low, view.high) == (
            self._view.places,
            self._view.low,
            self._view.high,
        )
        self._view = view
        if not same_places:
            self._blocks = None
            if self._focus_tap not in taps_in_order(view):
                self._focus_tap = None
            self._describe()
        self.update()

    def _describe(self) -> None:
        told = self._tap_details(self._focus_tap) if self._focus_tap is not None else self._view.next_words
        self.setAccessibleDescription(told)

    def _tap_details(self, number: int) -> str:
        for place in self._view.places:
            for tap in place.taps:
                if tap.tap == number:
                    return f"{tap.details}\n{place.drive} {place.direction}, {place.word}"
        return ""

    # -- geometry --------------------------------------------------------------------------------------

    def sizeHint(self) -> QSize:
        em = self.fontMetrics().height()
        return QSize(round(16.5 * em), 34 * em)

    def minimumSizeHint(self) -> QSize:
        em = self.fontMetrics().height()
        return QSize(15 * em, 16 * em)

    def _small(self, bold: bool = False) -> QFont:
        return sized(self.font(), SMALL, bold)

    def _sizes(self) -> Sizes:
        metrics = QFontMetricsF(self._small())
        return Sizes(QFontMetricsF(self.font()).height(), metrics.height(), metrics.horizontalAdvance)

    def _frame(self) -> Frame:
        """Room for the rungs, between heading and foot."""
        sizes = self._sizes()
        foot = 1.6 * sizes.em + (self._legend_lines() * (sizes.small + 2.0))
        half_axis = 0.5 * QFontMetricsF(self._small()).horizontalAdvance("00.0") + 0.55 * sizes.em
        return Frame(
            6.0, self.width() - 6.0, 3.0 * sizes.em, self.height() - foot - 1.4 * sizes.em, half_axis
        )

    def _legend_lines(self) -> int:
        return 3 if self.height() >= 26 * self.fontMetrics().height() else 0

    def blocks(self) -> list[Block]:
        """All rungs as laid out in the present size."""
        if self._blocks is None:
            self._blocks = lay_out(self._view, self._frame(), self._sizes(), self._focus_tap)
        return self._blocks

    def resizeEvent(self, event: QResizeEvent) -> None:
        self._blocks = None

    def changeEvent(self, event: QEvent) -> None:
        super().changeEvent(event)
        if event.type() in (QEvent.Type.FontChange, QEvent.Type.ApplicationFontChange):
            self._blocks = None

    def tap_box(self, number: int) -> QRectF | None:
        """Where a tap is drawn."""
        for block in self.blocks():
            for drawn in block.taps:
                if drawn.tap.tap == number:
                    return QRectF(*drawn.box)
        return None

    def _tap_at(self, at: QPointF) -> TapBox | None:
        reach = 0.15 * self.fontMetrics().height()
        hits = [
            drawn
            for block in self.blocks()
            for drawn in block.taps
            if QRectF(*drawn.box).adjusted(-reach, -reach, reach, reach).contains(at)
        ]
        return min(hits, key=lambda drawn: (QRectF(*drawn.box).center() - at).manhattanLength(), default=None)

    def hint_at(self, at: QPointF) -> str:
        """What a tool tip tells at a point: of a tap, else of a rung."""
        drawn = self._tap_at(at)
        if drawn is not None:
            return self._tap_details(drawn.tap.tap)
        em = float(self.fontMetrics().height())
        for block in self.blocks():
            marker = QRectF(block.rail_x - 0.6 * em, block.rail_y - 0.5 * em, 1.2 * em, em)
            if QRectF(*block.box).contains(at) or marker.contains(at):
                more = f"\n{block.left_out} more taps: arrow keys" if block.left_out else ""
                return block.place.details + more
        return ""

    # -- pointing and keys -----------------------------------------------------------------------------

    def event(self, event: QEvent) -> bool:
        if isinstance(event, QHelpEvent) and event.type() == QEvent.Type.ToolTip:
            told = self.hint_at(QPointF(event.pos()))
            if told:
                QToolTip.showText(event.globalPos(), told, self)
            else:
                QToolTip.hideText()
            return True
        return super().event(event)

    def mouseMoveEvent(self, event: QMouseEvent) -> None:
        over = self._tap_at(event.position()) is not None
        self.setCursor(Qt.CursorShape.PointingHandCursor if over else Qt.CursorShape.ArrowCursor)

    def mousePressEvent(self, event: QMouseEvent) -> None:
        drawn = self._tap_at(event.position())
        if drawn is not None and event.button() == Qt.MouseButton.LeftButton:
            self._focus_on(drawn.tap.tap, tell=False)
            self._choose(drawn.tap.tap)
        else:
            super().mousePressEvent(event)

    def _choose(self, number: int) -> None:
        self.set_chosen(number)
        self.tap_chosen.emit(number)

    def keyPressEvent(self, event: QKeyEvent) -> None:
        order = taps_in_order(self._view)
        key = Qt.Key(event.key())
        if not order:
            super().keyPressEvent(event)
        elif key in TOWARDS:
            at = order.index(self._focus_tap) if self._focus_tap in order else None
            wanted = len(order) - 1 if at is None else min(max(at + TOWARDS[key], 0), len(order) - 1)
            self._focus_on(order[wanted])
        elif key in (Qt.Key.Key_Home, Qt.Key.Key_End):
            self._focus_on(order[0 if key == Qt.Key.Key_Home else -1])
        elif key in (Qt.Key.Key_Up, Qt.Key.Key_Down):
            self._climb(up=key == Qt.Key.Key_Up)
        elif key in CHOOSE and self._focus_tap is not None:
            self._choose(self._focus_tap)
        else:
            super().keyPressEvent(event)

    def _climb(self, up: bool) -> None:
        """To the first tap of the next rung above or below on the same rail."""
        rungs = sorted((place for place in self._view.places if place.taps), key=lambda one: one.height)
        here = next((one for one in rungs if any(tap.tap == self._focus_tap for tap in one.taps)), None)
        if here is None:
            self._focus_on(taps_in_order(self._view)[-1])
            return
        rail = [one for one in rungs if one.direction == here.direction]
        at = rail.index(here) + (1 if up else -1)
        if 0 <= at < len(rail):
            self._focus_on(rail[at].taps[0].tap)

    def _focus_on(self, number: int, *, tell: bool = True) -> None:
        self._focus_tap = number
        self._blocks = None  # another part of a long row of taps may come to be seen
        self._describe()
        self.update()
        box = self.tap_box(number)
        if tell and box is not None and self.isVisible():
            corner = self.mapToGlobal(QPoint(round(box.right()), round(box.bottom())))
            QToolTip.showText(corner, self._tap_details(number), self)

    def focusInEvent(self, event: QFocusEvent) -> None:
        order = taps_in_order(self._view)
        if self._focus_tap is None and order and event.reason() != Qt.FocusReason.MouseFocusReason:
            self._focus_on(order[-1], tell=False)
        super().focusInEvent(event)

    # -- drawing ---------------------------------------------------------------------------------------

    def legend(self) -> list[tuple[str, str, Box]]:
        """Shape, word and place of each entry of the legend; none where there is no room."""
        lines = self._legend_lines()
        if not lines:
            return []
        sizes = self._sizes()
        top = self.height() - lines * (sizes.small + 2.0) - 0.3 * sizes.em
        half = 0.5 * (self.width() - 8.0)
        return [
            (
                OUTCOME_SHAPES[name],
                OUTCOME_WORDS[name],
                (8.0 + (at % 2) * half, top + (at // 2) * (sizes.small + 2.0), half - 6.0, sizes.small),
            )
            for at, name in enumerate(("accepted", "observed", "lost", "left_out", "double", "excluded"))
        ]

    def next_box(self) -> Box:
        """Where it says what is next."""
        sizes = self._sizes()
        return (8.0, self._frame().bottom + 1.4 * sizes.em, self.width() - 16.0, 1.2 * sizes.em)

    def paintEvent(self, event: QPaintEvent) -> None:
        focus = self._focus_tap if self.hasFocus() else None
        drawing = Drawing(
            self._theme, self.font(), self._view, self._frame(), self._sizes(), focus, self._chosen
        )
        painter = QPainter(self)
        painter.drawPixmap(0, 0, self._still_layer(drawing))
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        drawing.moving(painter)
        if self.hasFocus():
            focus_ring(painter, QRectF(self.rect()).adjusted(1.5, 1.5, -1.5, -1.5), QColor(self._theme.ink))
        painter.end()

    def _still_layer(self, drawing: Drawing) -> QPixmap:
        """All that does not move with the pointer, drawn once."""
        view, ratio = self._view, self.devicePixelRatioF()
        key = (
            *(view.places, view.low, view.high, view.unit, view.next_words),
            *(drawing.theme, drawing.focus, drawing.chosen, drawing.font.key(), self.size(), ratio),
        )
        if self._layer is None or key != self._layer_key:
            layer = QPixmap(self.size() * ratio)
            layer.setDevicePixelRatio(ratio)
            layer.fill(Qt.GlobalColor.transparent)
            painter = QPainter(layer)
            painter.setRenderHint(QPainter.RenderHint.Antialiasing)
            drawing.still(painter, self.blocks(), self.legend(), self.next_box())
            painter.end()
            self._layer, self._layer_key = layer, key
        return self._layer


__all__ = ["LadderView"]
