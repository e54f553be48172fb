"""Checking the ledger's proofs again: asking, progress, and what the verdicts change."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from tinemark.document import proofs
from tinemark.verify.claims import Outcome

if TYPE_CHECKING:
    from tinemark.document.session import Session
    from tinemark.window.main_window import MainWindow

LABEL = "check the proofs again"
WHERE = "Find, Check the proofs again"


class ProofJobs:
    """The one run of checks of a window."""

    def __init__(self, window: MainWindow) -> None:
        self._window = window
        self._desk: Any = None
        self._running = 0

    def make_with(self, desk: Any) -> None:
        """Have another desk do the work."""
        self._desk = desk

    @property
    def busy(self) -> bool:
        """Whether proofs are being checked."""
        return self._running != 0

    def check_all(self) -> None:
        """Check every proof of the ledger."""
        claims = proofs.claims_of(self._window.keeper.session)
        if not claims:
            self._window.status.show_words("No row of the ledger claims a proof.", "warning")
            return
        if self._desk is None:
            from tinemark.work.proof_checks import ProofDesk

            self._desk = ProofDesk(self._window.bridge.on_event)
        self._window.status.show_busy("Checking the proofs\N{HORIZONTAL ELLIPSIS}", 0.0)
        self._running = self._desk.check(claims)

    def cancel(self) -> bool:
        """Stop the checks; False when there were none."""
        if not self.busy:
            return False
        self._desk.cancel()
        return True

    def forget(self) -> None:
        """Let a run go unanswered: its session is gone."""
        if self.cancel():
            self._running = 0
            self._window.status.show_idle()

    def hear(self, event: object) -> None:
        """An event of the desk, on the window's thread; others are passed over."""
        from tinemark.work.proof_checks import Checked, ChecksEnded

        if not isinstance(event, (Checked, ChecksEnded)) or event.id != self._running:
            return
        if isinstance(event, Checked):
            words = f"Checked {event.done} of {event.count} proofs\N{HORIZONTAL ELLIPSIS}"
            self._window.status.show_busy(words, (event.done + event.share) / event.count)
            return
        self._running = 0
        self._window.status.show_idle()
        self._take(event)

    def _take(self, event: Any) -> None:
        keeper, status = self._window.keeper, self._window.status
        verdicts = {row: (claim, verdict) for row, claim, verdict in event.verdicts}
        keeper.do(LABEL, proofs.with_verdicts(keeper.session, verdicts))
        words = proofs.summary([verdict for _, verdict in verdicts.values()])
        if not event.complete:
            status.show_words(f"Stopped: {words}; the other rows are as they were.", "warning")
            return
        refused = [(row, v) for row, (_, v) in verdicts.items() if v.outcome is not Outcome.CONFIRMED]
        if refused:
            row, verdict = refused[0]
            self._window.rows.select(row)
            status.show_words(f"Proofs checked again: {words}. First: {verdict.words}.", "warning")
        else:
            status.show_words(f"Proofs checked again with a second implementation: {words}.")

    def detach(self) -> None:
        """End the process. The bridge lets nothing more through."""
        if self._desk is not None:
            self._desk.close()


def opening_words(session: Session) -> str:
    """What to say of a session's proofs when it has been opened; empty when all fit."""
    count = sum(proofs.waits(row.onset) for row in session.ledger.rows)
    if not count:
        return ""
    rows = "1 row is" if count == 1 else f"{count} rows are"
    return f"{rows} shown as estimated until the proofs are checked: {WHERE}."
