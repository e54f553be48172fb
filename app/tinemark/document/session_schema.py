"""A session as plain data: what stands in `session.json`, version 3, and the limits of every field.

The file knows no class of ours but enumerations: these structs only check shapes, two functions translate. A
change here is a new schema version with a migration from the one before.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Annotated, Final, Literal

import msgspec
from msgspec import Meta

from tinemark.density.request import SweepRule, View
from tinemark.density.tone import PALETTE_NAMES
from tinemark.document.ladders import MAX_LEVEL
from tinemark.document.ledger import MAX_ROWS, FollowedAlpha, Ledger
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
from tinemark.equations.accuracy import Accuracy
from tinemark.onsets.results import Certificate, Criticality, Kind, Onset, Sensitivity, Status
from tinemark.systems.errors import NumberError

FORMAT: Final = "tinemark-session"
VERSION: Final = 3
MAX_SYSTEM_TEXT = 512 * 1024
"""Characters of all system texts together: each is read when a session is opened."""

MAX_CERTIFIED_TEXT = 8 * 1024 * 1024
"""Characters of the system texts of all certificates together: they are parsed, not evaluated, on opening."""

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
SideTexts = tuple[Decimal, Decimal]
StateSide = tuple[Short, Decimal, Decimal]


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


class PlainPicture(msgspec.Struct, frozen=True, forbid_unknown_fields=True, omit_defaults=True):
    """How the diagram is drawn. Files from before equations name no accuracy."""

    rule: SweepRule
    transient_steps: Count
    starts: Annotated[int, Meta(ge=1, le=10_000)]
    budget: Short
    tone: Short
    palette: Short
    accuracy: Accuracy = Accuracy.PICTURE


class PlainSensitivity(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """How an onset moves with another parameter."""

    name: Short
    derivative: Decimal


class PlainCertificate(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """How to check a proof again. `system` is the place of its system's text in `certified`."""

    system: Annotated[int, Meta(ge=0, lt=MAX_ROWS)]
    kind: Kind
    period: Annotated[int, Meta(ge=1, le=2**53)]
    parameter: Short
    criticality: Criticality
    precision: Annotated[int, Meta(ge=1, le=100_000)]
    parameter_box: SideTexts
    state_boxes: Annotated[list[StateSide], Meta(max_length=64)]
    digest: Key


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
    consequence: Words
    sensitivities: Annotated[list[PlainSensitivity], Meta(max_length=64)]
    certificate: PlainCertificate | None


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


class PlainAlpha(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """The alpha of a ladder that was followed, or why there is none."""

    rows: Annotated[list[RowId], Meta(min_length=1, max_length=MAX_LEVEL)]
    value: Decimal | None
    uncertainty: Decimal | None
    reason: Words


class PlainLedger(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """The ledger."""

    rows: Annotated[list[PlainRow], Meta(max_length=MAX_ROWS)]
    next_number: Annotated[int, Meta(ge=1, le=999_999_999)]
    alphas: Annotated[list[PlainAlpha], Meta(max_length=MAX_ROWS)]


class PlainSystem(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """The text of a system that rows belong to."""

    key: Key
    text: LongText


class PlainSession(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """All of `session.json`."""

    format: Literal["tinemark-session"]
    version: Literal[3]
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
    certified: Annotated[list[LongText], Meta(max_length=MAX_ROWS)]


class Misfit(Exception):
    """Plain data whose shape is right and whose meaning is not; `key` is the place in the file."""

    def __init__(self, key: str, message: str) -> None:
        super().__init__(message)
        self.key = key
        self.message = message


def to_plain(session: Session) -> PlainSession:
    """The session as plain data."""
    # Certificates of one system carry the same text: it is written once.
    texts = list(
        dict.fromkeys(
            row.onset.certificate.system_text for row in session.ledger.rows if row.onset.certificate
        )
    )
    places = {text: place for place, text in enumerate(texts)}
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
            accuracy=session.picture.accuracy,
        ),
        probe=None if session.probe is None else number_text(session.probe),
        ledger=PlainLedger(
            [_plain_row(row, places) for row in session.ledger.rows],
            session.ledger.next_number,
            [
                PlainAlpha(list(alpha.rows), alpha.value or None, alpha.uncertainty or None, alpha.reason)
                for alpha in session.ledger.alphas
            ],
        ),
        systems=[PlainSystem(key, text) for key, text in session.systems],
        certified=texts,
    )


def _plain_view(view: View) -> PlainView:
    text = view_text(view)
    return PlainView(text.left, text.right, text.bottom, text.top)


def _plain_certificate(certificate: Certificate, places: Mapping[str, int]) -> PlainCertificate:
    return PlainCertificate(
        system=places[certificate.system_text],
        kind=Kind(certificate.kind),
        period=certificate.period,
        parameter=certificate.parameter,
        criticality=Criticality(certificate.criticality),
        precision=certificate.precision,
        parameter_box=certificate.parameter_box,
        state_boxes=list(certificate.state_boxes),
        digest=certificate.digest,
    )


def _plain_row(row: Row, places: Mapping[str, int]) -> PlainRow:
    onset = row.onset
    certificate = onset.certificate
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
            consequence=onset.consequence,
            sensitivities=[PlainSensitivity(s.name, s.derivative) for s in onset.sensitivities],
            certificate=None if certificate is None else _plain_certificate(certificate, places),
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
    if sum(len(text) for text in plain.certified) > MAX_CERTIFIED_TEXT:
        raise Misfit("certified", f"the texts have more than {MAX_CERTIFIED_TEXT} characters together")
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
            accuracy=picture.accuracy,
        ),
        ledger=_ledger(plain.ledger, plain.certified),
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


def _ledger(plain: PlainLedger, certified: list[str]) -> Ledger:
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
        certificate = row.onset.certificate
        if certificate is not None and certificate.system >= len(certified):
            raise Misfit(f"{key}.onset.certificate.system", "names a text that is not in the file")
        if row.level is not None:
            if (row.ladder, row.level) in levels:
                raise Misfit(f"{key}.level", f"level {row.level} of ladder {row.ladder} is there twice")
            levels.add((row.ladder, row.level))
    for n, alpha in enumerate(plain.alphas):
        key = f"ledger.alphas[{n}]"
        if not seen.issuperset(alpha.rows):
            raise Misfit(f"{key}.rows", "names a row that is not in the ledger")
        if (alpha.value is None) != (alpha.uncertainty is None):
            raise Misfit(key, "value and uncertainty go together")
    alphas = tuple(
        FollowedAlpha(tuple(alpha.rows), alpha.value or "", alpha.uncertainty or "", alpha.reason)
        for alpha in plain.alphas
    )
    return Ledger(tuple(_row(row, certified) for row in plain.rows), plain.next_number, alphas)


def _certificate(plain: PlainCertificate, certified: list[str]) -> Certificate:
    return Certificate(
        system_text=certified[plain.system],
        kind=plain.kind.value,
        period=plain.period,
        parameter=plain.parameter,
        criticality=plain.criticality.value,
        precision=plain.precision,
        parameter_box=plain.parameter_box,
        state_boxes=tuple(plain.state_boxes),
        digest=plain.digest,
    )


def _row(plain: PlainRow, certified: list[str]) -> Row:
    onset = plain.onset
    certificate = onset.certificate
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
            consequence=onset.consequence,
            sensitivities=tuple(Sensitivity(s.name, s.derivative) for s in onset.sensitivities),
            certificate=None if certificate is None else _certificate(certificate, certified),
        ),
        system_key=plain.system_key,
        fixed=tuple(plain.fixed),
        ladder=plain.ladder,
        level=plain.level,
        base_period=plain.base_period,
        stated_base=plain.stated_base,
        note=plain.note,
    )
