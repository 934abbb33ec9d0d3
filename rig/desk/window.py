"""The window: which page is shown, the run or replay behind it, and the keys that work everywhere."""

from __future__ import annotations

import shutil
import tempfile
from dataclasses import replace
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING

from PySide6.QtCore import QByteArray, QEvent, QObject, Qt, QTimer
from PySide6.QtGui import QAction, QCloseEvent, QKeyEvent, QKeySequence
from PySide6.QtWidgets import (
    QApplication,
    QFileDialog,
    QMainWindow,
    QMessageBox,
    QStackedWidget,
)

from rig.bench.job import Job
from rig.desk.link import BenchLink
from rig.desk.model.memory import Memory
from rig.desk.model.run_model import EVERYTHING, Changed
from rig.desk.reports import Reports
from rig.desk.sound import Sounds
from rig.desk.theme import DARK, LIGHT, THEMES
from rig.desk.widgets import style
from rig.desk.widgets.start_page import StartPage

if TYPE_CHECKING:
    from rig.desk.bench_page import BenchPage
    from rig.desk.replaying import Replaying
    from rig.desk.widgets.outcome_bar import OutcomeBar
    from rig.desk.widgets.prepare_page import PreparePage
    from rig.desk.widgets.replay_bar import ReplayBar
    from rig.desk.widgets.run_page import RunPage

DRAW_MS = 33
LATER_MS = 100
#: Keys that halt whatever has the focus; a foot pedal sends one of them.
HALT_KEYS = (Qt.Key.Key_Escape, Qt.Key.Key_F12, Qt.Key.Key_Pause)


class Window(QMainWindow):
    """One bench. `folder` holds what is remembered and the ring of a run; all paths are injected by the entry."""

    def __init__(self, memory: Memory, sounds: Sounds, state_folder: Path) -> None:
        super().__init__()
        self.memory = memory
        self.sounds = sounds
        self.theme = THEMES.get(memory.theme, LIGHT)
        app = QApplication.instance()
        assert isinstance(app, QApplication)
        style.apply(app, self.theme)  # before anything takes its size from a font
        self.link: BenchLink | None = None
        self.replaying: Replaying | None = None
        self._closing = False
        self._ring_folder = Path(tempfile.mkdtemp(prefix="haltere-", dir=_memory_folder()))
        self._state_folder = state_folder
        self.start = StartPage(self.theme, memory=memory)
        self.pages = QStackedWidget()
        self.pages.addWidget(self.start)
        self.setCentralWidget(self.pages)
        self.setWindowTitle("Haltere")
        self.setMinimumSize(1024, 640)
        self.resize(1280, 720)
        self._connect()
        self._menus()
        if memory.geometry:
            self.restoreGeometry(QByteArray.fromBase64(memory.geometry.encode("ascii")))
        self._draw = QTimer(self)
        self._draw.setInterval(DRAW_MS)
        self._draw.timeout.connect(self._tick)
        app.installEventFilter(self)
        # The other pages are made once the first one is seen.
        self._later = QTimer(self)
        self._later.setSingleShot(True)
        self._later.timeout.connect(self.build)
        self._later.start(LATER_MS)

    # -- building --------------------------------------------------------------------------------------

    def build(self) -> None:
        """Make all pages; what is needed before is made when it is needed."""
        assert self.prepare is not None and self.bench is not None

    @cached_property
    def prepare(self) -> PreparePage:
        """The page on which a run is prepared."""
        from rig.desk.widgets.prepare_page import PreparePage

        page = PreparePage(self.theme, memory=self.memory, state_folder=self._state_folder)
        page.armed.connect(self.start_run)
        page.back.connect(lambda: self.pages.setCurrentWidget(self.start))
        self.pages.addWidget(page)
        return page

    @cached_property
    def bench(self) -> BenchPage:
        """The page of a run or a replay."""
        from rig.desk.bench_page import BenchPage

        page = BenchPage(self.theme)
        page.run.halted.connect(self.halt)
        page.run.asked.connect(self.ask)
        page.run.reasoned.connect(self.tell_reason)
        page.run.tap_wanted.connect(self.show_tap)
        page.run.said.connect(self.say)
        self.reports = Reports(page.outcome, lambda: self.link.model.session if self.link is not None else "")
        page.outcome.replay.connect(self._replay_last)
        page.outcome.again.connect(self.show_prepare)
        bar = page.replay_bar
        bar.play.connect(lambda on: self._replay("play", on))
        bar.speed.connect(lambda speed: self._replay("set_speed", speed))
        bar.seek.connect(lambda at_s: self._replay("seek", at_s))
        bar.step_event.connect(lambda way: self._replay("step_event", way))
        bar.step_tap.connect(lambda way: self._replay("step_tap", way))
        bar.leave.connect(self.leave_replay)
        self.pages.addWidget(page)
        return page

    @property
    def run(self) -> RunPage:
        return self.bench.run

    @property
    def outcome(self) -> OutcomeBar:
        return self.bench.outcome

    @property
    def replay_bar(self) -> ReplayBar:
        return self.bench.replay_bar

    def _made(self, name: str) -> bool:
        """Whether a page has been made yet."""
        return name in self.__dict__

    def _connect(self) -> None:
        self.start.try_simulated.connect(self.try_simulated)
        self.start.prepare.connect(self.show_prepare)
        self.start.replay.connect(self.choose_replay)
        self.start.replay_file.connect(self.open_replay)

    def _menus(self) -> None:
        for title, actions in (
            (
                "&Bench",
                (
                    ("&Prepare a run", "Ctrl+N", self.show_prepare),
                    ("&Replay a session …", "Ctrl+O", self.choose_replay),
                    ("&Close the window", "Ctrl+Q", self.close),
                ),
            ),
            (
                "&View",
                (
                    ("&Light", "", lambda: self.set_theme(LIGHT.name)),
                    ("&Dark", "", lambda: self.set_theme(DARK.name)),
                    ("&Sounds on or off", "Ctrl+M", self.toggle_sounds),
                ),
            ),
        ):
            menu = self.menuBar().addMenu(title)
            for words, keys, act in actions:
                action = QAction(words, self)
                if keys:
                    action.setShortcut(QKeySequence(keys))
                action.triggered.connect(lambda _=False, act=act: act())
                menu.addAction(action)

    def set_theme(self, name: str) -> None:
        self.theme = THEMES[name]
        self.memory.theme = name
        app = QApplication.instance()
        assert isinstance(app, QApplication)
        style.apply(app, self.theme)
        self.start.set_theme(self.theme)
        for name in ("prepare", "bench"):
            if self._made(name):
                getattr(self, name).set_theme(self.theme)

    def toggle_sounds(self) -> None:
        self.memory.sound = self.sounds.on = not self.sounds.on
        self.statusBar().showMessage(self.sounds.told, 4000)

    # -- runs ------------------------------------------------------------------------------------------

    @property
    def running(self) -> bool:
        """Whether a bench process is at work for this window."""
        return self.link is not None and not self.link.over

    def show_prepare(self) -> None:
        if not self.running:
            self.leave_replay()
            self.pages.setCurrentWidget(self.prepare)

    def try_simulated(self) -> None:
        """Nothing is powered: the simulated boom runs at one press."""
        self.start_run(self.prepare.simulated_job())

    def start_run(self, job: Job) -> None:
        """Start a run that has been armed."""
        if self.running:
            return
        self.leave_replay()
        ring = self._ring_folder / f"ring-{Path(job.out).stem}"
        ring.unlink(missing_ok=True)
        job = replace(job, ring=str(ring))
        # All that takes long comes before the bench process is there to wait for signs of life.
        checked = self.prepare.checked_of(job)
        if checked.rig is None or checked.protocol is None or checked.forecast is None:
            self.say("The files cannot be run; see what is wrong with them.")
            self.show_prepare()
            return
        self.link = BenchLink(job, self)
        self.link.changed.connect(self._changed)
        self.link.ended.connect(self._ended)
        self.run.begin(job, checked.rig, checked.protocol.name, checked.forecast.levels)
        self.run.refresh(self.link.model, EVERYTHING)
        self.outcome.setVisible(False)
        self.pages.setCurrentWidget(self.bench)
        self._draw.start()

    def halt(self) -> None:
        """Take the drive away, whatever else is going on."""
        if self.link is not None and not self.link.over:
            self.link.halt()

    def ask(self, kind: str) -> None:
        if self.link is not None:
            self.link.send(kind)

    def tell_reason(self, tap: int, reason: str) -> None:
        """Why a tap was left out."""
        if self.link is not None:
            self.link.send("reason", reason, tap)

    def _changed(self, changed: Changed) -> None:
        if self.link is None:
            return
        model = self.link.model
        for sound in model.sounds:
            self.sounds.play(sound)
        model.sounds.clear()
        self.run.refresh(model, changed)
        self.outcome.refresh(model)
        if self._closing and model.phase == "waiting":
            self.link.send("end")

    def _ended(self) -> None:
        if self.link is None:
            return
        self.run.refresh(self.link.model, EVERYTHING)
        self.outcome.refresh(self.link.model)
        if self.link.model.session:
            self.memory.add_recent(self.link.model.session)
        if self._closing:
            self.close()

    def _tick(self) -> None:
        if self.replaying is not None:
            self.replaying.tick()
        self.run.tick()

    def show_tap(self, number: int) -> None:
        """A tap was chosen on the ladder or beside its picture."""
        if self.replaying is not None:
            self.replaying.show_tap(number)
        elif self.link is not None:
            self.link.model.last_tap = number
            self.run.refresh(self.link.model, {"tap"})

    # -- replay ----------------------------------------------------------------------------------------

    def _replay(self, wish: str, value: object) -> None:
        if self.replaying is not None:
            getattr(self.replaying, wish)(value)

    def choose_replay(self) -> None:
        if self.running:
            return
        name, _ = QFileDialog.getOpenFileName(
            self, "Replay a session", self.memory.folder, "Sessions (*.h5 *.hdf5);;All files (*)"
        )
        if name:
            self.open_replay(name)

    def _replay_last(self) -> None:
        if self.link is not None and self.link.model.session:
            self.open_replay(self.link.model.session)

    def open_replay(self, path: str) -> bool:
        """Show a stored session; False, with a sentence in the window, if it cannot be opened."""
        if self.running:
            return False
        from rig.desk.replaying import (
            Replaying,
        )  # late: it brings the analysis with it, which a run does not need

        try:
            replaying = Replaying(Path(path), self.run, self.replay_bar, self)
        except Replaying.Refused as refusal:
            self.say(str(refusal))
            return False
        self.leave_replay()
        self.replaying = replaying
        self.memory.add_recent(path)
        self.run.set_replay(True)
        self.outcome.setVisible(False)
        self.replay_bar.setVisible(True)
        self.pages.setCurrentWidget(self.bench)
        self.replaying.begin()
        self._draw.start()
        return True

    def leave_replay(self) -> None:
        if self.replaying is not None:
            self.run.end()
            self.replaying.close()
            self.replaying = None
            self.replay_bar.setVisible(False)
            self._draw.stop()
            self.pages.setCurrentWidget(self.start)

    def say(self, words: str) -> None:
        """One sentence at the foot of the window."""
        self.statusBar().showMessage(words, 15_000)

    # -- everywhere ------------------------------------------------------------------------------------

    def eventFilter(self, watched: QObject, event: QEvent) -> bool:
        """The halt keys work whatever has the focus, a dialog too; the key goes on to where it was meant for."""
        if event.type() == QEvent.Type.KeyPress and isinstance(event, QKeyEvent):
            halts = event.key() in HALT_KEYS and not event.isAutoRepeat()
            if halts and self.running and self.link is not None and self.link.model.may_be_driven:
                self.halt()
        return False  # every event of the program comes by here: not a call more than needed

    def _may_go(self) -> bool:
        """Edits that are in no file are not thrown away without asking, and asking is never in a run's way."""
        unsaved = self.prepare.unsaved() if self._made("prepare") else []
        if not unsaved or not self.isVisible():
            return True
        words = f"Edits of {' and '.join(unsaved)} are in no file yet. Close and lose them?"
        buttons = QMessageBox.StandardButton.Discard | QMessageBox.StandardButton.Cancel
        answer = QMessageBox.question(
            self, "Edits not saved", words, buttons, QMessageBox.StandardButton.Cancel
        )
        return answer is QMessageBox.StandardButton.Discard

    def closeEvent(self, event: QCloseEvent) -> None:
        """A run still on is halted; the window goes once its session is sealed, or at the second asking."""
        if self.running and not self._closing:
            self._closing = True
            self.halt()
            self.ask("end")  # of a run that stands still already
            self.say(
                "Halting; the window closes when the session is sealed. Close again to leave it to itself."
            )
            event.ignore()
            return
        if not self.running and not self._may_go():
            event.ignore()
            return
        self.memory.geometry = bytes(self.saveGeometry().toBase64().data()).decode("ascii")
        self.memory.save()
        if self.link is not None:
            self.link.close()
        if self._made("bench"):
            self.reports.cancel()
        self._draw.stop()
        self._later.stop()
        if self._made("bench"):
            self.run.end()
        if self.replaying is not None:
            self.replaying.close()
        if self._made("prepare"):
            self.prepare.close_down()
        self.sounds.close()
        app = QApplication.instance()
        if app is not None:
            app.removeEventFilter(self)
        shutil.rmtree(self._ring_folder, ignore_errors=True)
        event.accept()


def _memory_folder() -> str | None:
    """Where a ring is best kept: on a memory file system, where a busy disk cannot hold it up."""
    return "/dev/shm" if Path("/dev/shm").is_dir() else None
