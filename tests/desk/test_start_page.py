"""The first page: three ways to go on, recent sessions, and nothing cut in a small window."""

from __future__ import annotations

from pathlib import Path

import pytest
from preparing import LONG_MS
from PySide6.QtCore import QPoint, Qt
from PySide6.QtWidgets import QApplication, QLabel, QPushButton
from pytestqt.qtbot import QtBot

from rig.desk.model.memory import Memory
from rig.desk.theme import THEMES
from rig.desk.widgets import style
from rig.desk.widgets.start_page import CAUTIONS, StartPage


@pytest.fixture
def memory(tmp_path: Path) -> Memory:
    made = Memory(tmp_path / "window.json")
    for name in ("old.h5", "gone.h5", "new.h5"):
        (tmp_path / name).touch()
        made.add_recent(tmp_path / name)
    (tmp_path / "gone.h5").unlink()
    return made


@pytest.fixture
def page(qtbot: QtBot, qapp: QApplication, memory: Memory) -> StartPage:
    style.apply(qapp, THEMES["light"])
    made = StartPage(THEMES["light"], memory=memory)
    qtbot.addWidget(made)
    made.resize(1280, 640)
    made.show()
    made.activateWindow()
    qtbot.waitUntil(lambda: QApplication.focusWidget() is made.try_button, timeout=LONG_MS)
    return made


def test_one_key_tries_it(page: StartPage, qtbot: QtBot) -> None:
    with qtbot.waitSignal(page.try_simulated):
        qtbot.keyClick(QApplication.focusWidget(), Qt.Key.Key_Space)


def test_every_way_can_be_gone_by_keys(page: StartPage, qtbot: QtBot) -> None:
    heard: list[str] = []
    page.prepare.connect(lambda: heard.append("prepare"))
    page.replay.connect(lambda: heard.append("replay"))
    page.replay_file.connect(heard.append)
    for _ in range(2):
        qtbot.keyClick(QApplication.focusWidget(), Qt.Key.Key_Tab)
        qtbot.keyClick(QApplication.focusWidget(), Qt.Key.Key_Space)
    qtbot.keyClick(QApplication.focusWidget(), Qt.Key.Key_Tab)
    qtbot.keyClick(page.recent, Qt.Key.Key_Down)
    qtbot.keyClick(page.recent, Qt.Key.Key_Return)
    assert heard[:2] == ["prepare", "replay"] and Path(heard[2]).name == "old.h5"


def test_recent_sessions_are_those_still_there(page: StartPage, memory: Memory, tmp_path: Path) -> None:
    def names() -> list[str]:
        return [page.recent.item(row).text() for row in range(page.recent.count())]

    assert names() == ["new.h5", "old.h5"]
    (tmp_path / "another.h5").touch()
    memory.add_recent(tmp_path / "another.h5")
    page.hide()
    page.show()
    assert names() == ["another.h5", "new.h5", "old.h5"]
    memory.recent.clear()
    page.show_recent()
    assert page.recent.isHidden() and page.recent_label.isHidden()


def test_the_two_cautions_are_there(page: StartPage) -> None:
    shown = {label.text() for label in page.findChildren(QLabel) if label.isVisible()}
    assert set(CAUTIONS) <= shown
    assert "not a safety-rated stop" in CAUTIONS[0] and "Off does not mean stopped" in CAUTIONS[1]


@pytest.mark.parametrize("theme", THEMES)
@pytest.mark.parametrize("size", [(1024, 600), (1280, 640), (1920, 1080)])
def test_nothing_is_cut(
    page: StartPage, qtbot: QtBot, qapp: QApplication, theme: str, size: tuple[int, int]
) -> None:
    style.apply(qapp, THEMES[theme])
    page.set_theme(THEMES[theme])
    page.resize(*size)
    qapp.processEvents()
    for part in [*page.findChildren(QPushButton), *page.findChildren(QLabel)]:
        if part.isVisible():
            wanted = (
                part.heightForWidth(part.width()) if part.hasHeightForWidth() else part.sizeHint().height()
            )
            assert part.height() >= wanted, part
            inside = page.card.rect().contains(part.mapTo(page.card, QPoint(0, 0)))
            assert inside and part.width() <= page.card.width()
