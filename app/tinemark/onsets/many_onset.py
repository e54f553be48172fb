"""From a rough place to an `Onset` of a map of several states: two precisions, checks, texts."""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from tinemark.onsets.ball_orbits import fraction_of
from tinemark.onsets.decimals import (
    GUARD_DIGITS,
    decimal_places,
    enclosure_texts,
    fixed_text,
    leading_power,
    rounded,
)
from tinemark.onsets.many_cycles import Cycle, condensed, least_period
from tinemark.onsets.many_map import FloatManyMap, Floats, ManyMap
from tinemark.onsets.many_normal_form import Findings, findings
from tinemark.onsets.many_polish import NotFound, Polished, polish, working_bits
from tinemark.onsets.results import Kind, Onset, Status, Step

SECOND_PRECISION_BITS = 64
SAFETY = 4
"""Factor on the observed disagreement and the last Newton step, for 95 % coverage or better."""
ATTEMPTS = 4
NOT_PROVED = (
    "proofs for maps of several states are not made yet: the value is solved at two precisions, "
    "and its error estimated from the last Newton step and their difference"
)
PRESERVES = 1e-9
"""A product of all multipliers this near to 1 means that areas are preserved."""
POINTS_ONE = 1e-9
"""Points of an onset's cycle closer than this share of the state's scale are one point."""


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
    """Polish an onset from a rough cycle and check what it is.

    Parameters
    ----------
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
    many = float_map.many
    vector = critical_vector(float_map, kind, rough)
    first = yield from polish(many, kind, rough.points.tolist(), vector.tolist(), rough.r, 96, scales, reach)
    _check_period(first, scales)
    places = decimal_places(fraction_of(first.r), digits + GUARD_DIGITS)
    wanted = Fraction(1, 10) ** (places - 1)
    bits = working_bits(places, rough.period)
    for _ in range(ATTEMPTS):
        low = yield from _again(many, kind, first, bits, scales, reach)
        high = yield from _again(many, kind, low, bits + SECOND_PRECISION_BITS, scales, reach)
        apart = abs(fraction_of(high.r) - fraction_of(low.r))
        half = SAFETY * (apart + Fraction(high.last_step))
        if half <= wanted:
            break
        bits = bits * 3 // 2
    _check_period(high, scales)
    found = yield from findings(many, kind, high, scales, max(reach, abs(float(high.r))))
    if found.is_degenerate:
        raise NotFound("branches cross or touch here instead of turning round in a fold")
    return Settled(_onset(many, kind, high, found, half, digits, places, scales), high, found)


def critical_vector(float_map: FloatManyMap, kind: Kind, cycle: Cycle) -> Floats:
    """Rough critical vector at the first point: the direction that f^p all but reverses (or keeps)."""
    matrix = condensed(float_map, cycle.points, cycle.r).monodromy
    if not np.isfinite(matrix).all():
        raise NotFound("the orbit left the domain of the formula")
    target = -1.0 if kind is Kind.FLIP else 1.0
    vector: Floats = np.linalg.svd(matrix - target * np.eye(len(matrix)))[2][-1]
    return vector


def _again(
    many: ManyMap, kind: Kind, start: Polished, bits: int, scales: Floats, reach: float
) -> Generator[Step, None, Polished]:
    return (yield from polish(many, kind, start.points, start.vectors[0], start.r, bits, scales, reach))


def _check_period(found: Polished, scales: Floats) -> None:
    points = np.array([[float(value) for value in point] for point in found.points])
    if least_period(points, scales, POINTS_ONE) != len(points):
        raise NotFound("the cycle found has a lower period")


def _onset(
    many: ManyMap,
    kind: Kind,
    solution: Polished,
    found: Findings,
    half: Fraction,
    digits: int,
    places: int,
    scales: Floats,
) -> Onset:
    value = fraction_of(solution.r)
    period = len(solution.points)
    # Without the digits asked for, show those that hold: the error's leading digit is the last one.
    held = digits if half <= Fraction(1, 10) ** (places - 1) else max(1, -leading_power(half) - 1)
    shown = places if held == digits else held
    if held != digits:
        held = max(1, leading_power(value) + 1 + shown)
    texts = enclosure_texts(value - half, value + half, shown, centre=value)
    flip = kind is Kind.FLIP
    return Onset(
        parameter=many.parameter,
        kind=kind,
        period_before=period if flip else 0,
        period_after=2 * period if flip else period,
        criticality=found.criticality,
        value=texts.value,
        lower=texts.lower,
        upper=texts.upper,
        digits=held,
        status=Status.ESTIMATED,
        reason=_reason(found),
        states=_state_texts(many, solution, digits),
        evidence=_evidence(many, kind, solution, found, half, scales),
    )


def _state_texts(many: ManyMap, solution: Polished, digits: int) -> tuple[tuple[str, str], ...]:
    texts = []
    for name, ball in zip(many.states, solution.points[0], strict=True):
        value = fraction_of(ball)
        # A state that is zero up to rounding is written as zero.
        if abs(value) < Fraction(1, 10) ** (digits + 5):
            value = Fraction(0)
        places = decimal_places(value, digits)
        texts.append((name, fixed_text(rounded(value, places), places) if value else "0"))
    return tuple(texts)


def _reason(found: Findings) -> str:
    if found.doubled:
        value = "-1" if found.critical.real < 0 else "1"
        product = abs(complex(np.prod([found.critical, *found.others])))
        why = ", as they must where the map preserves areas" if abs(product - 1) < PRESERVES else ""
        return (
            f"two multipliers meet at {value}{why}, "
            f"so whether the change is soft is not decided; {NOT_PROVED}"
        )
    if not found.is_simple:
        return f"another multiplier lies on the unit circle here; {NOT_PROVED}"
    return NOT_PROVED


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
    critical = "-1" if found.critical.real < 0 else "1"
    if not found.others:
        return f"{critical}, the only one"
    sizes = ", ".join(f"{abs(value):.6g}" for value in found.others)
    where = "none of these on the unit circle" if found.is_simple else "not all off the unit circle"
    return f"{critical}; the others have size {sizes}: {where}"
