"""An onset of several states as a value: decimals from an enclosure or an estimate, and words."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np

from tinemark.onsets.ball_orbits import fraction_of
from tinemark.onsets.certificates import certified
from tinemark.onsets.decimals import (
    decimal_places,
    enclosure_texts,
    fixed_text,
    leading_power,
    rounded,
)
from tinemark.onsets.many_conservative import preserves_areas
from tinemark.onsets.many_map import Floats, ManyMap
from tinemark.onsets.many_normal_form import Findings
from tinemark.onsets.many_polish import Polished
from tinemark.onsets.many_proof import ManyProof
from tinemark.onsets.results import Kind, Onset, Status

SECOND_PRECISION_BITS = 64
SAFETY = 4
"""Factor on the observed disagreement and the last Newton step, for 95 % coverage or better."""
HOW_ESTIMATED = (
    "the value is solved at two precisions, and its error estimated from the last Newton step and their "
    "difference"
)
REAL = 1e-9
"""Multipliers whose imaginary part is smaller than this are no complex pair."""


def with_certificate(many: ManyMap, onset: Onset, proof: ManyProof, bits: int) -> Onset:
    """A proved onset with its certificate."""
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


def findings_of(proof: ManyProof) -> Findings:
    """What a proof showed, in doubles."""
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


def proved_onset(many: ManyMap, kind: Kind, proof: ManyProof, period: int, digits: int, places: int) -> Onset:
    """An onset with the enclosure a proof found; estimated where the proof calls it degenerate."""
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
        states=enclosed_state_texts(many, proof, digits),
        evidence=proof.evidence,
        consequence=proof.claims.consequence,
    )


def periods(kind: Kind, period: int) -> tuple[int, int]:
    """Periods before and after an onset of a cycle: a closed curve that grows round it leaves its period."""
    if kind is Kind.FLIP:
        return period, 2 * period
    return (0, period) if kind is Kind.FOLD else (period, period)


def estimated_texts(
    many: ManyMap, onset: Onset, value: Fraction, half: Fraction, states: list[Fraction], places: int
) -> Onset:
    """An estimated onset with its decimals filled in, `onset.digits` being those asked for.

    Parameters
    ----------
    half
        Error estimate of the value, at 95 % coverage.
    states
        One cycle point.
    places
        Decimals that the digits asked for take.
    """
    digits = onset.digits
    # Without the digits asked for, show those that hold: the error's leading digit is the last one.
    held = digits if half <= Fraction(1, 10) ** (places - 1) else max(1, -leading_power(half) - 1)
    shown = places if held == digits else held
    if held != digits:
        held = max(1, leading_power(value) + 1 + shown)
    texts = enclosure_texts(value - half, value + half, shown, centre=value)
    return replace(
        onset,
        value=texts.value,
        lower=texts.lower,
        upper=texts.upper,
        digits=held,
        states=_state_texts(many, states, digits),
    )


def estimated_onset(
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
    """An onset that was solved for at two precisions but not proved, and why it is not."""
    before, after = periods(kind, len(solution.points))
    bare = Onset(
        parameter=many.parameter,
        kind=kind,
        period_before=before,
        period_after=after,
        criticality=found.criticality,
        value="0",
        lower="0",
        upper="0",
        digits=digits,
        status=Status.ESTIMATED,
        reason=_reason(many, found, len(solution.points), why),
        evidence=_evidence(many, kind, solution, found, half, scales),
    )
    states = [fraction_of(ball) for ball in solution.points[0]]
    return estimated_texts(many, bare, fraction_of(solution.r), half, states, places)


def _state_texts(many: ManyMap, values: list[Fraction], digits: int) -> tuple[tuple[str, str], ...]:
    texts = []
    for name, value in zip(many.states, values, strict=True):
        # A state that is zero up to rounding is written as zero.
        if abs(value) < Fraction(1, 10) ** (digits + 5):
            value = Fraction(0)
        places = decimal_places(value, digits)
        texts.append((name, fixed_text(rounded(value, places), places) if value else "0"))
    return tuple(texts)


def enclosed_state_texts(many: ManyMap, proof: ManyProof, digits: int) -> tuple[tuple[str, str], ...]:
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
