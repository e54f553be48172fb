"""Checking the ledger's proofs from the menu, with a fake desk."""

from __future__ import annotations

from dataclasses import replace

import pytest
from shell_window import FakeDesks, window_on

from tinemark.document.proofs import WAITS
from tinemark.document.session import demo_session
from tinemark.document.session_file import save_session
from tinemark.onsets.results import Status
from tinemark.verify.claims import Outcome, Part, Verdict
from tinemark.work.proof_checks import Checked, ChecksEnded

GOOD = Verdict(Outcome.CONFIRMED, Part.NOTHING, "")
BAD = Verdict(Outcome.REFUSED, Part.BOX, "the interval Newton test does not map the box into itself")


class FakeDesk:
    def __init__(self) -> None:
        self.asked: list = []
        self.cancelled = 0

    def check(self, claims) -> int:
        self.asked.append(claims)
        return 1000 + len(self.asked)

    def cancel(self) -> None:
        self.cancelled += 1

    def close(self) -> None:
        pass


@pytest.fixture
def desk():
    return FakeDesk()


@pytest.fixture
def window(qtbot, tmp_path, desk):
    with window_on(tmp_path / "memory", make=FakeDesks().make) as made:
        qtbot.waitUntil(lambda: made.onsets.refinery is not None)
        made.proofs.make_with(desk)
        yield made


def tell(window, event) -> None:
    window.bridge.event_came.emit(event)


def ended(desk, verdicts, *, complete: bool = True) -> ChecksEnded:
    rows = [(row, claim, verdict) for (row, claim), verdict in zip(desk.asked[-1], verdicts, strict=False)]
    return ChecksEnded(1000 + len(desk.asked), tuple(rows), complete)


def test_without_rows_there_is_nothing_to_check(window, desk) -> None:
    assert not window.actions_by_name["check_proofs"].isEnabled()
    window.proofs.check_all()
    assert desk.asked == []
    assert "No row" in window.status.words.words


def test_confirmed_rows_stay_proved_and_refused_ones_do_not(window, desk) -> None:
    window.keeper.open(demo_session(), None)
    window.actions_by_name["check_proofs"].trigger()
    assert len(desk.asked[0]) == 10
    assert window.proofs.busy
    tell(window, Checked(1001, 3, 10))
    tell(window, ended(desk, [GOOD] * 4 + [BAD] + [GOOD] * 5))
    assert not window.proofs.busy
    rows = window.keeper.session.ledger.rows
    assert [row.onset.status for row in rows].count(Status.PROVED) == 9
    assert rows[4].onset.status is Status.ESTIMATED
    assert rows[4].onset.reason.startswith(WAITS)
    assert "box" in rows[4].onset.reason
    assert "9 confirmed, 1 refused of 10 proofs" in window.status.words.words
    # It is work like any other: it can be taken back.
    window.keeper.undo()
    assert all(row.onset.status is Status.PROVED for row in window.keeper.session.ledger.rows)


def test_a_file_that_does_not_bear_its_proofs_out(window, desk, tmp_path) -> None:
    session = demo_session()
    first, *others = session.ledger.rows
    held = first.onset.certificate
    spoiled = replace(first, onset=replace(first.onset, certificate=replace(held, digest="0" * 64)))
    session = replace(session, ledger=replace(session.ledger, rows=(spoiled, *others)))
    file = tmp_path / "spoiled.tinemark"
    save_session(session, file)
    window.files.open(file)
    row = window.keeper.session.ledger.rows[0]
    assert row.onset.status is Status.ESTIMATED
    assert "digest" in row.onset.reason
    assert "1 row is shown as estimated" in window.status.words.words
    window.proofs.check_all()
    tell(window, ended(desk, [GOOD] * 10))
    assert window.keeper.session.ledger.rows[0].onset.status is Status.PROVED
    assert window.keeper.session.ledger.rows[0].onset.reason == ""


def test_cancel_keeps_what_was_found(window, desk) -> None:
    window.keeper.open(demo_session(), None)
    window.proofs.check_all()
    window.cancel()
    assert desk.cancelled == 1
    tell(window, ended(desk, [BAD, GOOD], complete=False))
    assert window.keeper.session.ledger.rows[0].onset.status is Status.ESTIMATED
    assert window.status.words.words.startswith("Stopped: 1 confirmed, 1 refused")


def test_a_row_changed_meanwhile_stays_as_it_is(window, desk) -> None:
    window.keeper.open(demo_session(), None)
    window.proofs.check_all()
    ledger = window.keeper.session.ledger
    onset = replace(ledger.rows[0].onset, value="105.2680257828913150615")
    rows = (replace(ledger.rows[0], onset=onset), *ledger.rows[1:])
    window.keeper.set_ledger("change", replace(ledger, rows=rows))
    tell(window, ended(desk, [BAD] + [GOOD] * 9))
    assert window.keeper.session.ledger.rows == rows


def test_the_answer_for_another_session_is_dropped(window, desk) -> None:
    window.keeper.open(demo_session(), None)
    window.proofs.check_all()
    window.keeper.open(demo_session(), None)
    assert desk.cancelled == 1
    tell(window, ended(desk, [BAD] * 10))
    assert all(row.onset.status is Status.PROVED for row in window.keeper.session.ledger.rows)
