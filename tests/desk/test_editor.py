"""The editor: lines with mistakes told by mark and sentence, find, zoom, colours, and texts that are too much."""

from __future__ import annotations

import pytest
from preparing import shipped
from PySide6.QtCore import QMimeData, QPoint, QRect, Qt
from PySide6.QtGui import QColor, QHelpEvent, QImage, QTextCursor
from PySide6.QtWidgets import QApplication, QSplitter, QToolTip
from pytestqt.qtbot import QtBot

from rig.desk.theme import LIGHT, THEMES, Theme, contrast
from rig.desk.widgets.shapes import blended
from rig.desk.widgets.text_editor import LARGEST_COLOURED, LONGEST_LINE, TINT, TextEditor, unfit
from rig.desk.widgets.toml_colours import colours
from rig.files.lines import LARGEST_BYTES

TEXT = shipped("quick")


@pytest.fixture
def editor(qtbot: QtBot) -> TextEditor:
    made = TextEditor(LIGHT)
    qtbot.addWidget(made)
    made.resize(500, 400)
    made.set_text(TEXT)
    made.show()
    qtbot.waitExposed(made)
    return made


def test_the_text_comes_back_as_it_went_in(editor: TextEditor) -> None:
    for text in (TEXT, "", "\n", "a\n\nb", "a\u00a0b\tc", "ä名😀"):
        editor.set_text(text)
        assert editor.plain_text() == text


def test_only_edits_are_told(editor: TextEditor, qtbot: QtBot) -> None:
    heard: list[int] = []
    editor.changed.connect(lambda: heard.append(1))
    editor.set_text("a = 1")
    editor.set_theme(THEMES["dark"])
    editor.set_text("x\n" * LARGEST_COLOURED)
    editor.set_text("other")
    QApplication.processEvents()
    assert heard == []  # colouring it is no edit
    qtbot.keyClicks(editor.text, "x")
    assert heard == [1] and editor.plain_text() == "xother"
    editor.text.undo()
    assert editor.plain_text() == "other" and len(heard) == 2


def margin_image(editor: TextEditor) -> QImage:
    return editor.text.margin.grab().toImage()


def test_a_marked_line_has_a_shape_in_the_margin_and_its_sentence(editor: TextEditor, qtbot: QtBot) -> None:
    before = margin_image(editor)
    editor.set_marks({5: ["line 5: expected something", "line 5: expected more"], 0: ["the file"]})
    block = editor.text.document().findBlockByNumber(4)
    top = editor.text.blockBoundingGeometry(block).translated(editor.text.contentOffset())
    after, ratio = margin_image(editor), editor.text.margin.devicePixelRatioF()
    changed = [
        y
        for y in range(after.height())
        if any(before.pixel(x, y) != after.pixel(x, y) for x in range(after.width()))
    ]
    assert changed and top.top() * ratio <= changed[0] and changed[-1] <= top.bottom() * ratio
    middle = QPoint(5, round(top.center().y()))
    for widget in (editor.text.viewport(), editor.text.margin):
        QToolTip.hideText()
        event = QHelpEvent(QHelpEvent.Type.ToolTip, middle, widget.mapToGlobal(middle))
        QApplication.sendEvent(widget, event)
        assert QToolTip.text() == "line 5: expected something\nline 5: expected more"
    assert len(editor.text.extraSelections()) == 1
    editor.set_marks({})
    assert margin_image(editor) == before and editor.text.extraSelections() == []


def test_the_margin_grows_with_the_line_numbers(editor: TextEditor) -> None:
    narrow = editor.text.margin_width()
    editor.set_text("\n" * 20_000)
    assert editor.text.margin_width() > narrow
    assert editor.text.viewport().geometry().left() >= editor.text.margin.geometry().right()


def test_it_goes_to_a_line(editor: TextEditor, qtbot: QtBot) -> None:
    editor.set_text("\n".join(f"line {number}" for number in range(1, 500)))
    editor.go_to(321)
    cursor = editor.text.textCursor()
    assert cursor.block().text() == "line 321"
    assert editor.text.viewport().rect().contains(editor.text.cursorRect().center())
    editor.go_to(10**6)  # a line that is no more
    editor.go_to(0)
    assert editor.text.textCursor().blockNumber() == 0


def test_find_goes_round_and_back(editor: TextEditor, qtbot: QtBot) -> None:
    editor.set_text("one two\none\nthree")
    qtbot.keyClick(editor.text, Qt.Key.Key_F, Qt.KeyboardModifier.ControlModifier)
    assert editor.find_bar.isVisible()
    qtbot.keyClicks(editor.find_field, "one")
    lines = []
    for _ in range(3):
        qtbot.keyClick(editor.find_field, Qt.Key.Key_Return)
        lines.append(editor.text.textCursor().blockNumber())
    assert lines == [0, 1, 0] and editor.text.textCursor().selectedText() == "one"
    qtbot.keyClick(editor.find_field, Qt.Key.Key_Return, Qt.KeyboardModifier.ShiftModifier)
    assert editor.text.textCursor().blockNumber() == 1
    before = editor.text.textCursor().position()
    editor.find_field.setText("none such")
    assert not editor.find_next() and editor.find_told.text() == "not found"
    assert editor.text.textCursor().position() == before
    qtbot.keyClick(editor.find_field, Qt.Key.Key_Escape)
    assert not editor.find_bar.isVisible()


def test_letters_grow_and_shrink_by_keys(editor: TextEditor, qtbot: QtBot) -> None:
    usual = editor.text.font().pointSizeF()
    qtbot.keyClick(editor.text, Qt.Key.Key_Plus, Qt.KeyboardModifier.ControlModifier)
    assert editor.text.font().pointSizeF() > usual
    for _ in range(30):
        qtbot.keyClick(editor.text, Qt.Key.Key_Minus, Qt.KeyboardModifier.ControlModifier)
    assert 4.0 < editor.text.font().pointSizeF() < usual
    qtbot.keyClick(editor.text, Qt.Key.Key_0, Qt.KeyboardModifier.ControlModifier)
    assert editor.text.font().pointSizeF() == pytest.approx(usual)


def test_tab_leaves_the_editor(qtbot: QtBot) -> None:
    both = QSplitter()
    qtbot.addWidget(both)
    one, other = TextEditor(LIGHT), TextEditor(LIGHT)
    both.addWidget(one)
    both.addWidget(other)
    both.show()
    both.activateWindow()
    one.setFocus()
    qtbot.waitUntil(one.text.hasFocus)
    qtbot.keyClick(one.text, Qt.Key.Key_Tab)
    assert other.text.hasFocus() and one.plain_text() == ""


@pytest.mark.parametrize("theme", THEMES.values(), ids=lambda theme: theme.name)
def test_coloured_text_can_be_read_also_on_a_marked_line(theme: Theme) -> None:
    """WCAG 2.2, 1.4.3: 4.5 : 1."""
    marked = blended(theme.panel, theme.alert, TINT).name()
    for colour in colours(theme).values():
        assert contrast(colour, theme.panel) >= 4.5 and contrast(colour, marked) >= 4.5


def colour_at(editor: TextEditor, line: int, column: int) -> QColor:
    """Colour of a letter, from the formats the highlighter has laid on its line."""
    for one in editor.text.document().findBlockByNumber(line).layout().formats():
        if one.start <= column < one.start + one.length:
            return one.format.foreground().color()
    return QColor()


def test_parts_of_toml_are_told_apart(editor: TextEditor, qtbot: QtBot) -> None:
    editor.set_text(
        '[rig] # comment\na.b = "te#xt" # c\nc = """one\n[two] # no\nthree""" # c\n"q" = [\'x\']\nd = \'\'\'e\'\'\''
    )
    QApplication.processEvents()
    told = {name: QColor(colour) for name, colour in colours(LIGHT).items()}
    for line, column, part in (
        (0, 1, "table"),
        (0, 8, "comment"),
        (1, 0, "key"),
        (1, 9, "text"),
        (1, 16, "comment"),
        (2, 6, "text"),
        (3, 1, "text"),
        (3, 7, "text"),
        (4, 2, "text"),
        (4, 10, "comment"),
        (5, 1, "key"),
        (5, 8, "text"),
        (6, 7, "text"),
    ):
        assert colour_at(editor, line, column) == told[part], (line, column)
    editor.set_theme(THEMES["dark"])
    QApplication.processEvents()
    assert colour_at(editor, 0, 1) == QColor(colours(THEMES["dark"])["table"])


def test_a_large_text_is_not_coloured_and_the_next_one_is(editor: TextEditor, qtbot: QtBot) -> None:
    editor.set_text("a = 1\n" * (LARGEST_COLOURED // 6 + 1))
    QApplication.processEvents()
    assert not colour_at(editor, 0, 0).isValid() or colour_at(editor, 0, 0) == QColor(Qt.GlobalColor.black)
    editor.set_text("a = 1\n")
    qtbot.waitUntil(lambda: colour_at(editor, 0, 0) == QColor(colours(LIGHT)["key"]))


def test_a_text_that_grows_large_loses_its_colours_and_is_told_once(editor: TextEditor, qtbot: QtBot) -> None:
    heard: list[int] = []
    editor.changed.connect(lambda: heard.append(1))
    data = QMimeData()
    data.setText("a = 1\n" * (LARGEST_COLOURED // 6 + 1))
    editor.text.insertFromMimeData(data)
    QApplication.processEvents()
    assert heard == [1] and not colour_at(editor, 0, 0).isValid()
    qtbot.keyClicks(editor.text, "x")
    assert heard == [1, 1]


def test_what_would_hold_up_typing_is_refused(editor: TextEditor, qtbot: QtBot) -> None:
    refused: list[str] = []
    editor.refused.connect(refused.append)
    for text in ("x" * (LONGEST_LINE + 1), "x\n" * LARGEST_BYTES):
        data = QMimeData()
        data.setText(text)
        editor.text.insertFromMimeData(data)
        assert editor.plain_text() == TEXT and unfit(text)
    assert len(refused) == 2 and all("at most" in words for words in refused)
    data = QMimeData()
    data.setText("a = 1\n")
    editor.text.insertFromMimeData(data)
    assert editor.plain_text().startswith("a = 1\n")


def test_a_megabyte_is_edited_line_by_line(editor: TextEditor, qtbot: QtBot) -> None:
    text = "# forty letters or so of a long comment\n" * 25_000
    editor.set_text(text)
    qtbot.keyClicks(editor.text, "abc")
    editor.text.moveCursor(QTextCursor.MoveOperation.End)
    qtbot.keyClicks(editor.text, "xyz")
    assert editor.plain_text() == "abc" + text + "xyz"
    assert editor.text.margin.geometry().intersects(QRect(0, 0, 500, 400))
