"""The page on which a run is prepared: two files, what they come to, the cautions, and the arm button.

    rig file       protocol          where, session
    (text)         (text)            cautions
    mistakes, or the dry run         what is missing, Arm and run

Files are checked in a process of their own a moment after typing stops; until the answer is there the run cannot
be armed. What is armed is the text as it stands here, kept in a file or not.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path

from PySide6.QtCore import QEvent, Qt, QTimer, Signal
from PySide6.QtGui import QShowEvent
from PySide6.QtWidgets import (
    QFrame,
    QHBoxLayout,
    QLabel,
    QPushButton,
    QSplitter,
    QVBoxLayout,
    QWidget,
)

from drivers.ports import Port, serial_ports
from rig.bench.job import Job
from rig.command.moment import utc_s, utc_text
from rig.desk.checker import Checker
from rig.desk.model.acknowledgements import Acknowledgements
from rig.desk.model.checked import Checked, check, problem_sentence
from rig.desk.model.memory import Memory
from rig.desk.model.prepared import FIRST_PROTOCOL, FIRST_RIG, Prepared, session_folder
from rig.desk.model.written_file import PROTOCOL, RIG, WrittenFile, opened
from rig.desk.theme import Theme
from rig.desk.widgets.arm_control import ArmControl
from rig.desk.widgets.cautions_panel import CautionsPanel
from rig.desk.widgets.check_results import CheckResults
from rig.desk.widgets.file_pane import FilePane
from rig.desk.widgets.run_place import RunPlace
from rig.desk.widgets.shapes import ShapeMark, sized
from rig.desk.widgets.style import set_kind
from rig.run.cautions import Acknowledgement

TYPING_MS = 300
#: How often it is looked whether an acknowledgement still holds and the session's name is still free.
LOOK_MS = 20_000
ACKNOWLEDGEMENTS = "acknowledgements.json"
RIGHT_EM = 25


class PreparePage(QWidget):
    """`armed(Job)` when the run is to begin, `back` to leave. Clocks, ports and checks are injected for tests."""

    armed = Signal(object)
    back = Signal()

    def __init__(
        self,
        theme: Theme,
        parent: QWidget | None = None,
        *,
        memory: Memory | None = None,
        state_folder: Path | None = None,
        ports: Callable[[], Sequence[Port]] = serial_ports,
        now_s: Callable[[], float] = utc_s,
        now_text: Callable[[], str] = utc_text,
        checker: Checker | None = None,
    ) -> None:
        super().__init__(parent)
        self.memory = memory if memory is not None else Memory()
        self._now_s, self._now_text = now_s, now_text
        self._state_folder = state_folder
        self._theme = theme
        self._acknowledgements = Acknowledgements((state_folder or Path()) / ACKNOWLEDGEMENTS)
        rig, rig_lost = opened(self.memory.rig, FIRST_RIG)
        protocol, protocol_lost = opened(self.memory.protocol, FIRST_PROTOCOL)
        self.prepared = Prepared(rig, protocol, session_folder(self.memory.folder))
        self.checker = checker if checker is not None else Checker(self)
        self.rig_pane = FilePane(theme, RIG, "&Rig file", rig, self.memory)
        self.protocol_pane = FilePane(theme, PROTOCOL, "&Protocol", protocol, self.memory)
        self.results = CheckResults(theme)
        self.place = RunPlace(theme, ports)
        self.cautions = CautionsPanel(theme)
        self.arm = ArmControl(theme)
        self._parts = (
            self.rig_pane,
            self.protocol_pane,
            self.results,
            self.place,
            self.cautions,
            self.arm,
        )
        self.back_button = QPushButton("‹  Bac&k")
        set_kind(self.back_button, "quiet")
        self.title = QLabel("Prepare a run")
        set_kind(self.title, "heading")
        self.state_mark, self.state = ShapeMark(theme), QLabel()
        self._arrange()
        self._typing = QTimer(self)
        self._typing.setSingleShot(True)
        self._typing.setInterval(TYPING_MS)
        self._look = QTimer(self)
        self._look.setInterval(LOOK_MS)
        self._connect()
        self.cautions.name.setText(self.memory.operator)
        self.set_theme(theme)
        self._say_state("ring", "not checked yet")
        self.refresh()
        for pane, lost in ((self.rig_pane, rig_lost), (self.protocol_pane, protocol_lost)):
            if lost:
                pane.tell(lost)

    # -- building --------------------------------------------------------------------------------------

    def _arrange(self) -> None:
        head = QHBoxLayout()
        head.setSpacing(8)
        head.addWidget(self.back_button)
        head.addWidget(self.title)
        head.addStretch(1)
        head.addWidget(self.state_mark)
        head.addWidget(self.state)
        self.texts = QSplitter(Qt.Orientation.Horizontal)
        self.texts.addWidget(self.rig_pane)
        self.texts.addWidget(self.protocol_pane)
        self.texts.setSizes([1000, 1000])
        self.rows = QSplitter(Qt.Orientation.Vertical)
        self.rows.addWidget(self.texts)
        self.rows.addWidget(self.results)
        self.rows.setStretchFactor(0, 5)
        self.rows.setStretchFactor(1, 3)
        for splitter in (self.texts, self.rows):
            splitter.setChildrenCollapsible(False)
            splitter.setHandleWidth(8)
        self.side = QFrame()
        set_kind(self.side, "panel")
        side = QVBoxLayout(self.side)
        side.setContentsMargins(12, 10, 12, 12)
        side.setSpacing(10)
        side.addWidget(self.place)
        side.addWidget(_rule())
        side.addWidget(self.cautions, 1)
        side.addWidget(_rule())
        side.addWidget(self.arm)
        body = QHBoxLayout()
        body.setSpacing(10)
        body.addWidget(self.rows, 1)
        body.addWidget(self.side)
        column = QVBoxLayout(self)
        column.setContentsMargins(10, 6, 10, 10)
        column.setSpacing(6)
        column.addLayout(head)
        column.addLayout(body, 1)

    def _connect(self) -> None:
        self.back_button.clicked.connect(lambda: self.back.emit())
        self._typing.timeout.connect(self.check_now)
        self._look.timeout.connect(self.refresh)
        for pane in (self.rig_pane, self.protocol_pane):
            pane.changed.connect(self._edited)
            pane.opened.connect(self._opened)
        self.checker.done.connect(self._checked)
        self.checker.failed.connect(self._not_checked)
        self.results.chosen.connect(self._go_to)
        self.place.changed.connect(self.refresh)
        self.place.folder_chosen.connect(self._folder_chosen)
        self.cautions.acknowledged.connect(self._acknowledged)
        self.cautions.withdrawn.connect(self._withdrawn)
        self.arm.although_changed.connect(self.refresh)
        self.arm.pressed.connect(self._arm)

    # -- checks ----------------------------------------------------------------------------------------

    def _edited(self) -> None:
        self.prepared.changed()
        self._say_state("dotted", "checking …")
        self.refresh()
        self._typing.start()

    def _opened(self) -> None:
        self.prepared.rig, self.prepared.protocol = self.rig_pane.file, self.protocol_pane.file
        self.prepared.changed()
        self.check_now()

    def check_now(self) -> None:
        """Check what stands in the editors, in the other process."""
        self._typing.stop()
        for pane in (self.rig_pane, self.protocol_pane):
            pane.take_text()
        self._say_state("dotted", "checking …")
        self.checker.ask(self.prepared.changed(), self.prepared.question())
        self.refresh()

    def _checked(self, number: int, checked: Checked) -> None:
        if not self.prepared.take(number, checked):
            return
        self.place.show_rig(checked.rig)
        for pane, found in (
            (self.rig_pane, checked.rig_problems),
            (self.protocol_pane, checked.protocol_problems),
        ):
            marks: dict[int, list[str]] = {}
            for problem in found:
                marks.setdefault(problem.line, []).append(problem_sentence(problem))
            pane.editor.set_marks(marks)
        self.results.show_checked(checked, self.prepared.rig.name, self.prepared.protocol.name)
        count = checked.problem_count
        if count:
            self._say_state("cross", f"{count} mistake{'s' if count > 1 else ''}", alert=True)
        elif checked.crossings:
            self._say_state("warning", "a limit would be crossed", alert=True)
        else:
            self._say_state("disc", "no mistakes")
        self.refresh()

    def _not_checked(self, number: int, sentence: str) -> None:
        if number != self.prepared.generation:
            return
        self.results.show_sentence(sentence)
        self._say_state("cross", "not checked", alert=True)
        self.refresh()

    def _go_to(self, which: str, line: int) -> None:
        (self.rig_pane if which == RIG else self.protocol_pane).editor.go_to(line)

    def _say_state(self, shape: str, words: str, *, alert: bool = False) -> None:
        self.state_mark.show_shape(shape, self._theme.alert if alert else self._theme.ink)
        self.state.setText(words)
        set_kind(self.state, "alert" if alert else "")

    # -- arming ----------------------------------------------------------------------------------------

    def refresh(self) -> None:
        """Tell again who has acknowledged, and what is missing."""
        prepared, place = self.prepared, self.place
        prepared.by_port, prepared.port = place.by_port, place.port
        prepared.folder, prepared.session_typed = session_folder(self.memory.folder), place.session_typed
        if prepared.checked is not None:
            place.show_session(prepared.folder, prepared.default_session(self._now_text()))
        self.cautions.show_state(
            powered=prepared.powered, rig_known=bool(prepared.rig_sha256), held=self._held()
        )
        self.arm.show_state(
            self.missing(),
            crossings=prepared.checked is not None and bool(prepared.checked.crossings),
            powered=prepared.powered,
        )

    def missing(self) -> list[str]:
        """What must be done before arming, a sentence each."""
        return self.prepared.missing(self._now_text(), self._held(), although=self.arm.although.isChecked())

    def _held(self) -> Acknowledgement | None:
        return self._acknowledgements.holding(self.prepared.rig_sha256, self._now_s())

    def _folder_chosen(self, folder: str) -> None:
        self.memory.folder = folder
        self.refresh()

    def _acknowledged(self, name: str) -> None:
        if not name or not self.prepared.rig_sha256:
            return
        self._acknowledgements.acknowledge(name, self.prepared.rig_sha256, self._now_s())
        self.memory.operator = name
        self.refresh()
        for part in (self.arm.button, self.arm.although, self.back_button):
            if part.isEnabled() and part.isVisibleTo(self):
                part.setFocus(Qt.FocusReason.OtherFocusReason)
                return

    def _withdrawn(self) -> None:
        self._acknowledgements.withdraw(self.prepared.rig_sha256)
        self.refresh()
        self.cautions.name.clear()
        self.cautions.name.setFocus(Qt.FocusReason.OtherFocusReason)

    def _arm(self) -> None:
        self.refresh()  # time has passed since the button was enabled
        if self.missing():
            return
        held = self._held() if self.prepared.powered else None
        job = self.prepared.job(
            self._now_text(),
            self._now_s(),
            software=_software(),
            state_folder=str(self._state_folder or ""),
            acknowledged_by=held.name if held is not None else "",
        )
        self.memory.folder = str(self.prepared.folder)
        self.memory.rig, self.memory.protocol = self.prepared.rig.source, self.prepared.protocol.source
        self.memory.save()
        self.place.forget_session()
        self.arm.although.setChecked(False)
        self.checker.rest()
        self.armed.emit(job)

    # -- for the window --------------------------------------------------------------------------------

    def simulated_job(self) -> Job:
        """A short run on the simulated boom, as shipped: it needs no preparation."""
        folder = session_folder(self.memory.folder)
        simulated = Prepared(WrittenFile.open(FIRST_RIG), WrittenFile.open(FIRST_PROTOCOL), folder)
        return simulated.job(
            self._now_text(),
            self._now_s(),
            software=_software(),
            state_folder=str(self._state_folder or ""),
        )

    def checked_of(self, job: Job) -> Checked:
        """Rig, protocol and dry run of a job; checked now if it is not the one prepared here."""
        checked = self.prepared.checked
        if checked is not None and checked.is_of(job.rig_text, job.protocol_text):
            return checked
        return check(job.rig_text, job.rig_name, job.protocol_text, job.protocol_name)

    def unsaved(self) -> list[str]:
        """Names of the files with edits that are in no file."""
        for pane in (self.rig_pane, self.protocol_pane):
            pane.take_text()
        return [pane.file.name for pane in (self.rig_pane, self.protocol_pane) if pane.file.edited]

    def close_down(self) -> None:
        """End the process of the checks and the timers."""
        self._typing.stop()
        self._look.stop()
        self.checker.rest()

    # -- look ------------------------------------------------------------------------------------------

    def showEvent(self, event: QShowEvent) -> None:
        super().showEvent(event)
        self._look.start()
        if self.prepared.checked is None and not self.checker.busy:
            self.check_now()
        else:
            self.refresh()
        self.rig_pane.chooser.setFocus(Qt.FocusReason.OtherFocusReason)
        for pane in (self.rig_pane, self.protocol_pane):
            pane.look_at_disk()

    def hideEvent(self, event: QEvent) -> None:
        super().hideEvent(event)  # type: ignore[arg-type]
        self._look.stop()

    def set_theme(self, theme: Theme) -> None:
        self._theme = theme
        for part in self._parts:
            part.set_theme(theme)
        self._say_state(
            self.state_mark.shape, self.state.text(), alert=self.state.property("kind") == "alert"
        )
        self._fit()

    def _fit(self) -> None:
        self.side.setFixedWidth(round(RIGHT_EM * self.fontMetrics().height() * 0.85))
        font = sized(self.font(), 1.25, bold=True)
        if self.title.font() != font:
            self.title.setFont(font)

    def changeEvent(self, event: QEvent) -> None:
        super().changeEvent(event)
        if event.type() == QEvent.Type.FontChange and hasattr(self, "side"):
            self._fit()


def _software() -> str:
    from rig.command.sessions import software  # late: it loads the whole analysis

    return software()


def _rule() -> QFrame:
    line = QFrame()
    line.setFixedHeight(1)
    set_kind(line, "rule")
    return line
