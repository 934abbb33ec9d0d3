"""An editor for rig files and protocols: line numbers, lines with mistakes marked, find, zoom.

Ctrl+F  find        Enter, Shift+Enter  next, previous        Esc  close find
Ctrl++  Ctrl+-  Ctrl+0  larger, smaller, as it was             Tab  leaves the editor
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from PySide6.QtCore import QEvent, QMimeData, QRect, QRectF, QSize, Qt, Signal
from PySide6.QtGui import (
    QColor,
    QFont,
    QFontDatabase,
    QFontMetricsF,
    QHelpEvent,
    QKeyEvent,
    QKeySequence,
    QPainter,
    QPaintEvent,
    QResizeEvent,
    QShortcut,
    QTextCursor,
    QTextDocument,
    QTextFormat,
    QWheelEvent,
)
from PySide6.QtWidgets import (
    QApplication,
    QHBoxLayout,
    QLabel,
    QLineEdit,
    QPlainTextEdit,
    QPushButton,
    QTextEdit,
    QToolTip,
    QVBoxLayout,
    QWidget,
)

from rig.desk.theme import Theme
from rig.desk.widgets.shapes import blended, draw_shape
from rig.desk.widgets.style import set_kind
from rig.desk.widgets.toml_colours import TomlColours
from rig.files.lines import LARGEST_BYTES

#: Lines beyond this take the layout seconds at every key.
LONGEST_LINE = 5000
#: Larger texts are not coloured: it would hold up typing.
LARGEST_COLOURED = 60_000
SMALLEST_ZOOM, LARGEST_ZOOM, ZOOM_STEP = 0.6, 3.0, 1.1
TINT = 0.08  # of the alert colour behind a line with a mistake


def unfit(text: str) -> str:
    """Why a text cannot be edited here; "" if it can."""
    if len(text) > LARGEST_BYTES:
        return "A file to be edited here has at most 1 MiB."
    if any(len(line) > LONGEST_LINE for line in text.split("\n")):
        return f"A file to be edited here has lines of at most {LONGEST_LINE} letters."
    return ""


class NumberedText(QPlainTextEdit):
    """The text with its margin. `marks` holds the sentences of the lines with mistakes, lines counted from 1."""

    refused = Signal(str)
    zoomed = Signal(float)

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.theme = theme
        self.marks: dict[int, list[str]] = {}
        self.setLineWrapMode(QPlainTextEdit.LineWrapMode.NoWrap)
        self.setTabChangesFocus(True)
        self.setStyleSheet(
            "QPlainTextEdit { padding: 0; } QAbstractScrollArea::corner { background: transparent; }"
        )
        self.margin = _Margin(self)
        self.blockCountChanged.connect(lambda _: self.fit_margin())
        self.updateRequest.connect(self._scrolled)
        self.cursorPositionChanged.connect(self.margin.update)

    # -- what goes in ----------------------------------------------------------------------------------

    def insertFromMimeData(self, source: QMimeData) -> None:
        why = unfit(source.text())
        if not why and self.document().characterCount() + len(source.text()) > LARGEST_BYTES:
            why = "A file to be edited here has at most 1 MiB."
        if why:
            self.refused.emit(why)
            return
        self.textCursor().insertText(source.text())
        self.ensureCursorVisible()

    def wheelEvent(self, event: QWheelEvent) -> None:
        if event.modifiers() & Qt.KeyboardModifier.ControlModifier:
            self.zoomed.emit(ZOOM_STEP if event.angleDelta().y() > 0 else 1.0 / ZOOM_STEP)
            event.accept()
        else:
            super().wheelEvent(event)

    # -- the margin ------------------------------------------------------------------------------------

    def margin_width(self) -> int:
        digits = max(2, len(str(self.blockCount())))
        metrics = QFontMetricsF(self.font())
        return round(metrics.horizontalAdvance("0") * (digits + 0.8) + self.mark_side() + 6.0)

    def mark_side(self) -> float:
        return 0.8 * QFontMetricsF(self.font()).ascent()

    def fit_margin(self) -> None:
        self.setViewportMargins(self.margin_width(), 0, 0, 0)
        area = self.viewport().geometry()
        self.margin.setGeometry(
            QRect(area.left() - self.margin_width(), area.top(), self.margin_width(), area.height())
        )
        self.margin.update()

    def resizeEvent(self, event: QResizeEvent) -> None:
        super().resizeEvent(event)
        self.fit_margin()

    def _scrolled(self, rect: QRect, dy: int) -> None:
        if dy:
            self.margin.scroll(0, dy)
        else:
            self.margin.update(0, rect.y(), self.margin.width(), rect.height())

    def line_at(self, y: int) -> int:
        """Line, from 1, at a height of the viewport; 0 below the last."""
        block = self.firstVisibleBlock()
        top = self.blockBoundingGeometry(block).translated(self.contentOffset()).top()
        while block.isValid() and top <= y:
            bottom = top + self.blockBoundingRect(block).height()
            if y < bottom:
                return block.blockNumber() + 1
            top = bottom
            block = block.next()
        return 0

    def tell_line(self, line: int, event: QHelpEvent) -> None:
        """The sentences of a line as a tool tip."""
        QToolTip.showText(event.globalPos(), "\n".join(self.marks.get(line, [])), self)

    def viewportEvent(self, event: QEvent) -> bool:
        if event.type() == QEvent.Type.ToolTip and isinstance(event, QHelpEvent):
            self.tell_line(self.line_at(event.pos().y()), event)
            return True
        return super().viewportEvent(event)

    def paint_margin(self, painter: QPainter, area: QRect) -> None:
        theme = self.theme
        painter.fillRect(area, blended(theme.panel, theme.ground, 0.6))
        painter.setFont(self.font())
        here = self.textCursor().blockNumber()
        block = self.firstVisibleBlock()
        top = self.blockBoundingGeometry(block).translated(self.contentOffset()).top()
        side = self.mark_side()
        while block.isValid() and top <= area.bottom():
            height = self.blockBoundingRect(block).height()
            number = block.blockNumber()
            marked = number + 1 in self.marks
            painter.setPen(QColor(theme.ink if number == here or marked else theme.faint))
            room = QRectF(0.0, top, self.margin.width() - 6.0, height)
            painter.drawText(
                room, int(Qt.AlignmentFlag.AlignRight | Qt.AlignmentFlag.AlignVCenter), f"{number + 1}"
            )
            if marked:
                place = QRectF(2.0, top + 0.5 * (height - side), side, side)
                draw_shape(painter, "cross", place, QColor(theme.alert))
            top += height
            block = block.next()


class _Margin(QWidget):
    """Line numbers and marks, drawn by the text they belong to."""

    def __init__(self, text: NumberedText) -> None:
        super().__init__(text)
        self._text = text
        self.setAccessibleName("line numbers")

    def sizeHint(self) -> QSize:
        return QSize(self._text.margin_width(), 0)

    def paintEvent(self, event: QPaintEvent) -> None:
        painter = QPainter(self)
        self._text.paint_margin(painter, event.rect())
        painter.end()

    def event(self, event: QEvent) -> bool:
        if event.type() == QEvent.Type.ToolTip and isinstance(event, QHelpEvent):
            self._text.tell_line(self._text.line_at(event.pos().y()), event)
            return True
        return super().event(event)


class TextEditor(QWidget):
    """The text, and a line for finding below it. `changed` is emitted when somebody has edited."""

    changed = Signal()
    refused = Signal(str)

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._zoom = 1.0
        self._loading = False
        self._seen = ""
        self.text = NumberedText(theme)
        self.colours = TomlColours(theme, self.text.document())
        self.find_field = QLineEdit()
        self.find_told = QLabel()
        self.find_bar = self._make_find_bar()
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 0, 0, 0)
        column.setSpacing(4)
        column.addWidget(self.text, 1)
        column.addWidget(self.find_bar)
        self.setFocusProxy(self.text)
        self.text.textChanged.connect(self._edited)
        self.text.refused.connect(self.refused)
        self.text.zoomed.connect(lambda factor: self.zoom(self._zoom * factor))
        for keys, act in (
            (QKeySequence(QKeySequence.StandardKey.Find), self.open_find),
            (QKeySequence(QKeySequence.StandardKey.ZoomIn), lambda: self.zoom(self._zoom * ZOOM_STEP)),
            (QKeySequence("Ctrl+="), lambda: self.zoom(self._zoom * ZOOM_STEP)),
            (QKeySequence(QKeySequence.StandardKey.ZoomOut), lambda: self.zoom(self._zoom / ZOOM_STEP)),
            (QKeySequence("Ctrl+0"), lambda: self.zoom(1.0)),
        ):
            shortcut = QShortcut(keys, self)
            shortcut.setContext(Qt.ShortcutContext.WidgetWithChildrenShortcut)
            shortcut.activated.connect(act)
        self.set_theme(theme)

    def _make_find_bar(self) -> QWidget:
        bar = QWidget()
        row = QHBoxLayout(bar)
        row.setContentsMargins(0, 0, 0, 0)
        row.setSpacing(6)
        self.find_field.setPlaceholderText("find")
        self.find_field.setAccessibleName("find in the text")
        self.find_field.returnPressed.connect(self.find_next)
        self.find_field.installEventFilter(self)
        self.find_field.textEdited.connect(lambda _: self.find_told.clear())
        close = QPushButton("Close")
        close.setAccessibleName("close find")
        close.clicked.connect(self.close_find)
        set_kind(close, "quiet")
        set_kind(self.find_told, "faint")
        for part, stretch in ((self.find_field, 1), (self.find_told, 0), (close, 0)):
            row.addWidget(part, stretch)
        bar.hide()
        return bar

    # -- text ------------------------------------------------------------------------------------------

    def set_text(self, text: str) -> None:
        """Show another text; what was undone cannot be redone. Not told by `changed`."""
        self._loading = True
        self.colours.switch(len(text) <= LARGEST_COLOURED)
        self.text.marks = {}
        self.text.setPlainText(text)
        self._loading = False
        self._seen = self.plain_text()
        self._tint()
        self.text.fit_margin()

    def plain_text(self) -> str:
        """The text, lines ending in a line feed; unlike `toPlainText` it keeps blanks that do not break."""
        return self.text.document().toRawText().replace("\u2029", "\n")

    def _edited(self) -> None:
        if self._loading:
            return
        if self.text.document().characterCount() > LARGEST_COLOURED:
            self._loading = True  # taking the colours away counts as a change too
            self.colours.switch(False)
            self._loading = False
        else:  # colouring a text counts as a change of it, which is none to be told
            before, self._seen = self._seen, self.plain_text()
            if self._seen == before:
                return
        self.changed.emit()

    # -- mistakes --------------------------------------------------------------------------------------

    def set_marks(self, marks: Mapping[int, Sequence[str]]) -> None:
        """Mark lines, from 1, with their sentences; line 0, the whole file, is told by the list of problems."""
        made = {line: list(sentences) for line, sentences in marks.items() if line > 0}
        if made != self.text.marks:
            self.text.marks = made
            self._tint()
            self.text.margin.update()

    def _tint(self) -> None:
        """A ground behind the marked lines; the mark in the margin is what tells them apart."""
        ground = blended(self.text.theme.panel, self.text.theme.alert, TINT)
        selections = []
        for line in sorted(self.text.marks)[:500]:
            block = self.text.document().findBlockByNumber(line - 1)
            if block.isValid():
                selection = QTextEdit.ExtraSelection()
                selection.format.setBackground(ground)
                selection.format.setProperty(QTextFormat.Property.FullWidthSelection, True)
                selection.cursor = QTextCursor(block)
                selections.append(selection)
        self.text.setExtraSelections(selections)

    def go_to(self, line: int) -> None:
        """Put the cursor on a line, from 1, in sight, and give the text the focus."""
        block = self.text.document().findBlockByNumber(max(0, line - 1))
        if block.isValid():
            self.text.setTextCursor(QTextCursor(block))
            self.text.centerCursor()
        self.text.setFocus(Qt.FocusReason.OtherFocusReason)

    # -- find ------------------------------------------------------------------------------------------

    def open_find(self) -> None:
        chosen = self.text.textCursor().selectedText()
        if chosen and "\u2029" not in chosen:
            self.find_field.setText(chosen)
        self.find_told.clear()
        self.find_bar.show()
        self.find_field.setFocus(Qt.FocusReason.ShortcutFocusReason)
        self.find_field.selectAll()

    def close_find(self) -> None:
        self.find_bar.hide()
        self.text.setFocus(Qt.FocusReason.OtherFocusReason)

    def find_next(self, back: bool = False) -> bool:
        """Select the next place, round the end of the text; False if there is none."""
        wanted = self.find_field.text()
        way = QTextDocument.FindFlag.FindBackward if back else QTextDocument.FindFlag(0)
        if not wanted:
            return False
        found = self.text.find(wanted, way)
        if not found:
            before = self.text.textCursor()
            edge = QTextCursor.MoveOperation.End if back else QTextCursor.MoveOperation.Start
            self.text.moveCursor(edge)
            found = self.text.find(wanted, way)
            if not found:
                self.text.setTextCursor(before)
        self.find_told.setText("" if found else "not found")
        return found

    def eventFilter(self, watched: object, event: QEvent) -> bool:
        if event.type() == QEvent.Type.KeyPress and isinstance(event, QKeyEvent):
            if event.key() == Qt.Key.Key_Escape:
                self.close_find()
                return True
            enter = event.key() in (Qt.Key.Key_Return, Qt.Key.Key_Enter)
            if enter and event.modifiers() & Qt.KeyboardModifier.ShiftModifier:
                self.find_next(back=True)
                return True
        return super().eventFilter(watched, event)  # type: ignore[arg-type]

    # -- look ------------------------------------------------------------------------------------------

    def zoom(self, factor: float) -> None:
        """Letters `factor` times as large as those of the window."""
        self._zoom = min(LARGEST_ZOOM, max(SMALLEST_ZOOM, factor))
        font = QFontDatabase.systemFont(QFontDatabase.SystemFont.FixedFont)
        usual = QApplication.font().pointSizeF()
        font.setPointSizeF((usual if usual > 0.0 else 10.0) * self._zoom)
        font.setStyleHint(QFont.StyleHint.Monospace)
        self.text.setFont(font)
        self.text.fit_margin()

    def set_theme(self, theme: Theme) -> None:
        self.text.theme = theme
        self.colours.set_theme(theme)
        self.zoom(self._zoom)
        self._tint()
        self.text.margin.update()
