"""What is asked of the operator, large enough for 3 m, with the buttons and keys that answer it.

    when                              heading                 buttons
    --------------------------------  ----------------------  -------------------------------------------
    a prompt waits for an answer      the prompt              Done (Enter)
    a call to tap                     the call                those of the level's last tap, if it has one
    a level whose taps can be judged  none: one slim line     Redo tap (R), Reject tap (X), Enough (N)
    off, still turning                keep clear              none
    off, waiting                      why                     Go on at this level (G), End the run (E)

Otherwise, and in a replay, it is hidden. While a run is on, a tap that has just been left out adds a row below that
asks why (`reason_row`): keys 1 to 6, until the next tap has been judged or another level begins.
"""

from __future__ import annotations

from PySide6.QtCore import QEvent, QPointF, QRectF, Qt, Signal, SignalInstance
from PySide6.QtGui import (
    QAccessible,
    QAccessibleEvent,
    QColor,
    QFont,
    QFontMetricsF,
    QKeySequence,
    QPainter,
    QPaintEvent,
    QResizeEvent,
    QShortcut,
)
from PySide6.QtWidgets import QFrame, QHBoxLayout, QPushButton, QSizePolicy, QVBoxLayout, QWidget

from rig.desk.model.run_model import RunModel
from rig.desk.model.wording import OUTCOME_SHAPES, asks, opening, tap_sentence, tap_to_judge, waiting_sentence
from rig.desk.theme import Theme
from rig.desk.widgets.reason_row import ReasonRow
from rig.desk.widgets.shapes import ElidedLabel, ShapeMark, blended, rounded, sized
from rig.desk.widgets.style import set_kind, set_shown

#: Height of letters that can be read at 3 m: 30 points are 10.6 mm, an angle of about 12 minutes of arc there
#: (capitals 0.73 of it). In a window of this height; larger windows have larger letters.
HEADING_POINTS, LEAST_POINTS = 30.0, 14.0
WINDOW_HEIGHT = 720
MOST_LINES = 2
STILL_TURNING = "Still turning: keep clear until it stands still"
WRAP = int(Qt.AlignmentFlag.AlignLeft | Qt.AlignmentFlag.AlignTop | Qt.TextFlag.TextWordWrap)


class FittingText(QWidget):
    """A text in the largest font that fits its width in two lines, `LEAST_POINTS` to `HEADING_POINTS` (and more in
    a large window)."""

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._text = ""
        self._colour = QColor("black")
        self._shown = ""
        self.points = HEADING_POINTS
        self.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Fixed)

    @property
    def text(self) -> str:
        return self._text

    @property
    def shown(self) -> str:
        """The text as drawn: shortened if even the smallest letters do not fit."""
        return self._shown

    def tell(self, text: str, colour: str) -> None:
        if (text, QColor(colour)) != (self._text, self._colour):
            self._text, self._colour = text, QColor(colour)
            self.setAccessibleName(text)
            self.fit()
            self.update()

    def heading_font(self, points: float) -> QFont:
        font = QFont(self.font())
        font.setPointSizeF(points)
        font.setBold(True)
        return font

    def fit(self) -> None:
        """Choose the size of the letters and the height."""
        width = float(max(self.width(), 50))
        largest = HEADING_POINTS * min(2.5, max(1.0, self.window().height() / WINDOW_HEIGHT))
        points, shown = largest, self._text
        while points > LEAST_POINTS and not self._fits(shown, points, width):
            points = max(LEAST_POINTS, points - 1.0)
        while len(shown) > 2 and not self._fits(shown, points, width):
            shown = shown[: -max(2, len(shown) // 40)].rstrip(" .…") + "…"
        self.points, self._shown = points, shown
        self.setToolTip(self._text if shown != self._text else "")
        metrics = QFontMetricsF(self.heading_font(points))
        needed = metrics.boundingRect(QRectF(0.0, 0.0, width, 1e4), WRAP, shown).height() if shown else 0.0
        if round(needed) + 2 != self.height():
            self.setFixedHeight(round(needed) + 2)

    def _fits(self, text: str, points: float, width: float) -> bool:
        metrics = QFontMetricsF(self.heading_font(points))
        box = metrics.boundingRect(QRectF(0.0, 0.0, width, 1e4), WRAP, text)
        return box.width() <= width and box.height() <= (MOST_LINES + 0.2) * metrics.lineSpacing()

    def resizeEvent(self, event: QResizeEvent) -> None:
        self.fit()

    def paintEvent(self, event: QPaintEvent) -> None:
        painter = QPainter(self)
        painter.setFont(self.heading_font(self.points))
        painter.setPen(self._colour)
        painter.drawText(QRectF(self.rect()), WRAP, self._shown)
        painter.end()


class PromptBanner(QFrame):
    """Asks, and tells what was answered."""

    acknowledged = Signal()
    redo = Signal()
    reject = Signal()
    enough = Signal()
    go_on = Signal()
    end = Signal()
    reason = Signal(int, str)  # number of a tap left out, why

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = theme
        self._replay = False
        self._tone = "slim"
        self._shape = ""
        self.heading = FittingText()
        self.detail = ElidedLabel()
        self.mark = ShapeMark(theme)
        self.why = ReasonRow()
        self.buttons: dict[str, QPushButton] = {}
        self._shortcuts: dict[str, QShortcut] = {}
        row = QHBoxLayout()
        row.setContentsMargins(0, 0, 0, 0)
        row.setSpacing(8)
        row.addWidget(self.mark)
        row.addWidget(self.detail, 1)
        for name, text, hint, keys, signal in (
            ("done", "Done (Enter)", "what is asked has been done", ("Return", "Enter"), self.acknowledged),
            ("redo", "Redo tap (R)", "leave the last tap out and give it again", ("R",), self.redo),
            ("reject", "Reject tap (X)", "leave the last tap out", ("X",), self.reject),
            ("enough", "Enough, next level (N)", "enough is known of this level", ("N",), self.enough),
            (
                "go_on",
                "Go on at this level (G)",
                "switches the drive on and begins this level again",
                ("G",),
                self.go_on,
            ),
            ("end", "End the run (E)", "the run ends and its session is sealed", ("E",), self.end),
        ):
            row.addWidget(self._button(name, text, hint, keys, signal))
        column = QVBoxLayout(self)
        column.setSpacing(6)
        column.addWidget(self.heading)
        column.addLayout(row)
        column.addWidget(self.why)
        self.why.given.connect(self.reason)
        self.why.changed.connect(self._asked_less)
        for signal in (self.redo, self.reject):
            signal.connect(self.why.pass_over)
        self.setSizePolicy(QSizePolicy.Policy.Preferred, QSizePolicy.Policy.Fixed)
        self.setAccessibleName("what is asked of you")
        self.set_theme(theme)
        self.hide()

    def _button(
        self, name: str, text: str, hint: str, keys: tuple[str, ...], signal: SignalInstance
    ) -> QPushButton:
        button = QPushButton(text, self)
        button.setToolTip(hint)
        button.setAccessibleName(text)
        button.setAccessibleDescription(hint)
        button.clicked.connect(lambda: signal.emit())
        if name in ("done", "go_on"):
            set_kind(button, "primary")
        shortcut = QShortcut(button)
        shortcut.setKeys([QKeySequence(key) for key in keys])
        shortcut.setAutoRepeat(False)
        shortcut.activated.connect(button.click)
        shortcut.setEnabled(False)
        self.buttons[name], self._shortcuts[name] = button, shortcut
        button.hide()
        return button

    # -- content ---------------------------------------------------------------------------------------

    def set_theme(self, theme: Theme) -> None:
        self._theme = theme
        self._paint_texts()
        self.update()

    def set_replay(self, on: bool) -> None:
        """A recorded run is shown: nothing is asked, and no key answers."""
        self._replay = on
        if on:
            self.why.withdraw()
            self._rest()

    def _rest(self) -> None:
        set_shown(self, False)
        self._offer(set())

    def refresh(self, model: RunModel) -> None:
        if self._replay:
            return
        if model.phase == "running":
            self.why.offer(model.unexplained)
        else:
            self.why.withdraw()
        mark = tap_to_judge(model)
        judge = {"redo", "reject"} if mark is not None and mark.outcome != "excluded" else set()
        if model.phase == "running" and model.on_hand is not None and model.on_hand.taps:
            judge = judge | {"enough"}
        if mark is None and self.why.tap is not None:
            mark = model.tap(self.why.tap)
        detail, shape = (tap_sentence(mark), OUTCOME_SHAPES[mark.outcome]) if mark is not None else ("", "")
        if model.phase == "waiting":
            self._show("alert", waiting_sentence(model), "", "", {"go_on", "end"})
        elif model.phase == "turning":
            self._show("alert", STILL_TURNING, model.trips[-1].sentence if model.trips else "", "", set())
        elif asks(model):
            self._show("ask", opening(model.prompt), "", "", {"done"})
        elif model.prompt:
            self._show("call", opening(model.prompt), detail, shape, judge)
        elif judge or self.why.tap is not None:
            self._show("slim", "", detail, shape, judge)
        else:
            self._rest()

    def _show(self, tone: str, heading: str, detail: str, shape: str, buttons: set[str]) -> None:
        before = self.heading.text if not self.isHidden() else ""
        self._tone, self._shape = tone, shape
        set_shown(self.heading, bool(heading))
        self._offer(buttons)
        self.detail.tell(detail)
        set_shown(self.detail, bool(detail or buttons))
        self._paint_texts(heading)
        set_shown(self.mark, bool(shape))
        set_shown(self, True)
        self.heading.fit()
        layout = self.layout()
        if layout is not None:
            layout.activate()
        self.update()
        if heading and heading != before:
            self.setAccessibleDescription(heading)
            QAccessible.updateAccessibility(QAccessibleEvent(self, QAccessible.Event.Alert))

    def _asked_less(self) -> None:
        """The row below has been answered: without anything else to say the banner goes at once."""
        if (
            self._tone == "slim"
            and self.why.tap is None
            and not any(not button.isHidden() for button in self.buttons.values())
        ):
            self._rest()

    def _offer(self, names: set[str]) -> None:
        for name, button in self.buttons.items():
            set_shown(button, name in names)
            self._shortcuts[name].setEnabled(name in names)

    def _paint_texts(self, heading: str | None = None) -> None:
        on_accent = self._tone == "call"
        ink = self._theme.accent_ink if on_accent else self._theme.ink
        self.heading.tell(self.heading.text if heading is None else heading, ink)
        set_kind(self.detail, "on_accent" if on_accent else "")
        self.why.set_on_accent(on_accent)
        if self._shape:
            self.mark.show_shape(self._shape, ink)

    # -- drawing ---------------------------------------------------------------------------------------

    def changeEvent(self, event: QEvent) -> None:
        super().changeEvent(event)
        if event.type() == QEvent.Type.FontChange and hasattr(self, "detail"):
            self._space()

    def event(self, event: QEvent) -> bool:
        if event.type() == QEvent.Type.Polish:
            self._space()
        return super().event(event)

    def _space(self) -> None:
        gap = round(0.5 * self.fontMetrics().height())
        layout = self.layout()
        if layout is not None:
            layout.setContentsMargins(2 * gap, gap, gap, gap)
        self.detail.setFont(sized(self.font(), 1.15))

    def resizeEvent(self, event: QResizeEvent) -> None:
        super().resizeEvent(event)
        self.heading.fit()

    def paintEvent(self, event: QPaintEvent) -> None:
        theme = self._theme
        painter = QPainter(self)
        rect = QRectF(self.rect())
        strong = theme.alert if self._tone == "alert" else theme.accent
        ground = {
            "slim": QColor(theme.panel),
            "ask": blended(theme.panel, theme.accent, 0.12),
            "alert": blended(theme.panel, theme.alert, 0.10),
            "call": QColor(theme.accent),
        }[self._tone]
        rounded(painter, rect, ground)
        if self._tone != "slim":
            bar = 0.4 * self.fontMetrics().height()
            rounded(
                painter, QRectF(rect.topLeft(), QPointF(rect.left() + bar, rect.bottom())), QColor(strong)
            )
        painter.end()


__all__ = ["FittingText", "PromptBanner"]
