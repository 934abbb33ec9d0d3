"""A page on which runs are prepared, as the tests hold it: clock, ports and folders are theirs."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

from PySide6.QtCore import QTimer
from PySide6.QtWidgets import QApplication
from pytestqt.qtbot import QtBot

from drivers.ports import Port
from rig.bench.job import Job
from rig.desk.checker import Checker, Texts
from rig.desk.model.checked import check
from rig.desk.model.memory import Memory
from rig.desk.theme import THEMES
from rig.desk.widgets import style
from rig.desk.widgets.prepare_page import PreparePage
from rig.shipped import shipped_folder

#: Loading the numerics takes seconds on a busy computer.
LONG_MS = 60_000
NOON_S = 1_740_830_400.0  # 2025-03-01 12:00 UTC (GNU date)
NOON = "2025-03-01T12:00:00+00:00"


def shipped(name: str) -> str:
    return (shipped_folder() / f"{name}.toml").read_text(encoding="utf-8")


class CheckedHere(Checker):
    """Checks in this process, a little later: starting another takes seconds. Its rest is that of the real one."""

    def ask(self, number: int, texts: Texts) -> None:
        self._wanted = (number, texts)
        QTimer.singleShot(0, lambda: self._answer(number))

    def _answer(self, number: int) -> None:
        if self._wanted is not None and self._wanted[0] == number:
            texts, self._wanted = self._wanted[1], None
            self.done.emit(number, check(*texts))


class Bench:
    """A page with a clock that can be set, the ports there are, and what was armed."""

    def __init__(
        self, qtbot: QtBot, folder: Path, memory: Memory | None = None, checker: Checker | None = None
    ) -> None:
        self.qtbot = qtbot
        self.folder = folder
        self.now_s = NOON_S
        self.ports: tuple[Port, ...] = (Port("/dev/ttyACM0", "flywheel board"),)
        self.armed: list[Job] = []
        self.memory = memory if memory is not None else Memory(folder / "window.json", folder=str(folder))
        app = QApplication.instance()
        assert isinstance(app, QApplication)
        style.apply(app, THEMES["light"])
        self.page = PreparePage(
            THEMES["light"],
            memory=self.memory,
            state_folder=folder / "state",
            ports=lambda: self.ports,
            now_s=lambda: self.now_s,
            now_text=lambda: NOON,
            checker=checker if checker is not None else CheckedHere(),
        )
        self.page.armed.connect(self.armed.append)
        qtbot.addWidget(self.page)
        self.page.resize(1280, 720)
        self.page.show()
        self.page.activateWindow()
        qtbot.waitUntil(self.page.isActiveWindow, timeout=LONG_MS)

    def checked(self) -> None:
        """Wait until what stands in the editors is checked."""
        page = self.page
        self.qtbot.waitUntil(lambda: not page._typing.isActive() and not page.checker.busy, timeout=LONG_MS)

    def type(self, which: str, keys: str) -> None:
        """Type at the beginning of a text."""
        editor = (self.page.rig_pane if which == "rig" else self.page.protocol_pane).editor
        editor.text.setFocus()
        self.qtbot.keyClicks(editor.text, keys)

    def replace(self, which: str, old: str, new: str) -> None:
        """Edit a text as somebody who types would."""
        editor = (self.page.rig_pane if which == "rig" else self.page.protocol_pane).editor
        text = editor.plain_text()
        assert old in text
        editor.text.selectAll()
        editor.text.insertPlainText(text.replace(old, new))
        self.checked()

    def powered(self) -> None:
        """Send the run to the board's port."""
        self.page.place.look_for_ports()
        self.page.place.choose_place(("port", "/dev/ttyACM0"))

    @property
    def can_be_armed(self) -> bool:
        return self.page.arm.button.isEnabled()


Make = Callable[..., Bench]


@contextmanager
def benches(qtbot: QtBot, folder: Path) -> Iterator[Make]:
    """Makes pages, with their own memory or checker if given; closes them down in the end."""
    made: list[Bench] = []

    def one(memory: Memory | None = None, checker: Checker | None = None) -> Bench:
        made.append(Bench(qtbot, folder, memory, checker))
        return made[-1]

    yield one
    for bench in made:
        bench.page.close_down()
