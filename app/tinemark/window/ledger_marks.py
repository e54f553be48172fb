"""What the diagram says of the ledger's rows."""

from __future__ import annotations

from fractions import Fraction

from tinemark.document.ledger import Ledger, Place
from tinemark.document.row import Row
from tinemark.onsets.results import Kind, Onset
from tinemark.window.marks import Mark


def marks_of(ledger: Ledger, place: Place, observe: str) -> tuple[Mark, ...]:
    """Marks of the rows that belong to the diagram: same mathematics, parameter and fixed values."""
    return tuple(mark_of(row, observe) for row in ledger.rows if row.place == place)


def mark_of(row: Row, observe: str) -> Mark:
    """One row's mark. Its point is known where the observed quantity is one of the states."""
    onset = row.onset
    observed = next((Fraction(value) for name, value in onset.states if name == observe), None)
    return Mark(row.id, onset.value_fraction, observed, short_label(onset), onset.status.value, words_of(row))


def short_label(onset: Onset) -> str:
    """What fits in the lane above the plot."""
    if onset.kind is Kind.FLIP and onset.period_before:
        return f"{onset.period_before}\N{RIGHTWARDS ARROW}{onset.period_after}"
    if onset.kind is Kind.UNKNOWN:
        return "by eye"
    return f"{onset.kind.value} {onset.period_after}" if onset.period_after else onset.kind.value


def words_of(row: Row) -> str:
    """A row in a few lines, for hovering."""
    onset = row.onset
    value = onset.value if len(onset.value) <= 28 else onset.value[:27] + "\N{HORIZONTAL ELLIPSIS}"
    lines = [f"{onset.parameter} = {value}"]
    if onset.kind is not Kind.UNKNOWN:
        lines.append(kind_words(onset))
    lines.append(onset.status.value + (f": {onset.reason}" if onset.reason else ""))
    if row.note:
        lines.append(row.note)
    return "\n".join(lines)


def kind_words(onset: Onset) -> str:
    """Kind, periods and criticality in words."""
    softness = f"{onset.criticality.value} " if onset.criticality.value else ""
    if onset.kind is Kind.FLIP and onset.period_before:
        return f"{softness}flip, period {onset.period_before} to {onset.period_after}"
    if onset.kind is Kind.FOLD and onset.period_after:
        return f"{softness}fold, opens period {onset.period_after}"
    return f"{softness}{onset.kind.value}"


def refined_sentence(onset: Onset) -> str:
    """What the status line says of a new row."""
    value = onset.value if len(onset.value) <= 24 else onset.value[:23] + "\N{HORIZONTAL ELLIPSIS}"
    return f"{onset.status.value.capitalize()}: {kind_words(onset)} at {onset.parameter} = {value}"
