"""The last tap, or another one: the rows, the model over them, what it leaves over, and all of it in words.

Left and Right go through the taps, Home and End to the first and the last.
"""

from __future__ import annotations

import math

import numpy as np
from PySide6.QtCore import QRectF, Qt, Signal
from PySide6.QtGui import QFontMetricsF, QKeyEvent
from PySide6.QtWidgets import QGraphicsRectItem, QGridLayout, QLabel, QToolButton, QWidget

from rig.desk.model.ranges import ticks
from rig.desk.model.run_model import RunModel
from rig.desk.model.tap_model import TapCurves, TapPage, tap_numbers, tap_page
from rig.desk.theme import Theme
from rig.desk.widgets.axes import Caption, dashed, pen, wash
from rig.desk.widgets.charts import Band, Canvas, Chart
from rig.desk.widgets.legend import BAND_SHARE, DASHES, THICK_SHARE, Entry, Legend
from rig.desk.widgets.saving import Column, SavablePlot
from rig.desk.widgets.shapes import ElidedLabel, ShapeMark, sized
from rig.desk.widgets.style import set_kind

NARROWEST_DEG = 0.2
MODEL_WIDTH, MEAN_WIDTH = 2.2, 1.2
NOTHING = "No tap yet"


class TapView(SavablePlot):
    """Pictures of taps. `chosen` carries the number of a tap that somebody asked for here."""

    chosen = Signal(int)

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(theme, "tap", parent)
        self.setAccessibleName("tap")
        self.page: TapPage | None = None
        self._model: RunModel | None = None
        self._last: int | None = None  # the model's last tap when it was looked at
        self._number: int | None = None
        self._drawn: object = None
        self._make_head()
        self._make_charts()
        self._make_words()
        self._ready = True
        self.look_again()
        self._show(None)

    # -- parts -----------------------------------------------------------------------------------------

    def _make_head(self) -> None:
        self.title = QLabel()
        self.mark = ShapeMark(self.theme)
        self.outcome = ElidedLabel()
        for at, part in enumerate((self.title, self.mark, self.outcome)):
            self.header.insertWidget(at, part, 1 if part is self.outcome else 0)
        self.header.setSpacing(6)
        self.earlier, self.later = QToolButton(self.controls), QToolButton(self.controls)
        self.position = QLabel(self.controls)
        set_kind(self.position, "faint")
        for button, sign, name, step in (
            (self.earlier, "‹", "previous tap", -1),
            (self.later, "›", "next tap", 1),
        ):
            button.setText(sign)
            button.setAccessibleName(name)
            button.setToolTip(f"{name.capitalize()} ({'Left' if step < 0 else 'Right'})")
            button.clicked.connect(lambda _=False, step=step: self.step(step))
        for part in (self.earlier, self.position, self.later):
            self.control_row.addWidget(part)

    def _make_charts(self) -> None:
        self.key = Legend(self.theme)
        self.column.addWidget(self.key)
        self.canvas = Canvas()
        self.column.addWidget(self.canvas, 1)
        self.above = Chart(self.canvas, 0)
        self.caption = Caption("residual (deg)", "shaded: interval used")
        self.canvas.addItem(self.caption, row=1, col=1)
        self.below = Chart(self.canvas, 2, bottom=True)
        layout = self.canvas.ci.layout
        for row, chart, share in ((0, self.above, 5), (2, self.below, 3)):
            layout.setRowStretchFactor(row, share)
            chart.view.setMinimumHeight(0.0)
            chart.view.setPreferredHeight(5.0 * share)
        self.used = [QGraphicsRectItem(), QGraphicsRectItem()]
        for chart, patch in zip((self.above, self.below), self.used, strict=True):
            patch.setZValue(-50.0)
            patch.setPen(Qt.PenStyle.NoPen)
            chart.add(patch)
        self.rows = Band()
        self.above.add(self.rows)
        self.mean, self.fit = self.above.curve(1.0, smooth=True), self.above.curve(2.0, smooth=True)
        self.residual = self.below.curve(0.0)

    def _make_words(self) -> None:
        grid = QGridLayout()
        grid.setContentsMargins(0, 2, 0, 0)
        grid.setSpacing(0)
        grid.setHorizontalSpacing(8)
        self.names = [QLabel(name) for name in ("level", "decay rate", "slow mode")]
        self.level, self.decay, self.mode = ElidedLabel(), ElidedLabel(), ElidedLabel()
        values = (self.level, self.decay, self.mode)
        for row, (name, value) in enumerate(zip(self.names, values, strict=True)):
            set_kind(name, "faint")
            grid.addWidget(name, row, 0)
            grid.addWidget(value, row, 1)
        grid.setColumnStretch(1, 1)
        self.column.addLayout(grid)
        self.sentence = QLabel()
        self.sentence.setWordWrap(True)
        self.sentence.setTextFormat(Qt.TextFormat.PlainText)
        self.column.addWidget(self.sentence)

    # -- what is shown ---------------------------------------------------------------------------------

    def refresh(self, model: RunModel) -> None:
        """Show the model's last tap, or the one that was chosen here since."""
        if model is not self._model or model.last_tap != self._last:
            self._model, self._last, self._number = model, model.last_tap, model.last_tap
        self._show(None if self._number is None else tap_page(model, self._number))

    def show_tap(self, number: int) -> None:
        """Another tap of the same run; nothing happens if there is none of that number."""
        page = None if self._model is None else tap_page(self._model, number)
        if page is not None:
            self._number = number
            self._show(page)

    def step(self, by: int) -> None:
        """So many taps further; `chosen` tells which one that is."""
        if self._model is None or self.page is None:
            return
        numbers = tap_numbers(self._model)
        wanted = min(max(self.page.place - 1 + by, 0), len(numbers) - 1)
        if numbers[wanted] != self.page.number:
            self.show_tap(numbers[wanted])
            self.chosen.emit(numbers[wanted])

    def keyPressEvent(self, event: QKeyEvent) -> None:
        steps = {
            Qt.Key.Key_Left: -1,
            Qt.Key.Key_Right: 1,
            Qt.Key.Key_Home: -1_000_000,
            Qt.Key.Key_End: 1_000_000,
        }
        step = steps.get(Qt.Key(event.key()))
        if step is None:
            super().keyPressEvent(event)
        else:
            self.step(step)

    def _show(self, page: TapPage | None) -> None:
        before, self.page = self.page, page
        curves = None if page is None else page.curves
        if page is None:
            self.title.setText(NOTHING)
            self.outcome.tell("")
            for label in (self.level, self.decay, self.mode):
                label.tell("–")
            self.sentence.setText("")
            self.position.setText("")
        else:
            self.title.setText(f"Tap {page.number}")
            self.mark.show_shape(page.shape, self.theme.ink)
            self.outcome.tell(page.outcome)
            self.level.tell(page.level)
            self.decay.tell(page.decay)
            self.mode.tell(page.mode)
            self.sentence.setText(page.sentence)
            self.position.setText(f"of {page.first} to {page.last}")
            self.setAccessibleDescription(
                f"{page.outcome}; decay rate {page.decay}; slow mode {page.mode}. {page.sentence}"
            )
        self.mark.setVisible(page is not None and bool(page.outcome))
        self.earlier.setEnabled(page is not None and page.place > 1)
        self.later.setEnabled(page is not None and page.place < page.count)
        self.place_controls()
        # A picture comes whole: the same one is not drawn again.
        same = before is not None and page is not None and before.number == page.number
        if not same or curves is None or self._drawn is None or not _equal(self._drawn, curves):
            self._draw(curves)
        fitted = curves is not None and len(curves.model_deg) > 0
        missing = "" if page is None else page.missing
        self.above.words.say(missing if curves is None else "")
        self.below.words.say("no fit" if curves is not None and not fitted else "")

    def _draw(self, curves: TapCurves | None) -> None:
        self._drawn = curves
        if curves is None or not len(curves.time_s):
            self.rows.clear()
            for curve in (self.mean, self.fit, self.residual):
                curve.clear()
            for patch in self.used:
                patch.setRect(QRectF())
            for chart in (self.above, self.below):
                chart.set_empty()
            self._show_key(curves)
            return
        self.rows.draw(curves.time_s, curves.low_deg, curves.high_deg)
        self.mean.draw(curves.mean_time_s, curves.mean_deg)
        self.fit.draw(curves.model_time_s, curves.model_deg)
        self.residual.draw(curves.model_time_s, curves.residual_deg)
        x = float(curves.time_s[0]), float(curves.time_s[-1])
        y = _around(np.concatenate((curves.low_deg, curves.high_deg, curves.model_deg)))
        reach = float(np.abs(curves.residual_deg).max()) if len(curves.residual_deg) else 0.0
        reach = 1.15 * max(reach, 0.05 * NARROWEST_DEG)
        self.below.numbers_from = -np.inf if len(curves.residual_deg) else np.inf
        marks = [(value, f"{text} s") for value, text in ticks(*x, 5)]
        for chart, span, patch in (
            (self.above, y, self.used[0]),
            (self.below, (-reach, reach), self.used[1]),
        ):
            chart.lines.marks = ((0.0, "tap" if chart is self.above else ""),)
            chart.set_range(x, span, marks)
            if curves.used_s is None:
                patch.setRect(QRectF())
            else:
                patch.setRect(
                    QRectF(curves.used_s[0], span[0], curves.used_s[1] - curves.used_s[0], span[1] - span[0])
                )

        self._show_key(curves)

    def _show_key(self, curves: TapCurves | None) -> None:
        theme = self.theme
        entries = [
            Entry("thick", theme.trace, "body angle (deg)"),
            Entry("line", theme.mean, "turn mean"),
        ]
        if curves is not None and len(curves.model_deg):
            entries.append(Entry("dash", theme.fit, "model"))
        self.key.show_entries(entries)
        used = curves is not None and curves.used_s is not None
        self.caption.say("residual (deg)", "shaded: interval used" if used else "")

    # -- look ------------------------------------------------------------------------------------------

    def look_again(self) -> None:
        theme, font = self.theme, self.font()
        metrics = QFontMetricsF(font)
        self.title.setFont(sized(font, 1.0, bold=True))
        self.rows.set_brush(wash(theme.trace, THICK_SHARE))
        self.mean.set_pen(pen(theme.mean, MEAN_WIDTH * self.pixel))
        self.fit.set_pen(dashed(theme.fit, DASHES["dash"], MODEL_WIDTH * self.pixel))
        self.residual.set_pen(pen(theme.trace))
        for patch in self.used:
            patch.setBrush(wash(theme.band, BAND_SHARE))
        for chart in (self.above, self.below):
            chart.set_look(theme, font, numbers="−0.00")
        self.caption.set_look(theme, font)
        self.canvas.set_look(theme)
        self.canvas.setMinimumHeight(math.ceil(6.5 * metrics.height()))
        self.key.set_theme(theme)
        self._show_key(None if self.page is None else self.page.curves)
        if self.page is not None:
            self.mark.show_shape(self.page.shape, theme.ink)
        self.place_controls()
        self.update()

    # -- keeping ---------------------------------------------------------------------------------------

    def values(self) -> list[Column]:
        curves = None if self.page is None else self.page.curves
        if curves is None:
            return []
        return [
            Column("time since the tap", "s", curves.time_s),
            Column("body angle least", "deg", curves.low_deg),
            Column("body angle greatest", "deg", curves.high_deg),
            Column("time of turn mean", "s", curves.mean_time_s),
            Column("turn mean", "deg", curves.mean_deg),
            Column("time of model", "s", curves.model_time_s),
            Column("model", "deg", curves.model_deg),
            Column("residual", "deg", curves.residual_deg),
        ]


def _around(values: np.ndarray) -> tuple[float, float]:
    low, high = float(values.min()), float(values.max())
    room = max(0.08 * (high - low), 0.5 * (NARROWEST_DEG - (high - low)), 0.0)
    return low - room, high + room


def _equal(one: object, other: TapCurves) -> bool:
    return isinstance(one, TapCurves) and all(
        np.array_equal(getattr(one, name), getattr(other, name))
        for name in ("time_s", "low_deg", "high_deg", "model_deg", "residual_deg")
    )
