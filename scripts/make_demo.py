"""Make the demo sessions anew: ``python3 scripts/make_demo.py [--check]``.

Follows the ladders of the invented scenarios with the real engine and saves them in resources/demo: the
hatchery tank, a map, and the resonator board, a driven circuit. The same sources give the same bytes on one
machine (the board is integrated in doubles, whose last bits another processor may round otherwise);
``--check`` only compares, and exits 1 when a stored file is not what the engine finds.
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Generator, Sequence
from fractions import Fraction
from pathlib import Path
from typing import TypeVar

ROOT = Path(__file__).resolve().parents[1]
FOLDER = ROOT / "resources" / "demo"
DIGITS = 20
LEVELS = 6
WINDOW_FOLD = Fraction("160.39")
"""Where the period-3 window is clicked: the engine finds the fold itself."""

SESSION_NOTES = """\
Invented example. No such hatchery exists; every number was chosen for the demonstration.

Question: how much feed does the tank take before good and bad seasons alternate, and how far is today's \
ration of 100 kg/day from there?

Found: the first split lies at 105.27 kg/day, so the margin is 5.27 kg/day. The doublings end near \
139.89 kg/day. Beyond 160.39 kg/day there is a window in which the stock repeats every three seasons.
"""
NOTES = {
    (1, 1): "invented example: above this ration good and bad seasons alternate",
    (1, LEVELS): "extend the ladder to see the next levels",
    (3, 0): "a cycle of three seasons begins",
}
"""Notes by base period and level."""

BOARD_LEVELS = 5
BOARD_SESSION_NOTES = """\
Invented example. No such board exists; every number was chosen for the demonstration.

Question: at which drive amplitude does the board stop giving the same answer in every period, and how far \
is the working amplitude of 0.7 V from there?

Found: alternate periods begin to differ at 0.845 V, so the margin is 0.145 V. The doublings end near \
1.967 V. Which tolerance moves the first split most stands on the tolerance panel.
"""
BOARD_NOTES = {
    1: "invented example: above this amplitude alternate periods differ",
    BOARD_LEVELS: "extend the ladder to see the next levels",
}
"""Notes by level."""

Answer = TypeVar("Answer")


def answer_of(job: Generator[object, None, Answer]) -> Answer:
    """Run a job of the engine to its end."""
    while True:
        try:
            next(job)
        except StopIteration as end:
            answer: Answer = end.value
            return answer


def board_bytes() -> bytes:
    """The session of the resonator board, found anew."""
    from tinemark.document import ledger as led
    from tinemark.document import session as ses
    from tinemark.document.session_file import session_bytes
    from tinemark.onsets import engine
    from tinemark.onsets.results import LadderRequest
    from tinemark.systems.library import builtin_text

    session = ses.new_session(builtin_text("resonator_board"))
    system = ses.system_of(session)
    parameter = session.parameter
    request = LadderRequest(
        system, parameter, session.view.left, session.view.right, base_period=1, levels=BOARD_LEVELS
    )
    place = led.place_of(system, parameter)
    ledger = led.add_ladder(session.ledger, answer_of(engine.ladder(request)), place)
    for row in ledger.rows:
        ledger = led.note(ledger, row.id, BOARD_NOTES.get(row.level or 0, ""))
    session = ses.with_words(ses.with_ledger(session, ledger), notes=BOARD_SESSION_NOTES)
    return session_bytes(ses.with_probe(session, system.parameter(parameter).value.fraction))


def tank_bytes() -> bytes:
    """The session of the hatchery tank, found anew."""
    from tinemark.document import ledger as led
    from tinemark.document import session as ses
    from tinemark.document.session_file import session_bytes
    from tinemark.onsets import engine
    from tinemark.onsets.results import LadderRequest, RefineRequest
    from tinemark.systems.library import DEMO, builtin_text

    session = ses.new_session(builtin_text(DEMO))
    system = ses.system_of(session)
    parameter = session.parameter
    place = led.place_of(system, parameter)
    left, right = session.view.left, session.view.right

    request = LadderRequest(system, parameter, left, right, base_period=1, levels=LEVELS, digits=DIGITS)
    ledger = led.add_ladder(session.ledger, answer_of(engine.ladder(request)), place)
    click = RefineRequest(system, parameter, WINDOW_FOLD, Fraction(2), digits=DIGITS)
    fold = answer_of(engine.refine(click)).onsets[0]
    ledger, _ = led.add(ledger, fold, place, stated_base=fold.period_after)
    request = LadderRequest(
        system,
        parameter,
        fold.value_fraction,
        right,
        base_period=fold.period_after,
        levels=3,
        digits=DIGITS,
    )
    ledger = led.add_ladder(ledger, answer_of(engine.ladder(request)), place)
    for row in ledger.rows:
        if row.base_period is not None and row.level is not None:
            ledger = led.note(ledger, row.id, NOTES.get((row.base_period, row.level), ""))
    session = ses.with_words(ses.with_ledger(session, ledger), notes=SESSION_NOTES)
    return session_bytes(ses.with_probe(session, system.parameter(parameter).value.fraction))


def main(arguments: Sequence[str]) -> int:
    """Make the demos, or compare them; 0 when the files are as they should be."""
    parser = argparse.ArgumentParser(prog="make_demo.py", description="Make the demo sessions anew.")
    parser.add_argument("--check", action="store_true", help="compare only, write nothing")
    options = parser.parse_args(arguments)
    sys.path.insert(0, str(ROOT / "app"))
    from tinemark.document.atomic_file import write_whole

    wrong = 0
    for name, make in (("hatchery", tank_bytes), ("resonator_board", board_bytes)):
        file, data = FOLDER / f"{name}.tinemark", make()
        if options.check:
            same = file.is_file() and file.read_bytes() == data
            wrong += not same
            print(f"{file.name} is " + ("up to date" if same else "not what the engine finds"))
        else:
            write_whole(file, data)
            print(f"wrote {file.relative_to(ROOT)} ({len(data)} bytes)")
    return 1 if wrong else 0


if __name__ == "__main__":
    raise SystemExit(main(sys.argv[1:]))
