"""Proofs of the ledger's rows as claims for the second implementation, and what its verdicts change.

A row that says "proved" is believed when it was proved here. Out of a file it is believed only where its
certificate fits it: same digest, same numbers, same system. Otherwise it is shown as estimated, with
the reason, until its proof is checked (`verify`) or made anew (by refining the row).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from tinemark.document.onsets_file import CertificateEntry, OnsetsFile
from tinemark.document.row import Row
from tinemark.document.session import Session, read_system
from tinemark.onsets.results import Certificate, Onset, Status
from tinemark.systems.system import Sample
from tinemark.verify.claims import Claim, Outcome, Paper, Verdict
from tinemark.verify.compare import mismatch

WAITS = "not relied on until its proof is checked again"
"""How the reason of a row begins that is only called estimated because it waits for a check."""
NO_CERTIFICATE = "the file holds no certificate of it; refine the row to prove it again"


def waits(onset: Onset) -> bool:
    """Whether an onset is called estimated only because its proof has not been checked."""
    return onset.status is Status.ESTIMATED and onset.reason.startswith(WAITS)


def claims_of(session: Session) -> tuple[tuple[str, Claim], ...]:
    """(row, claim) of every row that claims a proof or carries a certificate."""
    return tuple(
        (row.id, _claim_of_row(session, row))
        for row in session.ledger.rows
        if row.onset.status is Status.PROVED or row.onset.certificate is not None or waits(row.onset)
    )


def _claim_of_row(session: Session, row: Row) -> Claim:
    onset = row.onset
    formulas: tuple[tuple[str, str], ...] | None = None
    text = dict(session.systems).get(row.system_key)
    sample: tuple[str, str, str, str] | None = None
    if text is not None:
        system = read_system(text)
        held = system.sample or Sample()
        sample = (system.kind, held.every, held.crosses, held.direction)
        formulas = tuple(zip(system.state_names, system.formulas, strict=True))
    return Claim(
        name=f"{row.id}, {onset.parameter} = {onset.value[:24]}",
        status=onset.status.value,
        waits=waits(onset),
        kind=onset.kind.value,
        period_before=onset.period_before,
        period_after=onset.period_after,
        criticality=onset.criticality.value,
        parameter=onset.parameter,
        value=onset.value,
        lower=onset.lower,
        upper=onset.upper,
        states=onset.states,
        paper=None if onset.certificate is None else _paper(onset.certificate),
        formulas=formulas,
        values=row.fixed,
        consequence=onset.consequence,
        sample=sample,
    )


def _paper(certificate: Certificate | CertificateEntry) -> Paper:
    return Paper(
        system_text=certificate.system_text,
        kind=certificate.kind,
        period=certificate.period,
        parameter=certificate.parameter,
        criticality=certificate.criticality,
        precision=certificate.precision,
        parameter_box=certificate.parameter_box,
        state_boxes=tuple(certificate.state_boxes),
        digest=certificate.digest,
    )


def claims_of_file(file: OnsetsFile) -> tuple[Claim, ...]:
    """The claims of an onsets file: every entry that says proved or carries a certificate."""
    claims = []
    for number, entry in enumerate(file.onsets, 1):
        held = entry.certificate
        if held is None and entry.status != Status.PROVED.value:
            continue
        name = f"level {entry.level}" if entry.level is not None else f"onset {number}"
        claims.append(
            Claim(
                name=f"{name}, {file.parameter} = {entry.value[:24]}",
                status=entry.status,
                waits=False,
                kind=entry.kind,
                period_before=entry.period_before,
                period_after=entry.period_after,
                criticality=entry.criticality,
                parameter=file.parameter,
                value=entry.value,
                lower=entry.lower,
                upper=entry.upper,
                states=tuple(entry.states.items()),
                paper=None if held is None else _paper(held),
            )
        )
    return tuple(claims)


def with_doubts(session: Session) -> Session:
    """A session out of a file: rows whose certificate does not fit them are shown as estimated."""
    doubts = {}
    for row_id, claim in claims_of(session):
        if claim.status == Status.PROVED.value:
            doubt = NO_CERTIFICATE if claim.paper is None else _doubt(mismatch(claim))
            if doubt:
                doubts[row_id] = doubt
    return _with_reasons(session, doubts)


def _doubt(verdict: Verdict | None) -> str:
    if verdict is None:
        return ""
    if verdict.outcome is Outcome.NOT_CHECKABLE:
        return f"its certificate is not looked at: {verdict.reason}"
    return f"its certificate does not fit it ({verdict.part.value}: {verdict.reason})"


def _with_reasons(session: Session, doubts: Mapping[str, str]) -> Session:
    if not doubts:
        return session
    rows = tuple(
        replace(row, onset=doubted(row.onset, doubts[row.id])) if row.id in doubts else row
        for row in session.ledger.rows
    )
    return replace(session, ledger=replace(session.ledger, rows=rows))


def doubted(onset: Onset, reason: str) -> Onset:
    """The onset, called estimated because of its proof."""
    return replace(onset, status=Status.ESTIMATED, reason=f"{WAITS}: {reason}"[:4000])


def with_verdicts(session: Session, verdicts: Mapping[str, tuple[Claim, Verdict]]) -> Session:
    """The session after a check: confirmed rows are proved, refused ones estimated with the reason.

    A row that has changed since its claim was made stays as it is.
    """
    rows = []
    present = dict(claims_of(session))
    for row in session.ledger.rows:
        claim, verdict = verdicts.get(row.id, (None, None))
        onset = row.onset
        if verdict is not None and present.get(row.id) == claim:
            if verdict.outcome is Outcome.CONFIRMED:
                onset = replace(onset, status=Status.PROVED, reason="") if waits(onset) else onset
            elif verdict.outcome is Outcome.REFUSED:
                reason = f"the check refused it ({verdict.part.value}: {verdict.reason})"
                onset = doubted(onset, reason)
        rows.append(row if onset is row.onset else replace(row, onset=onset))
    if tuple(rows) == session.ledger.rows:
        return session
    return replace(session, ledger=replace(session.ledger, rows=tuple(rows)))


def summary(verdicts: list[Verdict]) -> str:
    """How many proofs were confirmed, refused and not checkable, as one sentence without its full stop."""
    if not verdicts:
        return "there is no proof to check"
    counts = [(outcome, sum(v.outcome is outcome for v in verdicts)) for outcome in Outcome]
    return ", ".join(f"{count} {outcome.value}" for outcome, count in counts if count) + (
        f" of {len(verdicts)} proofs" if len(verdicts) != 1 else " of 1 proof"
    )
