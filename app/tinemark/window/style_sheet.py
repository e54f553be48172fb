"""The style sheet: flat surfaces, thin outlines, a focus ring that is always seen. Lengths are device-
independent.

It names no colour, only roles of Qt's palette (`ROLE_WORDS`, filled by `theme.qt_palette`). So it is set
once, and a change of theme is a change of palette: reading a new sheet takes Qt a millisecond a widget.
"""

from __future__ import annotations

from string import Template

ROLE_WORDS = {
    "surface": "window",
    "raised": "base",
    "sunken": "shadow",
    "line": "mid",
    "edge": "dark",
    "text": "text",
    "muted": "placeholder-text",
    "accent": "link",
    "on_accent": "midlight",
    "accent_soft": "highlight",
    "warning": "link-visited",
    "error": "bright-text",
}
"""Where the palette holds a theme's tokens, in the style sheet's words."""

_SHEET = Template("""
QMainWindow, QDialog { background: $surface; }
QDialogButtonBox { dialogbuttonbox-buttons-have-icons: 0; }
QToolTip { background: $raised; color: $text; border: 1px solid $edge; padding: 4px 6px; }

QMenuBar { background: $surface; border-bottom: 1px solid $line; padding: 1px 4px; }
QMenuBar::item { background: transparent; padding: 4px 9px; border-radius: 4px; }
QMenuBar::item:selected { background: $accent_soft; }
QMenu { background: $raised; border: 1px solid $edge; padding: 4px; }
QMenu::item { padding: 5px 26px 5px 22px; border-radius: 4px; }
QMenu::item:selected { background: $accent_soft; }
QMenu::item:disabled { color: $edge; }
QMenu::separator { height: 1px; background: $line; margin: 4px 8px; }

QStatusBar { background: $surface; border-top: 1px solid $line; }
QStatusBar::item { border: none; }
QSplitter::handle { background: transparent; }
QSplitter::handle:horizontal { width: 5px; border-right: 1px solid $line; }
QSplitter::handle:vertical { height: 5px; border-bottom: 1px solid $line; }
QSplitter::handle:hover { background: $accent_soft; }

QPushButton { background: $raised; border: 1px solid $edge; border-radius: 4px; padding: 4px 12px; }
QPushButton:hover { background: $accent_soft; }
QPushButton:pressed { background: $line; }
QPushButton:default { border-color: $accent; }
QPushButton:focus { border: 2px solid $accent; padding: 3px 11px; }
QPushButton:disabled { color: $edge; border-color: $line; }
QToolButton { background: transparent; border: 1px solid transparent; border-radius: 4px; padding: 3px 6px; }
QToolButton:hover { background: $accent_soft; }
QToolButton:checked { background: $accent_soft; border-color: $accent; }
QToolButton:focus { border: 1px solid $accent; }
QToolButton:disabled { color: $edge; }

QLineEdit, QPlainTextEdit, QTextEdit, QAbstractSpinBox, QComboBox {
    background: $raised; border: 1px solid $edge; border-radius: 4px; padding: 3px 6px;
    selection-background-color: $accent; selection-color: $on_accent; }
QLineEdit:focus, QPlainTextEdit:focus, QTextEdit:focus, QAbstractSpinBox:focus, QComboBox:focus {
    border: 2px solid $accent; padding: 2px 5px; }
QLineEdit:disabled, QAbstractSpinBox:disabled, QComboBox:disabled { color: $edge; border-color: $line; }
QLineEdit:read-only, QTextBrowser { background: $surface; }
QLineEdit[invalid="true"] { border: 2px solid $error; padding: 2px 5px; }
QComboBox QAbstractItemView { background: $raised; border: 1px solid $edge; selection-background-color:
$accent_soft; selection-color: $text; }

QAbstractItemView { background: $raised; alternate-background-color: $surface; border: none; outline: none;
    selection-background-color: $accent_soft; selection-color: $text; }
QHeaderView { background: $surface; }
QHeaderView::section { background: $surface; color: $muted; border: none; border-bottom: 1px solid $line;
    padding: 4px 6px; }
QTableCornerButton::section { background: $surface; border: none; }
QScrollArea { background: transparent; border: none; }
QScrollBar:vertical { background: transparent; width: 11px; margin: 0; }
QScrollBar:horizontal { background: transparent; height: 11px; margin: 0; }
QScrollBar::handle { background: $edge; border-radius: 3px; margin: 2px 3px; min-height: 24px; min-width:
24px; } QScrollBar::handle:horizontal { margin: 3px 2px; } QScrollBar::handle:hover { background: $muted; }
QScrollBar::add-line, QScrollBar::sub-line { width: 0; height: 0; } QScrollBar::add-page, QScrollBar::sub-
page { background: transparent; }

QProgressBar { background: $sunken; border: none; border-radius: 3px; max-height: 6px; min-height: 6px; }
QProgressBar::chunk { background: $accent; border-radius: 3px; }
QLabel[rank="second"] { color: $muted; }
QLabel[rank="error"] { color: $error; }
QLabel[rank="warning"] { color: $warning; }
QFrame[rank="panel"] { background: $raised; border: 1px solid $line; border-radius: 6px; }
QFrame[rank="rule"] { background: $line; max-height: 1px; min-height: 1px; border: none; }
""")


def style_sheet() -> str:
    """The application's style sheet, for every theme."""
    return _SHEET.substitute({token: f"palette({role})" for token, role in ROLE_WORDS.items()})
