"""A replay on the run page: the player, its position shown, its tap pictures made off the window's loop."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from PySide6.QtCore import QElapsedTimer, QObject, QRunnable, QThreadPool, Signal

from rig.desk.model.replay_model import ReplayModel
from rig.desk.model.run_model import EVERYTHING, TAP, Changed
from rig.desk.widgets.replay_bar import ReplayBar
from rig.desk.widgets.run_page import RunPage
from rig.problem import FileProblems
from rig.record.errors import Damaged
from rig.session import open_session


class _PictureTask(QRunnable):
    """Fits one tap of the session."""

    class Told(QObject):
        made = Signal(int, object)

    def __init__(self, player: ReplayModel, number: int) -> None:
        super().__init__()
        self.told = self.Told()
        self._player = player
        self._number = number

    def run(self) -> None:
        try:
            picture = self._player.picture(self._number)
        except (Damaged, ValueError) as error:
            picture = {"failed": str(error)}
        self.told.made.emit(self._number, picture)


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
        self._pool = QThreadPool(self)
        self._pool.setMaxThreadCount(1)
        self._elapsed = QElapsedTimer()
        self._events_s = [time_s for time_s, _ in self.player.events()]
        self._taps = self.player.taps()
        self._asked: set[int] = set()

    def begin(self) -> None:
        """Show the beginning, playing."""
        self._page.begin_replay(self.player, self._protocol_name, self.path.name)
        self._elapsed.start()
        self.player.playing = True
        self._show(EVERYTHING)

    def close(self) -> None:
        self.player.playing = False
        self._pool.waitForDone(20_000)
        self.session.close()

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
        number = player.model.last_tap
        if number is not None and number not in player.model.pictures:
            self._ask(number)
        if changed:
            self._page.refresh(player.model, changed)

    def _ask(self, number: int) -> None:
        if number in self._asked:
            return
        self._asked.add(number)
        task = _PictureTask(self.player, number)
        task.told.made.connect(self._made)
        self._told = task.told  # the task may be gone before its signal is delivered
        self._pool.start(task)

    def _made(self, number: int, picture: dict[str, Any] | None) -> None:
        self._asked.discard(number)
        if picture is not None and "failed" not in picture:
            self.player.model.pictures[number] = picture
            if self.player.model.last_tap == number:
                self._page.refresh(self.player.model, {TAP})
