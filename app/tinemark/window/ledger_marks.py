"""What the diagram says of the ledger's rows."""

from __future__ import annotations

import re
from fractions import Fraction

from tinemark.document.ledger import Ledger, Place
from tinemark.document.row import Row
from tinemark.onsets.results import Criticality, Kind, Onset
from tinemark.window.marks import Mark

_JUMP = re.compile(r"\ba jump\b|\bbehaviour jumps\b")


def marks_of(ledger: Ledger, place: Place, observe: str) -> tuple[Mark, ...]:
    """Marks of the rows that belong to the diagram: same mathematics, parameter and fixed values."""
    return tuple(mark_of(row, observe) for row in ledger.rows if row.place == place)


def mark_of(row: Row, observe: str) -> Mark:
    """One row's mark. Its point is known where the observed quantity is one of the states."""
    onset = row.onset
    observed = next((Fraction(value) for name, value in onset.states if name == observe), None)
    return Mark(
        row.id,
        onset.value_fraction,
        observed,
        short_label(onset),
        onset.status.value,
        words_of(row),
        onset.kind.value,
        is_jump(onset),
    )


def is_jump(onset: Onset) -> bool:
    """Whether the behaviour changes with a jump: the onset is subcritical, or its consequence says so."""
    if onset.criticality is Criticality.SUBCRITICAL:
        return True
    return bool(_JUMP.search(onset.consequence))


def short_label(onset: Onset) -> str:
    """What fits in the lane above the plot."""
    return _label(onset) + (", jump" if is_jump(onset) else "")


def _label(onset: Onset) -> str:
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
    follows = consequence_words(onset)
    if follows:
        lines.append(follows)
    lines.append(onset.status.value + (f": {onset.reason}" if onset.reason else ""))
    if row.note:
        lines.append(row.note)
    return "\n".join(lines)


def consequence_words(onset: Onset) -> str:
    """What follows past the onset; a jump is always named. Empty where there is nothing to say."""
    if not is_jump(onset) or _JUMP.search(onset.consequence):
        return onset.consequence
    jump = "the change is a jump"
    return f"{jump}: {onset.consequence}" if onset.consequence else jump


def kind_words(onset: Onset) -> str:
    """Kind, periods and criticality in words."""
    softness = f"{onset.criticality.value} " if onset.criticality.value else ""
    if onset.kind is Kind.FLIP and onset.period_before:
        return f"{softness}flip, period {onset.period_before} to {onset.period_after}"
    if onset.kind is Kind.FOLD and onset.period_after:
        return f"{softness}fold, opens period {onset.period_after}"
    if onset.kind is Kind.NEIMARK_SACKER and onset.period_before:
        return f"{softness}Neimark-Sacker point of period {onset.period_before}"
    if onset.period_before and onset.period_after and onset.period_before != onset.period_after:
        return f"{softness}{onset.kind.value}, period {onset.period_before} to {onset.period_after}"
    period = onset.period_before or onset.period_after
    return f"{softness}{onset.kind.value}" + (f" of period {period}" if period else "")


def refined_sentence(onset: Onset) -> str:
    """What the status line says of a new row."""
    value = onset.value if len(onset.value) <= 24 else onset.value[:23] + "\N{HORIZONTAL ELLIPSIS}"
    return f"{onset.status.value.capitalize()}: {kind_words(onset)} at {onset.parameter} = {value}"
