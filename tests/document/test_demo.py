"""The demo sessions that ship: invented, marked so, and right."""

from __future__ import annotations

import math
from decimal import Decimal, localcontext
from fractions import Fraction

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from tinemark.document import ledger as led
from tinemark.document import session as ses
from tinemark.document.session_file import open_session, session_bytes
from tinemark.onsets.results import Status
from tinemark.resources_path import resource
from tinemark.systems.library import DEMOS, builtin_text

# Ricker onsets r_1 … r_6: the first exact, the others recomputed to 28 digits (May and Oster 1976; May 1976
# give 2.526, 2.656, 2.685; attribution from memory).
RICKER = (
    "2",
    "2.526467725853819217688809805",
    "2.656353265157177421817771443",
    "2.684623358294223575367752608",
    "2.690708802601215883527436769",
    "2.692013259813188457161717157",
)
RICKER_PERIOD_3_FOLD = "3.10243991563542660947544093842"


def feed_at(ricker: str) -> Fraction:
    """Feed at a Ricker onset: r = 0.02*feed + ln(1 - 0.1), as the system's own notes say."""
    with localcontext() as context:
        context.prec = 40
        return Fraction((Decimal(ricker) - Decimal("0.9").ln()) / Decimal("0.02"))


def test_the_demo_holds_proved_onsets_of_its_system() -> None:
    session = ses.demo_session()
    assert session == open_session(resource("demo", "hatchery.tinemark"))
    # Its system is the one in the library, so the demo is not out of date.
    assert session.system_text == builtin_text("hatchery")
    assert "invented" in session.title.lower()
    assert "invented" in session.notes.lower()
    ladders = {
        row.base_period: led.ladder_rows(session.ledger, row.ladder)
        for row in session.ledger.rows
        if row.ladder
    }
    assert len(session.ledger.rows) == sum(len(rows) for rows in ladders.values())
    assert all(row.onset.status is Status.PROVED for row in session.ledger.rows)
    place = led.place_of(ses.system_of(session), session.parameter)
    assert all(row.place == place for row in session.ledger.rows)
    for row, ricker in zip(ladders[1], RICKER, strict=True):
        # The published side has 28 digits, so it lies within its last digit of the enclosure.
        assert Fraction(row.onset.lower) - Fraction(1, 10**24) <= feed_at(ricker)
        assert feed_at(ricker) <= Fraction(row.onset.upper) + Fraction(1, 10**24)
    fold = ladders[3][0]
    assert fold.level == 0
    assert abs(fold.onset.value_fraction - feed_at(RICKER_PERIOD_3_FOLD)) < Fraction(1, 10**18)
    estimates = led.estimates(session.ledger, "L1")
    assert estimates is not None
    assert estimates.class_name == "quadratic maximum"


@pytest.mark.parametrize("name", DEMOS)
def test_a_demo_is_stored_as_it_would_be_saved(name: str) -> None:
    data = resource("demo", f"{name}.tinemark").read_bytes()
    assert session_bytes(ses.demo_session(name)) == data


def test_the_board_holds_estimated_onsets_of_one_cascade() -> None:
    session = ses.demo_session("resonator_board")
    assert session.system_text == builtin_text("resonator_board")
    assert "invented" in session.title.lower() and "invented" in session.notes.lower()
    rows = session.ledger.rows
    assert [row.level for row in rows] == [1, 2, 3, 4, 5]
    assert all(row.onset.status is Status.ESTIMATED and row.onset.reason for row in rows)
    assert {s.name for s in rows[0].onset.sensitivities} == {
        *("frequency", "inductance", "resistance", "knee", "scale")
    }
    estimates = led.estimates(session.ledger, "L1")
    assert estimates is not None
    assert estimates.class_name == "quadratic maximum"


def board_cycle(amplitude: float) -> float:
    """Sum of trace, determinant and one of the board's cycle map at an amplitude, by SciPy alone."""
    r, knee, scale, period = 0.634, 0.4, 0.16, 1 / 0.43

    def rate(t: float, y: np.ndarray) -> list[float]:
        q, i, *columns = y
        slope = knee / scale * math.exp(q / scale)
        force = amplitude * math.cos(2 * math.pi * t / period)
        out = [i, force - r * i - knee * (math.exp(q / scale) - 1)]
        for a, b in zip(columns[::2], columns[1::2], strict=True):
            out += [b, -r * b - slope * a]
        return out

    point = np.array([-0.2, 0.05])
    matrix = np.eye(2)
    for _ in range(30):
        start = np.concatenate([point, [1, 0, 0, 1]])
        end = solve_ivp(rate, (0, period), start, method="DOP853", rtol=1e-12, atol=1e-13).y[:, -1]
        matrix = end[2:].reshape(2, 2).T
        point = point - np.linalg.solve(matrix - np.eye(2), end[:2] - point)
    return float(1 + np.trace(matrix) + np.linalg.det(matrix))


def test_the_board_s_first_split_is_the_one_that_scipy_finds() -> None:
    first = ses.demo_session("resonator_board").ledger.rows[0].onset
    value = float(first.value)
    assert board_cycle(value - 1e-8) * board_cycle(value + 1e-8) < 0
