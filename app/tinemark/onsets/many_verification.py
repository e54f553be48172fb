"""Checking a printed onset of a map of several states afresh: its own decimals are the claim."""

from __future__ import annotations

from collections.abc import Generator, Sequence
from fractions import Fraction
from typing import Any

import numpy as np
from flint import arb

from tinemark.onsets.ball_orbits import ball_of, precision
from tinemark.onsets.decimals import decimal_places
from tinemark.onsets.many_borders import prove_claim
from tinemark.onsets.many_branch_points import identity_of, start_of
from tinemark.onsets.many_cycles import Cycle, condensed
from tinemark.onsets.many_map import (
    BallEvaluators,
    FloatManyMap,
    Floats,
    ball_evaluators,
    float_many_map,
    many_map,
)
from tinemark.onsets.many_onset import rough_start
from tinemark.onsets.many_polish import NotFound, polish, working_bits
from tinemark.onsets.many_preparation import worked_out
from tinemark.onsets.many_proof import ManyProof, prove_many
from tinemark.onsets.many_shooting import in_turn
from tinemark.onsets.many_texts import periods
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Kind, Onset, Step
from tinemark.onsets.verification import last_unit
from tinemark.systems.system import System

CROSSED = (Kind.TRANSCRITICAL, Kind.PITCHFORK)
KINDS = (Kind.FLIP, Kind.FOLD, Kind.NEIMARK_SACKER, Kind.BORDER_COLLISION, *CROSSED)
STATE_UNITS = 50
"""How far a state may lie from the printed one, in units of its last printed digit."""
REACH = 1e-6
"""How far from the printed parameter, in parts of it, the polished one may lie."""


def verify_onset_many(system: System, onset: Onset) -> Generator[Step, None, ManyProof]:
    """Prove that the printed interval and cycle point hold an onset of the printed kind and periods.

    The printed cycle point and parameter are carried round the cycle and polished, the result is proved, and
    the proved enclosures must lie inside what is printed. Nothing that is printed is repaired.

    Returns
    -------
    ManyProof
        As the generator's value.

    Raises
    ------
    NotProved
        The claim does not hold, or could not be shown; says which part.
    SwitchingTouched
        The box of a cycle point touches a switching surface.
    """
    many = many_map(system, onset.parameter)
    yield from worked_out(many, 2)
    float_map = float_many_map(many)
    period = _claimed_period(onset)
    lower, value, upper = (Fraction(text) for text in (onset.lower, onset.value, onset.upper))
    if not lower <= value <= upper or lower == upper:
        raise NotProved("the printed interval does not hold the printed value", refuted=True)
    printed = dict(onset.states)
    if set(printed) != set(float_map.many.states):
        raise NotProved("the claim names no cycle point", refuted=True)
    texts = [printed[name] for name in float_map.many.states]
    bits = working_bits(decimal_places((upper - lower) / 2, 6), period)
    state = [Fraction(text) for text in texts]
    if onset.kind is Kind.BORDER_COLLISION:
        yield Step("verifying")
        scales = float_map.scales(float(value))
        collision = prove_claim(float_map, period, state, value, scales, bits + 8 * period)
        if (collision.before, collision.after) != (onset.period_before, onset.period_after):
            reason = "the periods before and after do not belong to such an onset"
            raise NotProved(reason, refuted=True)
        proof = collision.proof
    else:
        proof = yield from _proof(float_map, onset.kind, period, state, value, bits)
    if not (lower <= proof.parameter[0] and proof.parameter[1] <= upper):
        raise NotProved("the onset lies outside the printed interval", refuted=True)
    for text, interval in zip(texts, proof.states, strict=True):
        if max(abs(end - Fraction(text)) for end in interval) > STATE_UNITS * last_unit(text, onset.digits):
            raise NotProved("the onset's cycle does not pass through the printed point", refuted=True)
    if proof.claims.degenerate:
        raise NotProved(proof.claims.degenerate)
    if proof.claims.criticality is not onset.criticality:
        found, claimed = proof.claims.criticality.value, onset.criticality.value
        raise NotProved(f"the {onset.kind.value} is {found or 'neither'}, not {claimed}", refuted=True)
    return proof


def _claimed_period(onset: Onset) -> int:
    if onset.kind not in KINDS:
        raise NotProved(f"a {onset.kind.value} is not proved for maps of several states", refuted=True)
    if onset.kind is Kind.BORDER_COLLISION:
        return onset.period_before or onset.period_after
    period = onset.period_after if onset.kind is Kind.FOLD else onset.period_before
    if period < 1 or periods(onset.kind, period) != (onset.period_before, onset.period_after):
        raise NotProved("the periods before and after do not belong to such an onset", refuted=True)
    return period


def _proof(
    float_map: FloatManyMap, kind: Kind, period: int, state: Sequence[Fraction], value: Fraction, bits: int
) -> Generator[Step, None, ManyProof]:
    many, text = float_map.many, "verifying"
    evaluators: BallEvaluators = ball_evaluators(many)
    with precision(bits):
        now: list[Any] = [ball_of(part).mid() for part in state]
        r = ball_of(value).mid()
    points = []

    def advance(_: int) -> None:
        nonlocal now
        points.append([float(part) for part in now])
        now = [part.mid() for part in evaluators.step(*now, r)]

    yield from in_turn(period, bits, text, advance)
    cycle = Cycle(np.array(points), float(value))
    if not np.isfinite(cycle.points).all():
        raise NotProved("the printed point leaves the domain of the formula", refuted=True)
    scales = float_map.scales(cycle.r)
    reach = REACH * max(abs(cycle.r), 1e-3)
    if kind in CROSSED:
        return (yield from _crossing(float_map, kind, cycle, scales, reach, bits))
    try:
        start = rough_start(float_map, kind, cycle)
        rough = yield from polish(many, kind, start, bits, scales, reach)
    except NotFound as error:
        raise NotProved(f"no {kind.value} of period {period} is there: {error}", refuted=True) from error
    return (yield from prove_many(many, kind, rough.place, scales, bits))


def _crossing(
    float_map: FloatManyMap, kind: Kind, cycle: Cycle, scales: Floats, reach: float, bits: int
) -> Generator[Step, None, ManyProof]:
    """Prove a crossing of branches at a printed cycle, by the identity that makes them meet."""
    crossed = identity_of(float_map, cycle.points, cycle.r, scales)
    if crossed is None:
        raise NotProved("no exact identity of the formulas makes two branches meet there", refuted=True)
    if crossed.kind is not kind:
        raise NotProved(f"what happens there is no {kind.value}", refuted=True)
    points = [[arb(float(value)) for value in point] for point in cycle.points]
    matrix = condensed(float_map, cycle.points, cycle.r).monodromy
    vector = np.linalg.svd(matrix - np.eye(len(matrix)))[2][-1]
    start = start_of(crossed, points, vector.tolist(), arb(cycle.r), bits)
    try:
        rough = yield from polish(crossed.seen, Kind.FLIP, start, bits, scales, reach)
    except NotFound as error:
        period = len(points)
        raise NotProved(f"no {kind.value} of period {period} is there: {error}", refuted=True) from error
    return (yield from crossed.prove(float_map.many, rough.place, scales, bits))
