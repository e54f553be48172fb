"""The ledger: every pick, grouped in ladders. Each change gives a new ledger."""

from __future__ import annotations

import math
from collections.abc import Collection, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from tinemark.document.estimates import LadderEstimates, estimates_of, with_alpha
from tinemark.document.ladders import direction, grouped
from tinemark.document.rounding import decimal_text, exponent
from tinemark.document.row import Place, Row, place_of, row_id
from tinemark.onsets.results import Criticality, Kind, LadderResult, Onset, Status
from tinemark.systems.errors import TinemarkError

__all__ = [
    "FollowedAlpha",
    "LadderEstimates",
    "Ledger",
    "LedgerFull",
    "Place",
    "Row",
    "add",
    "add_all",
    "add_ladder",
    "alpha_of",
    "estimates",
    "eye_pick",
    "ladder_ids",
    "ladder_rows",
    "ladder_title",
    "loose_rows",
    "missing_levels",
    "note",
    "place_of",
    "remove",
    "reorder",
    "replace_onset",
    "same_onset",
    "state_base",
]

MAX_ROWS = 1000

_RANK = {Status.PROVED: 3, Status.ESTIMATED: 2, Status.READ_BY_EYE: 1, Status.MEASURED: 0}


@dataclass(frozen=True)
class FollowedAlpha:
    """What following a ladder said of how its cycles shrink.

    Attributes
    ----------
    rows
        Names of the ladder's rows by level; it holds while they are that ladder's flips.
    value, uncertainty
        Decimal texts, the uncertainty at 95 % coverage; empty where there is none, and `reason` says why.
    """

    rows: tuple[str, ...]
    value: str = ""
    uncertainty: str = ""
    reason: str = ""


@dataclass(frozen=True)
class Ledger:
    """Rows in the user's order, the number the next row will carry, and the alpha of followed ladders."""

    rows: tuple[Row, ...] = ()
    next_number: int = 1
    alphas: tuple[FollowedAlpha, ...] = ()

    def row(self, row_id: str) -> Row | None:
        """The row of that name, None when it is gone."""
        return next((row for row in self.rows if row.id == row_id), None)


class LedgerFull(TinemarkError):
    """Not all that was to be kept fits; `ledger` holds what did, and nothing that was there is lost."""

    def __init__(self, ledger: Ledger, left_out: int) -> None:
        super().__init__(
            f"the ledger holds {MAX_ROWS} rows and is full; {left_out} of what was found had no room",
            what_to_do="remove some rows first, then ask again",
        )
        self.ledger = ledger
        self.left_out = left_out


# Changes


def add(ledger: Ledger, onset: Onset, place: Place, *, stated_base: int = 0) -> tuple[Ledger, str]:
    """Add a pick.

    A pick that is there already (`same_onset`) is not doubled: the better of the two stays, by
    status, then by the narrower interval, in the older one's row, with its note.

    Parameters
    ----------
    stated_base
        Base period of the cascade where it is known, else 0.

    Returns
    -------
    ledger, row_id
        The new ledger, and the row that now holds the onset.

    Raises
    ------
    LedgerFull
        There is no room (`MAX_ROWS`).
    """
    try:
        rows, number, held_by = _insert(ledger.rows, ledger.next_number, onset, place, stated_base)
    except _NoRoom:
        raise LedgerFull(ledger, 1) from None
    return replace(ledger, rows=grouped(rows), next_number=number), held_by


def add_all(ledger: Ledger, onsets: Sequence[Onset], place: Place) -> tuple[Ledger, tuple[str, ...]]:
    """Add several picks; see `add`. Gives the rows that now hold them.

    Raises
    ------
    LedgerFull
        Not all of them fit; those that do are in the ledger that the error brings.
    """
    rows, number, held = ledger.rows, ledger.next_number, []
    left_out = 0
    for onset in onsets:
        try:
            rows, number, row = _insert(rows, number, onset, place, 0)
        except _NoRoom:
            left_out += 1
            continue
        held.append(row)
    changed = replace(ledger, rows=grouped(rows), next_number=number)
    if left_out:
        raise LedgerFull(changed, left_out)
    return changed, tuple(held)


def add_ladder(ledger: Ledger, result: LadderResult, place: Place) -> Ledger:
    """Add every level of a followed ladder, what else it met, and its alpha; see `add`.

    Raises
    ------
    LedgerFull
        Not all of them fit; those that do are in the ledger that the error brings.
    """
    rows, number, held = ledger.rows, ledger.next_number, []
    left_out = 0
    onsets = [(level.onset, result.base_period) for level in result.levels]
    onsets += [(onset, 0) for onset in result.besides]
    for onset, base in onsets:
        try:
            rows, number, row = _insert(rows, number, onset, place, base)
        except _NoRoom:
            left_out += 1
            continue
        held.append(row)
    alphas = ledger.alphas
    names = tuple(held[: len(result.levels)])
    if not left_out and names and (result.alpha is not None or result.alpha_reason):
        value, uncertainty = result.alpha or ("", "")
        kept = [alpha for alpha in alphas if not set(alpha.rows) & set(names)]
        alphas = (*kept, FollowedAlpha(names, value, uncertainty, result.alpha_reason))
    changed = _with_rows(replace(ledger, next_number=number, alphas=alphas), rows)
    if left_out:
        raise LedgerFull(changed, left_out)
    return changed


def _with_rows(ledger: Ledger, rows: Sequence[Row]) -> Ledger:
    """The ledger with other rows; what was said of ladders whose rows are gone goes with them."""
    names = {row.id for row in rows}
    alphas = tuple(alpha for alpha in ledger.alphas if names.issuperset(alpha.rows))
    return replace(ledger, rows=grouped(rows), alphas=alphas)


def replace_onset(ledger: Ledger, row_id: str, onset: Onset) -> Ledger:
    """Put a refined onset into a row; its name and note stay.

    Other rows that hold the same onset are taken in, with their notes. A row that is gone, or
    that already holds the same onset better known, stays as it is.
    """
    old = ledger.row(row_id)
    if old is None or (same_onset(old.onset, onset) and not _better(onset, old.onset)):
        return ledger
    new = replace(old, onset=onset)
    doubles = [
        row
        for row in ledger.rows
        if row.id != row_id and row.place == new.place and same_onset(row.onset, onset)
    ]
    best = max(doubles, key=lambda row: _quality(row.onset), default=new)
    if _better(best.onset, new.onset):
        new = replace(new, onset=best.onset)
    new = _taking_in(new, doubles)
    gone = {row.id for row in doubles}
    rows = tuple(new if row.id == row_id else row for row in ledger.rows if row.id not in gone)
    return _with_rows(ledger, rows)


def remove(ledger: Ledger, row_ids: Collection[str]) -> Ledger:
    """Remove rows; names that are not there are passed over."""
    return _with_rows(ledger, [row for row in ledger.rows if row.id not in row_ids])


def note(ledger: Ledger, row_id: str, text: str) -> Ledger:
    """Set the note of a row."""
    rows = tuple(replace(row, note=text) if row.id == row_id else row for row in ledger.rows)
    return replace(ledger, rows=rows)


def state_base(ledger: Ledger, row_ids: Collection[str], base_period: int) -> Ledger:
    """Say of which base period a cascade is, where its onsets cannot tell; 0 takes it back."""
    rows = [replace(row, stated_base=base_period) if row.id in row_ids else row for row in ledger.rows]
    return replace(ledger, rows=grouped(rows))


def reorder(ledger: Ledger, row_ids: Sequence[str]) -> Ledger:
    """Put the named rows first, in that order; the others follow as they were."""
    named = [row for name in dict.fromkeys(row_ids) if (row := ledger.row(name)) is not None]
    taken = {row.id for row in named}
    return replace(ledger, rows=(*named, *(row for row in ledger.rows if row.id not in taken)))


class _NoRoom(Exception):
    """The ledger is full."""


def _insert(
    rows: tuple[Row, ...], number: int, onset: Onset, place: Place, stated_base: int
) -> tuple[tuple[Row, ...], int, str]:
    doubles = [row for row in rows if row.place == place and same_onset(row.onset, onset)]
    if not doubles:
        if len(rows) >= MAX_ROWS:
            raise _NoRoom
        new = Row(row_id(number), onset, place.system_key, place.fixed, stated_base=stated_base)
        return (*rows, new), number + 1, new.id
    best = max(doubles, key=lambda row: _quality(row.onset))
    if not _better(onset, best.onset):
        if stated_base and not best.stated_base:
            stated = replace(best, stated_base=stated_base)
            rows = tuple(stated if row is best else row for row in rows)
        return rows, number, best.id
    oldest = min(doubles, key=lambda row: row.number)
    new = replace(oldest, onset=onset, stated_base=stated_base or oldest.stated_base)
    new = _taking_in(new, [row for row in doubles if row is not oldest])
    gone = {row.id for row in doubles if row is not oldest}
    return tuple(new if row.id == new.id else row for row in rows if row.id not in gone), number, new.id


def _taking_in(row: Row, doubles: Sequence[Row]) -> Row:
    notes = dict.fromkeys(text for text in (row.note, *(double.note for double in doubles)) if text)
    base = row.stated_base or next((double.stated_base for double in doubles if double.stated_base), 0)
    return replace(row, note="; ".join(notes), stated_base=base)


def same_onset(first: Onset, second: Onset) -> bool:
    """Whether two picks can be one onset: same kind and periods, overlapping intervals.

    A measured value is never the same as the model's: comparing them is the point of having both.
    """
    alike = (
        first.parameter == second.parameter
        and first.kind is second.kind
        and first.period_before == second.period_before
        and first.period_after == second.period_after
        and (first.status is Status.MEASURED) == (second.status is Status.MEASURED)
    )
    return (
        alike
        and Fraction(first.lower) <= Fraction(second.upper)
        and Fraction(second.lower) <= Fraction(first.upper)
    )


def _quality(onset: Onset) -> tuple[int, Fraction, bool, bool]:
    # Of two that are as good in their numbers, the one that brings its proof and its derivatives.
    return (
        _RANK[onset.status],
        Fraction(onset.lower) - Fraction(onset.upper),
        onset.certificate is not None,
        bool(onset.sensitivities),
    )


def _better(first: Onset, second: Onset) -> bool:
    return _quality(first) > _quality(second)


# Ladders


def ladder_ids(ledger: Ledger) -> tuple[str, ...]:
    """Names of the ladders, in order of their first row in the ledger."""
    return tuple(dict.fromkeys(row.ladder for row in ledger.rows if row.ladder))


def ladder_rows(ledger: Ledger, ladder_id: str) -> tuple[Row, ...]:
    """Rows of a ladder by level, the fold that opens it first."""
    rows = [row for row in ledger.rows if row.ladder == ladder_id]
    return tuple(sorted(rows, key=lambda row: row.level or 0))


def loose_rows(ledger: Ledger) -> tuple[Row, ...]:
    """Rows that belong to no ladder, in the ledger's order."""
    return tuple(row for row in ledger.rows if not row.ladder)


def missing_levels(ledger: Ledger, ladder_id: str) -> tuple[int, ...]:
    """Levels from 1 up to the highest known that have no row."""
    known = {row.level for row in ladder_rows(ledger, ladder_id) if row.level is not None}
    return tuple(level for level in range(1, max(known, default=0)) if level not in known)


def ladder_title(ledger: Ledger, ladder_id: str) -> str:
    """A heading in words, as in "period 3 in r, rising"."""
    rows = ladder_rows(ledger, ladder_id)
    if not rows:
        return ""
    fixed = ", ".join(f"{name} = {value}" for name, value in rows[0].fixed)
    way = {1: ", rising", -1: ", falling", 0: ""}[direction(rows)]
    measured = "measured " if rows[0].onset.status is Status.MEASURED else ""
    title = f"{measured}period {rows[0].base_period} in {rows[0].onset.parameter}{way}"
    return f"{title}, at {fixed}" if fixed else title


def estimates(ledger: Ledger, ladder_id: str) -> LadderEstimates | None:
    """Gaps, ratios, limit, class and next onset of a ladder; None when there is no such ladder."""
    rows = ladder_rows(ledger, ladder_id)
    if not rows:
        return None
    found, alpha = estimates_of(ladder_id, rows), alpha_of(ledger, ladder_id)
    if alpha is None:
        return found
    return with_alpha(found, (alpha.value, alpha.uncertainty) if alpha.value else None, alpha.reason)


def alpha_of(ledger: Ledger, ladder_id: str) -> FollowedAlpha | None:
    """What following this very ladder said of its cycles; None where its rows are others by now."""
    flips = {row.id for row in ladder_rows(ledger, ladder_id) if row.onset.kind is Kind.FLIP}
    return next((alpha for alpha in ledger.alphas if flips == set(alpha.rows)), None)


# Reading by eye


def eye_pick(
    parameter: str,
    value: Fraction,
    half_pixel: Fraction,
    *,
    kind: Kind = Kind.UNKNOWN,
    period_before: int = 0,
    period_after: int = 0,
) -> Onset:
    """A pick read by eye from the crosshair: uncertain by half a pixel each way.

    Kind and periods are as the user states them; unknown kind and periods of 0 otherwise.
    """
    if half_pixel <= 0:
        raise ValueError("half a pixel must have a width")
    places = max(3 - exponent(half_pixel), 0)
    scale = Fraction(10) ** places
    lower = math.floor((value - half_pixel) * scale) / scale
    upper = math.ceil((value + half_pixel) * scale) / scale
    return Onset(
        parameter=parameter,
        kind=kind,
        period_before=period_before,
        period_after=period_after,
        criticality=Criticality.UNDECIDED if kind is Kind.FLIP else Criticality.NOT_APPLICABLE,
        value=decimal_text(value, places),
        lower=decimal_text(lower, places),
        upper=decimal_text(upper, places),
        digits=max(exponent(value) - exponent(half_pixel), 0),
        status=Status.READ_BY_EYE,
        reason="read from the diagram, half a pixel each way",
    )
