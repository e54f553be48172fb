"""The invented hatchery with onsets and derivatives in closed form, for tests of tolerances and margins.

feed = (r_k - ln(1 - harvest))/response with the Ricker onsets r_k (r_1 = 2), so d feed/d response is
-feed/response and d feed/d harvest is 1/(response (1 - harvest)); the capacity only scales the stock.
"""

from __future__ import annotations

import dataclasses
import math
from fractions import Fraction

import onset_samples as known

from tinemark.document import ledger as led
from tinemark.document import session as ses
from tinemark.document.session import Session
from tinemark.onsets.results import Onset, Sensitivity
from tinemark.resources_path import resource
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text

TEXT = resource("demo", "hatchery.toml").read_text(encoding="utf-8")
FIRST = f"{(2 - math.log(0.9)) / 0.02:.12f}"
SECOND = "131.591412075582"


def tank(*changes: tuple[str, str]) -> System:
    """The tank, with parts of its text replaced."""
    return read_system_text(changed_text(*changes))


def changed_text(*changes: tuple[str, str]) -> str:
    """The tank's text with parts replaced, each of which must be there."""
    text = TEXT
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    return text


def without_tolerances(text: str = TEXT) -> str:
    """A system's text with no tolerance in it."""
    return "\n".join(line for line in text.split("\n") if not line.startswith("tolerance"))


def onset(value: str, before: int, *, slopes: bool = True) -> Onset:
    """A proved flip of the tank with its derivatives in closed form."""
    moves = (
        Sensitivity("response", str(float(-Fraction(value) / Fraction("0.02")))),
        Sensitivity("harvest", "55.5555555556"),
        Sensitivity("capacity", "0"),
    )
    flip = dataclasses.replace(known.flip(value, before, width="1e-12"), parameter="feed")
    return dataclasses.replace(flip, sensitivities=moves if slopes else ())


def session(text: str = TEXT, onsets: tuple[Onset, ...] | None = None) -> Session:
    """A session of the tank with its first two onsets, or others, in the ledger."""
    begun = ses.new_session(text)
    place = led.place_of(ses.system_of(begun), begun.parameter)
    ledger = begun.ledger
    for item in onsets if onsets is not None else (onset(FIRST, 1), onset(SECOND, 2)):
        ledger, _ = led.add(ledger, item, place)
    return ses.with_ledger(begun, ledger)
