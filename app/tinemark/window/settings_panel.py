"""How the diagram is drawn: sweep rule, settling, starts, quality and colours, each in plain words."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import ArrayLike
from PySide6.QtCore import QEvent, QSize, Qt, Signal
from PySide6.QtGui import QIcon, QImage, QPixmap
from PySide6.QtWidgets import QFrame, QLabel, QPushButton, QScrollArea, QVBoxLayout, QWidget

from tinemark.density.request import SweepRule
from tinemark.document.session import BUDGETS, TONES, PictureSettings, budget_steps
from tinemark.equations.accuracy import Accuracy
from tinemark.systems.system import System
from tinemark.window.faces import FaceKeeper, wear
from tinemark.window.field_editors import CountEdit, QuietCombo
from tinemark.window.theme import current_theme

MOST_TRANSIENT = 1_000_000
MOST_STARTS = 64
SWATCH = QSize(72, 12)

RULE_WORDS = {
    SweepRule.FRESH: "Each column begins at the system's own start values, whatever its neighbours do.",
    SweepRule.FORWARD: "Each column goes on from the one to its left, as in a slow sweep upwards.",
    SweepRule.BACKWARD: "Each column goes on from the one to its right, as in a slow sweep downwards.",
    SweepRule.SEVERAL: "Each column is drawn from several scattered starts, so that rival attractors show.",
}
ACCURACY_WORDS = {
    Accuracy.PICTURE: "Enough for the eye: where pixels would show a smaller error, samples are taken finer.",
    Accuracy.BENCH: "As fine as a good bench measurement, in every view.",
    Accuracy.REFERENCE: "Near the end of double precision, to hold against other solvers.",
}
TONE_NAMES = {"linear": "Linear", "log": "Logarithmic", "equalised": "Equalised"}
TONE_WORDS = {
    "linear": "Colour in proportion to how often a value is visited.",
    "log": "Lifts faint branches: equal steps of colour for equal factors of visits.",
    "equalised": "Spreads all counts evenly over the colours and shows the most.",
}


def theme_palettes() -> Mapping[str, ArrayLike]:
    """The colour maps of the density room: name -> table of 256 colours."""
    from tinemark.density.tone import palettes

    return palettes()


class SettingsPanel(QScrollArea):
    """Shows and changes `document.session.PictureSettings`.

    Signals
    -------
    settings_changed : PictureSettings
        What the user has chosen, whole.
    """

    settings_changed = Signal(object)

    def __init__(
        self,
        parent: QWidget | None = None,
        *,
        load_palettes: Callable[[], Mapping[str, ArrayLike]] = theme_palettes,
    ) -> None:
        super().__init__(parent)
        self.setWindowTitle("Picture settings")
        self.setAccessibleName("Picture settings")
        self.setWidgetResizable(True)
        self.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        self.setFocusPolicy(Qt.FocusPolicy.NoFocus)
        self._settings = PictureSettings()
        self._system: System | None = None
        self._error = math.nan
        self._load_palettes = load_palettes
        self._palettes: Mapping[str, ArrayLike] | None = None
        page = QWidget()
        self._page = QVBoxLayout(page)
        self._page.setContentsMargins(10, 8, 10, 8)
        self._page.setSpacing(4)
        self.setWidget(page)
        self._build()
        self._faces = FaceKeeper(self)
        self.show_settings(self._settings)

    def _build(self) -> None:
        self._heading("Orbits")
        self.rule = self._combo("Sweep rule", [(rule.value.capitalize(), rule.name) for rule in SweepRule])
        self.rule_words = self._words()
        self.starts = CountEdit("Starts in each column", 1, MOST_STARTS, 1)
        self._field("Starts in each column", self.starts)
        self.starts_words = self._words("Only the rule “several starts” has more than one.")
        self.transient = CountEdit("Steps thrown away first", 0, MOST_TRANSIENT, 100)
        self.transient_name = self._field("Steps thrown away first", self.transient)
        self.transient_words = self._words()
        self._heading("Quality")
        self.budget = self._combo("Picture improves up to", [("", name) for name in BUDGETS])
        self._words("The first picture appears at once in every case; it gets finer while the view rests.")
        self._build_accuracy()
        self._heading("Colour")
        self.tone = self._combo("Tone", [(TONE_NAMES.get(tone, tone.capitalize()), tone) for tone in TONES])
        self.tone_words = self._words()
        self.palette_choice = self._combo("Colour map", [("As the theme", "")])
        self.palette_choice.setIconSize(SWATCH)
        self._words("All maps are even to the eye and safe for colour-blind readers.")
        self._page.addSpacing(8)
        self.reset_button = QPushButton("Back to the defaults")
        self.reset_button.clicked.connect(self._reset)
        self._page.addWidget(self.reset_button, 0, Qt.AlignmentFlag.AlignLeft)
        self._page.addStretch(1)
        for combo in (self.rule, self.budget, self.accuracy, self.tone, self.palette_choice):
            combo.activated.connect(self._changed)
        for count in (self.starts, self.transient):
            count.counted.connect(self._changed)

    def _build_accuracy(self) -> None:
        """Only equations are integrated: maps have no use for it, and do not see it."""
        levels = [(f"{level.value.capitalize()}: {parts(level.error)}", level.value) for level in Accuracy]
        self.accuracy = QuietCombo()
        self.accuracy.setAccessibleName("Error of a sample at most")
        self.accuracy.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        for shown, name in levels:
            self.accuracy.addItem(shown, name)
        self.accuracy_name = self._field("Error of a sample at most", self.accuracy)
        self.accuracy_words = self._words()

    def _heading(self, words: str) -> None:
        if self._page.count():
            self._page.addSpacing(10)
            rule = QFrame()
            rule.setProperty("rank", "rule")
            self._page.addWidget(rule)
            self._page.addSpacing(4)
        label = QLabel(words)
        wear(label, "heading")
        self._page.addWidget(label)

    def _field(self, words: str, editor: QWidget) -> QLabel:
        label = QLabel(words)
        label.setBuddy(editor)
        self._page.addSpacing(4)
        self._page.addWidget(label)
        self._page.addWidget(editor)
        if isinstance(editor, CountEdit):
            self._page.addWidget(editor.trouble)
        return label

    def _combo(self, words: str, items: list[tuple[str, str]]) -> QuietCombo:
        combo = QuietCombo()
        combo.setAccessibleName(words)
        combo.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        for shown, data in items:
            combo.addItem(shown, data)
        self._field(words, combo)
        return combo

    def _words(self, text: str = "") -> QLabel:
        label = QLabel(text)
        label.setWordWrap(True)
        label.setProperty("rank", "second")
        self._page.addWidget(label)
        return label

    # -- what others ask -------------------------------------------------------------------

    def show_settings(self, settings: PictureSettings) -> None:
        """Show settings; nothing is emitted."""
        self._settings = settings
        combos = (self.rule, self.budget, self.accuracy, self.tone, self.palette_choice)
        editors = (*combos, self.starts, self.transient)
        for editor in editors:
            editor.blockSignals(True)
        _select(self.rule, settings.rule.name)
        self.starts.show_count(settings.starts)
        self.transient.show_count(settings.transient_steps)
        _select(self.budget, settings.budget)
        _select(self.accuracy, settings.accuracy.value)
        _select(self.tone, settings.tone)
        if settings.palette:
            self.prepare()
        _select(self.palette_choice, settings.palette)
        for editor in editors:
            editor.blockSignals(False)
        self._refresh()

    def show_system(self, system: System) -> None:
        """Say what the settings mean for a system."""
        self._system = system
        self._refresh()

    def show_measured(self, error: float) -> None:
        """Say how accurate the samples shown were found to be; nan where that is not known."""
        self._error = error
        self._refresh()

    @property
    def settings(self) -> PictureSettings:
        """What is shown."""
        return self._settings

    # -- inside ----------------------------------------------------------------------------

    def _changed(self) -> None:
        rule = SweepRule[str(self.rule.currentData())]
        chosen = replace(
            self._settings,
            rule=rule,
            starts=self._starts_for(rule),
            transient_steps=self.transient.count,
            budget=str(self.budget.currentData()),
            accuracy=Accuracy(str(self.accuracy.currentData())),
            tone=str(self.tone.currentData()),
            palette=str(self.palette_choice.currentData() or ""),
        )
        if chosen != self._settings:
            self.show_settings(chosen)
            self.settings_changed.emit(chosen)

    def _starts_for(self, rule: SweepRule) -> int:
        if rule is not SweepRule.SEVERAL:
            return 1
        fresh = self._settings.rule is not SweepRule.SEVERAL
        return max(self.starts.count, 8) if fresh else self.starts.count

    def _reset(self) -> None:
        fresh = PictureSettings()
        if fresh != self._settings:
            self.show_settings(fresh)
            self.settings_changed.emit(fresh)

    def _refresh(self) -> None:
        several = self._settings.rule is SweepRule.SEVERAL
        self.rule_words.setText(RULE_WORDS[self._settings.rule])
        self.tone_words.setText(TONE_WORDS.get(self._settings.tone, ""))
        self._refresh_counts()
        self.starts.setEnabled(several)
        self.starts_words.setVisible(not several)
        self.reset_button.setEnabled(self._settings != PictureSettings())

    def _refresh_counts(self) -> None:
        """Maps count steps; equations count samples, and have an accuracy."""
        is_map = self._system is None or self._system.is_map
        what = "Steps" if is_map else "Samples"
        self.transient_name.setText(f"{what} thrown away first")
        self.transient.setAccessibleName(f"{what} thrown away first")
        self.transient_words.setText(
            f"An orbit needs time to settle, most of all near a split. More {what.lower()} draw it crisper."
        )
        for place in range(self.budget.count()):
            name = str(self.budget.itemData(place))
            steps = BUDGETS[name] if self._system is None else budget_steps(name, self._system)
            self.budget.setItemText(place, _budget_words(name, steps, what.lower()))
        for widget in (self.accuracy_name, self.accuracy, self.accuracy_words):
            widget.setVisible(not is_map)
        known = math.isfinite(self._error) and self._error > 0
        seen = f" In this picture at most {parts(self._error)} were measured." if known else ""
        words = f"As a share of a state's size. {ACCURACY_WORDS[self._settings.accuracy]}"
        self.accuracy_words.setText(words + seen)

    def showEvent(self, event: QEvent) -> None:
        """The colour maps are read when they are first to be seen, not at the start of the program."""
        super().showEvent(event)
        self.prepare()

    def prepare(self) -> None:
        """Read the colour maps, where that has not been done."""
        if self._palettes is not None:
            return
        self._palettes = self._load_palettes()
        chosen = self._settings.palette
        self.palette_choice.blockSignals(True)
        for name, table in self._palettes.items():
            self.palette_choice.addItem(swatch(table), name.replace("_", " ").capitalize(), name)
        self._paint_theme_swatch()
        _select(self.palette_choice, chosen)
        self.palette_choice.blockSignals(False)

    def _paint_theme_swatch(self) -> None:
        table = (self._palettes or {}).get(current_theme().picture)
        if table is not None:
            self.palette_choice.setItemIcon(0, swatch(table))

    def changeEvent(self, event: QEvent) -> None:
        """The theme's own colour map changes with it."""
        super().changeEvent(event)
        if event.type() == QEvent.Type.PaletteChange and hasattr(self, "reset_button"):
            self._paint_theme_swatch()


def swatch(table: ArrayLike) -> QIcon:
    """A strip of a colour map, lowest counts at the left."""
    colours = np.asarray(table)[:, :3]
    if colours.dtype.kind == "f":
        colours = np.rint(colours * 255)
    strip = np.ascontiguousarray(np.repeat(colours[None].astype(np.uint8), SWATCH.height(), axis=0))
    height, width = strip.shape[:2]
    image = QImage(strip.tobytes(), width, height, 3 * width, QImage.Format.Format_RGB888).copy()
    return QIcon(QPixmap.fromImage(image.scaled(SWATCH * 2)))


def _budget_words(name: str, steps: int, what: str) -> str:
    return f"{name.capitalize()}: {steps:,} {what} a column".replace(",", "\u2009")


def parts(error: float) -> str:
    """A small share in words, rounded up: 3 parts in 10 million."""
    power = math.floor(math.log10(error) + 1e-9)
    count = math.ceil(error / 10.0**power - 1e-9)
    if count == 10:
        count, power = 1, power + 1
    return f"{count} part{'' if count == 1 else 's'} in {_tens(-power)}"


def _tens(power: int) -> str:
    named = ((12, "trillion"), (9, "billion"), (6, "million"))
    least, word = next(((least, word) for least, word in named if power >= least), (0, ""))
    return f"{10 ** max(power - least, 0)} {word}".strip()


def _select(combo: QuietCombo, data: str) -> None:
    place = combo.findData(data)
    combo.setCurrentIndex(max(place, 0))
