"""The page: mistakes disarm and are told at their lines, cautions hold a shift, keys alone lead from open to armed."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest
from preparing import LONG_MS, NOON_S, Bench, Make, benches, shipped
from PySide6.QtCore import QPoint, Qt, QTimer
from PySide6.QtWidgets import QApplication, QCheckBox, QFileDialog, QLabel, QLineEdit, QPushButton, QWidget
from pytestqt.qtbot import QtBot

from rig.desk.checker import Checker
from rig.desk.model.memory import Memory
from rig.desk.theme import THEMES
from rig.desk.widgets import style
from rig.desk.widgets.run_place import TYPED
from rig.run.cautions import VALID_S


@pytest.fixture
def make(qtbot: QtBot, tmp_path: Path, nothing_left: None) -> Iterator[Make]:
    with benches(qtbot, tmp_path) as one:
        yield one


@pytest.fixture
def bench(make: Make) -> Bench:
    made = make()
    made.checked()
    return made


# -- mistakes ------------------------------------------------------------------------------------------


def test_a_simulated_run_as_shipped_can_be_armed(make: Make) -> None:
    bench = make(checker=Checker())
    bench.checked()
    page = bench.page
    assert page.checker.pid
    assert bench.can_be_armed and page.state.text() == "no mistakes"
    assert page.results.stack.currentWidget() is page.results.forecast
    assert page.results.forecast.table.rowCount() == 6
    assert any("off does not mean stopped" in words for words in page.results.forecast.words())
    page.arm.button.click()
    (job,) = bench.armed
    assert job.out == str(bench.folder / "boom-quick-20250301-120000.h5")
    assert (job.port, job.acknowledged_by) == ("", "") and job.software.startswith("haltere ")
    assert job.state_folder == str(bench.folder / "state") and job.rig().simulated
    assert page.checker.pid == 0  # nothing works beside a run
    assert page.checked_of(job) is page.prepared.checked


def test_a_mistake_disarms_and_is_told_at_its_line_until_it_is_mended(bench: Bench, qtbot: QtBot) -> None:
    page = bench.page
    bench.replace("rig", 'current = "6 A"', 'current = "6 V"')
    bench.replace("protocol", 'order = "rising"', 'order = "sideways"')
    assert not bench.can_be_armed and page.arm.missing() == ["2 mistakes in the files."]
    assert "2 mistakes in the files." in page.arm.button.accessibleDescription()
    lines = {}
    for which, pane in (("rig", page.rig_pane), ("protocol", page.protocol_pane)):
        ((line, (sentence,)),) = pane.editor.text.marks.items()
        lines[which] = line
        assert sentence in page.results.problems.sentences() and f"line {line}," in sentence
    assert page.rig_pane.editor.plain_text().split("\n")[lines["rig"] - 1] == 'current = "6 V"'
    listed = page.results.problems.list
    assert page.results.stack.currentWidget() is page.results.problems
    listed.setFocus()
    qtbot.keyClick(listed, Qt.Key.Key_End)
    qtbot.keyClick(listed, Qt.Key.Key_Return)
    assert page.protocol_pane.editor.text.textCursor().blockNumber() == lines["protocol"] - 1
    assert page.protocol_pane.editor.text.hasFocus()
    bench.replace("rig", 'current = "6 V"', 'current = "6 A"')
    bench.replace("protocol", 'order = "sideways"', 'order = "rising"')
    assert (
        bench.can_be_armed and page.rig_pane.editor.text.marks == {} == page.protocol_pane.editor.text.marks
    )


def test_what_is_typed_disarms_at_once(bench: Bench, qtbot: QtBot) -> None:
    bench.type("rig", "#")
    assert not bench.can_be_armed and bench.page.arm.missing() == ["The files are being checked."]
    qtbot.keyClick(bench.page, Qt.Key.Key_A, Qt.KeyboardModifier.AltModifier)
    assert bench.armed == []
    bench.checked()
    assert bench.can_be_armed
    bench.page.arm.button.click()
    assert bench.armed[0].rig_text == "#" + shipped("boom")  # as it stands here, in no file


def test_no_part_ever_becomes_a_window(bench: Bench, qapp: QApplication) -> None:
    bench.powered()
    for old, new in (("60 Hz", "30 Hz"), ("30 Hz", "30 V"), ("30 V", "60 Hz")):
        bench.replace("rig", f'flap_rate = "{old}"', f'flap_rate = "{new}"')
        bench.page.refresh()
        bench.page.arm.show_state(["a"], crossings=False, powered=True)
        bench.page.arm.show_state(["b"], crossings=False, powered=True)
        qapp.processEvents()
        assert [window for window in qapp.topLevelWidgets() if window.isVisible()] == [bench.page]


@pytest.mark.parametrize(
    "text",
    ["rubbish ]] = [", "\x01\x02\u2028\u2029\ufeff", "a = " + "[" * 3000, "\ud83d", "[rig]\n" * 2, ""],
)
def test_rubbish_is_told_not_raised(bench: Bench, qtbot: QtBot, text: str) -> None:
    editor = bench.page.rig_pane.editor.text
    editor.selectAll()
    editor.insertPlainText(text)
    if not text:
        editor.clear()
    bench.checked()
    assert not bench.can_be_armed and bench.page.results.problems.sentences()


def test_the_window_lives_while_a_large_text_is_checked(make: Make, qtbot: QtBot) -> None:
    """Half a minute of checking in the other process; here the clock goes on ticking and keys are taken."""
    bench = make(checker=Checker())
    bench.checked()
    editor = bench.page.rig_pane.editor
    editor.text.setPlainText("".join(f"key{number} = 1\n" for number in range(70_000)))
    qtbot.waitUntil(lambda: bench.page.checker.busy, timeout=LONG_MS)
    ticks: list[int] = []
    timer = QTimer()
    timer.timeout.connect(lambda: ticks.append(1))
    timer.start(5)
    qtbot.waitUntil(lambda: len(ticks) >= 20, timeout=LONG_MS)
    qtbot.keyClicks(editor.text, "# ")
    assert bench.page.checker.busy and editor.plain_text().startswith("# key0")
    assert not bench.can_be_armed
    editor.text.setPlainText(shipped("boom"))  # what is no longer wanted is given up
    bench.checked()
    assert bench.can_be_armed


def test_a_check_that_breaks_off_is_told(bench: Bench) -> None:
    bench.page.check_now()
    bench.page.checker.failed.emit(bench.page.prepared.generation, "The check has broken off.")
    assert "The check has broken off." in bench.page.results.problems.sentences()
    assert not bench.can_be_armed


# -- limits, cautions, place ---------------------------------------------------------------------------


def test_a_limit_that_would_be_crossed_is_answered_each_time(bench: Bench, qtbot: QtBot) -> None:
    arm = bench.page.arm
    assert arm.although.isHidden()
    bench.replace("rig", 'flap_rate = "60 Hz"', 'flap_rate = "30 Hz"')
    assert not bench.can_be_armed and arm.although.isVisible() and not arm.although.isChecked()
    assert any(words.startswith("Limit: ") for words in bench.page.results.forecast.words())
    assert bench.page.state.text() == "a limit would be crossed"
    qtbot.keyClick(arm.although, Qt.Key.Key_Space)
    assert bench.can_be_armed
    arm.button.click()
    assert len(bench.armed) == 1 and not arm.although.isChecked() and not bench.can_be_armed
    qtbot.keyClick(arm.although, Qt.Key.Key_Space)
    bench.replace("rig", 'flap_rate = "30 Hz"', 'flap_rate = "29 Hz"')
    assert not arm.although.isChecked() and not bench.can_be_armed  # other limits: asked anew


def test_a_powered_run_needs_a_name_that_holds_a_shift(bench: Bench, qtbot: QtBot) -> None:
    page = bench.page
    bench.powered()
    assert not bench.can_be_armed and "acknowledged" in page.arm.missing()[0]
    qtbot.keyClicks(page.cautions.name, "A. Person")
    qtbot.keyClick(page.cautions.understood, Qt.Key.Key_Space)
    assert bench.can_be_armed and any("switches the drive on" in words for words in page.arm.told.words())
    page.arm.button.click()
    assert (bench.armed[0].acknowledged_by, bench.armed[0].port) == ("A. Person", "/dev/ttyACM0")
    bench.now_s = NOON_S + VALID_S + 1.0
    page.arm.button.click()  # enabled still: it is looked at again when pressed
    assert len(bench.armed) == 1 and not bench.can_be_armed
    assert page.cautions.name.isVisible() and page.cautions.name.text() == "A. Person"


def test_another_rig_file_is_acknowledged_anew(bench: Bench) -> None:
    bench.powered()
    bench.page.cautions.acknowledged.emit("A. Person")
    assert bench.can_be_armed
    bench.replace("rig", 'current = "6 A"', 'current = "5 A"')
    assert not bench.can_be_armed
    bench.replace("rig", 'current = "5 A"', 'current = "6 A"')
    assert bench.can_be_armed
    bench.page.cautions.another.click()
    assert not bench.can_be_armed and bench.page.cautions.name.text() == ""


def test_the_next_window_knows_who_acknowledged(bench: Bench, make: Make) -> None:
    bench.page.cautions.acknowledged.emit("A. Person")
    bench.page.close_down()
    again = make(bench.memory)
    again.checked()
    again.powered()
    assert again.can_be_armed and "A. Person" in again.page.cautions.told.words()[0]


def test_ports_are_those_there_when_the_list_is_opened(bench: Bench, qtbot: QtBot) -> None:
    where = bench.page.place.where

    def words() -> list[str]:
        return [where.itemText(row) for row in range(where.count())]

    where.showPopup()
    assert words() == ["Simulated, in real time", "/dev/ttyACM0, flywheel board", "Another address"]
    where.hidePopup()
    bench.powered()
    bench.ports = ()
    where.showPopup()
    assert words() == ["Simulated, in real time", "/dev/ttyACM0, not there", "Another address"]
    where.hidePopup()
    assert where.currentText() == "/dev/ttyACM0, not there" and bench.page.prepared.port == "/dev/ttyACM0"


def test_an_address_is_typed(bench: Bench, qtbot: QtBot) -> None:
    page = bench.page
    page.cautions.acknowledged.emit("A. Person")
    page.place.choose_place(TYPED)
    assert page.place.address.isVisible() and not bench.can_be_armed and "not given" in page.arm.missing()[0]
    qtbot.keyClicks(page.place.address, "socket://bench")
    assert "socket://HOST:PORT" in page.arm.missing()[0]
    qtbot.keyClicks(page.place.address, ":5000")
    assert bench.can_be_armed
    page.arm.button.click()
    assert bench.armed[0].port == "socket://bench:5000"


def test_a_rig_file_of_a_board_runs_where_it_says(bench: Bench) -> None:
    bench.replace("rig", 'driver = "simulated"', 'driver = "board"\nport = "/dev/ttyUSB7"')
    assert bench.page.place.where.currentText().startswith("/dev/ttyUSB7")
    assert "acknowledged" in bench.page.arm.missing()[0]
    bench.page.cautions.acknowledged.emit("A. Person")
    bench.page.arm.button.click()
    assert bench.armed[0].port == "" and bench.armed[0].rig().port == "/dev/ttyUSB7"


# -- names ---------------------------------------------------------------------------------------------


def test_a_name_is_made_that_is_free(bench: Bench, qtbot: QtBot) -> None:
    page, session = bench.page, bench.page.place.session
    assert session.text() == "boom-quick-20250301-120000.h5"
    (bench.folder / session.text()).touch()
    page.refresh()
    assert session.text() == "boom-quick-20250301-120000-2.h5" and bench.can_be_armed
    session.selectAll()
    qtbot.keyClicks(session, "boom-quick-20250301-120000.h5")
    assert not bench.can_be_armed and "is there already" in page.arm.missing()[0]
    session.selectAll()
    qtbot.keyClicks(session, "mine.h5")
    assert bench.can_be_armed
    page.arm.button.click()
    assert bench.armed[0].out == str(bench.folder / "mine.h5")
    page.refresh()
    assert session.text() == "boom-quick-20250301-120000-2.h5"  # the next run has a name of its own


def test_the_folder_chosen_is_remembered(bench: Bench, qtbot: QtBot) -> None:
    other = bench.folder / "other"
    other.mkdir()
    bench.page.place.folder_button.click()
    dialog = bench.page.findChild(QFileDialog)
    dialog.fileSelected.emit(str(other))
    dialog.close()
    bench.page.arm.button.click()
    assert Path(bench.armed[0].out).parent == other
    assert bench.memory.path is not None
    stored = Memory.load(bench.memory.path)
    assert (stored.folder, stored.rig, stored.protocol) == (str(other), "boom", "quick")


def test_nothing_is_armed_into_a_folder_that_is_gone(bench: Bench) -> None:
    bench.page.place.session.setFocus()
    gone = bench.folder / "gone"
    gone.mkdir()
    bench.page.place.folder_chosen.emit(str(gone))
    assert bench.page.prepared.folder == gone
    gone.rmdir()
    bench.page.arm.button.click()
    assert not bench.armed or Path(bench.armed[0].out).parent.is_dir()


# -- keys, sizes ---------------------------------------------------------------------------------------


def focused() -> QWidget:
    widget = QApplication.focusWidget()
    assert widget is not None
    return widget


def tab_to(qtbot: QtBot, wanted: QWidget) -> None:
    for _ in range(60):
        if focused() is wanted:
            return
        qtbot.keyClick(focused(), Qt.Key.Key_Tab)
    raise AssertionError(f"{wanted} is not reached by the tab key")


def test_keys_alone_lead_from_open_to_armed(bench: Bench, qtbot: QtBot) -> None:
    page = bench.page
    page.activateWindow()
    qtbot.waitUntil(lambda: QApplication.focusWidget() is page.rig_pane.chooser, timeout=LONG_MS)
    column = page.rig_pane.chooser.findText("column")
    boom = page.rig_pane.chooser.currentIndex()
    for _ in range(column - boom):  # each is opened on the way
        qtbot.keyClick(focused(), Qt.Key.Key_Down)
    assert page.rig_pane.file.name == "column"
    tab_to(qtbot, page.protocol_pane.chooser)
    qtbot.keyClicks(focused(), "column-s")
    assert page.protocol_pane.file.name == "column-sweep"
    bench.checked()
    tab_to(qtbot, page.place.where)
    qtbot.keyClick(focused(), Qt.Key.Key_Down)
    assert page.prepared.port == "/dev/ttyACM0"
    tab_to(qtbot, page.cautions.list)
    tab_to(qtbot, page.cautions.name)
    qtbot.keyClicks(focused(), "A. Person")
    tab_to(qtbot, page.cautions.understood)
    qtbot.keyClick(focused(), Qt.Key.Key_Space)
    if page.arm.although.isVisible():
        tab_to(qtbot, page.arm.although)
        qtbot.keyClick(focused(), Qt.Key.Key_Space)
    tab_to(qtbot, page.arm.button)
    qtbot.keyClick(focused(), Qt.Key.Key_Space)
    (job,) = bench.armed
    assert (job.rig_name, job.protocol_name, job.acknowledged_by) == ("column", "column-sweep", "A. Person")


def test_a_key_goes_back(bench: Bench, qtbot: QtBot) -> None:
    with qtbot.waitSignal(bench.page.back):
        qtbot.keyClick(bench.page, Qt.Key.Key_K, Qt.KeyboardModifier.AltModifier)


def test_what_can_be_used_has_a_name_and_no_letter_twice(bench: Bench) -> None:
    bench.powered()
    page = bench.page
    letters: list[str] = []
    for part in [*page.findChildren(QPushButton), *page.findChildren(QCheckBox), *page.findChildren(QLabel)]:
        if part.isVisible() and "&" in part.text():
            letters.append(part.text()[part.text().index("&") + 1].lower())
    assert len(set(letters)) == len(letters) >= 7
    assert not set(letters) & {"b", "v"}  # the menus of the window
    for edit in page.findChildren(QLineEdit):
        assert not edit.isVisible() or edit.accessibleName(), edit


@pytest.mark.parametrize("theme", THEMES)
@pytest.mark.parametrize("size", [(1024, 590), (1280, 660), (1920, 1010)])
def test_nothing_is_cut(bench: Bench, qapp: QApplication, theme: str, size: tuple[int, int]) -> None:
    page = bench.page
    style.apply(qapp, THEMES[theme])
    page.set_theme(THEMES[theme])
    bench.powered()
    bench.replace("rig", 'flap_rate = "60 Hz"', 'flap_rate = "30 Hz"')  # the most there is to be shown
    page.resize(*size)
    qapp.processEvents()
    assert (page.width(), page.height()) == size  # it fits: nothing asks for more
    for part in [
        *page.findChildren(QPushButton),
        *page.findChildren(QCheckBox),
        *page.side.findChildren(QLabel),
    ]:
        if part.isVisible():
            assert part.width() >= part.minimumSizeHint().width(), part.text()
            wanted = (
                part.heightForWidth(part.width()) if part.hasHeightForWidth() else part.sizeHint().height()
            )
            assert part.height() >= wanted, part.text()
    low = page.arm.button.mapTo(page, QPoint(0, page.arm.button.height())).y()
    assert low <= page.height()
    table = page.results.forecast.table
    if size[0] > 1024:
        assert table.horizontalScrollBar().maximum() == 0  # all columns are to be seen
