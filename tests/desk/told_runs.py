"""Runs as a bench process would tell them, made up message by message; and the windowless application for widgets."""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")

from PySide6.QtCore import QRectF
from PySide6.QtWidgets import QApplication, QWidget

from rig.desk.model.run_model import RunModel
from rig.desk.theme import THEMES, Theme
from rig.desk.widgets import style

TICK_HZ = 1_000_000


@dataclass(frozen=True)
class Planned:
    """A planned level."""

    direction: str
    drive_v: float
    flap_hz: float | None


class ToldRun:
    """A run model and the messages that feed it."""

    def __init__(self) -> None:
        self.model = RunModel()
        self.model.start()
        self.model.take({"ready": {"bench": "made up", "ring": "", "channels": [], "tick_hz": TICK_HZ}})
        self._tick = 0
        self._levels = self._taps = 0
        self.event("run", rig="boom", protocol="made-up")

    def event(self, kind: str, **data: Any) -> None:
        self._tick += TICK_HZ // 10
        self.model.take({"event": {"tick": self._tick, "kind": kind, **data}})

    def verdict(self, kind: str, **data: Any) -> None:
        self.model.take({"verdict": {"kind": kind, "tick": self._tick, **data}})

    def standing(self, **data: Any) -> None:
        told = {
            "time_s": self._tick / TICK_HZ,
            "tick": self._tick,
            "standing": {"prompt": self.model.prompt},
            "run_state": self.model.phase,
        }
        self.model.take({"standing": {**told, **data}})

    def level(self, direction: str, drive_v: float, number: int | None = None) -> int:
        made = self._levels if number is None else number
        self._levels = max(self._levels, made + 1)
        self.event("level", level=made, direction=direction, drive_v=drive_v, role="level")
        return made

    def flap(self, flap_hz: float, state: str = "held") -> None:
        self._tick += TICK_HZ // 10
        self.verdict("condition", flap_hz=flap_hz, mean_angle_rad=0.1, state=state, settled=True)

    def tap(self, outcome: str = "accepted", by: str = "tapper", reason: str = "returned") -> int:
        """A tap and, but for "observed", its verdict."""
        number, level = self._taps, self.model.rungs[-1].level
        self._taps += 1
        self.event("tap", tap=number, level=level, by=by, impulse_n_m_s=1e-4 if by == "tapper" else None)
        if outcome == "observed":
            return number
        self.event("tap_end", tap=number, level=level, writes=0)
        if outcome == "excluded":
            self.event("tap_excluded", tap=number, reason="rejected by the operator")
            return number
        reasons = {"double": "struck 2 times", "lost": "did not return", "left_out": "too faint"}
        self.verdict(
            "tap",
            tap=number,
            level=level,
            returned=outcome != "lost",
            accepted=outcome == "accepted",
            reason=reasons.get(outcome, reason),
            decay_per_s=0.8 if outcome == "accepted" else None,
            decay_std_per_s=0.01 if outcome == "accepted" else None,
        )
        return number

    def level_end(self, regime: str = "stable", state: str = "held") -> None:
        level = self.model.rungs[-1].level
        self.event("level_end", level=level)
        self.verdict("level", level=level, state=state, regime=regime, decay_half_width_per_s=0.02)

    def trip(self, cause: str = "current") -> None:
        sentence = (
            "Motor current 6.20 A exceeded 6.00 A at 12.300 s; drive off (coast): check the crank for a jam and "
            "the wiring for a short before arming again."
        )
        self.event("trip", cause=cause, sentence=sentence, value=6.2, limit=6.0, halt="coast")
        self.event("halt", how="coast", cause=cause)


def staircase(drives_v: Sequence[float], hz_per_v: float = 3.6) -> tuple[Planned, ...]:
    """Up and down again over these drives."""
    up = [Planned("rising", volts, hz_per_v * volts) for volts in drives_v]
    return (*up, *(Planned("falling", one.drive_v, one.flap_hz) for one in reversed(up[:-1])))


def walked(
    planned: Sequence[Planned], levels: int, taps: Sequence[str] = ("accepted", "accepted")
) -> ToldRun:
    """A run that has been through so many levels of a plan; the last is not over."""
    run = ToldRun()
    for at, one in enumerate(planned[:levels]):
        run.level(one.direction, one.drive_v)
        run.flap(one.flap_hz or 0.0)
        for outcome in taps:
            run.tap(outcome)
        if at < levels - 1:
            run.level_end(("stable", "undetermined", "unstable")[at % 3])
    run.standing(flap_hz=planned[levels - 1].flap_hz)
    return run


def dressed(app: QApplication, name: str = "light") -> Theme:
    """The application in a theme."""
    theme = THEMES[name]
    style.apply(app, theme)
    return theme


def settle(app: QApplication, widget: QWidget, width: int, height: int) -> None:
    """Show a widget in a size, laid out."""
    widget.resize(width, height)
    widget.show()
    app.processEvents()


def overlapping(boxes: Sequence[tuple[float, float, float, float]]) -> list[tuple[int, int]]:
    """Pairs of boxes (left, top, width, height) that overlap by more than a rounding."""
    rects = [QRectF(*box).adjusted(0.25, 0.25, -0.25, -0.25) for box in boxes]
    return [
        (i, j) for i in range(len(rects)) for j in range(i + 1, len(rects)) if rects[i].intersects(rects[j])
    ]


def differing_pixels(widget: QWidget, colour: str) -> float:
    """Share of a widget's pixels that are not of a colour."""
    image = widget.grab().toImage()
    count = image.width() * image.height()
    same = sum(
        image.pixelColor(x, y).name() == colour.lower()
        for x in range(0, image.width(), 2)
        for y in range(0, image.height(), 2)
    )
    return 1.0 - 4.0 * same / count
