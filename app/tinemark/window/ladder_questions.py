"""What a ladder is asked with: offered from the view, the selected row, or the levels that are known."""

from __future__ import annotations

import numpy as np
from PySide6.QtWidgets import QWidget

from tinemark.density.field import Field
from tinemark.density.request import View
from tinemark.document.ledger import ladder_rows
from tinemark.document.row import Row
from tinemark.document.session import Session, system_of_row
from tinemark.onsets.results import Kind, LadderRequest
from tinemark.systems.system import System
from tinemark.window.ladder_dialog import LadderDialog, LadderQuestion
from tinemark.window.onset_jobs import LEAST_DIGITS, digits_for
from tinemark.window.view_navigation import reading, unit_x

MORE_LEVELS = 4
LONGEST_BASE = 64


def ladder_question(
    window: QWidget, session: Session, row: Row | None, field: Field | None
) -> LadderQuestion | None:
    """Ask; None when the user thinks better of it."""
    view = session.view
    offered = offered_question(view, row, field)
    columns = max(window.width(), 1)
    texts = tuple(
        reading(end, view.width, columns).replace("\N{MINUS SIGN}", "-")
        for end in (offered.start, offered.stop)
    )
    dialog = LadderDialog(session.parameter, offered, (texts[0], texts[1]), window)
    dialog.exec()
    answer = dialog.answer
    dialog.deleteLater()
    return answer


def offered_question(view: View, row: Row | None, field: Field | None) -> LadderQuestion:
    """The view from end to end, from the side on which the cycle is still simple.

    With a flip selected, its base period; else the shortest period seen at that side.
    """
    rising = _rises(view, row, field)
    start, stop = (view.left, view.right) if rising else (view.right, view.left)
    base = 1
    if row is not None and row.onset.kind is Kind.FLIP and row.onset.period_before:
        base = row.base_period or row.onset.period_before
    elif field is not None:
        base = _period_at(field, 0 if rising else len(field.period) - 1)
    return LadderQuestion(start, stop, base)


def _rises(view: View, row: Row | None, field: Field | None) -> bool:
    """Whether the periods grow towards larger parameter values."""
    if field is None:
        return True
    periods = field.period
    if row is not None and view.left < row.onset.value_fraction < view.right:
        at = unit_x(view, row.onset.value_fraction) * len(periods)
        before, after = row.onset.period_before, row.onset.period_after
        sides = np.arange(len(periods)) < at
        votes = np.where(periods == after, 1, 0) - np.where(periods == before, 1, 0)
        return bool(votes[~sides].sum() >= votes[sides].sum())
    half = len(periods) // 2
    left, right = np.count_nonzero(periods[:half]), np.count_nonzero(periods[half:])
    return bool(left >= right)


def _period_at(field: Field, column: int) -> int:
    """The period seen at one end of the view; 1 where it is not a short one."""
    period = int(field.period[column])
    return period if 1 <= period <= LONGEST_BASE else 1


def ladder_request(system: System, session: Session, question: LadderQuestion) -> LadderRequest:
    """The request for an answered question."""
    return LadderRequest(
        system,
        session.parameter,
        question.start,
        question.stop,
        question.base_period,
        question.levels,
        digits_for(session.view),
    )


def further_levels(session: Session, ladder: str, field: Field | None) -> tuple[LadderRequest, int] | str:
    """The request that finds the next levels of a known ladder, with the ladder's base period.

    The search begins a little before the first flip that is known, so its own base period is that flip's.
    A sentence instead where there is nothing to go on from.
    """
    rows = [row for row in ladder_rows(session.ledger, ladder) if row.level is not None and row.level >= 1]
    if not rows:
        return "This ladder has no flip to go on from."
    system = system_of_row(session, rows[0].id)
    if system is None:
        return "The system of this ladder is not known any more; open it to go on."
    first, last = rows[0].onset, rows[-1].onset
    if len(rows) > 1:
        way = last.value_fraction - first.value_fraction
        stop = last.value_fraction + 2 * way
    else:
        way = session.view.width / 4 * (1 if _rises(session.view, rows[0], field) else -1)
        stop = last.value_fraction + 4 * way
    request = LadderRequest(
        system,
        first.parameter,
        first.value_fraction - way / 8,
        stop,
        first.period_before,
        (rows[-1].level or 1) - (rows[0].level or 1) + 1 + MORE_LEVELS,
        max(LEAST_DIGITS, digits_for(session.view)),
    )
    return request, rows[0].base_period or first.period_before
