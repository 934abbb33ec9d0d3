"""Every plot can be kept: as a picture, PNG or SVG, and as values with units that a spreadsheet reads.

    Ctrl+S    save the picture        Ctrl+C    copy the values        with the focus on the plot

Nothing here stops the window: the file dialog leaves everything else in reach, the halt control above all.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from PySide6.QtCore import QBuffer, QByteArray, QEvent, QIODevice, QPoint, QSaveFile, Qt, Signal
from PySide6.QtGui import (
    QAction,
    QColor,
    QContextMenuEvent,
    QFocusEvent,
    QGuiApplication,
    QImage,
    QKeySequence,
    QPainter,
    QPaintEvent,
    QResizeEvent,
)
from PySide6.QtSvg import QSvgGenerator
from PySide6.QtWidgets import QFileDialog, QHBoxLayout, QMenu, QSpacerItem, QVBoxLayout, QWidget

from rig.desk.theme import Theme
from rig.desk.widgets.shapes import focus_ring
from rig.desk.widgets.style import ring

#: Pixels of a saved PNG for each on the screen: it is to be printed.
PNG_SCALE = 3.0
FORMATS = {".png": "Picture (*.png)", ".svg": "Drawing (*.svg)"}
DIGITS = 10
EDGE = 4  # pixels around a plot, for the ring of the focus


@dataclass(frozen=True)
class Column:
    """Values with what they are and their unit, e.g. "time", "s"; columns of a table may differ in length."""

    name: str
    unit: str
    values: Sequence[float] | Sequence[str] | np.ndarray

    @property
    def header(self) -> str:
        return f"{self.name} ({self.unit})" if self.unit else self.name


class NotWritten(Exception):
    """A file that could not be written, in one sentence."""


def as_text(columns: Iterable[Column]) -> str:
    """Tab-separated: a line of headers, then the values; what is not known is left empty."""
    held = list(columns)
    lines = ["\t".join(column.header for column in held)]
    for row in range(max((len(column.values) for column in held), default=0)):
        cells = (column.values[row] if row < len(column.values) else "" for column in held)
        lines.append("\t".join(_cell(cell) for cell in cells))
    return "\n".join(lines) + "\n"


def _cell(value: object) -> str:
    if value is None:
        return ""
    if isinstance(value, str):
        return " ".join(value.split())  # a tab or a new line would begin another cell
    number = float(value)  # type: ignore[arg-type]
    return f"{number:.{DIGITS}g}" if np.isfinite(number) else ""


def write_picture(widget: QWidget, path: Path, ground: str) -> None:
    """The widget as it stands on the screen, PNG or SVG after the name's ending; on a ground of one colour.

    Raises NotWritten. A file that was there stays as it was unless the new one is complete.
    """
    ending = path.suffix.lower()
    if ending not in FORMATS:
        raise NotWritten(f"{path.name} is neither .png nor .svg, so it was not saved")
    data = _svg(widget, path.stem, ground) if ending == ".svg" else _png(widget, ground)
    file = QSaveFile(str(path))
    if (
        not file.open(QIODevice.OpenModeFlag.WriteOnly)
        or file.write(data) != data.size()
        or not file.commit()
    ):
        raise NotWritten(f"{path} cannot be written: {file.errorString()}")


def _png(widget: QWidget, ground: str) -> QByteArray:
    image = QImage(widget.size() * PNG_SCALE, QImage.Format.Format_RGB32)
    image.setDevicePixelRatio(PNG_SCALE)
    image.fill(QColor(ground))
    painter = QPainter(image)
    widget.render(painter, QPoint(), renderFlags=QWidget.RenderFlag.DrawChildren)
    painter.end()
    data = QByteArray()
    buffer = QBuffer(data)
    buffer.open(QIODevice.OpenModeFlag.WriteOnly)
    image.save(buffer, "PNG")  # type: ignore[call-overload]
    buffer.close()
    return data


def _svg(widget: QWidget, title: str, ground: str) -> QByteArray:
    data = QByteArray()
    buffer = QBuffer(data)
    buffer.open(QIODevice.OpenModeFlag.WriteOnly)
    drawing = QSvgGenerator(QSvgGenerator.SvgVersion.Svg11)
    drawing.setOutputDevice(buffer)
    drawing.setSize(widget.size())
    drawing.setViewBox(widget.rect())
    drawing.setResolution(widget.logicalDpiX())
    drawing.setTitle(title)
    painter = QPainter(drawing)
    painter.fillRect(widget.rect(), QColor(ground))
    widget.render(painter, QPoint(), renderFlags=QWidget.RenderFlag.DrawChildren)
    painter.end()
    buffer.close()
    return data


def compact_buttons(theme: Theme) -> str:
    """Style of the small buttons at the head of a plot: what is chosen has a bold word and a frame."""
    return (
        f"QToolButton {{ color: {theme.ink}; background: transparent; border: 2px solid transparent;"
        " border-radius: 4px; padding: 0 0.35em; min-height: 1.35em; }"
        f" QToolButton:hover {{ background: {theme.raised}; }}"
        f" QToolButton:checked {{ background: {theme.raised}; border-color: {theme.accent}; font-weight: 600; }}"
        f" QToolButton:focus {{ border-color: {ring(theme)}; }}"
        f" QToolButton:disabled {{ color: {theme.rule}; }}"
    )


class SavablePlot(QWidget):
    """A part of the window that shows values and can be kept. A subclass gives `values`.

    `body` is the picture: a line of `header`, then what is put into `column`. `controls`, at the right end of the
    header, belong to the screen and not to the picture. `failed` carries one sentence, `saved` the path.
    """

    failed = Signal(str)
    saved = Signal(str)
    _ready = False  # a subclass has made its parts

    def __init__(self, theme: Theme, name: str, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.theme = theme
        self.file_name = name
        self.folder = Path.home()
        self.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        self.body = QWidget(self)
        outer = QVBoxLayout(self)
        outer.setContentsMargins(EDGE, EDGE, EDGE, EDGE)  # the focus ring is drawn there
        outer.addWidget(self.body)
        self.column = QVBoxLayout(self.body)
        self.column.setContentsMargins(0, 0, 0, 0)
        self.column.setSpacing(0)
        self.header = QHBoxLayout()
        self.header_room = QSpacerItem(0, 0)
        self.header.addItem(self.header_room)
        self.column.addLayout(self.header)
        self.controls = QWidget(self)
        self.control_row = QHBoxLayout(self.controls)
        self.control_row.setContentsMargins(0, 0, 0, 0)
        self.control_row.setSpacing(2)
        self.controls.setStyleSheet(compact_buttons(theme))
        self.dialog: QFileDialog | None = None
        self.save_action = self._action("Save the picture …", QKeySequence.StandardKey.Save, self.ask_where)
        self.copy_action = self._action("Copy the values", QKeySequence.StandardKey.Copy, self.copy_values)

    def _action(self, words: str, keys: QKeySequence.StandardKey, act: Callable[[], None]) -> QAction:
        action = QAction(words, self)
        action.setShortcut(keys)
        action.setShortcutContext(Qt.ShortcutContext.WidgetWithChildrenShortcut)
        action.triggered.connect(act)
        self.addAction(action)
        return action

    # -- what a plot gives -----------------------------------------------------------------------------

    def values(self) -> list[Column]:
        """What is drawn just now, as columns; a plot that shows nothing has none."""
        return []

    def more_actions(self, menu: QMenu, place: QPoint) -> None:
        """Add what else can be done where the menu was asked for (place in `body`)."""

    # -- keeping ---------------------------------------------------------------------------------------

    def copy_values(self) -> None:
        """The values to the clipboard, as tab-separated text."""
        self.copy_columns(self.values())

    def copy_columns(self, columns: Iterable[Column]) -> None:
        QGuiApplication.clipboard().setText(as_text(columns))

    def ask_where(self) -> None:
        """Ask for a file, without keeping anything else from being used meanwhile."""
        if self.dialog is not None:
            self.dialog.raise_()
            return
        dialog = QFileDialog(self, "Save the picture", str(self.folder / f"{self.file_name}.png"))
        dialog.setOption(QFileDialog.Option.DontUseNativeDialog)
        dialog.setAcceptMode(QFileDialog.AcceptMode.AcceptSave)
        dialog.setNameFilters(list(FORMATS.values()))
        dialog.setDefaultSuffix("png")
        dialog.filterSelected.connect(
            lambda chosen: dialog.setDefaultSuffix("svg" if ".svg" in chosen else "png")
        )
        dialog.setModal(False)
        dialog.setAttribute(Qt.WidgetAttribute.WA_DeleteOnClose)
        dialog.fileSelected.connect(lambda name: self.save_to(Path(name)))
        dialog.finished.connect(self._dialog_gone)
        self.dialog = dialog
        dialog.show()

    def _dialog_gone(self) -> None:
        self.dialog = None

    def save_to(self, path: Path) -> bool:
        """Write the picture; False, with a sentence by `failed`, if it cannot be."""
        try:
            write_picture(self.body, path, self.theme.panel)
        except NotWritten as reason:
            self.failed.emit(str(reason))
            return False
        self.folder = path.parent
        self.saved.emit(str(path))
        return True

    # -- the window's side -----------------------------------------------------------------------------

    def menu(self, place: QPoint) -> QMenu:
        """The menu for a place in `body`."""
        made = QMenu(self)
        made.setAttribute(Qt.WidgetAttribute.WA_DeleteOnClose)
        made.addActions([self.save_action, self.copy_action])
        self.more_actions(made, place)
        return made

    def place_controls(self) -> None:
        """Put the controls where the header ends, and keep the header clear of them."""
        wanted = self.controls.sizeHint()
        self.controls.setGeometry(self.width() - wanted.width() - EDGE, EDGE, wanted.width(), wanted.height())
        self.controls.raise_()
        self.header.setContentsMargins(0, 0, wanted.width(), 0)
        self.header_room.changeSize(0, wanted.height())

    def resizeEvent(self, event: QResizeEvent) -> None:
        super().resizeEvent(event)
        self.place_controls()

    def changeEvent(self, event: QEvent) -> None:
        super().changeEvent(event)
        if event.type() == QEvent.Type.FontChange and self._ready:
            self.look_again()

    def event(self, event: QEvent) -> bool:
        if event.type() == QEvent.Type.DevicePixelRatioChange and self._ready:
            self.look_again()
        return super().event(event)

    @property
    def pixel(self) -> float:
        """Dots of the screen in a pixel: what a pen's width is to be taken by, lest lines be thin on a fine screen."""
        return self.devicePixelRatioF()

    def set_theme(self, theme: Theme) -> None:
        """Other colours."""
        self.theme = theme
        # Not on every change of a font: a style sheet set while another is being set ends the interpreter.
        self.controls.setStyleSheet(compact_buttons(theme))
        self.look_again()

    def look_again(self) -> None:
        """Draw with the colours and the font as they are now."""

    def contextMenuEvent(self, event: QContextMenuEvent) -> None:
        self.menu(self.body.mapFrom(self, event.pos())).popup(event.globalPos())

    def focusInEvent(self, event: QFocusEvent) -> None:
        super().focusInEvent(event)
        self.update()

    def focusOutEvent(self, event: QFocusEvent) -> None:
        super().focusOutEvent(event)
        self.update()

    def paintEvent(self, event: QPaintEvent) -> None:
        painter = QPainter(self)
        painter.fillRect(self.rect(), QColor(self.theme.panel))
        if self.hasFocus():
            focus_ring(
                painter, self.rect().toRectF().adjusted(1.0, 1.0, -1.0, -1.0), QColor(ring(self.theme))
            )
        painter.end()
