"""Files on the page: opened, edited, kept; nothing of what somebody wrote is lost or written over."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest
from preparing import Bench, Make, benches, shipped
from PySide6.QtCore import Qt
from PySide6.QtWidgets import QFileDialog
from pytestqt.qtbot import QtBot

from rig.desk.model.memory import Memory


@pytest.fixture
def make(qtbot: QtBot, tmp_path: Path, nothing_left: None) -> Iterator[Make]:
    with benches(qtbot, tmp_path) as one:
        yield one


@pytest.fixture
def bench(make: Make) -> Bench:
    made = make()
    made.checked()
    return made


def mine(bench: Bench, text: str = "") -> Path:
    path = bench.folder / "mine.toml"
    path.write_text(text or shipped("quick"), encoding="utf-8")
    bench.page.protocol_pane.choose(str(path))
    bench.checked()
    return path


def test_another_file_is_opened_and_remembered(bench: Bench) -> None:
    pane = bench.page.protocol_pane
    path = mine(bench)
    assert pane.file.path == path and bench.memory.recent_protocols == [str(path)]
    pane.choose("first-sweep")
    bench.checked()
    assert bench.page.prepared.protocol.name == "first-sweep" and bench.can_be_armed
    pane.fill_chooser()
    words = [pane.chooser.itemText(row) for row in range(pane.chooser.count())]
    assert "quick" in words and "mine.toml" in words and "boom" not in words
    assert bench.page.place.session.text().startswith("boom-first-sweep-")


def test_edits_are_asked_about_before_another_file_is_opened(bench: Bench, qtbot: QtBot) -> None:
    pane = bench.page.protocol_pane
    path = mine(bench)
    bench.type("protocol", "# here ")
    bench.checked()
    assert bench.page.unsaved() == ["mine.toml"]
    for answer, name in (("Keep editing", "mine.toml"), ("Save", "quick")):
        pane.choose("quick")
        assert pane.file.name == "mine.toml" and pane.question.isVisible()
        next(button for button in pane.question.buttons if button.text() == answer).click()
        assert pane.file.name == name
    assert path.read_text(encoding="utf-8").startswith("# here ") and bench.page.unsaved() == []
    bench.type("protocol", "# there ")
    bench.checked()
    pane.choose(str(path))
    next(button for button in pane.question.buttons if button.text() == "Discard the edits").click()
    assert pane.file.name == "mine.toml" and not pane.file.edited


def test_a_file_changed_on_disk_is_told_and_not_written_over(bench: Bench, qtbot: QtBot) -> None:
    pane = bench.page.protocol_pane
    path = mine(bench)
    bench.type("protocol", "# here ")
    path.write_text(shipped("quick") + "# elsewhere\n", encoding="utf-8")
    qtbot.keyClick(pane.editor.text, Qt.Key.Key_S, Qt.KeyboardModifier.ControlModifier)
    assert "changed on disk" in pane.question.words.text()
    assert path.read_text(encoding="utf-8").endswith("# elsewhere\n")
    pane.save_to(str(bench.folder / "other"))
    assert (bench.folder / "other.toml").read_text(encoding="utf-8").startswith("# here ")
    assert pane.file.name == "other.toml" and pane.question.isHidden()


def test_a_file_changed_on_disk_is_offered_when_the_page_comes_back(bench: Bench, qtbot: QtBot) -> None:
    pane = bench.page.protocol_pane
    path = mine(bench)
    path.write_text(shipped("quick") + "# elsewhere\n", encoding="utf-8")
    bench.page.hide()
    bench.page.show()
    assert "changed on disk" in pane.question.words.text()
    pane.question.buttons[0].click()
    bench.checked()
    assert pane.editor.plain_text().endswith("# elsewhere\n") and bench.can_be_armed


def test_a_shipped_file_is_saved_under_another_name(bench: Bench, qtbot: QtBot) -> None:
    pane = bench.page.rig_pane
    bench.type("rig", "# mine ")
    bench.checked()
    assert not pane.save_button.isEnabled() and pane.state.full_text == "edited, not saved"
    qtbot.keyClick(pane.editor.text, Qt.Key.Key_S, Qt.KeyboardModifier.ControlModifier)
    dialog = bench.page.findChild(QFileDialog)  # asks for a name
    dialog.fileSelected.emit(str(bench.folder / "mine.toml"))
    dialog.close()
    bench.checked()
    assert pane.file.name == "mine.toml" and not pane.file.edited and bench.can_be_armed
    assert bench.memory.recent_rigs == [str(bench.folder / "mine.toml")]


def test_files_that_cannot_be_edited_here_are_told(bench: Bench) -> None:
    pane = bench.page.rig_pane
    wide = bench.folder / "wide.toml"
    wide.write_text("#" + "x" * 100_000, encoding="utf-8")
    for path, words in ((wide, "lines of at most"), (bench.folder / "none.toml", "expected a file")):
        pane.choose(str(path))
        assert words in pane.question.words.text() and pane.file.name == "boom"
    assert pane.chooser.currentText() == "boom"


def test_remembered_files_that_are_gone_give_way(make: Make, tmp_path: Path) -> None:
    bench = make(Memory(rig=str(tmp_path / "gone.toml"), protocol="first-sweep", folder=str(tmp_path)))
    bench.checked()
    assert "gone.toml" in bench.page.rig_pane.question.words.text()
    assert bench.page.prepared.question()[1::2] == ("boom", "first-sweep") and bench.can_be_armed


def test_the_try_button_needs_no_preparation(make: Make) -> None:
    bench = make(Memory(rig="column", protocol="column-sweep", folder=str(make().folder)))
    job = bench.page.simulated_job()
    assert job.rig().simulated and job.port == "" and job.may_go_on and job.pictures
    assert bench.page.checked_of(job).good
