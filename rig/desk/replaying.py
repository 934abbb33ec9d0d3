"""A replay on the run page: the player, its position shown, its tap pictures made in another process."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from PySide6.QtCore import QElapsedTimer, QObject, QTimer

from rig.desk.model.replay_model import ReplayModel
from rig.desk.model.run_model import EVERYTHING, TAP, Changed
from rig.desk.tap_fitter import TapFitter
from rig.desk.widgets.replay_bar import ReplayBar
from rig.desk.widgets.run_page import RunPage
from rig.problem import FileProblems
from rig.record.errors import Damaged
from rig.session import open_session

#: A tap is fitted once the replay has stayed with it for so long: those that are passed by are not worth it.
STAY_MS = 100


class Replaying(QObject):
    """One session on the page. Raises Refused, in one sentence, if it cannot be opened."""

    class Refused(Exception):
        pass

    def __init__(self, path: Path, page: RunPage, bar: ReplayBar, parent: QObject | None = None) -> None:
        super().__init__(parent)
        try:
            self.session = open_session(path)
        except FileNotFoundError:
            raise self.Refused(f"{path}: there is no such session file") from None
        except Damaged as error:
            raise self.Refused(str(error)) from None
        try:
            self.player = ReplayModel(self.session)
            protocol = self.session.protocol
        except (Damaged, FileProblems, ValueError, KeyError, TypeError) as error:
            self.session.close()
            raise self.Refused(f"{path} cannot be replayed: {str(error).splitlines()[0]}") from None
        self.path = path
        self._page = page
        self._bar = bar
        self._protocol_name = protocol.name
        self._elapsed = QElapsedTimer()
        self._events_s = [time_s for time_s, _ in self.player.events()]
        self._taps = self.player.taps()
        self.fitter = TapFitter(path, self)
        self.fitter.made.connect(self._made)
        self._tap: int | None = None  # the last one that was shown
        self._closed = False
        self._without: set[int] = set()  # taps no picture can be made of
        self._stay = QTimer(self)
        self._stay.setSingleShot(True)
        self._stay.setInterval(STAY_MS)
        self._stay.timeout.connect(self._fit)

    def begin(self) -> None:
        """Show the beginning, playing."""
        self._page.begin_replay(self.player, self._protocol_name, self.path.name)
        self._elapsed.start()
        self.player.playing = True
        self._stay.start()
        self._show(EVERYTHING)

    def close(self) -> None:
        """Let go of the session; safe to repeat."""
        if self._closed:
            return
        self.player.playing = False
        self._closed = True
        self._stay.stop()
        self.fitter.close()
        self.session.close()
        self.deleteLater()  # or the window would keep every session it has shown

    # -- wishes ----------------------------------------------------------------------------------------

    def play(self, on: bool) -> None:
        if on and self.player.position_s >= self.player.duration_s:
            self.seek(0.0)
        self.player.playing = on
        self._show(set())

    def set_speed(self, speed: float) -> None:
        self.player.speed = speed

    def seek(self, position_s: float) -> None:
        self._show(self.player.seek(position_s))

    def step_event(self, way: int) -> None:
        self._show(self.player.step(self._events_s, way))

    def step_tap(self, way: int) -> None:
        # To just behind the tap: its swing is what is looked at.
        self._show(self.player.step([time_s + 0.05 for _, time_s in self._taps], way))

    def show_tap(self, number: int) -> None:
        """The picture of a tap, wherever the replay is."""
        self.player.model.last_tap = number
        self._show({TAP})

    def tick(self) -> None:
        """Once a drawing."""
        elapsed_s = self._elapsed.restart() / 1000.0
        if self.player.playing:
            self._show(self.player.advance(elapsed_s))

    # -- showing ---------------------------------------------------------------------------------------

    def _show(self, changed: Changed) -> None:
        player = self.player
        self._bar.show_position(player.position_s, player.duration_s, player.playing)
        if player.model.last_tap != self._tap:
            self._tap = player.model.last_tap
            self._stay.start()
        if changed:
            self._page.refresh(player.model, changed)

    def _fit(self) -> None:
        """Have the picture of the tap that is shown made, if it has none."""
        number = self._tap
        if number is None:
            self.fitter.start()
        elif number not in self.player.model.pictures and number not in self._without:
            self.fitter.ask(number)

    def _made(self, number: int, picture: dict[str, Any] | None) -> None:
        if picture is None:
            self._without.add(number)
            return
        self.player.keep_picture(number, picture)
        if self.player.model.last_tap == number:
            self._page.refresh(self.player.model, {TAP})
