"""Live signals, one above the other on one time axis, or folded on the crank phase.

`tick`, called about 30 times a second, draws what is newest. What is drawn is at most a few hundred columns a signal,
filled as the rows came in (`rig.desk.model.trace_model`), with pens of one pixel and ranges that stand still.
"""

from __future__ import annotations

import math

from PySide6.QtCore import QElapsedTimer, QPoint, QPointF, Qt, Signal
from PySide6.QtGui import QAction, QFontMetricsF
from PySide6.QtWidgets import QButtonGroup, QMenu, QToolButton, QWidget

from rig.desk.model.fold import Folded, fold
from rig.desk.model.ranges import ticks
from rig.desk.model.run_model import RunModel
from rig.desk.model.signals import BODY, UNITS, Traces
from rig.desk.model.trace_model import TraceSource
from rig.desk.theme import Theme
from rig.desk.widgets.charts import Canvas
from rig.desk.widgets.legend import Entry, Legend
from rig.desk.widgets.saving import Column, SavablePlot
from rig.desk.widgets.signal_chart import NAMES, Seconds, SignalChart

#: Spans to choose from, s; the last choice is folded on the crank phase.
SPANS_S = (1.0, 2.0, 10.0, 60.0)
SPAN_S = 2.0
FOLDED_OF_S = 1.5
#: Without new rows for so long, a picture is told to be old.
STALE_MS = 500
#: Signals drawn unless others are chosen.
FIRST = (BODY, "motor voltage", "vertical load", "motor current")
FOLD_STEPS = [(float(angle), str(angle)) for angle in range(0, 361, 45)]


class TracesView(SavablePlot):
    """The traces of a source. `span_chosen` carries seconds, 0 for folded."""

    span_chosen = Signal(float)

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(theme, "traces", parent)
        self.setAccessibleName("live signals")
        self.source: TraceSource | None = None
        self.span_s = SPAN_S
        self.shown: tuple[str, ...] = FIRST
        self.charts: dict[str, SignalChart] = {}  # those shown
        self._made: dict[str, SignalChart] = {}  # all there are: see _build
        self._drawn: Traces | Folded | None = None
        self.newest: int | None = None  # of the rows drawn
        self._old = self._ended = False
        self._since = QElapsedTimer()
        self._since.start()
        self.key = Legend(theme)
        self.header.insertWidget(0, self.key, 1, Qt.AlignmentFlag.AlignVCenter)
        self.canvas = Canvas()
        self.column.addWidget(self.canvas, 1)
        self.seconds: Seconds | None = None
        self.spans = QButtonGroup(self)
        for span_s in (*SPANS_S, 0.0):
            button = QToolButton(self.controls)
            button.setText(f"{span_s:g} s" if span_s else "folded")
            button.setAccessibleName(
                f"show the last {span_s:g} seconds" if span_s else "fold on the crank phase"
            )
            button.setToolTip(
                f"The last {span_s:g} seconds"
                if span_s
                else "The last turns of the crank laid over each other"
            )
            button.setCheckable(True)
            button.setChecked(span_s == self.span_s)
            button.clicked.connect(lambda _=False, chosen=span_s: self.choose_span(chosen))
            self.spans.addButton(button)
            self.control_row.addWidget(button)
        self._ready = True
        self._build()

    # -- what is shown ---------------------------------------------------------------------------------

    @property
    def folded(self) -> bool:
        return self.span_s == 0.0

    def set_source(self, source: TraceSource | None) -> None:
        """Signals from somewhere else, or from nowhere."""
        self.source = source
        self.newest, self._drawn = None, None
        if source is not None:
            kept = tuple(measures for measures in FIRST if measures in source.signals)
            self.shown = kept or source.signals[:4]
        for chart in self._made.values():
            chart.forget()
        self._build()

    def show_signals(self, shown: tuple[str, ...]) -> None:
        """Draw these, in the order of `rig.desk.model.signals.SHOWN`."""
        self.shown = tuple(measures for measures in UNITS if measures in shown)
        self._build()

    def choose_span(self, span_s: float) -> None:
        """One of SPANS_S, or 0: folded on the crank phase."""
        for button, known in zip(self.spans.buttons(), (*SPANS_S, 0.0), strict=True):
            button.setChecked(known == span_s)
        if span_s == self.span_s:
            return
        self.span_s = span_s
        for chart in self.charts.values():
            chart.range.forget()
            chart.clear()
        self.newest = None
        self._name_axis()
        self.tick()
        self.span_chosen.emit(span_s)

    def refresh(self, model: RunModel) -> None:
        """When the run began, and where a replay stands."""
        if self.source is not None:
            self.source.follow(model)

    # -- drawing ---------------------------------------------------------------------------------------

    def tick(self) -> None:
        """Draw the newest rows, if there are any."""
        source = self.source
        if source is None:
            self._tell("no run")
            return
        columns = max(200, 200 * round(self.canvas.width() / 200.0))
        found = source.latest(SPAN_S if self.folded else self.span_s, columns)
        if found is None:
            self._tell({"waiting": "waiting for rows", "stored": ""}.get(source.state, source.state))
            return
        if found.newest == self.newest:
            self._no_news(source.state)
            return
        self.newest = found.newest
        self._since.restart()
        self._tell("")
        if self.folded:
            self._draw_folded(source)
        else:
            self._draw_courses(found)
        self._show_key()

    def _draw_courses(self, found: Traces) -> None:
        self._drawn = found
        end = found.now_s
        start = end - self.span_s
        marks = [mark for mark in ticks(start, end, 6) if mark[0] >= 0.0]
        for measures, chart in self.charts.items():
            trace = found.by.get(measures)
            if trace is None or not len(trace.time_s):
                chart.clear()
                chart.words.say("no rows of it")
                y = None
            else:
                chart.draw_course(trace, found.mean if measures == BODY else None)
                y = chart.fit(float(trace.low.min()), float(trace.high.max()), end)
            chart.set_range((start, end), y, marks)

    def _draw_folded(self, source: TraceSource) -> None:
        recent = source.recent(FOLDED_OF_S)
        self._drawn = None if recent is None else fold(recent)
        if self._drawn is None:
            for chart in self.charts.values():
                chart.clear()
            self._tell("the crank does not turn: nothing to fold")
            return
        for measures, chart in self.charts.items():
            folded = self._drawn.by.get(measures)
            if folded is None:
                chart.clear()
                chart.words.say("not folded")
                continue
            chart.draw_folded(folded)
            at_s = float(recent.time_s[-1]) if recent is not None else 0.0
            y = chart.fit(float(folded.low.min()), float(folded.high.max()), at_s)
            chart.set_range((0.0, 360.0), y, FOLD_STEPS)

    def _no_news(self, state: str) -> None:
        """Nothing has come since the last time."""
        if state == "stored" or self._since.elapsed() < STALE_MS:
            return
        if state == "ended":
            self._tell("", ended=True)
            return
        self._tell(f"no new rows for {self._since.elapsed() / 1000.0:.0f} s", old=True)

    def _tell(self, words: str, *, old: bool = False, ended: bool = False) -> None:
        """A word in every chart; `old`: what is drawn is no longer so."""
        if old != self._old:
            self._old = old
            for chart in self.charts.values():
                chart.show_old(self.theme, old)
        for chart in self.charts.values():
            chart.words.say(words)
        if ended != self._ended:
            self._ended = ended
            self._show_key()
        self.setAccessibleDescription(words or ("the last rows of the run" if ended else ""))

    def _show_key(self) -> None:
        theme, drawn = self.theme, self._drawn
        if isinstance(drawn, Folded):
            entries = [
                Entry("thick", theme.trace, f"{drawn.turns} turns"),
                Entry("line", theme.mean, "their mean"),
                Entry("line", theme.trace, "last turn"),
            ]
        else:
            entries = [Entry("line", theme.trace, "signal")]
            if BODY in self.charts and drawn is not None and drawn.mean is not None:
                entries.append(Entry("line", theme.mean, "mean over each turn"))
        if self._ended:
            entries.append(Entry("square", theme.ink, "run ended"))
        self.key.show_entries(entries)

    # -- building --------------------------------------------------------------------------------------

    def _build(self) -> None:
        """One chart for each signal shown.

        A chart is made when its signal is first shown, in a row of its own, and hidden when it is not. Made again
        where others had just been let go, charts could end the interpreter: the bindings took a new object for the
        one that had been at its address.
        """
        rows = list(UNITS)
        for measures in self.shown:
            if measures not in self._made:
                self._made[measures] = SignalChart(self.canvas, rows.index(measures), measures)
        for measures, chart in self._made.items():
            chart.set_shown(measures in self.shown)
            chart.bottom = None
        self.charts = {measures: self._made[measures] for measures in self.shown}
        if self.charts:
            last = self.charts[self.shown[-1]]
            if self.seconds is None:
                self.seconds = Seconds(last.view)
                self.canvas.addItem(self.seconds, row=len(rows), col=1)
            self.seconds.stand_under(last.view)
            last.bottom = self.seconds
        stops = None if self.source is None else self.source.stops_deg
        if stops is not None and BODY in self.charts:
            self.charts[BODY].lines.across = [(stops[0], "lower stop"), (stops[1], "upper stop")]
        self.newest = None
        self._name_axis()
        self.look_again()

    def _name_axis(self) -> None:
        for chart in self.charts.values():
            if chart.bottom is not None:
                chart.bottom.set_name(
                    *(("crank phase", "deg") if self.folded else ("seconds since start", ""))
                )

    def look_again(self) -> None:
        font = self.font()
        metrics = QFontMetricsF(font)
        names_px = max((metrics.horizontalAdvance(chart.name) for chart in self.charts.values()), default=0.0)
        for chart in self._made.values():  # hidden ones too: the column of scales is as wide as its widest
            chart.set_theme(self.theme)
            chart.set_look(self.theme, font, names_px + 0.8 * metrics.height())
            chart.view.setMinimumHeight(1.5 * metrics.height())
            if self._old:
                chart.show_old(self.theme, True)
        self.canvas.set_look(self.theme)
        self.key.set_theme(self.theme)
        self._show_key()
        self.canvas.ci.layout.setVerticalSpacing(0.45 * metrics.height())
        self.canvas.setMinimumHeight(math.ceil((2.0 * len(self.charts) + 2.6) * metrics.height()))
        self.place_controls()
        self.update()

    # -- keeping ---------------------------------------------------------------------------------------

    def values(self) -> list[Column]:
        return [column for measures in self.charts for column in self.values_of(measures)]

    def values_of(self, measures: str) -> list[Column]:
        """What the chart of one signal shows."""
        chart = self.charts[measures]
        unit, drawn = UNITS[measures], self._drawn
        if isinstance(drawn, Folded):
            folded = drawn.by.get(measures)
            if folded is None:
                return []
            return [
                Column(f"crank phase of {chart.name}", "deg", folded.phase_deg),
                Column(f"{chart.name} least", unit, folded.low),
                Column(f"{chart.name} mean", unit, folded.mean),
                Column(f"{chart.name} greatest", unit, folded.high),
            ]
        trace = drawn.by.get(measures) if isinstance(drawn, Traces) else None
        if drawn is None or trace is None:
            return []
        found = [
            Column(f"time of {chart.name}", "s", trace.time_s),
            Column(f"{chart.name} least", unit, trace.low),
            Column(f"{chart.name} greatest", unit, trace.high),
        ]
        if measures == BODY and drawn.mean is not None:
            found.append(Column("time of cycle mean", "s", drawn.mean.time_s))
            found.append(Column("cycle mean", unit, drawn.mean.low))
        return found

    def more_actions(self, menu: QMenu, place: QPoint) -> None:
        chart = self._chart_at(place)
        menu.addSeparator()
        if chart is not None:
            measures = chart.measures
            copy = QAction(f"Copy the values of {chart.name}", menu)
            copy.triggered.connect(lambda: self.copy_columns(self.values_of(measures)))
            fit = QAction(f"Fit the range of {chart.name} to what is drawn", menu)
            fit.triggered.connect(chart.range.forget)
            hold = QAction(f"Hold the range of {chart.name}", menu, checkable=True, checked=chart.held)
            hold.toggled.connect(lambda on: setattr(chart, "held", on))
            menu.addActions([copy, fit, hold])
        signals = menu.addMenu("Signals shown")
        for measures in () if self.source is None else self.source.signals:
            shown = measures in self.shown
            choice = QAction(NAMES.get(measures, measures), signals, checkable=True, checked=shown)
            choice.setEnabled(not shown or len(self.shown) > 1)
            choice.toggled.connect(lambda on, which=measures: self._show(which, on))
            signals.addAction(choice)

    def _show(self, measures: str, on: bool) -> None:
        others = tuple(shown for shown in self.shown if shown != measures)
        self.show_signals((*others, measures) if on else others)

    def _chart_at(self, place: QPoint) -> SignalChart | None:
        on_canvas = self.canvas.mapToScene(self.canvas.mapFrom(self.body, place))
        for chart in self.charts.values():
            box = chart.view.sceneBoundingRect()
            if box.top() <= QPointF(on_canvas).y() <= box.bottom():
                return chart
        return None
