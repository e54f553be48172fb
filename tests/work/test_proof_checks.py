"""The desk that checks proofs in a process of its own."""

from __future__ import annotations

import threading

from tinemark.document.proofs import claims_of
from tinemark.document.session import demo_session
from tinemark.verify.claims import Outcome
from tinemark.work.proof_checks import Checked, ChecksEnded, ProofDesk


class Listener:
    def __init__(self) -> None:
        self.events: list[Checked | ChecksEnded] = []
        self.first, self.ended = threading.Event(), threading.Event()

    def __call__(self, event: Checked | ChecksEnded) -> None:
        self.events.append(event)
        self.first.set()
        if isinstance(event, ChecksEnded):
            self.ended.set()


def test_all_are_checked_in_order_and_a_cancel_ends_it() -> None:
    claims = claims_of(demo_session())
    assert len(claims) == 10
    heard = Listener()
    desk = ProofDesk(heard)
    number = desk.check(claims)
    assert heard.ended.wait(60)
    end = heard.events[-1]
    assert heard.events[:-1] == [Checked(number, n, 10) for n in range(1, 11)]
    assert isinstance(end, ChecksEnded)
    assert (end.id, end.complete) == (number, True)
    assert [(row, claim) for row, claim, _ in end.verdicts] == list(claims)
    assert {verdict.outcome for _, _, verdict in end.verdicts} == {Outcome.CONFIRMED}

    # A long run, cancelled after its first answer.
    heard.__init__()
    desk.check(claims * 500)
    assert heard.first.wait(60)
    desk.cancel()
    assert heard.ended.wait(60)
    end = heard.events[-1]
    assert isinstance(end, ChecksEnded)
    assert not end.complete
    assert 0 < len(end.verdicts) < 5000
    desk.close()
