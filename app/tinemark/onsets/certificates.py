"""Certificates: what others need to check a proved onset again without our solver.

A certificate is made where a proof has just succeeded. Its box lies inside the box of the proof and
holds the enclosure that the proof found, so what was shown of the one holds for the other.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction
from functools import lru_cache

from tinemark.onsets.decimals import fixed_text, leading_power, rounded
from tinemark.onsets.results import Certificate, Kind, Onset, Status
from tinemark.systems.system import System
from tinemark.systems.system_text import write_system_text

MOST_DIGITS = 1000
"""Decimals of the texts of a box; a proof that needs more leaves no certificate."""

Side = tuple[Fraction, Fraction]
"""Middle and half-width of one side of a box."""


@lru_cache(maxsize=32)
def system_text(system: System) -> str:
    """The system as TOML with the values that held, without what says nothing about its mathematics."""
    return write_system_text(replace(system, notes=""))


def digest_of(certificate: Certificate, onset: Onset) -> str:
    """SHA-256 over the certificate and the printed value, lower and upper."""
    content = [
        certificate.system_text,
        certificate.kind,
        certificate.period,
        certificate.parameter,
        certificate.criticality,
        certificate.precision,
        list(certificate.parameter_box),
        [list(side) for side in certificate.state_boxes],
        onset.value,
        onset.lower,
        onset.upper,
    ]
    return hashlib.sha256(json.dumps(content, separators=(",", ":")).encode()).hexdigest()


def certified(
    onset: Onset,
    system: System,
    precision: int,
    parameter: Side,
    states: Sequence[tuple[str, Side]],
    *,
    keep_within: Sequence[Side] = (),
) -> Onset:
    """A proved onset with its certificate; any other onset as it is.

    Parameters
    ----------
    onset
        What was proved.
    system
        The system with the values that held.
    precision
        Bits the proof worked with.
    parameter, states
        Middle and half-width of the proved box: the parameter, and one cycle point as (name, side) in
        the system's order of states. A state that is known exactly has no width.
    keep_within
        Enclosures found by the proof, as (lower, upper): the parameter, then each state. Where the
        rounded box does not hold them, there is no certificate.
    """
    if onset.status is not Status.PROVED:
        return onset
    sides = [side_texts(*side) for side in _with_width((parameter, *(side for _, side in states)))]
    if any(text is None for text in sides):
        return onset
    texts = [text for text in sides if text is not None]
    for (middle, half), (low, high) in zip(texts, keep_within, strict=False):
        if not Fraction(middle) - Fraction(half) <= low <= high <= Fraction(middle) + Fraction(half):
            return onset
    certificate = Certificate(
        system_text=system_text(system),
        kind=onset.kind.value,
        period=cycle_period(onset),
        parameter=onset.parameter,
        criticality=onset.criticality.value,
        precision=precision,
        parameter_box=texts[0],
        state_boxes=tuple((name, *text) for (name, _), text in zip(states, texts[1:], strict=True)),
        digest="",
    )
    return replace(onset, certificate=replace(certificate, digest=digest_of(certificate, onset)))


def _with_width(sides: Sequence[Side]) -> list[Side]:
    """The sides; one without width, of a state known exactly, as narrow as the narrowest of the others."""
    least = min((half for _, half in sides if half > 0), default=Fraction(0))
    return [(middle, half or least) for middle, half in sides]


def cycle_period(onset: Onset) -> int:
    """Least period of the cycle that the equations of an onset are about."""
    if onset.kind is Kind.BORDER_COLLISION:
        # A pair of cycles that meets on the surface comes out of none.
        return onset.period_before or onset.period_after
    return onset.period_after if onset.kind is Kind.FOLD else onset.period_before


def side_texts(middle: Fraction, half: Fraction) -> tuple[str, str] | None:
    """Exact decimal texts of a side that lies inside the one given, nearly as wide; None where too long."""
    if half <= 0:
        return None
    places = 3 - leading_power(half)
    if not -MOST_DIGITS < places < MOST_DIGITS:
        return None
    centre = Fraction(rounded(middle, places)) / Fraction(10) ** places
    inner = half - abs(centre - middle)
    units = (inner * Fraction(10) ** places).__floor__()
    return fixed_text(rounded(centre, places), places), fixed_text(units, places)
