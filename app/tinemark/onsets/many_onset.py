"""From a rough place to an `Onset` of a map of several states: polish, proof, and what to say of it."""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from tinemark.onsets.ball_orbits import fraction_of
from tinemark.onsets.certificates import certified
from tinemark.onsets.decimals import (
    GUARD_DIGITS,
    decimal_places,
    enclosure_texts,
    fixed_text,
    leading_power,
    rounded,
)
from tinemark.onsets.many_conservative import preserves_areas
from tinemark.onsets.many_cycles import Cycle, condensed, least_period
from tinemark.onsets.many_map import FloatManyMap, Floats, ManyMap
from tinemark.onsets.many_normal_form import Findings, findings
from tinemark.onsets.many_polish import NotFound, Polished, polish, rough_place, working_bits
from tinemark.onsets.many_proof import ManyProof, prove_many
from tinemark.onsets.many_shooting import Place
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Kind, Onset, Status, Step
from tinemark.systems.errors import SwitchingTouched, Unbounded

FIRST_BITS = 96
SECOND_PRECISION_BITS = 64
SAFETY = 4
"""Factor on the observed disagreement and the last Newton step, for 95 % coverage or better."""
ATTEMPTS = 4
PROOF_ATTEMPTS = 4
LEAST_SIZE = Fraction(1, 10**40)
"""An onset at zero has no significant digits: those of this size are given instead."""
HOW_ESTIMATED = (
    "the value is solved at two precisions, and its error estimated from the last Newton step and their "
    "difference"
)
POINTS_ONE = 1e-9
"""Points of an onset's cycle closer than this share of the state's scale are one point."""
REAL = 1e-9
"""Multipliers whose imaginary part is smaller than this are no complex pair."""


@dataclass(frozen=True)
class Settled:
    """An onset and the high-precision solution it stands on."""

    onset: Onset
    solution: Polished
    found: Findings

    @property
    def cycle(self) -> Cycle:
        """The onset's cycle in doubles."""
        points = np.array([[float(value) for value in point] for point in self.solution.points])
        return Cycle(points, float(self.solution.r))

    @property
    def vector(self) -> Floats:
        """The critical vectors at the cycle's points, in doubles."""
        return np.array([[float(value) for value in vector] for vector in self.solution.vectors])


def settle_onset(
    float_map: FloatManyMap,
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
        Flip, fold or Neimark-Sacker.
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
    try:
        return (yield from _settled(float_map, kind, rough, digits, scales, reach))
    except Unbounded as error:
        raise NotFound(error.message) from error


def _settled(
    float_map: FloatManyMap, kind: Kind, rough: Cycle, digits: int, scales: Floats, reach: float
) -> Generator[Step, None, Settled]:
    many = float_map.many
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
                onset = _proved_onset(many, kind, proof, first.place.period, digits, places)
                if not proof.conservative:
                    onset = _with_certificate(many, onset, proof, bits)
                return Settled(onset, first, _findings_of(proof))
            reason = "the enclosure stayed wider than the digits asked for"
        bits = max(bits * 3 // 2, working_bits(places, first.place.period))
    return reason


def _with_certificate(many: ManyMap, onset: Onset, proof: ManyProof, bits: int) -> Onset:
    parameter, *states = ((_middle(ends), (ends[1] - ends[0]) / 2) for ends in proof.box)
    within = (proof.parameter, *proof.states)
    return certified(
        onset,
        many.system,
        bits,
        parameter,
        list(zip(many.states, states, strict=True)),
        keep_within=within,
    )


def _middle(ends: tuple[Fraction, Fraction]) -> Fraction:
    return (ends[0] + ends[1]) / 2


def _findings_of(proof: ManyProof) -> Findings:
    claims = proof.claims
    return Findings(
        claims.critical,
        claims.others,
        is_simple=True,
        doubled=False,
        crossing=float(claims.speed),
        coefficient=None if claims.coefficient is None else float(claims.coefficient),
        criticality=claims.criticality,
    )


def _proved_onset(
    many: ManyMap, kind: Kind, proof: ManyProof, period: int, digits: int, places: int
) -> Onset:
    texts = enclosure_texts(*proof.parameter, places)
    degenerate = proof.claims.degenerate
    before, after = periods(kind, period)
    return Onset(
        parameter=many.parameter,
        kind=kind,
        period_before=before,
        period_after=after,
        criticality=proof.claims.criticality,
        value=texts.value,
        lower=texts.lower,
        upper=texts.upper,
        digits=digits,
        status=Status.ESTIMATED if degenerate else Status.PROVED,
        reason=degenerate,
        states=_enclosed_state_texts(many, proof, digits),
        evidence=proof.evidence,
        consequence=proof.claims.consequence,
    )


def periods(kind: Kind, period: int) -> tuple[int, int]:
    """Periods before and after an onset of a cycle: a closed curve that grows round it leaves its period."""
    if kind is Kind.FLIP:
        return period, 2 * period
    return (0, period) if kind is Kind.FOLD else (period, period)


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
    return Settled(_estimated_onset(many, kind, high, found, half, digits, places, scales, why), high, found)


def _check_period(found: Polished, scales: Floats) -> None:
    points = np.array([[float(value) for value in point] for point in found.points])
    if least_period(points, scales, POINTS_ONE) != len(points):
        raise NotFound("the cycle found has a lower period")


def _estimated_onset(
    many: ManyMap,
    kind: Kind,
    solution: Polished,
    found: Findings,
    half: Fraction,
    digits: int,
    places: int,
    scales: Floats,
    why: str,
) -> Onset:
    value = fraction_of(solution.r)
    before, after = periods(kind, len(solution.points))
    # Without the digits asked for, show those that hold: the error's leading digit is the last one.
    held = digits if half <= Fraction(1, 10) ** (places - 1) else max(1, -leading_power(half) - 1)
    shown = places if held == digits else held
    if held != digits:
        held = max(1, leading_power(value) + 1 + shown)
    texts = enclosure_texts(value - half, value + half, shown, centre=value)
    return Onset(
        parameter=many.parameter,
        kind=kind,
        period_before=before,
        period_after=after,
        criticality=found.criticality,
        value=texts.value,
        lower=texts.lower,
        upper=texts.upper,
        digits=held,
        status=Status.ESTIMATED,
        reason=_reason(many, found, len(solution.points), why),
        states=_state_texts(many, [fraction_of(ball) for ball in solution.points[0]], digits),
        evidence=_evidence(many, kind, solution, found, half, scales),
    )


def _state_texts(many: ManyMap, values: list[Fraction], digits: int) -> tuple[tuple[str, str], ...]:
    texts = []
    for name, value in zip(many.states, values, strict=True):
        # A state that is zero up to rounding is written as zero.
        if abs(value) < Fraction(1, 10) ** (digits + 5):
            value = Fraction(0)
        places = decimal_places(value, digits)
        texts.append((name, fixed_text(rounded(value, places), places) if value else "0"))
    return tuple(texts)


def _enclosed_state_texts(many: ManyMap, proof: ManyProof, digits: int) -> tuple[tuple[str, str], ...]:
    """Texts of the first cycle point: no more digits than its enclosure holds."""
    texts = []
    for at, (name, (low, high)) in enumerate(zip(many.states, proof.states, strict=True)):
        middle, extent = (low + high) / 2, many.extents[at]
        if low <= 0 <= high:
            # Zero, as far as can be told, has no significant digits: decimals of the state's own size then.
            size = abs(many.starts[at]) if extent is None else extent[1] - extent[0]
            places = decimal_places(size or Fraction(1), digits)
        else:
            places = decimal_places(middle, digits)
        if high > low:
            places = min(places, -leading_power((high - low) / 2) - 2)
        texts.append((name, fixed_text(rounded(middle, places), places)))
    return tuple(texts)


def _reason(many: ManyMap, found: Findings, period: int, why: str) -> str:
    if found.doubled:
        value = "-1" if found.critical.real < 0 else "1"
        preserves = ", as they must where the map preserves areas" if preserves_areas(many, period) else ""
        return (
            f"two multipliers meet at {value}{preserves}, "
            f"so whether the change is soft is not decided; {HOW_ESTIMATED}"
        )
    return f"{why}; {HOW_ESTIMATED}"


def _evidence(
    many: ManyMap, kind: Kind, solution: Polished, found: Findings, half: Fraction, scales: Floats
) -> tuple[tuple[str, str], ...]:
    period = len(solution.points)
    lines = [("least period", _period_words(solution, scales)), ("multipliers", _multiplier_words(found))]
    unit = f"per unit of {many.parameter}"
    if kind is Kind.FLIP and found.coefficient is not None:
        lines.append(("crossing speed", f"the critical multiplier changes by {found.crossing:.6g} {unit}"))
        word = found.criticality.value or "undecided"
        lines.append(("normal form", f"coefficient {found.coefficient:.6g} in scaled states: {word}"))
    if kind is Kind.FOLD and found.coefficient is not None:
        lines.append(("crossing speed", f"the cycle is pushed by {found.crossing:.6g} {unit}"))
        lines.append(("normal form", f"quadratic coefficient {found.coefficient:.6g} in scaled states"))
    bits = f"{solution.bits - SECOND_PRECISION_BITS} and {solution.bits} bits"
    finding = f"{float(half):.1e}: {SAFETY} times the last Newton step and the difference between {bits}"
    lines.append(("error estimate", f"{finding}, all {period} points unknown"))
    return tuple(lines)


def _period_words(solution: Polished, scales: Floats) -> str:
    points = np.array([[float(value) for value in point] for point in solution.points])
    if len(points) == 1:
        return "1: a steady state"
    gaps = np.max(np.abs(points[1:] - points[0]) / scales, axis=1)
    nearest = f"{gaps.min():.2g} of the state's range"
    return f"{len(points)}: no other point comes nearer to the first than {nearest}"


def _multiplier_words(found: Findings) -> str:
    if abs(found.critical.imag) > REAL:
        critical = f"{found.critical.real:.6g} and {abs(found.critical.imag):.6g} i, both signs"
    else:
        critical = "-1" if found.critical.real < 0 else "1"
    if not found.others:
        return f"{critical}, no others"
    sizes = ", ".join(f"{abs(value):.6g}" for value in found.others)
    where = "none of these on the unit circle" if found.is_simple else "not all off the unit circle"
    return f"{critical}; the others have size {sizes}: {where}"
