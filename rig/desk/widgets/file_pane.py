"""One file being edited: which one, whether it is kept, and its text.

    Ctrl+S  save        Ctrl+Shift+S  save under another name        with the focus in the pane

Nothing here opens a question that must be answered first: what is to be decided stands in a line above the text.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from PySide6.QtCore import Qt, Signal
from PySide6.QtGui import QKeySequence, QShortcut
from PySide6.QtWidgets import QFileDialog, QFrame, QHBoxLayout, QLabel, QPushButton, QVBoxLayout, QWidget

from rig.desk.model.memory import Memory
from rig.desk.model.written_file import NotKept, NotOpened, WrittenFile, shipped_of, with_plain_ends
from rig.desk.theme import Theme
from rig.desk.widgets.fresh_list import FreshList
from rig.desk.widgets.shapes import ElidedLabel
from rig.desk.widgets.style import set_kind, set_shown
from rig.desk.widgets.text_editor import TextEditor, unfit

#: Three of them stand beside a few words in a third of a small window.
COMPACT = "padding: 0.05em 0.5em; min-height: 1.35em;"
FILTER = "Files in TOML (*.toml);;All files (*)"


class FilePane(QWidget):
    """`opened` when it is another file, `changed` when its text is being edited."""

    opened = Signal()
    changed = Signal()

    def __init__(
        self,
        theme: Theme,
        kind: str,
        title: str,
        file: WrittenFile,
        memory: Memory,
        parent: QWidget | None = None,
    ) -> None:
        super().__init__(parent)
        self.kind = kind
        self.file = file
        self._memory = memory
        self._recent = f"recent_{kind}s"
        self._shipped = shipped_of(kind)
        self._wanted = ""  # what to open once the edits are dealt with
        self.words = title.replace("&", "").lower()
        self.chooser = FreshList()
        self.label = QLabel(title)
        self.label.setBuddy(self.chooser)
        set_kind(self.label, "heading")
        self.open_button = self._button("Open …", f"open another {self.words}", self.ask_open)
        self.save_button = self._button("Save", f"write the {self.words} to its file (Ctrl+S)", self.save)
        self.save_as_button = self._button(
            "Save as …", f"write the {self.words} under another name (Ctrl+Shift+S)", self.ask_save
        )
        self.state = ElidedLabel()
        set_kind(self.state, "faint")
        self.editor = TextEditor(theme)
        self.editor.text.setAccessibleName(f"text of the {self.words}")
        self.question = _Question()
        self._arrange()
        self.chooser.opening.connect(self.fill_chooser)
        self.chooser.activated.connect(lambda row: self.choose(str(self.chooser.itemData(row))))
        self.editor.changed.connect(self._edited)
        self.editor.refused.connect(self.tell)
        for keys, act in (("Ctrl+S", self.save), ("Ctrl+Shift+S", self.ask_save)):
            shortcut = QShortcut(QKeySequence(keys), self)
            shortcut.setContext(Qt.ShortcutContext.WidgetWithChildrenShortcut)
            shortcut.activated.connect(act)
        self._show_file()

    def _button(self, words: str, hint: str, act: Callable[[], object]) -> QPushButton:
        button = QPushButton(words)
        button.setToolTip(hint)
        button.setAccessibleName(hint)
        button.setStyleSheet(COMPACT)
        button.clicked.connect(lambda: act())
        return button

    def _arrange(self) -> None:
        which, kept = QHBoxLayout(), QHBoxLayout()
        which.setSpacing(8)
        which.addWidget(self.label)
        which.addWidget(self.chooser, 1)
        kept.setSpacing(6)
        kept.addWidget(self.state, 1)
        for button in (self.open_button, self.save_button, self.save_as_button):
            kept.addWidget(button)
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 0, 0, 0)
        column.setSpacing(5)
        column.addLayout(which)
        column.addLayout(kept)
        column.addWidget(self.question)
        column.addWidget(self.editor, 1)
        QWidget.setTabOrder(self.chooser, self.open_button)

    # -- which file ------------------------------------------------------------------------------------

    def fill_chooser(self) -> None:
        """Shipped files, then recent ones; the present one in any case."""
        entries: list[tuple[str, object]] = [(name, name) for name in self._shipped]
        recent = [name for name in getattr(self._memory, self._recent) if name not in self._shipped]
        if self.file.source not in (*self._shipped, *recent):
            recent.insert(0, self.file.source)
        entries += [(_short(name, recent), name) for name in recent]
        self.chooser.fill(entries, self.file.source)
        self.chooser.setToolTip(str(self.file.path))

    def choose(self, source: str) -> None:
        """Open a shipped name or a path; asks first what becomes of edits."""
        if source == self.file.source and not self.file.edited and not self.file.changed_on_disk():
            return
        if self.file.edited:
            self._wanted = source
            self.question.ask(
                f"{self.file.name} is edited and not saved.",
                (
                    ("Save", self._save_then_open),
                    ("Discard the edits", self._open_wanted),
                    ("Keep editing", self._keep_editing),
                ),
            )
            self.fill_chooser()
            return
        self._open(source)

    def _save_then_open(self) -> None:
        if self.file.shipped:
            self.ask_save()
        elif self.save():
            self._open_wanted()

    def _open_wanted(self) -> None:
        wanted, self._wanted = self._wanted, ""
        self.question.close_down()
        self._open(wanted)

    def _keep_editing(self) -> None:
        self._wanted = ""
        self.question.close_down()
        self.editor.setFocus()

    def _open(self, source: str) -> bool:
        try:
            file = WrittenFile.open(source)
        except NotOpened as error:
            self.tell(str(error))
            self.fill_chooser()
            return False
        why = unfit(file.text)
        if why:
            self.tell(f"{file.name}: {why}")
            self.fill_chooser()
            return False
        self.file = file
        self._remember()
        self._show_file()
        self.opened.emit()
        return True

    def _remember(self) -> None:
        if not self.file.shipped:
            self._memory.add_recent(self.file.path, self._recent)
        setattr(self._memory, self.kind, self.file.source)

    def _show_file(self) -> None:
        self.question.close_down()
        self.editor.set_text(with_plain_ends(self.file.text))
        self.fill_chooser()
        self.show_state()

    # -- edited and kept -------------------------------------------------------------------------------

    def _edited(self) -> None:
        self.changed.emit()

    def take_text(self) -> None:
        """What stands in the editor becomes the file's text."""
        self.file.edit(self.editor.plain_text())
        self.show_state()

    def show_state(self) -> None:
        """Whether it is as on disk, in words."""
        if self.file.edited:
            words = "edited, not saved"
        elif self.file.shipped:
            words = "comes with Haltere"
        else:
            words = f"as saved in {self.file.path.parent}"
        self.state.tell(words, str(self.file.path))
        self.save_button.setEnabled(self.file.edited and not self.file.shipped)

    def look_at_disk(self) -> None:
        """Tell if another program has changed the file."""
        if self.question.isHidden() and not self.file.shipped and self.file.changed_on_disk():
            source = self.file.source
            self.question.ask(
                f"{self.file.name} has changed on disk.",
                (("Open it again", lambda: self._open(source)), ("Keep this text", self._keep_editing)),
            )

    def save(self) -> bool:
        """Write it where it came from; False, with a sentence in the pane, if it was not."""
        if self.file.shipped:
            self.ask_save()
            return False
        return self._keep(self.file.save)

    def save_to(self, path: str) -> bool:
        """Write it to another path."""
        chosen = Path(path)
        done = self._keep(lambda: self.file.save_as(chosen if chosen.suffix else chosen.with_suffix(".toml")))
        if done and self._wanted:
            self._open_wanted()
        return done

    def _keep(self, write: Callable[[], None]) -> bool:
        self.take_text()
        name = self.file.name
        try:
            write()
        except NotKept as error:
            self.tell(str(error))
            return False
        self._remember()
        if not self._wanted:
            self.question.close_down()
        self.fill_chooser()
        self.show_state()
        if self.file.name != name:
            self.changed.emit()
        return True

    def tell(self, sentence: str) -> None:
        """A sentence above the text, until it is closed."""
        self.question.ask(sentence, (("Close", self.question.close_down),))

    # -- dialogs ---------------------------------------------------------------------------------------

    def ask_open(self) -> None:
        dialog = self._dialog(f"Open a {self.words}")
        dialog.setFileMode(QFileDialog.FileMode.ExistingFile)
        dialog.fileSelected.connect(self.choose)
        dialog.open()

    def ask_save(self) -> None:
        dialog = self._dialog(f"Save the {self.words}")
        dialog.setAcceptMode(QFileDialog.AcceptMode.AcceptSave)
        dialog.setDefaultSuffix("toml")
        dialog.selectFile(self.file.path.name)
        dialog.fileSelected.connect(self.save_to)
        dialog.open()

    def _dialog(self, title: str) -> QFileDialog:
        folder = self._memory.folder if self.file.shipped else str(self.file.path.parent)
        dialog = QFileDialog(self, title, folder, FILTER)
        dialog.setOption(QFileDialog.Option.DontUseNativeDialog)
        dialog.setAttribute(Qt.WidgetAttribute.WA_DeleteOnClose)
        return dialog

    def set_theme(self, theme: Theme) -> None:
        self.editor.set_theme(theme)
        self.question.set_theme(theme)


def _short(source: str, among: list[str]) -> str:
    """A path by its name, and by its folder too where another has the same name."""
    path = Path(source)
    if sum(Path(one).name == path.name for one in among) > 1:
        return f"{path.name} in {path.parent}"
    return path.name


class _Question(QFrame):
    """A sentence with its answers, in a line of its own; hidden while there is none."""

    def __init__(self) -> None:
        super().__init__()
        set_kind(self, "panel")
        self.words = QLabel()
        self.words.setTextFormat(Qt.TextFormat.PlainText)
        self.words.setWordWrap(True)
        self.answers = QHBoxLayout()
        self.answers.setSpacing(6)
        column = QVBoxLayout(self)
        column.setContentsMargins(8, 6, 8, 6)
        column.setSpacing(6)
        column.addWidget(self.words)
        column.addLayout(self.answers)
        self.buttons: list[QPushButton] = []
        self.hide()

    def ask(self, sentence: str, answers: tuple[tuple[str, Callable[[], object]], ...]) -> None:
        self._clear()
        self.words.setText(sentence)
        self.setAccessibleName(sentence)
        for words, act in answers:
            button = QPushButton(words)
            button.clicked.connect(lambda _=False, act=act: act())
            self.answers.addWidget(button)
            self.buttons.append(button)
        self.answers.addStretch(1)
        self.show()
        self.buttons[0].setFocus(Qt.FocusReason.OtherFocusReason)

    def close_down(self) -> None:
        set_shown(self, False)

    def _clear(self) -> None:
        self.buttons.clear()
        while (item := self.answers.takeAt(0)) is not None:
            widget = item.widget()
            if widget is not None:
                widget.hide()
                widget.deleteLater()

    def set_theme(self, theme: Theme) -> None:
        """The style sheet of the window colours it."""
