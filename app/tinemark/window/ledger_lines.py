"""The lines of the ledger's table in words: ladders under headings, an onset a line, holes said. No Qt."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from enum import IntEnum
from fractions import Fraction
from functools import lru_cache

from tinemark.document.estimates import Estimate, LadderEstimates, LevelEstimate, estimate_text
from tinemark.document.ledger import Ledger
from tinemark.document.rounding import (
    ELLIPSIS,
    SHORT_DIGITS,
    decimal_text,
    exponent,
    group_digits,
    held_digits,
    minus_sign,
    onset_text,
    plus_minus,
)
from tinemark.document.row import Row
from tinemark.onsets.results import Criticality, Onset, Status

NOTHING = "\u2013"
MOST_DIGITS = 15
ROUNDED_DIGITS = 8
LEAST_SIZE = 6

STATUS_MEANING = {
    Status.PROVED: "The enclosure holds with mathematical certainty for the formulas as typed.",
    Status.ESTIMATED: "Computed and polished; the interval is meant to hold the true value at 95 % coverage.",
    Status.READ_BY_EYE: "Set with the crosshair; uncertain by half a pixel of the view it was read in.",
    Status.MEASURED: "From bench data, with their uncertainty.",
}


class Column(IntEnum):
    """Columns in the order shown."""

    LEVEL = 0
    KIND = 1
    PERIOD = 2
    VALUE = 3
    GAP = 4
    RATIO = 5
    STATUS = 6
    NOTE = 7


HEADERS = {
    Column.LEVEL: "Level",
    Column.KIND: "Kind",
    Column.PERIOD: "Period",
    Column.VALUE: "Value",
    Column.GAP: "Gap",
    Column.RATIO: "Ratio",
    Column.STATUS: "Status",
    Column.NOTE: "Note",
}
HEADER_TIPS = {
    Column.LEVEL: "n for the n-th flip of the ladder, 0 for the fold that opens it",
    Column.KIND: "What happens at the onset",
    Column.PERIOD: "Least period before and after the onset",
    Column.VALUE: "Parameter value; brackets hold the standard uncertainty of the last digits, "
    "… stands for more known digits",
    Column.GAP: "Next onset minus this one; rounded to 8 digits where more are known",
    Column.RATIO: "This gap divided by the next one; rounded to 8 digits where more are known",
    Column.STATUS: "How far the value can be relied on",
    Column.NOTE: "Your own words: press F2 to write",
}
MAIN_COLUMNS = (Column.LEVEL, Column.PERIOD, Column.VALUE, Column.STATUS)
NUMBER_COLUMNS = (Column.VALUE, Column.GAP, Column.RATIO)


@dataclass(frozen=True)
class HeadingEntry:
    """The heading of a ladder; `ladder` is empty for onsets that belong to none."""

    ladder: str
    text: str


@dataclass(frozen=True)
class OnsetEntry:
    """One pick, and what its ladder says about its level."""

    row: Row
    level: LevelEstimate | None


@dataclass(frozen=True)
class MissingEntry:
    """Levels in a row that a ladder lacks below its highest known one."""

    ladder: str
    first: int
    last: int


Entry = HeadingEntry | OnsetEntry | MissingEntry


def entries_of(
    ledger: Ledger, estimates: Sequence[LadderEstimates], current_key: str = ""
) -> tuple[Entry, ...]:
    """Lines of the table: ladders as they were begun, levels rising, single onsets last.

    `current_key` is the key of the system on the card: its ladders come first, others say so.
    """
    by_ladder = {estimate.ladder: estimate for estimate in estimates}
    ladders: dict[str, list[Row]] = {}
    settings: dict[str, set[tuple[tuple[str, str], ...]]] = {}
    for row in ledger.rows:
        ladders.setdefault(row.ladder, []).append(row)
        settings.setdefault(row.system_key, set()).add(row.fixed)
    loose = ladders.pop("", [])
    lines: list[Entry] = []
    # Sorting is stable: within each of the two groups ladders stay as they were begun.
    for ladder, rows in sorted(ladders.items(), key=lambda item: item[1][0].system_key != current_key):
        rows.sort(key=lambda row: row.level or 0)
        # Other parameters are named where they tell this ladder from another.
        told = len(settings[rows[0].system_key]) > 1
        lines.append(HeadingEntry(ladder, _heading(rows[0], told, current_key)))
        lines += _ladder_lines(rows, by_ladder.get(ladder))
    if loose:
        lines.append(HeadingEntry("", "Onsets outside a ladder"))
        lines += [OnsetEntry(row, None) for row in loose]
    return tuple(lines)


def _ladder_lines(rows: Sequence[Row], estimate: LadderEstimates | None) -> Iterator[Entry]:
    known: Mapping[str, LevelEstimate] = (
        {level.row_id: level for level in estimate.levels if level.row_id} if estimate else {}
    )
    previous = 0
    for row in rows:
        level = row.level or 0
        if level > previous + 1:
            yield MissingEntry(row.ladder, previous + 1, level - 1)
        previous = max(previous, level)
        yield OnsetEntry(row, known.get(row.id))


def _heading(first: Row, with_settings: bool, current_key: str) -> str:
    base = first.base_period or first.onset.period_before
    text = f"Ladder from period {base}, parameter {first.onset.parameter}"
    if with_settings and first.fixed:
        text += " at " + ", ".join(f"{name} = {value}" for name, value in first.fixed)
    if current_key and first.system_key != current_key:
        text += ", of another system"
    return text


def kind_words(onset: Onset) -> str:
    """Kind in words, with its criticality where that is known."""
    if onset.criticality in (Criticality.SUPERCRITICAL, Criticality.SUBCRITICAL):
        return f"{onset.criticality.value} {onset.kind.value}"
    return onset.kind.value


def period_words(onset: Onset) -> str:
    """Periods before and after: "4 → 8"; a fold makes a cycle out of none: "none → 3"."""
    if not onset.period_before and not onset.period_after:
        return NOTHING
    return f"{onset.period_before or 'none'} \u2192 {onset.period_after}"


@lru_cache(maxsize=4096)
def value_text(onset: Onset) -> str:
    """The value as the table shows it; digits beyond `MOST_DIGITS` are left to the detail."""
    text = onset_text(onset)
    if sum(letter.isdigit() for letter in text.partition("(")[0]) <= MOST_DIGITS:
        return text
    held = held_digits(Fraction(onset.lower), Fraction(onset.upper), most=SHORT_DIGITS)
    return minus_sign(group_digits(held)) + ELLIPSIS if held else text


@lru_cache(maxsize=8192)
def derived_text(estimate: Estimate | None) -> str:
    """A gap or ratio as the table shows it: rounded to `ROUNDED_DIGITS` where more are known, else with its
    uncertainty.
    """
    if estimate is None:
        return NOTHING
    size = exponent(estimate.value) if estimate.value else 0
    places = ROUNDED_DIGITS - 1 - size
    if -LEAST_SIZE <= size < ROUNDED_DIGITS and 100 * estimate.uncertainty * 10**places < 1:
        return minus_sign(group_digits(decimal_text(estimate.value, places)))
    text = estimate_text(estimate)
    if sum(letter.isdigit() for letter in text.partition("(")[0]) <= MOST_DIGITS:
        return text
    low, high = estimate.value - estimate.uncertainty, estimate.value + estimate.uncertainty
    held = held_digits(low, high, most=SHORT_DIGITS)
    return minus_sign(group_digits(held)) + ELLIPSIS if held else text


def full_text(estimate: Estimate | None) -> str:
    """A derived number with every digit worth having, for copying: "value ± uncertainty"."""
    return plus_minus(estimate.value, estimate.uncertainty, grouped=False) if estimate else ""


def level_words(row: Row) -> str:
    """Level as shown; empty outside a ladder."""
    return "" if row.level is None else str(row.level)


def cell_text(entry: OnsetEntry, column: Column) -> str:
    """What a cell shows."""
    onset, level = entry.row.onset, entry.level
    match column:
        case Column.LEVEL:
            return level_words(entry.row)
        case Column.KIND:
            return kind_words(onset)
        case Column.PERIOD:
            return period_words(onset)
        case Column.VALUE:
            return value_text(onset)
        case Column.GAP:
            return derived_text(level.gap if level else None)
        case Column.RATIO:
            return derived_text(level.ratio if level else None)
        case Column.STATUS:
            return onset.status.value
        case Column.NOTE:
            return entry.row.note


def cell_tip(entry: OnsetEntry, column: Column) -> str:
    """All digits of a number, or the reason why there is none."""
    onset, level = entry.row.onset, entry.level
    match column:
        case Column.VALUE:
            return f"{onset.parameter} = {onset.value}\nlower end {onset.lower}\nupper end {onset.upper}"
        case Column.GAP if level:
            return full_text(level.gap) or _sentence(level.gap_reason)
        case Column.RATIO if level:
            return full_text(level.ratio) or _sentence(level.ratio_reason)
        case Column.STATUS:
            meaning = STATUS_MEANING[onset.status]
            return f"{meaning}\n{_sentence(onset.reason)}" if onset.reason else meaning
        case Column.NOTE:
            return entry.row.note or "Press F2 to write a note."
        case _:
            return ""


def missing_words(entry: MissingEntry) -> str:
    """The quiet line of a hole in a ladder."""
    if entry.first == entry.last:
        return f"level {entry.first} missing: no gap and no ratio across it"
    return f"levels {entry.first} to {entry.last} missing: no gap and no ratio across them"


def _sentence(words: str) -> str:
    return words[:1].upper() + words[1:] if words else ""
