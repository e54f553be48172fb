"""Checking a printed onset afresh: its own decimals are the claim, and are proved or refused."""

from __future__ import annotations

from collections.abc import Generator
from fractions import Fraction

from flint import arb

from tinemark.onsets.ball_orbits import ball_loops, ball_of, precision
from tinemark.onsets.border_onsets import prove_claim as prove_border
from tinemark.onsets.branch_point_onsets import prove_claim as prove_branch_point
from tinemark.onsets.decimals import decimal_places
from tinemark.onsets.one_map import OneMap, one_map
from tinemark.onsets.polish import Rough, first_bits, newton_step
from tinemark.onsets.proofs import TARGETS, Box, NotProved, Proof, correction_at, prove
from tinemark.onsets.results import Kind, Onset, Step
from tinemark.systems.system import System

STATE_UNITS = 50
"""Half-width of the state's box, in units of its last printed digit."""


def verify_onset(system: System, onset: Onset) -> Generator[Step, None, Proof]:
    """Prove that exactly one onset lies between the printed lower and upper end.

    Nothing is searched for or repaired: the box is the printed one, and the interval Newton test
    must map that box into itself.

    Returns
    -------
    Proof
        As the generator's value.

    Raises
    ------
    NotProved
        The claim does not hold, or could not be shown; says which part.
    SwitchingTouched
        The orbit's box touches a switching surface.
    """
    one = one_map(system, onset.parameter)
    states = dict(onset.states)
    if one.state not in states:
        raise NotProved("the claim names no cycle point", refuted=True)
    period = onset.period_after if onset.kind is Kind.FOLD else onset.period_before
    if onset.kind is Kind.BORDER_COLLISION:
        period = onset.period_before or onset.period_after
    after = {Kind.FLIP: 2 * period, Kind.PITCHFORK: period, Kind.TRANSCRITICAL: period}
    if period < 1 or onset.period_after != after.get(onset.kind, onset.period_after):
        raise NotProved("the periods before and after do not belong to such an onset", refuted=True)
    lower, upper = Fraction(onset.lower), Fraction(onset.upper)
    if not lower < upper:
        raise NotProved("the printed interval is empty", refuted=True)
    text = states[one.state]
    x, r = Fraction(text), (lower + upper) / 2
    half_x = STATE_UNITS * last_unit(text, onset.digits)
    places = decimal_places((upper - lower) / 2, 6)
    bits = 2 * first_bits(Rough(onset.kind, period, x, r), places)
    with precision(bits):
        box = Box(ball_of(x).mid(), ball_of(r).mid(), _below(half_x), _below((upper - lower) / 2))
    if onset.kind is Kind.BORDER_COLLISION:
        yield Step("verifying")
        return prove_border(one, onset.period_before, onset.period_after, box, bits)
    proof = yield from _proof(one, onset.kind, period, box, bits)
    if proof.degenerate:
        raise NotProved(proof.degenerate)
    if onset.kind in (Kind.FLIP, Kind.PITCHFORK) and proof.criticality is not onset.criticality:
        raise NotProved(
            f"the {onset.kind.value} is {proof.criticality.value}, not {onset.criticality.value}",
            refuted=True,
        )
    return proof


def _proof(one: OneMap, kind: Kind, period: int, box: Box, bits: int) -> Generator[Step, None, Proof]:
    if kind in (Kind.TRANSCRITICAL, Kind.PITCHFORK):
        return (yield from prove_branch_point(one, kind, period, box, bits))
    if kind not in TARGETS:
        raise NotProved(f"a {kind.value} of a map of one state is not proved")
    loops = ball_loops(one)
    _, _, inverse, _ = yield from newton_step(loops, kind, period, box.x, box.r, bits, "verifying")
    correction = yield from correction_at(loops, kind, period, box.x, box.r, inverse, bits)
    return (yield from prove(loops, kind, period, box, inverse, correction, bits))


def last_unit(text: str, digits: int) -> Fraction:
    """One unit of the last digit that counts of a state printed to a number of significant digits."""
    whole, _, decimals = text.partition(".")
    if decimals:
        return Fraction(1, 10 ** len(decimals))
    if not whole.strip("-0"):
        # A state printed as plain zero is zero to far more digits than are asked for.
        return Fraction(1, 10**digits)
    # The zeros that end a whole number with more digits than were asked for only fill it up.
    return Fraction(10) ** max(0, len(whole.lstrip("-")) - digits)


def _below(half: Fraction) -> arb:
    """A little less than a half-width, so that rounding the middle stays inside the claim."""
    return ball_of(half * Fraction(999, 1000)).abs_lower()
