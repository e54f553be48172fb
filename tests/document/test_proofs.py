"""What a file's certificates make of its rows: believed, doubted, checked."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from session_samples import CUBIC_TEXT, certified_session

from tinemark.document import ledger as led
from tinemark.document import session as ses
from tinemark.document.proofs import (
    NO_CERTIFICATE,
    WAITS,
    claims_of,
    doubted,
    summary,
    waits,
    with_doubts,
    with_verdicts,
)
from tinemark.document.session import Session, demo_session
from tinemark.document.session_file import open_session, read_session, save_session, session_bytes
from tinemark.onsets.results import Certificate, Kind, Onset, Status
from tinemark.verify.check import check
from tinemark.verify.claims import Outcome, Part, Verdict

CONFIRMED = Verdict(Outcome.CONFIRMED, Part.NOTHING, "")


def with_onset(session: Session, number: int, **changes: Any) -> Session:
    rows = list(session.ledger.rows)
    rows[number] = replace(rows[number], onset=replace(rows[number].onset, **changes))
    return replace(session, ledger=replace(session.ledger, rows=tuple(rows)))


def with_certificate(session: Session, number: int, **changes: Any) -> Session:
    held = session.ledger.rows[number].onset.certificate
    assert held is not None
    return with_onset(session, number, certificate=replace(held, **changes))


def test_certificates_that_fit_are_believed_and_cost_no_byte(tmp_path: Path) -> None:
    session = demo_session()
    assert with_doubts(session) is session
    first, second = tmp_path / "a.tinemark", tmp_path / "b.tinemark"
    save_session(session, first)
    save_session(open_session(first), second)
    assert first.read_bytes() == second.read_bytes()


def certificate_of(session: Session, number: int) -> Certificate:
    held = session.ledger.rows[number].onset.certificate
    assert held is not None
    return held


MISFITS: dict[str, tuple[Any, str]] = {
    "none": (lambda s: with_onset(s, 1, certificate=None), NO_CERTIFICATE),
    "another value": (lambda s: with_onset(s, 1, value="131.5", lower="131.4", upper="131.6"), "digest"),
    "another row's": (lambda s: with_onset(s, 1, certificate=certificate_of(s, 2)), "period"),
    "another kind": (lambda s: with_onset(s, 1, kind=Kind.FOLD, period_before=0, period_after=2), "kind"),
    "another box": (lambda s: with_certificate(s, 1, parameter_box=("1", "2")), "digest"),
    "another formula": (
        lambda s: with_certificate(
            s, 1, system_text=certificate_of(s, 1).system_text.replace("(1 - stock", "(2 - stock")
        ),
        "formula",
    ),
    "another system": (lambda s: with_certificate(s, 1, system_text=CUBIC_TEXT), "formula"),
    "another fixed value": (
        lambda s: with_certificate(
            s, 1, system_text=certificate_of(s, 1).system_text.replace('value = "0.02"', 'value = "0.03"')
        ),
        "system",
    ),
}


@pytest.mark.parametrize("name", MISFITS)
def test_what_does_not_fit_is_shown_as_estimated(name: str, tmp_path: Path) -> None:
    change, word = MISFITS[name]
    session = change(demo_session())
    file = tmp_path / "a.tinemark"
    save_session(session, file)
    opened = open_session(file)
    row = opened.ledger.rows[1]
    assert row.onset.status is Status.ESTIMATED
    assert row.onset.reason.startswith(WAITS)
    assert word in row.onset.reason
    assert waits(row.onset)
    assert sum(r.onset.status is Status.PROVED for r in opened.ledger.rows) == 9
    # Nothing of it is lost, and from now on the file keeps its bytes.
    assert row.onset.value == session.ledger.rows[1].onset.value
    assert row.onset.certificate == session.ledger.rows[1].onset.certificate
    save_session(opened, file)
    assert session_bytes(open_session(file)) == file.read_bytes()


def test_a_check_gives_the_word_back_or_takes_it() -> None:
    session = demo_session()
    rows = tuple(replace(row, onset=doubted(row.onset, "for a test")) for row in session.ledger.rows[:3])
    waiting = replace(session, ledger=replace(session.ledger, rows=rows))
    claims = claims_of(waiting)
    assert [check(claim) for _, claim in claims] == [CONFIRMED] * 3
    refused = Verdict(Outcome.REFUSED, Part.BOX, "for a test")
    unknown = Verdict(Outcome.NOT_CHECKABLE, Part.NOTHING, "for a test")
    verdicts = {
        row: (claim, verdict)
        for (row, claim), verdict in zip(claims, (CONFIRMED, refused, unknown), strict=True)
    }
    checked = [row.onset for row in with_verdicts(waiting, verdicts).ledger.rows]
    assert checked[0] == session.ledger.rows[0].onset
    assert checked[1].status is Status.ESTIMATED
    assert "refused" in checked[1].reason
    assert checked[2] == rows[2].onset
    # A proved row that cannot be checked stays as it is.
    proved = {row: (claim, unknown) for row, claim in claims_of(session)}
    assert with_verdicts(session, proved) is session


def test_a_refined_row_is_proved_again() -> None:
    session = demo_session()
    good: Onset = session.ledger.rows[1].onset
    waiting = with_doubts(with_onset(session, 1, certificate=None))
    refined = led.replace_onset(waiting.ledger, waiting.ledger.rows[1].id, good)
    assert refined.rows[1].onset == good


def test_rows_of_an_edited_system_keep_their_proofs() -> None:
    """Their own formulas stay in the session; editing the card does not touch what was proved of them."""
    session = ses.with_system(demo_session(), CUBIC_TEXT)
    opened = read_session(session_bytes(session))
    assert with_doubts(opened) == opened
    assert all(check(claim) == CONFIRMED for _, claim in claims_of(opened)[:2])


def test_invented_certificates_are_not_believed() -> None:
    shown = with_doubts(certified_session())
    assert {row.onset.status for row in shown.ledger.rows} & {Status.PROVED} == set()


def test_summary_counts_in_words() -> None:
    assert summary([]) == "there is no proof to check"
    assert summary([CONFIRMED]) == "1 confirmed of 1 proof"
