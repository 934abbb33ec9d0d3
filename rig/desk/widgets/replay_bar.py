"""The controls of a replay: where in the session, how fast, and jumps to events and taps."""

from __future__ import annotations

from PySide6.QtCore import Qt, Signal
from PySide6.QtGui import QKeySequence, QShortcut
from PySide6.QtWidgets import QComboBox, QHBoxLayout, QLabel, QPushButton, QSlider, QWidget

from rig.desk.theme import Theme

SPEEDS = (0.1, 0.25, 0.5, 1.0, 2.0, 5.0, 10.0, 50.0, 1000.0)
STEPS = 10_000


class ReplayBar(QWidget):
    """Play, pause, seek. It says what is wished; whoever holds the replay does it."""

    play = Signal(bool)
    speed = Signal(float)
    seek = Signal(float)
    step_event = Signal(int)
    step_tap = Signal(int)
    leave = Signal()

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._duration_s = 0.0
        self._playing = False
        self.play_button = self._button("Play", "Play or pause (Space)", self._toggle)
        self.back_event = self._button(
            "◂ event", "Previous event (Page Up)", lambda: self.step_event.emit(-1)
        )
        self.next_event = self._button("event ▸", "Next event (Page Down)", lambda: self.step_event.emit(1))
        self.back_tap = self._button("◂ tap", "Previous tap (comma)", lambda: self.step_tap.emit(-1))
        self.next_tap = self._button("tap ▸", "Next tap (full stop)", lambda: self.step_tap.emit(1))
        self.slider = QSlider(Qt.Orientation.Horizontal)
        self.slider.setRange(0, STEPS)
        self.slider.setAccessibleName("Position in the session")
        self.slider.valueChanged.connect(self._moved)
        self.speeds = QComboBox()
        self.speeds.setAccessibleName("Speed of the replay")
        for speed in SPEEDS:
            self.speeds.addItem("as fast as it draws" if speed == SPEEDS[-1] else f"{speed:g} ×", speed)
        self.speeds.setCurrentIndex(SPEEDS.index(1.0))
        self.speeds.currentIndexChanged.connect(lambda at: self.speed.emit(SPEEDS[at]))
        self.time = QLabel("0.0 of 0.0 s")
        self.time.setAccessibleName("Time in the session")
        self.time.setAlignment(Qt.AlignmentFlag.AlignRight | Qt.AlignmentFlag.AlignVCenter)
        self.close_button = self._button("Leave replay", "Back to the beginning", self.leave.emit)
        row = QHBoxLayout(self)
        row.setContentsMargins(8, 4, 8, 4)
        row.setSpacing(6)
        for part in (
            self.play_button,
            self.speeds,
            self.back_event,
            self.next_event,
            self.back_tap,
            self.next_tap,
        ):
            row.addWidget(part)
        row.addWidget(self.slider, 1)
        row.addWidget(self.time)
        row.addWidget(self.close_button)
        for keys, act in (
            ("Space", self._toggle),
            ("PgUp", lambda: self.step_event.emit(-1)),
            ("PgDown", lambda: self.step_event.emit(1)),
            (",", lambda: self.step_tap.emit(-1)),
            (".", lambda: self.step_tap.emit(1)),
        ):
            QShortcut(QKeySequence(keys), self, act, context=Qt.ShortcutContext.WindowShortcut)
        self.set_theme(theme)

    def set_theme(self, theme: Theme) -> None:
        self.time.setMinimumWidth(self.time.fontMetrics().horizontalAdvance("00000.0 of 00000.0 s"))

    def show_position(self, position_s: float, duration_s: float, playing: bool) -> None:
        """Where the replay is; emits nothing."""
        self._duration_s = duration_s
        self.slider.blockSignals(True)
        self.slider.setValue(round(STEPS * position_s / duration_s) if duration_s > 0.0 else 0)
        self.slider.blockSignals(False)
        self.time.setText(f"{position_s:.1f} of {duration_s:.1f} s")
        if playing != self._playing:
            self._playing = playing
            self.play_button.setText("Pause" if playing else "Play")

    def _toggle(self) -> None:
        self.play.emit(not self._playing)

    def _moved(self, value: int) -> None:
        self.seek.emit(self._duration_s * value / STEPS)

    def _button(self, text: str, tip: str, act: object) -> QPushButton:
        button = QPushButton(text)
        button.setToolTip(tip)
        button.setAccessibleName(tip)
        button.clicked.connect(lambda: act())  # type: ignore[operator]
        return button
