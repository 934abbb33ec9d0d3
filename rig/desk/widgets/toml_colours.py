"""Modest colouring of TOML: tables, keys, texts, comments. Weight and slant tell them apart without colour too."""

from __future__ import annotations

import re

from PySide6.QtGui import QColor, QFont, QSyntaxHighlighter, QTextCharFormat, QTextDocument

from rig.desk.theme import Theme

KEY = re.compile(r"\s*((?:[\w-]+|\"[^\"]*\"|'[^']*')(?:\s*\.\s*(?:[\w-]+|\"[^\"]*\"|'[^']*'))*)\s*(?==)")
TABLE = re.compile(r"\s*\[\[?[^\]#]*\]?\]?")
#: What may follow: a text (three quotes: perhaps over lines), a comment.
PIECE = re.compile(r"\"\"\"|'''|\"(?:[^\"\\]|\\.)*\"?|'[^']*'?|#.*")
QUOTES = {1: '"""', 2: "'''"}


class TomlColours(QSyntaxHighlighter):
    """Colours of one document."""

    def __init__(self, theme: Theme, document: QTextDocument) -> None:
        super().__init__(document)
        self._text_document = document
        self._formats = _formats(theme)

    def switch(self, on: bool) -> None:
        """Off for texts so large that colouring, or only being asked for it line by line, would take seconds."""
        if on != (self.document() is not None):
            self.setDocument(self._text_document if on else None)

    def set_theme(self, theme: Theme) -> None:
        self._formats = _formats(theme)
        self.rehighlight()

    def highlightBlock(self, text: str) -> None:
        self.setCurrentBlockState(0)
        start = 0
        within = self.previousBlockState()
        if within in QUOTES:
            end = text.find(QUOTES[within])
            if end < 0:
                self.setFormat(0, len(text), self._formats["text"])
                self.setCurrentBlockState(within)
                return
            start = end + 3
            self.setFormat(0, start, self._formats["text"])
        else:
            start = self._head(text)
        self._rest(text, start)

    def _head(self, text: str) -> int:
        """A table's header or a key at the beginning; where the rest begins."""
        if text.lstrip().startswith("["):
            found = TABLE.match(text)
            which = "table"
        else:
            found = KEY.match(text)
            which = "key"
        if found is None:
            return 0
        self.setFormat(found.start(), found.end() - found.start(), self._formats[which])
        return found.end()

    def _rest(self, text: str, start: int) -> None:
        while (found := PIECE.search(text, start)) is not None:
            piece = found.group()
            if piece in QUOTES.values():
                end = text.find(piece, found.end())
                if end < 0:
                    self.setFormat(found.start(), len(text) - found.start(), self._formats["text"])
                    self.setCurrentBlockState(1 if piece == QUOTES[1] else 2)
                    return
                start = end + 3
                self.setFormat(found.start(), start - found.start(), self._formats["text"])
                continue
            which = "comment" if piece.startswith("#") else "text"
            self.setFormat(found.start(), len(piece), self._formats[which])
            start = found.end()


def colours(theme: Theme) -> dict[str, str]:
    """The colour of each part, all of 4.5 : 1 on the panel."""
    return {"table": theme.ink, "key": theme.accent, "text": theme.fit, "comment": theme.faint}


def _formats(theme: Theme) -> dict[str, QTextCharFormat]:
    formats = {}
    for which, colour in colours(theme).items():
        made = QTextCharFormat()
        made.setForeground(QColor(colour))
        if which == "table":
            made.setFontWeight(QFont.Weight.Bold)
        if which == "comment":
            made.setFontItalic(True)
        formats[which] = made
    return formats
