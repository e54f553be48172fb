"""From a rough place to an `Onset` of a map of several states: polish, proof, and what to say of it."""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from tinemark.onsets.ball_orbits import fraction_of
from tinemark.onsets.cycle_map import CycleMap
from tinemark.onsets.decimals import GUARD_DIGITS, decimal_places
from tinemark.onsets.many_cycles import Cycle, condensed, least_period
from tinemark.onsets.many_map import FloatManyMap, Floats, ManyMap
from tinemark.onsets.many_normal_form import Findings, findings
from tinemark.onsets.many_polish import NotFound, Polished, polish, rough_place, working_bits
from tinemark.onsets.many_preparation import worked_out
from tinemark.onsets.many_proof import prove_many
from tinemark.onsets.many_shooting import Place
from tinemark.onsets.many_texts import (
    REAL,
    SAFETY,
    SECOND_PRECISION_BITS,
    estimated_onset,
    findings_of,
    proved_onset,
    with_certificate,
)
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Kind, Onset, Step
from tinemark.systems.errors import SwitchingTouched, Unbounded

FIRST_BITS = 96
ATTEMPTS = 4
PROOF_ATTEMPTS = 4
LEAST_SIZE = Fraction(1, 10**40)
"""An onset at zero has no significant digits: those of this size are given instead."""
POINTS_ONE = 1e-9
"""Points of an onset's cycle closer than this share of the state's scale are one point."""


@dataclass(frozen=True)
class Settled:
    """An onset, with its cycle and the critical vectors at the cycle's points in doubles."""

    onset: Onset
    cycle: Cycle
    vector: Floats
    found: Findings


def _settled_on(onset: Onset, solution: Polished, found: Findings) -> Settled:
    points = np.array([[float(value) for value in point] for point in solution.points])
    vectors = np.array([[float(value) for value in vector] for vector in solution.vectors])
    return Settled(onset, Cycle(points, float(solution.r)), vectors, found)


def settle_onset(
    float_map: CycleMap,
    kind: Kind,
    rough: Cycle,
    digits: int,
    scales: Floats,
    reach: float,
) -> Generator[Step, None, Settled]:
    """Polish an onset from a rough cycle, and prove it or say why it is only estimated.

    Parameters
    ----------
    kind
        Flip, fold or Neimark-Sacker; or a crossing of branches, for which the kind of the answer is the one
        of the two that holds; or a border collision, where the rough cycle's first point touches.
    digits
        Significant digits wanted of the parameter.
    scales
        Length typical of each state.
    reach
        How far the parameter may lie from the rough cycle's.

    Raises
    ------
    NotFound
        No onset of this kind and least period in reach.
    """
    if not isinstance(float_map, FloatManyMap):
        from tinemark.onsets.flow_onset import settle_flow

        return (yield from settle_flow(float_map, kind, rough, digits, scales, reach))
    if kind is Kind.BORDER_COLLISION:
        from tinemark.onsets.many_borders import settle_border

        return (yield from settle_border(float_map, rough, digits, scales, reach))
    if kind in (Kind.TRANSCRITICAL, Kind.PITCHFORK):
        from tinemark.onsets.many_branch_points import settle_branch_point

        return (yield from settle_branch_point(float_map, rough, digits, scales, reach))
    try:
        return (yield from _settled(float_map, kind, rough, digits, scales, reach))
    except Unbounded as error:
        raise NotFound(error.message) from error


def _settled(
    float_map: FloatManyMap, kind: Kind, rough: Cycle, digits: int, scales: Floats, reach: float
) -> Generator[Step, None, Settled]:
    many = float_map.many
    yield from worked_out(many, 2)
    start = rough_start(float_map, kind, rough)
    first = yield from polish(many, kind, start, FIRST_BITS, scales, reach)
    _check_period(first, scales)
    places = decimal_places(max(abs(fraction_of(first.r)), LEAST_SIZE), digits + GUARD_DIGITS)
    bits = working_bits(places, rough.period)
    proved = yield from _proved(many, kind, first, bits, digits, places, scales, reach)
    if isinstance(proved, Settled):
        return proved
    return (yield from _estimated(many, kind, first, bits, digits, places, scales, reach, proved))


def rough_start(float_map: FloatManyMap, kind: Kind, cycle: Cycle) -> Place:
    """The defining equations' unknowns as doubles tell them.

    Raises
    ------
    NotFound
        The cycle cannot be carried, or has no complex pair of multipliers.
    """
    matrix = condensed(float_map, cycle.points, cycle.r).monodromy
    if not np.isfinite(matrix).all():
        raise NotFound("the orbit left the domain of the formula")
    angle: tuple[float, float] | None = None
    if kind is Kind.NEIMARK_SACKER:
        values, vectors = np.linalg.eig(matrix)
        pairs = [place for place, value in enumerate(values) if value.imag > REAL]
        if not pairs:
            raise NotFound("the cycle has no complex pair of multipliers there")
        critical = min(pairs, key=lambda place: abs(abs(values[place]) - 1))
        value, vector = values[critical], vectors[:, critical]
        angle = (float(value.real / abs(value)), float(value.imag / abs(value)))
        directions = [vector.real, vector.imag]
    else:
        target = -1.0 if kind is Kind.FLIP else 1.0
        directions = [np.linalg.svd(matrix - target * np.eye(len(matrix)))[2][-1]]
    return rough_place(
        float_map.many,
        cycle.points.tolist(),
        [direction.tolist() for direction in directions],
        cycle.r,
        angle,
        FIRST_BITS,
    )


def _proved(
    many: ManyMap,
    kind: Kind,
    first: Polished,
    bits: int,
    digits: int,
    places: int,
    scales: Floats,
    reach: float,
) -> Generator[Step, None, Settled | str]:
    """The proved onset, or why there is none."""
    reason = ""
    for _ in range(PROOF_ATTEMPTS):
        first = yield from polish(many, kind, first.place, bits, scales, reach)
        try:
            proof = yield from prove_many(many, kind, first.place, scales, bits)
        except SwitchingTouched as error:
            return error.message
        except NotProved as error:
            if error.refuted:
                raise NotFound(error.reason) from error
            reason = error.reason
        else:
            low, high = proof.parameter
            if not low <= 0 <= high:
                # A value that comes out smaller than thought needs more decimals.
                places = max(places, decimal_places((low + high) / 2, digits + GUARD_DIGITS))
            if high - low <= Fraction(1, 10) ** (places + 1):
                onset = proved_onset(many, kind, proof, first.place.period, digits, places)
                onset = with_certificate(many, onset, proof, bits)
                return _settled_on(onset, first, findings_of(proof))
            reason = "the enclosure stayed wider than the digits asked for"
        bits = max(bits * 3 // 2, working_bits(places, first.place.period))
    return reason


def _estimated(
    many: ManyMap,
    kind: Kind,
    first: Polished,
    bits: int,
    digits: int,
    places: int,
    scales: Floats,
    reach: float,
    why: str,
) -> Generator[Step, None, Settled]:
    wanted = Fraction(1, 10) ** (places - 1)
    for _ in range(ATTEMPTS):
        low = yield from polish(many, kind, first.place, bits, scales, reach)
        high = yield from polish(many, kind, low.place, bits + SECOND_PRECISION_BITS, scales, reach)
        apart = abs(fraction_of(high.r) - fraction_of(low.r))
        half = SAFETY * (apart + Fraction(high.last_step))
        if half <= wanted:
            break
        bits = bits * 3 // 2
    _check_period(high, scales)
    found = yield from findings(many, kind, high, scales, max(reach, abs(float(high.r))))
    if found.is_degenerate:
        raise NotFound("branches cross or touch here instead of turning round in a fold")
    onset = estimated_onset(many, kind, high, found, half, digits, places, scales, why)
    return _settled_on(onset, high, found)


def _check_period(found: Polished, scales: Floats) -> None:
    points = np.array([[float(value) for value in point] for point in found.points])
    if least_period(points, scales, POINTS_ONE) != len(points):
        raise NotFound("the cycle found has a lower period")
