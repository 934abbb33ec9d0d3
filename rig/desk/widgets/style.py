"""The look of the whole application: palette, font and style sheet of a theme.

Parts ask for a variant with the property `kind` of a widget:

    QPushButton   "primary" (the one to press), "quiet" (no frame until pointed at), "arm" (switches the drive on),
                  "small" (one of many in a row)
    QLineEdit     "small" (in the place of such a row)
    QLabel        "heading", "faint", "alert" (bold), "alerting", "on_accent"
    QFrame        "panel", "rule"

Lengths are in em, so that they grow with the font.
"""

from __future__ import annotations

import string
from pathlib import Path

from PySide6.QtCore import Qt
from PySide6.QtGui import QColor, QFont, QPalette
from PySide6.QtWidgets import QApplication, QStyleFactory, QToolTip, QWidget

from rig.desk.theme import Theme, contrast
from rig.desk.widgets.shapes import blended

BASE_POINTS = 10.5
#: Marks of check boxes and lists, one of each for every theme.
IMAGES = Path(__file__).parent / "images"

SHEET = string.Template("""
QMainWindow, QDialog { background: $ground; }
QFrame[kind="panel"] { background: $panel; border: 1px solid $rule; border-radius: 4px; }
QFrame[kind="rule"] { background: $rule; border: none; }
QLabel { color: $ink; background: transparent; }
QLabel[kind="heading"] { font-weight: 600; }
QLabel[kind="faint"] { color: $faint; }
QLabel[kind="alert"] { color: $alert; font-weight: 600; }
QLabel[kind="alerting"] { color: $alert; }
QLabel[kind="on_accent"] { color: $accent_ink; }
QLabel:disabled { color: $faint; }

QPushButton {
    color: $ink; background: $raised; border: 2px solid $edge; border-radius: 4px;
    padding: 0.35em 1.0em; min-height: 1.5em;
}
QPushButton:hover { background: $hover; }
QPushButton:pressed { background: $press; }
QPushButton:checked { background: $chosen; border-color: $accent; font-weight: 600; }
QPushButton:disabled { color: $off; background: $ground; border-color: $rule; }
QPushButton:focus { border-color: $ring; }
QPushButton[kind="primary"] { color: $accent_ink; background: $accent; border-color: $accent; font-weight: 600; }
QPushButton[kind="primary"]:hover { background: $accent_hover; }
QPushButton[kind="primary"]:focus { border-color: $ring; }
QPushButton[kind="primary"]:disabled { color: $off; background: $ground; border-color: $rule; }
QPushButton[kind="arm"] { background: $panel; border-color: $ink; font-weight: 600; }
QPushButton[kind="arm"]:hover { background: $hover; }
QPushButton[kind="arm"]:focus { border-color: $ring; }
QPushButton[kind="arm"]:disabled { color: $off; background: $ground; border-color: $rule; }
QPushButton[kind="small"] { padding: 0.15em 0.5em; min-height: 1.4em; }
QPushButton[kind="quiet"] { background: transparent; border-color: transparent; }
QPushButton[kind="quiet"]:hover { background: $raised; }
QPushButton[kind="quiet"]:focus { border-color: $ring; }

QLineEdit, QPlainTextEdit, QTextEdit, QSpinBox, QDoubleSpinBox, QComboBox {
    color: $ink; background: $panel; border: 2px solid $edge; border-radius: 4px; padding: 0.3em 0.5em;
    selection-background-color: $accent; selection-color: $accent_ink;
}
QLineEdit[kind="small"] { padding: 0.22em 0.5em; }
QLineEdit:focus, QPlainTextEdit:focus, QTextEdit:focus, QSpinBox:focus, QDoubleSpinBox:focus, QComboBox:focus {
    border-color: $ring;
}
QLineEdit:disabled, QLineEdit[readOnly="true"], QComboBox:disabled { color: $faint; background: $ground; }
QAbstractSpinBox > QLineEdit { border: none; padding: 0 0.4em; background: transparent; }
QComboBox::drop-down { border: none; width: 1.8em; }
QComboBox::down-arrow { image: url("$images/down-$name.svg"); width: 0.85em; height: 0.85em; }
QSpinBox::up-button, QDoubleSpinBox::up-button, QSpinBox::down-button, QDoubleSpinBox::down-button {
    border: none; width: 1.6em; background: transparent;
}
QSpinBox::up-arrow, QDoubleSpinBox::up-arrow {
    image: url("$images/up-$name.svg"); width: 0.7em; height: 0.7em;
}
QSpinBox::down-arrow, QDoubleSpinBox::down-arrow {
    image: url("$images/down-$name.svg"); width: 0.7em; height: 0.7em;
}
QComboBox QAbstractItemView {
    color: $ink; background: $panel; border: 1px solid $edge;
    selection-background-color: $accent; selection-color: $accent_ink;
}

QListView, QTreeView, QTableView {
    color: $ink; background: $panel; border: 1px solid $rule; border-radius: 4px; outline: none;
    alternate-background-color: $ground; gridline-color: $rule;
    selection-background-color: $accent; selection-color: $accent_ink;
}
QListView:focus, QTreeView:focus, QTableView:focus { border: 2px solid $ring; }
QListView::item, QTreeView::item { padding: 0.25em 0.4em; }
QHeaderView::section {
    color: $faint; background: $panel; border: none; border-bottom: 1px solid $rule; padding: 0.3em 0.5em;
}

QTabWidget::pane { border: 1px solid $rule; border-radius: 4px; background: $panel; top: -1px; }
QTabBar::tab {
    color: $faint; background: transparent; border: 2px solid transparent; border-radius: 4px;
    padding: 0.35em 0.9em; margin: 0 0.15em 0.25em 0;
}
QTabBar::tab:hover { background: $raised; color: $ink; }
QTabBar::tab:selected { color: $ink; font-weight: 600; border-bottom: 3px solid $accent; border-radius: 0; }
QTabBar:focus::tab:selected, QTabBar::tab:selected:focus {
    border: 2px solid $ring; border-bottom: 3px solid $ring; border-radius: 4px;
}

QCheckBox, QRadioButton { color: $ink; spacing: 0.5em; padding: 0.2em 0.3em; border: 2px solid transparent;
    border-radius: 4px; }
QCheckBox:focus, QRadioButton:focus { border-color: $ring; }
QCheckBox::indicator, QRadioButton::indicator, QListView::indicator, QTreeView::indicator {
    width: 1.05em; height: 1.05em; border: 2px solid $edge; border-radius: 3px; background: $panel;
}
QCheckBox::indicator:checked, QListView::indicator:checked, QTreeView::indicator:checked {
    image: url("$images/check-$name.svg"); background: $accent; border-color: $accent;
}
QRadioButton::indicator { border-radius: 0.62em; }
QRadioButton::indicator:checked {
    border-color: $accent;
    background: qradialgradient(cx: 0.5, cy: 0.5, radius: 0.5, fx: 0.5, fy: 0.5,
        stop: 0 $accent, stop: 0.55 $accent, stop: 0.65 $panel, stop: 1 $panel);
}
QCheckBox::indicator:disabled, QRadioButton::indicator:disabled { border-color: $rule; background: $ground; }
QGroupBox { color: $ink; border: 1px solid $rule; border-radius: 4px; margin-top: 0.9em; padding-top: 0.5em; }
QGroupBox::title { subcontrol-origin: margin; left: 0.7em; padding: 0 0.3em; color: $faint; }

QToolTip { color: $ink; background: $panel; border: 1px solid $edge; padding: 0.35em; }
QMenu { color: $ink; background: $panel; border: 1px solid $edge; padding: 0.25em; }
QMenu::item { padding: 0.3em 1.4em; border-radius: 4px; }
QMenu::item:selected { color: $accent_ink; background: $accent; }
QProgressBar { color: $ink; background: $raised; border: none; border-radius: 4px; text-align: center; }
QProgressBar::chunk { background: $accent; border-radius: 4px; }
QSplitter::handle { background: $ground; }
QSplitter::handle:hover { background: $accent; }
QSlider::groove:horizontal { height: 0.3em; background: $raised; border-radius: 2px; }
QSlider::sub-page:horizontal { background: $accent; border-radius: 2px; }
QSlider::handle:horizontal {
    width: 0.9em; margin: -0.4em 0; background: $panel; border: 2px solid $accent; border-radius: 4px;
}
QSlider { border: 2px solid transparent; border-radius: 4px; min-height: 1.4em; }
QSlider:focus { border: 2px solid $ring; border-radius: 4px; }

QScrollArea { border: none; background: transparent; }
QScrollArea > QWidget > QWidget { background: transparent; }
QScrollBar:vertical { background: transparent; width: 0.75em; margin: 0; }
QScrollBar:horizontal { background: transparent; height: 0.75em; margin: 0; }
QScrollBar::handle { background: $edge; border-radius: 4px; }
QScrollBar::handle:vertical { min-height: 2em; margin: 0 0.12em; }
QScrollBar::handle:horizontal { min-width: 2em; margin: 0.12em 0; }
QScrollBar::handle:hover { background: $faint; }
QScrollBar::add-line, QScrollBar::sub-line { width: 0; height: 0; }
QScrollBar::add-page, QScrollBar::sub-page { background: transparent; }
""")


def style_sheet(theme: Theme) -> str:
    """Style sheet of the whole application."""
    return SHEET.substitute(
        vars(theme),
        images=IMAGES.as_posix(),
        ring=ring(theme),
        edge=edge(theme),
        hover=blended(theme.raised, theme.ink, 0.08).name(),
        press=blended(theme.raised, theme.ink, 0.18).name(),
        chosen=blended(theme.panel, theme.accent, 0.18).name(),
        accent_hover=blended(theme.accent, theme.accent_ink, 0.12).name(),
        off=blended(theme.faint, theme.ground, 0.25).name(),
    )


def ring(theme: Theme) -> str:
    """Colour of the focus ring: the ink, which stands out from every ground and from the accent."""
    return theme.ink


def edge(theme: Theme) -> str:
    """Outline of what can be pressed or typed into: a little more than 3 : 1 against its ground (WCAG 2.2, 1.4.11),
    and no more, so that the focus ring stands out from it."""
    shades = (blended(theme.rule, theme.faint, 0.05 * step).name() for step in range(20))
    grounds = (theme.ground, theme.panel)
    return next((one for one in shades if min(contrast(one, back) for back in grounds) > 3.2), theme.faint)


def palette(theme: Theme) -> QPalette:
    """Palette for what the style sheet does not reach."""
    made = QPalette()
    role = QPalette.ColorRole
    for which, colour in (
        (role.Window, theme.ground),
        (role.WindowText, theme.ink),
        (role.Base, theme.panel),
        (role.AlternateBase, theme.ground),
        (role.Text, theme.ink),
        (role.PlaceholderText, theme.faint),
        (role.Button, theme.raised),
        (role.ButtonText, theme.ink),
        (role.BrightText, theme.alert),
        (role.ToolTipBase, theme.panel),
        (role.ToolTipText, theme.ink),
        (role.Highlight, theme.accent),
        (role.HighlightedText, theme.accent_ink),
        (role.Link, theme.accent),
        (role.LinkVisited, theme.accent),
        (role.Light, theme.panel),
        (role.Midlight, theme.raised),
        (role.Mid, theme.rule),
        (role.Dark, theme.faint),
        (role.Shadow, theme.ink),
        (role.Accent, theme.accent),
    ):
        made.setColor(which, QColor(colour))
    for which in (role.WindowText, role.Text, role.ButtonText):
        made.setColor(QPalette.ColorGroup.Disabled, which, QColor(theme.faint))
    return made


def base_font(app: QApplication) -> QFont:
    """The system's font at the size everything is measured in, figures of equal width where it has them."""
    font = QFont(app.font())
    font.setPointSizeF(BASE_POINTS)
    if hasattr(font, "setFeature"):
        font.setFeature(QFont.Tag("tnum"), 1)
    return font


def apply(app: QApplication, theme: Theme) -> None:
    """Give the application its look; call it again for another theme."""
    style = QStyleFactory.create("Fusion")
    if style is not None and app.style().name().lower() != "fusion":
        app.setStyle(style)
    app.setPalette(palette(theme))
    QToolTip.setPalette(palette(theme))
    app.setFont(base_font(app))
    app.setStyleSheet(style_sheet(theme))


def set_kind(widget: QWidget, kind: str) -> None:
    """Give a widget a variant of the style sheet, also after it has been shown."""
    if widget.property("kind") != kind:
        widget.setProperty("kind", kind)
        if widget.testAttribute(Qt.WidgetAttribute.WA_WState_Polished):
            # Not before: a font set by hand would be lost when it is shown.
            widget.style().unpolish(widget)
            widget.style().polish(widget)


def set_shown(widget: QWidget, shown: bool) -> None:
    """Show or hide, without work when it is so already."""
    if widget.isHidden() == shown:
        widget.setVisible(shown)
