"""The look: two palettes of named tokens, and the one place that turns them into Qt's palette and style
sheet.

Cool picture, warm accent: orbit densities are drawn in blues, everything that is *said about* them (marks,
selection, focus) in one copper accent, a pair that stays apart for colour-blind readers. Other rooms of the
window use tokens, never colours of their own.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import cast

from PySide6.QtCore import Qt
from PySide6.QtGui import QColor, QFont, QFontDatabase, QGuiApplication, QPalette
from PySide6.QtWidgets import QApplication, QStyleFactory

from tinemark.window.dressing import Dressing
from tinemark.window.style_sheet import style_sheet

THEME_PROPERTY = "tinemark_theme"


@dataclass(frozen=True)
class Theme:
    """Named colours ("#rrggbb") of one appearance.

    Attributes
    ----------
    surface, raised, sunken
        Grounds: the window, panels and fields on it, and wells under it.
    plot
        Ground of the diagram and of every plot.
    line, edge
        Quiet separators, and outlines of controls and axes (at least 3:1 against every ground).
    text, muted
        Words, and words of second rank (both at least 4.5:1 against every ground).
    accent, on_accent, accent_soft
        The one accent, text upon it, and its tint for selected rows.
    warning, error, good
        For words and signs that also say it in words or shape.
    cool
        The hue of the picture, for the strip below it.
    branch
        The one hue of branches, apart from the picture's and the accent for colour-blind readers too.
    picture
        Name of the colour map that suits the ground.
    """

    name: str
    dark: bool
    surface: str
    raised: str
    sunken: str
    plot: str
    line: str
    edge: str
    text: str
    muted: str
    accent: str
    on_accent: str
    accent_soft: str
    warning: str
    error: str
    good: str
    cool: str
    branch: str
    picture: str


LIGHT = Theme(
    name="light",
    dark=False,
    surface="#f3f2ee",
    raised="#fcfbf8",
    sunken="#e9e7e1",
    plot="#fdfdfb",
    line="#d8d5cd",
    edge="#85827a",
    text="#1e2227",
    muted="#585c63",
    accent="#a6421a",
    on_accent="#ffffff",
    accent_soft="#f3dfd3",
    warning="#7a5200",
    error="#a3123a",
    good="#2c6140",
    cool="#2f5f8f",
    branch="#0a7d63",
    picture="ink",
)

DARK = Theme(
    name="dark",
    dark=True,
    surface="#16191d",
    raised="#1e2227",
    sunken="#111417",
    plot="#0d1013",
    line="#31373e",
    edge="#757d87",
    text="#e7e5e0",
    muted="#a2a8b0",
    accent="#f09a6c",
    on_accent="#1b1310",
    accent_soft="#422c23",
    warning="#e6b655",
    error="#ff8fa3",
    good="#8fd0a4",
    cool="#86b6e6",
    branch="#5fe0b4",
    picture="glow",
)

THEMES = {theme.name: theme for theme in (LIGHT, DARK)}


def color(token: str, alpha: float = 1.0) -> QColor:
    """A token's colour for painting, with `alpha` from 0 to 1."""
    result = QColor(token)
    result.setAlphaF(alpha)
    return result


def current_theme() -> Theme:
    """The theme last applied to the running application; `LIGHT` before any was."""
    app = QGuiApplication.instance()
    return THEMES.get(str(app.property(THEME_PROPERTY)) if app else "", LIGHT)


def system_theme() -> Theme:
    """The theme that follows the desktop's own setting."""
    hints = QGuiApplication.styleHints()
    return DARK if hints.colorScheme() == Qt.ColorScheme.Dark else LIGHT


def apply_theme(app: QApplication, theme: Theme) -> None:
    """Dress the application. Widgets that paint for themselves get a `PaletteChange` and read
    `current_theme`.
    """
    app.setProperty(THEME_PROPERTY, theme.name)
    sheet = style_sheet()
    if app.styleSheet() != sheet:
        app.setStyle(QStyleFactory.create("Fusion"))
        # The sheet takes its colours from the palette, so the palette comes first.
        app.setPalette(qt_palette(theme))
        app.setStyleSheet(sheet)
        return
    app.setPalette(qt_palette(theme))
    Dressing.of(app).start()


def qt_palette(theme: Theme) -> QPalette:
    """Qt's palette from the tokens, disabled roles included. The style sheet finds all its tokens in it
    (`style_sheet.ROLE_WORDS`).
    """
    palette = QPalette()
    role = QPalette.ColorRole
    for which, token in (
        (role.Window, theme.surface),
        (role.WindowText, theme.text),
        (role.Base, theme.raised),
        (role.AlternateBase, theme.surface),
        (role.Text, theme.text),
        (role.PlaceholderText, theme.muted),
        (role.Button, theme.raised),
        (role.ButtonText, theme.text),
        (role.BrightText, theme.error),
        (role.ToolTipBase, theme.raised),
        (role.ToolTipText, theme.text),
        (role.Highlight, theme.accent_soft),
        (role.HighlightedText, theme.text),
        (role.Link, theme.accent),
        (role.LinkVisited, theme.warning),
        (role.Light, theme.raised),
        (role.Midlight, theme.on_accent),
        (role.Mid, theme.line),
        (role.Dark, theme.edge),
        (role.Shadow, theme.sunken),
        (role.Accent, theme.accent),
    ):
        palette.setColor(which, QColor(token))
    for which in (role.WindowText, role.Text, role.ButtonText, role.HighlightedText):
        palette.setColor(QPalette.ColorGroup.Disabled, which, QColor(theme.edge))
    return palette


def mono_font(scale: float = 1.0) -> QFont:
    """The tabular face for numbers, `scale` times the size of the interface's font."""
    font = QFontDatabase.systemFont(QFontDatabase.SystemFont.FixedFont)
    font.setStyleHint(QFont.StyleHint.Monospace)
    font.setFixedPitch(True)
    size = cast("QFont", QApplication.font()).pointSizeF()
    if size > 0:
        font.setPointSizeF(size * scale)
    return font


def small_font(scale: float = 0.9) -> QFont:
    """The interface's font for labels of second rank."""
    font = QFont(QApplication.font())
    if font.pointSizeF() > 0:
        font.setPointSizeF(font.pointSizeF() * scale)
    return font


def heading_font() -> QFont:
    """The interface's font for the title of a panel."""
    font = QFont(QApplication.font())
    font.setWeight(QFont.Weight.DemiBold)
    return font


def contrast(one: str, other: str) -> float:
    """Contrast ratio of two colours, 1 to 21 (relative luminance after ITU-R BT.709 and sRGB, as WCAG 2
    defines it).
    """
    bright, dim = sorted((_luminance(one), _luminance(other)), reverse=True)
    return (bright + 0.05) / (dim + 0.05)


def _luminance(token: str) -> float:
    shown = QColor(token)
    linear = [
        part / 12.92 if part <= 0.04045 else ((part + 0.055) / 1.055) ** 2.4
        for part in (shown.redF(), shown.greenF(), shown.blueF())
    ]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]
