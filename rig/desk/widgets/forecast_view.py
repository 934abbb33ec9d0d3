"""The dry run: a row a level, and what matters of it in sentences; limits it would cross come first."""

from __future__ import annotations

from PySide6.QtCore import QEvent, Qt
from PySide6.QtGui import QGuiApplication, QKeyEvent, QKeySequence
from PySide6.QtWidgets import (
    QAbstractItemView,
    QHBoxLayout,
    QScrollArea,
    QTableWidget,
    QTableWidgetItem,
    QVBoxLayout,
    QWidget,
)

from rig.desk.model.checked import forecast_sentences
from rig.desk.theme import Theme
from rig.desk.widgets.sentences import Line, Sentences
from rig.files.forecast import Forecast, LevelForecast

COLUMNS = (
    ("\ndirection", "the way the drive has come from"),
    ("drive\nV", "drive voltage"),
    ("start\ns", "when the level begins"),
    ("flap rate\nHz", "steady flap rate at that drive"),
    ("current\nA", "steady current"),
    ("winding\n°C", "temperature of the winding at the end of the level"),
    ("\ntaps", "taps of the level"),
    ("decay ±\n1/s", "half-width of the 95 % interval of the decay rate, at best"),
)
UNKNOWN = "–"
#: All columns are to be seen in half of a small window.
NARROW = (
    "QHeaderView { background: transparent; }"
    " QHeaderView::section, QTableView::item { padding: 0.1em 0.3em; }"
    " QTableCornerButton::section, QAbstractScrollArea::corner { background: transparent; border: none; }"
)


def cells(level: LevelForecast) -> tuple[str, ...]:
    """One level as text, in the order of COLUMNS."""

    def told(value: float | None, digits: int) -> str:
        return UNKNOWN if value is None else f"{value:.{digits}f}"

    return (
        level.direction,
        f"{level.drive_v:.2f}",
        f"{level.start_s:.0f}",
        told(level.flap_hz, 2),
        told(level.current_a, 2),
        told(level.winding_deg_c, 1),
        str(level.taps),
        told(level.decay_half_width_per_s, 3),
    )


def lines(told: Forecast) -> list[Line]:
    """A dry run in sentences; each limit it would cross with a shape and the word."""
    crossings: list[Line] = [(f"Limit: {crossing}.", "warning", "alerting") for crossing in told.crossings]
    rest: list[Line] = [(sentence, "", "") for sentence in forecast_sentences(told)]
    return [*crossings, *rest, *([] if crossings else [("No limit would be crossed.", "", "")])]


class ForecastView(QWidget):
    """Table on the left, sentences on the right."""

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.told: Forecast | None = None
        self.table = _Table()
        self.sentences = Sentences(theme)
        inner = QWidget()
        column = QVBoxLayout(inner)
        column.setContentsMargins(0, 0, 4, 0)
        column.addWidget(self.sentences)
        column.addStretch(1)
        self.area = QScrollArea()
        self.area.setWidgetResizable(True)
        self.area.setWidget(inner)
        self.area.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        self.area.setAccessibleName("dry run in sentences")
        row = QHBoxLayout(self)
        row.setContentsMargins(0, 0, 0, 0)
        row.setSpacing(14)
        row.addWidget(self.table, 9)
        row.addWidget(self.area, 4)

    def words(self) -> list[str]:
        """The sentences shown."""
        return self.sentences.words()

    def show_forecast(self, told: Forecast | None) -> None:
        """Show a dry run; None: nothing."""
        self.told = told
        self.table.show_levels(told.levels if told is not None else ())
        self.table.setVisible(told is not None and bool(told.levels))
        self.sentences.show_lines(lines(told) if told is not None else [])
        self.area.verticalScrollBar().setValue(0)

    def set_theme(self, theme: Theme) -> None:
        self.sentences.set_theme(theme)


class _Table(QTableWidget):
    """Read only; what is selected, or all of it, can be copied as tab-separated text."""

    def __init__(self) -> None:
        super().__init__(0, len(COLUMNS))
        self.setAccessibleName("dry run, a row a level")
        self.setStyleSheet(NARROW)
        self.setEditTriggers(QAbstractItemView.EditTrigger.NoEditTriggers)
        self.setSelectionBehavior(QAbstractItemView.SelectionBehavior.SelectRows)
        self.setTabKeyNavigation(False)
        self.setShowGrid(False)
        self.verticalHeader().hide()
        self.verticalHeader().setMinimumSectionSize(1)
        self.setWordWrap(False)
        self.setVerticalScrollMode(QAbstractItemView.ScrollMode.ScrollPerPixel)
        self.setHorizontalScrollMode(QAbstractItemView.ScrollMode.ScrollPerPixel)
        self.horizontalHeader().setHighlightSections(False)
        for column, (name, hint) in enumerate(COLUMNS):
            head = QTableWidgetItem(name)
            head.setToolTip(hint)
            head.setTextAlignment(_side(column) | Qt.AlignmentFlag.AlignBottom)
            self.setHorizontalHeaderItem(column, head)

    def show_levels(self, levels: tuple[LevelForecast, ...]) -> None:
        self.setRowCount(len(levels))
        for row, level in enumerate(levels):
            for column, text in enumerate(cells(level)):
                item = QTableWidgetItem(text)
                item.setTextAlignment(_side(column) | Qt.AlignmentFlag.AlignVCenter)
                self.setItem(row, column, item)
        self._fit()

    def _fit(self) -> None:
        self.resizeColumnsToContents()
        self.verticalHeader().setDefaultSectionSize(round(1.5 * self.fontMetrics().height()))
        scroll = self.verticalScrollBar().sizeHint().width()
        self.setMaximumWidth(self.horizontalHeader().length() + scroll + 2 * self.frameWidth() + 4)

    def keyPressEvent(self, event: QKeyEvent) -> None:
        if event.matches(QKeySequence.StandardKey.Copy):
            QGuiApplication.clipboard().setText(self.as_text())
            event.accept()
            return
        super().keyPressEvent(event)

    def as_text(self) -> str:
        chosen = sorted({index.row() for index in self.selectedIndexes()})
        rows = chosen if len(chosen) > 1 else range(self.rowCount())
        told = ["\t".join(" ".join(name.split()) for name, _ in COLUMNS)]
        for row in rows:
            items = (self.item(row, column) for column in range(self.columnCount()))
            told.append("\t".join(item.text() if item is not None else "" for item in items))
        return "\n".join(told) + "\n"

    def changeEvent(self, event: QEvent) -> None:
        super().changeEvent(event)
        if event.type() in (QEvent.Type.FontChange, QEvent.Type.StyleChange):
            self._fit()


def _side(column: int) -> Qt.AlignmentFlag:
    return Qt.AlignmentFlag.AlignLeft if column == 0 else Qt.AlignmentFlag.AlignRight
