"""The cautions are acknowledged by name, for one rig file and one shift."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from PySide6.QtCore import Qt
from PySide6.QtWidgets import QLabel
from pytestqt.qtbot import QtBot

from rig.desk.model.acknowledgements import LONGEST_NAME, Acknowledgements, cleaned
from rig.desk.theme import LIGHT
from rig.desk.widgets.cautions_panel import CautionsPanel
from rig.run.cautions import CAUTIONS, VALID_S, Acknowledgement

RIG, OTHER = "a" * 64, "b" * 64
NOW_S = 1_740_830_400.0


def test_it_holds_for_a_shift_and_a_rig_file(tmp_path: Path) -> None:
    kept = Acknowledgements(tmp_path / "state" / "a.json")
    assert kept.holding(RIG, NOW_S) is None
    kept.acknowledge("  A.\n Person ", RIG, NOW_S)
    held = kept.holding(RIG, NOW_S + VALID_S - 1.0)
    assert held == Acknowledgement("A. Person", RIG, NOW_S)
    assert kept.holding(RIG, NOW_S + VALID_S + 1.0) is None
    assert kept.holding(RIG, NOW_S - 1.0) is None  # a clock set back
    assert kept.holding(OTHER, NOW_S) is None and kept.holding("", NOW_S) is None


def test_it_outlives_the_window_until_withdrawn(tmp_path: Path) -> None:
    path = tmp_path / "a.json"
    Acknowledgements(path).acknowledge("A. Person", RIG, NOW_S)
    again = Acknowledgements(path)
    assert again.holding(RIG, NOW_S) is not None
    again.acknowledge("B. Person", OTHER, NOW_S)
    again.withdraw(RIG)
    last = Acknowledgements(path)
    assert last.holding(RIG, NOW_S) is None and last.holding(OTHER, NOW_S) is not None
    assert [file.name for file in tmp_path.iterdir()] == ["a.json"]


def test_those_of_earlier_shifts_are_dropped(tmp_path: Path) -> None:
    path = tmp_path / "a.json"
    Acknowledgements(path).acknowledge("A. Person", RIG, NOW_S)
    Acknowledgements(path).acknowledge("A. Person", OTHER, NOW_S + 2.0 * VALID_S)
    assert [row["rig_sha256"] for row in json.loads(path.read_text(encoding="utf-8"))] == [OTHER]


@pytest.mark.parametrize("name", ["", "  ", "\n\t", "\u200b"])
def test_nobody_is_no_name(tmp_path: Path, name: str) -> None:
    with pytest.raises(ValueError, match="by name"):
        Acknowledgements(tmp_path / "a.json").acknowledge(name, RIG, NOW_S)
    assert len(cleaned("x" * 200)) == LONGEST_NAME


@pytest.mark.parametrize(
    "text",
    [
        "",
        "{",
        "3",
        "[" * 100_000,
        '[{"name": 3}]',
        f'[{{"name": "", "rig_sha256": "{RIG}", "utc_s": {NOW_S}}}]',
        f'[{{"name": "A", "rig_sha256": "{RIG}", "utc_s": "now"}}]',
        f'[{{"name": "A", "rig_sha256": "{RIG}", "utc_s": Infinity}}]',
    ],
)
def test_a_damaged_file_means_nobody(tmp_path: Path, text: str) -> None:
    path = tmp_path / "a.json"
    path.write_text(text, encoding="utf-8")
    assert Acknowledgements(path).holding(RIG, NOW_S) is None


def test_it_holds_in_this_window_though_it_cannot_be_written(tmp_path: Path) -> None:
    (tmp_path / "file").touch()
    kept = Acknowledgements(tmp_path / "file" / "a.json")
    kept.acknowledge("A. Person", RIG, NOW_S)
    assert kept.holding(RIG, NOW_S) is not None


# -- the panel -----------------------------------------------------------------------------------------


@pytest.fixture
def panel(qtbot: QtBot) -> CautionsPanel:
    made = CautionsPanel(LIGHT)
    qtbot.addWidget(made)
    made.resize(330, 500)
    made.show()
    return made


def test_every_caution_can_be_read_also_when_simulated(panel: CautionsPanel) -> None:
    panel.show_state(powered=False, rig_known=True, held=None)
    shown = {label.text() for label in panel.list.findChildren(QLabel)}
    assert set(CAUTIONS) <= shown
    assert "nothing is powered" in " ".join(panel.told.words())
    assert panel.name.isHidden() and panel.understood.isHidden()
    assert panel.list.focusPolicy() == Qt.FocusPolicy.StrongFocus  # keys scroll it


def test_the_tick_needs_a_name(panel: CautionsPanel, qtbot: QtBot) -> None:
    heard: list[str] = []
    panel.acknowledged.connect(heard.append)
    panel.show_state(powered=True, rig_known=True, held=None)
    assert not panel.understood.isEnabled()
    panel.name.setText("   ")
    assert not panel.understood.isEnabled()
    qtbot.keyClicks(panel.name, "A. Person")
    assert panel.understood.isEnabled() and heard == []
    qtbot.keyClick(panel.understood, Qt.Key.Key_Space)
    assert heard == ["A. Person"]


def test_it_tells_until_when_it_holds(panel: CautionsPanel, qtbot: QtBot) -> None:
    panel.show_state(powered=True, rig_known=True, held=Acknowledgement("A. Person", RIG, NOW_S))
    (told,) = panel.told.words()
    assert "A. Person" in told and "valid until" in told and told.rstrip(".")[-3] == ":"
    assert panel.name.isHidden()
    with qtbot.waitSignal(panel.withdrawn):
        panel.another.click()


def test_a_rig_file_with_mistakes_is_acknowledged_by_nobody(panel: CautionsPanel) -> None:
    panel.show_state(powered=True, rig_known=False, held=None)
    assert panel.name.isHidden() and "no mistakes" in " ".join(panel.told.words())
