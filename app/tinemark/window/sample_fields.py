"""Fields of the system card that say what kind of system it is and when it is sampled."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Protocol

from PySide6.QtCore import Signal
from PySide6.QtWidgets import QGridLayout, QWidget

from tinemark.window.field_editors import FieldEdit, QuietCombo, field_label
from tinemark.window.system_draft import Draft

KIND_WORDS = {
    "map": "map: next states",
    "driven": "driven: rates, strobed",
    "flow": "flow: rates, a section",
}
DIRECTION_WORDS = {"rising": "rising", "falling": "falling"}


class _WordChooser(QuietCombo):
    """A chooser of one word of a few, each shown with what it means.

    Signals
    -------
    chosen : str
        The word chosen by the user.
    """

    chosen = Signal(str)

    def __init__(self, name: str, words: Mapping[str, str]) -> None:
        super().__init__()
        self.setAccessibleName(name)
        for word, meaning in words.items():
            self.addItem(meaning, word)
        self.setMinimumContentsLength(12)
        self.activated.connect(lambda place: self.chosen.emit(str(self.itemData(place))))

    def show_word(self, word: str) -> None:
        """Show a word; one that is not known leaves the chooser empty."""
        self.setCurrentIndex(self.findData(word))


class KindChooser(_WordChooser):
    """The kind of system."""

    def __init__(self) -> None:
        super().__init__("Kind of system", KIND_WORDS)

    def show_kind(self, kind: str) -> None:
        """Show the kind a text names."""
        self.show_word(kind)


class DirectionChooser(_WordChooser):
    """Which way a section is crossed when a sample is taken."""

    def __init__(self) -> None:
        super().__init__("Direction of crossing", DIRECTION_WORDS)

    def show_direction(self, direction: str) -> None:
        """Show the direction a text names."""
        self.show_word(direction)


class FieldMaker(Protocol):
    """The form that these fields belong to."""

    def line(
        self, key: str, name: str, *, number: bool = False, optional: bool = False, digits: int = 6
    ) -> FieldEdit:
        """An editor of one text."""

    def register(self, key: str, editor: QWidget) -> None:
        """Make an editor findable by its key."""

    def error_row(self, grid: QGridLayout, row: int, key: str) -> None:
        """Say where a mistake in a field is shown."""

    def choose(self, changes: dict[str, str]) -> None:
        """Change fields at once."""


def build_sample(form: FieldMaker, grid: QGridLayout, draft: Draft) -> DirectionChooser | None:
    """The fields of a sample: of a driven system its strobe period, of a flow its section."""
    if draft.kind == "driven":
        every = form.line("sample.every", "Strobe period, a formula in the parameters", digits=12)
        every.setToolTip("The period of the drive, a formula in the parameters")
        grid.addWidget(field_label("every", every), 0, 0)
        grid.addWidget(every, 0, 1, 1, 4)
        form.error_row(grid, 1, "sample.every")
        return None
    crosses = form.line("sample.crosses", "Section, a formula in the states", digits=12)
    crosses.setToolTip("A sample is taken where this formula passes zero")
    grid.addWidget(field_label("zero of", crosses), 0, 0)
    grid.addWidget(crosses, 0, 1, 1, 4)
    form.error_row(grid, 1, "sample.crosses")
    direction = DirectionChooser()
    direction.chosen.connect(lambda way: form.choose({"sample.direction": way}))
    form.register("sample.direction", direction)
    grid.addWidget(field_label("while", direction), 2, 0)
    grid.addWidget(direction, 2, 1, 1, 4)
    form.error_row(grid, 3, "sample.direction")
    return direction
