"""The look of the application: every colour is one of the theme's, what can be pressed is seen, the focus is seen."""

from __future__ import annotations

import re

import pytest
from PySide6.QtGui import QImage, QPalette
from PySide6.QtWidgets import QApplication, QLabel, QLineEdit, QPushButton, QVBoxLayout, QWidget
from pytestqt.qtbot import QtBot
from told_runs import dressed, settle

from rig.desk.theme import THEMES, contrast
from rig.desk.widgets import style
from rig.desk.widgets.shapes import SHAPES, ElidedLabel, ShapeMark


@pytest.mark.parametrize("name", THEMES)
def test_edges_rings_and_inks_stand_out(name: str) -> None:
    """WCAG 2.2: 3 : 1 for outlines and focus (1.4.11, 2.4.13), 4.5 : 1 for text (1.4.3)."""
    theme = THEMES[name]
    for ground in (theme.ground, theme.panel):
        assert contrast(style.edge(theme), ground) >= 3.0
        assert contrast(style.ring(theme), ground) >= 3.0
    assert contrast(style.ring(theme), style.edge(theme)) >= 3.0  # before and after the focus has come
    for front, back in (
        (theme.accent_ink, theme.accent),
        (theme.ink, theme.raised),
        (theme.alert_ink, theme.alert),
        (theme.alert, theme.panel),
    ):
        assert contrast(front, back) >= 4.5


@pytest.mark.parametrize("name", THEMES)
def test_the_sheet_is_whole_and_its_images_exist(name: str) -> None:
    sheet = style.style_sheet(THEMES[name])
    assert "$" not in sheet
    assert sheet.count("{") == sheet.count("}")
    images = re.findall(r'url\("([^"]+)"\)', sheet)
    assert images
    for image in images:
        assert not QImage(image).isNull(), image


@pytest.mark.parametrize("name", THEMES)
def test_a_theme_reaches_plain_widgets(qtbot: QtBot, qapp: QApplication, name: str) -> None:
    theme = dressed(qapp, name)
    host = QWidget()
    qtbot.addWidget(host)
    plain, primary, line = QPushButton("plain"), QPushButton("primary"), QLineEdit("typed")
    style.set_kind(primary, "primary")
    column = QVBoxLayout(host)
    for part in (plain, primary, line):
        column.addWidget(part)
    settle(qapp, host, 400, 200)
    image = primary.grab().toImage()
    assert image.pixelColor(10, image.height() // 2).name() == theme.accent.lower()
    assert qapp.palette().color(QPalette.ColorRole.Window).name() == theme.ground.lower()
    qtbot.waitActive(host)
    plain.setFocus()
    qapp.processEvents()
    image = plain.grab().toImage()
    assert image.pixelColor(0, image.height() // 2).name() == style.ring(theme).lower()


def test_a_variant_can_change_later_and_keeps_the_font(qtbot: QtBot, qapp: QApplication) -> None:
    theme = dressed(qapp)
    host = QWidget()
    qtbot.addWidget(host)
    label = QLabel("told", host)
    style.set_kind(label, "faint")
    font = label.font()
    font.setPointSizeF(7.0)
    label.setFont(font)
    settle(qapp, host, 100, 50)
    assert label.font().pointSizeF() == 7.0
    assert label.palette().color(QPalette.ColorRole.WindowText).name() == theme.faint.lower()
    style.set_kind(label, "alerting")
    assert label.palette().color(QPalette.ColorRole.WindowText).name() == theme.alert.lower()
    assert label.font().pointSizeF() == 7.0


def test_every_shape_looks_different(qtbot: QtBot, qapp: QApplication) -> None:
    mark = ShapeMark(dressed(qapp))
    qtbot.addWidget(mark)
    settle(qapp, mark, 24, 24)
    seen: dict[bytes, str] = {}
    for shape in SHAPES:
        mark.show_shape(shape, "#000000")
        image = mark.grab().toImage().convertToFormat(QImage.Format.Format_Grayscale8)
        drawn = bytes(image.constBits())
        assert drawn not in seen, f"{shape} looks like {seen.get(drawn)}"
        seen[drawn] = shape


def test_a_shortened_text_is_told_whole(qtbot: QtBot, qapp: QApplication) -> None:
    dressed(qapp)
    label = ElidedLabel()
    qtbot.addWidget(label)
    label.tell("a text of several words", "and more about it")
    settle(qapp, label, 60, 20)
    assert label.text() != label.full_text and label.text().endswith("…")
    assert label.toolTip() == "a text of several words\nand more about it"
    settle(qapp, label, 600, 20)
    assert label.text() == label.full_text
    assert label.toolTip() == "and more about it"
    label.tell("")
    assert label.text() == ""
