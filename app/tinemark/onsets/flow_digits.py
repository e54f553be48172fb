"""More digits of an onset of a driven or free-running system, and its proof where it closes.

An estimate in doubles is raised by Newton's method on the defining equations, the return map integrated by
Taylor series at growing precision. Order and steps follow from the precision, so two precisions are two
orders and two sequences of steps as well; the error is told from how far they disagree.
"""

from __future__ import annotations

import math
from collections.abc import Generator
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from flint import arb

from tinemark.onsets.ball_orbits import fraction_of, precision
from tinemark.onsets.decimals import GUARD_DIGITS, decimal_places
from tinemark.onsets.flow_proofs import prove
from tinemark.onsets.flow_proofs_map import IntegratedMap, TooLong, integrated_map
from tinemark.onsets.many_map import Floats
from tinemark.onsets.many_polish import NotFound, Polished, polish
from tinemark.onsets.many_proof import ManyProof
from tinemark.onsets.many_shooting import Place
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Kind, Step
from tinemark.systems.errors import SwitchingTouched, Unbounded
from tinemark.systems.system import System

GUARD_BITS = 30
"""Bits beyond the digits wanted: what the integration loses it makes up for by itself."""
LEAST_BITS = 96
"""A box must be small for what is shown on all of it: fewer bits would not pay."""
SECOND_PRECISION_BITS = 40
SAFETY = 4
"""Factor on the observed disagreement and the last Newton step, for 95 % coverage or better."""
PROOF_ATTEMPTS = 2
LEAST_SIZE = Fraction(1, 10**40)
"""An onset at zero has no significant digits: those of this size are given instead."""


@dataclass(frozen=True)
class MoreDigits:
    """An onset to more digits.

    Attributes
    ----------
    place
        Points, critical vectors, parameter and angle, exact balls.
    value, half
        The parameter, and its error: proved when there is a proof, otherwise estimated.
    proof
        What was shown, or None.
    reason
        Why there is no proof.
    bits
        Precisions the value was solved at.
    """

    place: Place
    value: Fraction
    half: Fraction
    proof: ManyProof | None
    reason: str
    bits: tuple[int, ...]


def more_digits(
    system: System,
    parameter: str,
    kind: Kind,
    points: Floats,
    vectors: Floats,
    r: float,
    digits: int,
    scales: Floats,
    reach: float,
    angle: float | None = None,
) -> Generator[Step, None, MoreDigits]:
    """Raise an estimated onset to the digits wanted, and prove it where that closes.

    Parameters
    ----------
    kind
        Flip, fold or Neimark-Sacker.
    points, vectors
        (p, n): cycle points and the critical vector at each, complex for a Neimark-Sacker point.
    r
        The parameter.
    digits
        Significant digits wanted of the parameter.
    scales
        Length typical of each state.
    reach
        How far the parameter may lie from the estimate.
    angle
        Of the critical multiplier, for a Neimark-Sacker point.

    Yields
    ------
    Step
        Progress, at most a few tenths of a second apart for a few states.

    Raises
    ------
    NotFound
        Why the digits could not be had: the estimate stands as it is.
    """
    integrated = integrated_map(system, parameter)
    places = decimal_places(max(abs(Fraction(r)), LEAST_SIZE), digits + GUARD_DIGITS)
    bits = max(LEAST_BITS, math.ceil(places * math.log2(10)) + GUARD_BITS)
    try:
        start = start_place(points, vectors, r, angle, bits)
        first = yield from polish(integrated, kind, start, bits, scales, reach)
        proof, reason, first = yield from _proof(integrated, kind, first, places, scales, reach)
        if proof is not None:
            low, high = proof.parameter
            return MoreDigits(first.place, (low + high) / 2, (high - low) / 2, proof, "", (first.bits,))
        return (yield from _estimated(integrated, kind, first, scales, reach, reason))
    except (NotProved, SwitchingTouched, Unbounded) as error:
        raise NotFound(_message(error)) from error


def _message(error: NotProved | SwitchingTouched | Unbounded) -> str:
    return error.reason if isinstance(error, NotProved) else error.message


def start_place(points: Floats, vectors: Floats, r: float, angle: float | None, bits: int) -> Place:
    """An estimate in doubles as a place; the critical vectors come out with length 1 at the first point."""
    length = float(np.sqrt(np.sum(np.abs(vectors[0]) ** 2)))
    unit = np.asarray(vectors) / length
    with precision(bits):
        along: list[list[list[object]]] = []
        for vector in unit:
            parts = [vector] if angle is None else [vector.real, vector.imag]
            along.append([[arb(float(value)) for value in part] for part in parts])
        pair = None if angle is None else (arb(float(np.cos(angle))), arb(float(np.sin(angle))))
        exact = [[arb(float(value)) for value in point] for point in points]
        return Place(exact, along, arb(float(r)), pair)


def _proof(
    integrated: IntegratedMap, kind: Kind, first: Polished, places: int, scales: Floats, reach: float
) -> Generator[Step, None, tuple[ManyProof | None, str, Polished]]:
    """The proof or why there is none, and the solution it stands on."""
    reason = ""
    for attempt in range(PROOF_ATTEMPTS):
        if attempt:
            bits = first.bits * 3 // 2
            first = yield from polish(integrated, kind, first.place, bits, scales, reach)
        try:
            proof = yield from prove(integrated, kind, first.place, scales, first.bits)
        except TooLong:
            raise
        except NotProved as error:
            if error.refuted:
                raise NotFound(error.reason) from error
            reason = error.reason
            continue
        low, high = proof.parameter
        if high - low > Fraction(1, 10) ** (places + 1):
            reason = "the enclosure stayed wider than the digits asked for"
        elif not proof.claims.degenerate or attempt == PROOF_ATTEMPTS - 1:
            return proof, "", first
    return None, reason, first


def _estimated(
    integrated: IntegratedMap, kind: Kind, low: Polished, scales: Floats, reach: float, reason: str
) -> Generator[Step, None, MoreDigits]:
    bits = low.bits + SECOND_PRECISION_BITS
    high = yield from polish(integrated, kind, low.place, bits, scales, reach)
    apart = abs(fraction_of(high.r) - fraction_of(low.r))
    half = SAFETY * (apart + Fraction(high.last_step))
    return MoreDigits(high.place, fraction_of(high.r), half, None, reason, (low.bits, high.bits))
