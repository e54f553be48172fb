"""A session as plain data: what stands in `session.json`, version 1, and the limits of every field.

The file knows no class of ours: these structs only check shapes, and two functions translate. A
change here is a new schema version with a migration from the one before.
"""

from __future__ import annotations

from fractions import Fraction
from typing import Annotated, Final, Literal

import msgspec
from msgspec import Meta

from tinemark.density.request import SweepRule, View
from tinemark.density.tone import PALETTE_NAMES
from tinemark.document.ladders import MAX_LEVEL
from tinemark.document.ledger import MAX_ROWS, Ledger
from tinemark.document.row import Row
from tinemark.document.session import BUDGETS, TONES, PictureSettings, Session
from tinemark.document.views import (
    MAX_VIEWS,
    ViewHistory,
    ViewText,
    number_of,
    number_text,
    view_of,
    view_text,
)
from tinemark.onsets.results import Criticality, Kind, Onset, Status
from tinemark.systems.errors import NumberError

FORMAT: Final = "tinemark-session"
VERSION: Final = 1
MAX_SYSTEM_TEXT = 512 * 1024
"""Characters of all system texts together: each is read when a session is opened."""

Short = Annotated[str, Meta(max_length=400)]
Words = Annotated[str, Meta(max_length=4000)]
LongText = Annotated[str, Meta(max_length=262_144)]
Key = Annotated[str, Meta(pattern=r"^[0-9a-f]{64}\Z")]
RowId = Annotated[str, Meta(pattern=r"^r[1-9][0-9]{0,8}\Z")]
LadderId = Annotated[str, Meta(pattern=r"^(?:L[1-9][0-9]{0,8})?\Z")]
Decimal = Annotated[str, Meta(pattern=r"^-?[0-9]{1,320}(?:\.[0-9]{1,1200})?(?:[eE][-+]?[0-9]{1,3})?\Z")]
Edge = Annotated[str, Meta(max_length=1250)]
Count = Annotated[int, Meta(ge=0, le=10_000_000)]
Period = Annotated[int, Meta(ge=0, le=2**53)]


class PlainView(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """A view, as exact texts."""

    left: Edge
    right: Edge
    bottom: Edge
    top: Edge


class PlainHistory(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """Views before and after the present one."""

    back: Annotated[list[PlainView], Meta(max_length=MAX_VIEWS)]
    forward: Annotated[list[PlainView], Meta(max_length=MAX_VIEWS)]


class PlainPicture(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """How the diagram is drawn."""

    rule: SweepRule
    transient_steps: Count
    starts: Annotated[int, Meta(ge=1, le=10_000)]
    budget: Short
    tone: Short
    palette: Short


class PlainOnset(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """One onset."""

    parameter: Short
    kind: Kind
    period_before: Period
    period_after: Period
    criticality: Criticality
    value: Decimal
    lower: Decimal
    upper: Decimal
    digits: Count
    status: Status
    reason: Words
    states: Annotated[list[tuple[Short, Decimal]], Meta(max_length=64)]
    evidence: Annotated[list[tuple[Words, Words]], Meta(max_length=64)]


class PlainRow(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """One row of the ledger."""

    id: RowId
    onset: PlainOnset
    system_key: Key
    fixed: Annotated[list[tuple[Short, Decimal]], Meta(max_length=64)]
    ladder: LadderId
    level: Annotated[int, Meta(ge=0, le=MAX_LEVEL)] | None
    base_period: Annotated[int, Meta(ge=1, le=2**53)] | None
    stated_base: Period
    note: Words


class PlainLedger(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """The ledger."""

    rows: Annotated[list[PlainRow], Meta(max_length=MAX_ROWS)]
    next_number: Annotated[int, Meta(ge=1, le=999_999_999)]


class PlainSystem(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """The text of a system that rows belong to."""

    key: Key
    text: LongText


class PlainSession(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """All of `session.json`."""

    format: Literal["tinemark-session"]
    version: Literal[1]
    title: Words
    notes: LongText
    system: LongText
    parameter: Short
    observe: Words
    view: PlainView
    history: PlainHistory
    picture: PlainPicture
    probe: Edge | None
    ledger: PlainLedger
    systems: Annotated[list[PlainSystem], Meta(max_length=200)]


class Misfit(Exception):
    """Plain data whose shape is right and whose meaning is not; `key` is the place in the file."""

    def __init__(self, key: str, message: str) -> None:
        super().__init__(message)
        self.key = key
        self.message = message


def to_plain(session: Session) -> PlainSession:
    """The session as plain data."""
    return PlainSession(
        format=FORMAT,
        version=VERSION,
        title=session.title,
        notes=session.notes,
        system=session.system_text,
        parameter=session.parameter,
        observe=session.observe,
        view=_plain_view(session.view),
        history=PlainHistory(
            [_plain_view(view) for view in session.history.back],
            [_plain_view(view) for view in session.history.forward],
        ),
        picture=PlainPicture(
            rule=session.picture.rule,
            transient_steps=session.picture.transient_steps,
            starts=session.picture.starts,
            budget=session.picture.budget,
            tone=session.picture.tone,
            palette=session.picture.palette,
        ),
        probe=None if session.probe is None else number_text(session.probe),
        ledger=PlainLedger([_plain_row(row) for row in session.ledger.rows], session.ledger.next_number),
        systems=[PlainSystem(key, text) for key, text in session.systems],
    )


def _plain_view(view: View) -> PlainView:
    text = view_text(view)
    return PlainView(text.left, text.right, text.bottom, text.top)


def _plain_row(row: Row) -> PlainRow:
    onset = row.onset
    return PlainRow(
        id=row.id,
        onset=PlainOnset(
            parameter=onset.parameter,
            kind=onset.kind,
            period_before=onset.period_before,
            period_after=onset.period_after,
            criticality=onset.criticality,
            value=onset.value,
            lower=onset.lower,
            upper=onset.upper,
            digits=onset.digits,
            status=onset.status,
            reason=onset.reason,
            states=list(onset.states),
            evidence=list(onset.evidence),
        ),
        system_key=row.system_key,
        fixed=list(row.fixed),
        ladder=row.ladder,
        level=row.level,
        base_period=row.base_period,
        stated_base=row.stated_base,
        note=row.note,
    )


def from_plain(plain: PlainSession) -> Session:
    """The session of plain data whose shape has been checked. The system's text is not read here.

    Raises
    ------
    Misfit
        A value contradicts another, or is no number.
    """
    picture = plain.picture
    if picture.budget not in BUDGETS:
        raise Misfit("picture.budget", f'"{picture.budget[:40]}" is not one of {", ".join(BUDGETS)}')
    if picture.tone not in TONES:
        raise Misfit("picture.tone", f'"{picture.tone[:40]}" is not one of {", ".join(TONES)}')
    if picture.palette not in ("", *PALETTE_NAMES):
        raise Misfit("picture.palette", f'"{picture.palette[:40]}" is not one of {", ".join(PALETTE_NAMES)}')
    if len(plain.system) + sum(len(system.text) for system in plain.systems) > MAX_SYSTEM_TEXT:
        raise Misfit("systems", f"the texts have more than {MAX_SYSTEM_TEXT} characters together")
    return Session(
        system_text=plain.system,
        parameter=plain.parameter,
        observe=plain.observe,
        view=_view(plain.view, "view"),
        history=ViewHistory(
            tuple(_view(view, f"history.back[{n}]") for n, view in enumerate(plain.history.back)),
            tuple(_view(view, f"history.forward[{n}]") for n, view in enumerate(plain.history.forward)),
        ),
        picture=PictureSettings(
            rule=picture.rule,
            transient_steps=picture.transient_steps,
            starts=picture.starts,
            budget=picture.budget,
            tone=picture.tone,
            palette=picture.palette,
        ),
        ledger=_ledger(plain.ledger),
        systems=tuple((system.key, system.text) for system in plain.systems),
        probe=None if plain.probe is None else _number(plain.probe, "probe"),
        title=plain.title,
        notes=plain.notes,
    )


def _number(text: str, key: str) -> Fraction:
    try:
        return number_of(text)
    except NumberError as error:
        raise Misfit(key, error.message) from error


def _view(view: PlainView, key: str) -> View:
    try:
        return view_of(ViewText(view.left, view.right, view.bottom, view.top))
    except NumberError as error:
        raise Misfit(key, error.message) from error


def _ledger(plain: PlainLedger) -> Ledger:
    seen: set[str] = set()
    levels: set[tuple[str, int]] = set()
    for n, row in enumerate(plain.rows):
        key = f"ledger.rows[{n}]"
        if row.id in seen:
            raise Misfit(f"{key}.id", f'the row "{row.id}" is there twice')
        seen.add(row.id)
        if int(row.id[1:]) >= plain.next_number:
            raise Misfit("ledger.next_number", f'is not above the number of row "{row.id}"')
        if not Fraction(row.onset.lower) <= Fraction(row.onset.value) <= Fraction(row.onset.upper):
            raise Misfit(f"{key}.onset", "the value lies outside its own interval")
        if bool(row.ladder) != (row.level is not None) or bool(row.ladder) != (row.base_period is not None):
            raise Misfit(key, "ladder, level and base period go together")
        if row.level is not None:
            if (row.ladder, row.level) in levels:
                raise Misfit(f"{key}.level", f"level {row.level} of ladder {row.ladder} is there twice")
            levels.add((row.ladder, row.level))
    return Ledger(tuple(_row(row) for row in plain.rows), plain.next_number)


def _row(plain: PlainRow) -> Row:
    onset = plain.onset
    return Row(
        id=plain.id,
        onset=Onset(
            parameter=onset.parameter,
            kind=onset.kind,
            period_before=onset.period_before,
            period_after=onset.period_after,
            criticality=onset.criticality,
            value=onset.value,
            lower=onset.lower,
            upper=onset.upper,
            digits=onset.digits,
            status=onset.status,
            reason=onset.reason,
            states=tuple(onset.states),
            evidence=tuple(onset.evidence),
        ),
        system_key=plain.system_key,
        fixed=tuple(plain.fixed),
        ladder=plain.ladder,
        level=plain.level,
        base_period=plain.base_period,
        stated_base=plain.stated_base,
        note=plain.note,
    )
