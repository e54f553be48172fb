"""From the rough place where branches cross to an `Onset`: a pitchfork or a transcritical point.

It is proved where an identity of the formulas makes the branches meet (a symmetry, or a plane that cycles
stay on), and estimated otherwise.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import numpy as np
from flint import arb

from tinemark.onsets.ball_orbits import fraction_of
from tinemark.onsets.decimals import GUARD_DIGITS, decimal_places
from tinemark.onsets.many_crossings import CrossingPoint, crossing_point
from tinemark.onsets.many_cycles import Cycle, condensed, eigenvalues, least_period
from tinemark.onsets.many_invariant import Plane, map_beside, plane_of
from tinemark.onsets.many_map import FloatManyMap, Floats, ManyMap
from tinemark.onsets.many_normal_form import Findings
from tinemark.onsets.many_onset import LEAST_SIZE, POINTS_ONE, PROOF_ATTEMPTS, Settled
from tinemark.onsets.many_polish import NotFound, polish, rough_place, working_bits
from tinemark.onsets.many_proof import ManyProof
from tinemark.onsets.many_shooting import Place
from tinemark.onsets.many_symmetry import Mirrored, mirrored_map, symmetry_of
from tinemark.onsets.many_symmetry_proofs import pitchfork_words, prove_pitchfork
from tinemark.onsets.many_texts import (
    HOW_ESTIMATED,
    SAFETY,
    SECOND_PRECISION_BITS,
    estimated_texts,
    findings_of,
    proved_onset,
    with_certificate,
)
from tinemark.onsets.many_transcritical_proofs import prove_transcritical, transcritical_words
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Criticality, Kind, Onset, Status, Step
from tinemark.systems.errors import SwitchingTouched, Unbounded

FIRST_BITS = 128
STRAIGHT = 1e-9
"""A crossing whose curvature in scaled states is smaller than this is taken for a pitchfork's."""
NO_IDENTITY = (
    "branches cross only where an equality holds exactly, which no enclosure can show, and no identity of "
    "the formulas that makes it hold was recognised"
)


@dataclass(frozen=True)
class Crossed:
    """What makes branches meet: a symmetry or a plane, and the regular system that stands for the crossing.

    Attributes
    ----------
    seen
        The map of which it is a flip.
    """

    kind: Kind
    seen: ManyMap
    mirrored: Mirrored | None
    plane: Plane | None

    def prove(
        self, many: ManyMap, middle: Place, scales: Floats, bits: int
    ) -> Generator[Step, None, ManyProof]:
        """See `prove_pitchfork` and `prove_transcritical`."""
        if self.mirrored is not None:
            return (yield from prove_pitchfork(many, self.mirrored, middle, scales, bits))
        assert self.plane is not None
        return (yield from prove_transcritical(many, self.plane, middle, scales, bits))

    def words(self, many: ManyMap, period: int, proof: ManyProof) -> str:
        """What follows past the crossing."""
        if self.mirrored is not None:
            return pitchfork_words(many, self.mirrored, period, proof.claims, proof.conservative)
        assert self.plane is not None
        return transcritical_words(many, self.plane, period, proof)


def identity_of(float_map: FloatManyMap, points: Floats, r: float, scales: Floats) -> Crossed | None:
    """The exact identity that makes branches cross at a cycle with multiplier 1; None where none is found."""
    many = float_map.many
    mirrored = symmetry_of(float_map, points, r, scales)
    if mirrored is not None:
        return Crossed(Kind.PITCHFORK, mirrored_map(many, mirrored), mirrored, None)
    plane = plane_of(float_map, points, scales)
    if plane is not None:
        return Crossed(Kind.TRANSCRITICAL, map_beside(many, plane), None, plane)
    return None


def settle_branch_point(
    float_map: FloatManyMap, rough: Cycle, digits: int, scales: Floats, reach: float
) -> Generator[Step, None, Settled]:
    """Polish a crossing of branches, and prove it where an identity makes it generic.

    Raises
    ------
    NotFound
        No branches cross in reach.
    """
    try:
        return (yield from _settled(float_map, rough, digits, scales, reach))
    except Unbounded as error:
        raise NotFound(error.message) from error


def _settled(
    float_map: FloatManyMap, rough: Cycle, digits: int, scales: Floats, reach: float
) -> Generator[Step, None, Settled]:
    first = yield from crossing_point(float_map, rough, FIRST_BITS, scales, reach)
    points = _floats(first.points)
    if least_period(points, scales, POINTS_ONE) != len(points):
        raise NotFound("the cycle found has a lower period")
    cycle = Cycle(points, float(first.r))
    places = decimal_places(max(abs(fraction_of(first.r)), LEAST_SIZE), digits + GUARD_DIGITS)
    bits = working_bits(places, rough.period)
    crossed = identity_of(float_map, points, cycle.r, scales)
    reason = NO_IDENTITY
    if crossed is not None:
        proved = yield from _proved(float_map.many, crossed, first, bits, digits, places, scales, reach)
        if isinstance(proved, tuple):
            onset, findings = proved
            return Settled(onset, cycle, np.array([[float(v) for v in first.vector]]), findings)
        reason = proved
    return (yield from _estimated(float_map, first, digits, places, bits, scales, reach, crossed, reason))


def _proved(
    many: ManyMap,
    crossed: Crossed,
    first: CrossingPoint,
    bits: int,
    digits: int,
    places: int,
    scales: Floats,
    reach: float,
) -> Generator[Step, None, tuple[Onset, Findings] | str]:
    reason, period = "", len(first.points)
    place = start_of(crossed, first.points, first.vector, first.r, FIRST_BITS)
    for _ in range(PROOF_ATTEMPTS):
        try:
            found = yield from polish(crossed.seen, Kind.FLIP, place, bits, scales, reach)
            proof = yield from crossed.prove(many, found.place, scales, bits)
        except SwitchingTouched as error:
            return error.message
        except NotFound as error:
            return f"more meets there than two branches that cross: {error}"
        except NotProved as error:
            if error.refuted:
                return error.reason
            reason = error.reason
        else:
            low, high = proof.parameter
            if not low <= 0 <= high:
                places = max(places, decimal_places((low + high) / 2, digits + GUARD_DIGITS))
            if high - low <= Fraction(1, 10) ** (places + 1):
                onset = proved_onset(many, crossed.kind, proof, period, digits, places)
                onset = replace(onset, consequence=crossed.words(many, period, proof))
                return with_certificate(many, onset, proof, bits), findings_of(proof)
            reason = "the enclosure stayed wider than the digits asked for"
        bits = max(bits * 3 // 2, working_bits(places, period))
    return reason


def start_of(crossed: Crossed, points: list[list[Any]], vector: list[Any], r: Any, bits: int) -> Place:
    """The unknowns of the regular system at a rough place of the crossing."""
    direction = [float(value) for value in vector]
    if crossed.mirrored is not None:
        points = points[: crossed.mirrored.steps]
    else:
        assert crossed.plane is not None
        fixed = crossed.plane.fixed
        points = [[arb(0) if at in fixed else value for at, value in enumerate(point)] for point in points]
        direction = [value if at in fixed else 0.0 for at, value in enumerate(direction)]
    return rough_place(crossed.seen, points, [direction], r, None, bits)


def _estimated(
    float_map: FloatManyMap,
    first: CrossingPoint,
    digits: int,
    places: int,
    bits: int,
    scales: Floats,
    reach: float,
    crossed: Crossed | None,
    reason: str,
) -> Generator[Step, None, Settled]:
    """A crossing that could not be proved: solved at two precisions."""
    many, cycle = float_map.many, Cycle(_floats(first.points), float(first.r))
    low = yield from crossing_point(float_map, cycle, bits, scales, reach)
    high = yield from crossing_point(float_map, cycle, bits + SECOND_PRECISION_BITS, scales, reach)
    half = SAFETY * (abs(fraction_of(high.r) - fraction_of(low.r)) + Fraction(high.last_step))
    straight = abs(float(high.bend)) < STRAIGHT
    kind = crossed.kind if crossed is not None else Kind.PITCHFORK if straight else Kind.TRANSCRITICAL
    period = len(high.points)
    values = eigenvalues(condensed(float_map, cycle.points, cycle.r).monodromy)
    values.sort(key=lambda value: abs(value - 1))
    what = (
        f"a pair of cycles of period {period} branches off"
        if kind is Kind.PITCHFORK
        else f"two cycles of period {period} cross"
    )
    onset = estimated_texts(
        many,
        Onset(
            parameter=many.parameter,
            kind=kind,
            period_before=period,
            period_after=period,
            criticality=Criticality.UNDECIDED if kind is Kind.PITCHFORK else Criticality.NOT_APPLICABLE,
            value="0",
            lower="0",
            upper="0",
            digits=digits,
            status=Status.ESTIMATED,
            reason=f"{reason}; {HOW_ESTIMATED}",
            evidence=(
                ("the branches miss each other by at most", f"{high.unfolding:.2g} of the states' range"),
                ("multiplier", "+1, by the equations solved"),
                ("error estimate", f"{float(half):.1e}"),
            ),
            consequence=what,
        ),
        fraction_of(high.r),
        half,
        [fraction_of(value) for value in high.points[0]],
        places,
    )
    findings = Findings(complex(1), tuple(values[1:]), False, False, 0.0, float(high.bend), onset.criticality)
    return Settled(onset, cycle, np.array([[float(v) for v in high.vector]]), findings)


def _floats(points: list[list[Any]]) -> Floats:
    return np.array([[float(value) for value in point] for point in points])
