"""Onsets in a few words, for messages and tables."""

from __future__ import annotations

from fractions import Fraction

from tinemark.onsets.results import Criticality, Kind, Onset, Status
from tinemark.systems.exact import fraction_text


def describe(onset: Onset) -> str:
    """An onset in a few words: kind, periods, place and status."""
    proved = "proved" if onset.status is Status.PROVED else f"estimated ({onset.reason})"
    return f"{_named(onset)} at {onset.parameter} = {short_number(onset.value_fraction)}, {proved}"


def consequence_sentence(onset: Onset) -> str:
    """What follows past an onset, as a sentence; empty where it is no more than the periods say."""
    return f"{onset.consequence[0].upper()}{onset.consequence[1:]}." if onset.consequence else ""


def short_number(value: Fraction) -> str:
    """A number to ten digits."""
    return fraction_text(value, 10)


def period_words(onset: Onset) -> str:
    """Periods before and after as a table shows them."""
    before, after = onset.period_before, onset.period_after
    if not before:
        return f"new {after}"
    if not after or before == after:
        return str(before)
    return f"{before} -> {after}"


def _named(onset: Onset) -> str:
    before, after = onset.period_before, onset.period_after
    soft = onset.criticality
    critical = f"{soft.value} " if soft in (Criticality.SUPERCRITICAL, Criticality.SUBCRITICAL) else ""
    match onset.kind:
        case Kind.FLIP:
            subcritical = critical if soft is Criticality.SUBCRITICAL else ""
            return f"{subcritical}flip of period {before} to {after}"
        case Kind.FOLD:
            return f"fold that opens period {after}"
        case Kind.TRANSCRITICAL:
            return f"transcritical crossing of two cycles of period {before}"
        case Kind.PITCHFORK:
            return f"{critical}pitchfork of period {before}"
        case Kind.BORDER_COLLISION if not before:
            return f"border collision that opens period {after}"
        case Kind.BORDER_COLLISION if after and after != before:
            return f"border collision of period {before} to {after}"
        case Kind.BORDER_COLLISION:
            return f"border collision of period {before}"
        case Kind.CRISIS:
            return f"crisis on the unstable cycle of period {before}"
    return str(onset.kind.value)
