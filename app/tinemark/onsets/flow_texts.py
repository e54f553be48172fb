"""An onset of equations as a value: only decimals that hold, and words for what was seen."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from tinemark.onsets.cycle_map import Floats
from tinemark.onsets.decimals import decimal_places, enclosure_texts, fixed_text, leading_power, rounded
from tinemark.onsets.flow_map import FINEST, FlowMap, Level
from tinemark.onsets.flow_polish import Solution
from tinemark.onsets.flow_symmetry import symmetries, symmetry_words
from tinemark.onsets.many_normal_form import Findings
from tinemark.onsets.results import Criticality, Kind, Onset, Status

HOW_ESTIMATED = "integrated in double precision, and the error told by other step sizes and another method"
REAL = 1e-9


@dataclass(frozen=True)
class Judged:
    """The value and the cycle's first point, their errors at 95 % coverage, and the levels that told them."""

    value: float
    half: float
    point: Floats
    point_half: Floats
    levels: tuple[Level, ...]


def periods(kind: Kind, period: int) -> tuple[int, int]:
    """Periods before and after an onset."""
    if kind is Kind.FLIP:
        return period, 2 * period
    return (0, period) if kind is Kind.FOLD else (period, period)


def estimated(
    flow: FlowMap, kind: Kind, found: Solution, seen: Findings, judged: Judged, digits: int, scales: Floats
) -> Onset:
    """The onset, its value to the digits asked for or to as many as hold."""
    value, half = Fraction(judged.value), Fraction(judged.half)
    places = min(_places_that_hold(half), decimal_places(value, digits) if value else digits)
    texts = enclosure_texts(value - half, value + half, places, centre=value)
    before, after = periods(kind, found.cycle.period)
    system = flow.many.system
    return Onset(
        parameter=flow.many.parameter,
        kind=kind,
        period_before=before,
        period_after=after,
        criticality=seen.criticality,
        value=texts.value,
        lower=texts.lower,
        upper=texts.upper,
        digits=max(1, leading_power(value) + 1 + places),
        status=Status.ESTIMATED,
        reason=_reason(seen),
        states=tuple(
            (name, _state_text(float(x), float(error), digits))
            for name, x, error in zip(system.state_names, judged.point, judged.point_half, strict=True)
        ),
        evidence=_evidence(flow, kind, found, seen, judged, scales),
        consequence=_consequence(flow, kind, found, seen),
    )


def _places_that_hold(half: Fraction) -> int:
    """Decimals such that the last one is off by at most one, rounding included."""
    return -leading_power(2 * half) - 1 if half > 0 else 17


def _state_text(value: float, half: float, digits: int) -> str:
    exact, error = Fraction(value), Fraction(max(half, 1e-17))
    places = _places_that_hold(error)
    if abs(exact) > error:
        places = min(places, decimal_places(exact, digits))
    text = fixed_text(rounded(exact, places), places)
    return "0" if Fraction(text) == 0 else text


def _reason(seen: Findings) -> str:
    if seen.doubled:
        value = "-1" if seen.critical.real < 0 else "1"
        return (
            f"two multipliers meet at {value}, so whether the change is soft is not decided; {HOW_ESTIMATED}"
        )
    return HOW_ESTIMATED


def _evidence(
    flow: FlowMap, kind: Kind, found: Solution, seen: Findings, judged: Judged, scales: Floats
) -> tuple[tuple[str, str], ...]:
    lines = [("least period", _period_words(flow, found, scales)), ("multipliers", _multiplier_words(seen))]
    unit = f"per unit of {flow.many.parameter}"
    if seen.coefficient is not None:
        if kind is Kind.FOLD:
            lines.append(("crossing speed", f"the cycle is pushed by {seen.crossing:.6g} {unit}"))
            lines.append(("normal form", f"quadratic coefficient {seen.coefficient:.4g} in scaled states"))
        else:
            what = (
                "the modulus of the critical pair"
                if kind is Kind.NEIMARK_SACKER
                else "the critical multiplier"
            )
            lines.append(("crossing speed", f"{what} changes by {seen.crossing:.6g} {unit}"))
            word = seen.criticality.value
            text = f"coefficient {seen.coefficient:.4g} in scaled states"
            lines.append(("normal form", f"{text}: {word}" if word else text))
    levels = "; ".join(level.words for level in (FINEST, *judged.levels))
    lines.append(("error estimate", f"{judged.half:.1e}, from the values of {levels}, all points unknown"))
    return tuple(lines)


def _period_words(flow: FlowMap, found: Solution, scales: Floats) -> str:
    points = found.cycle.points
    sample = "strobe period" if flow.many.system.kind == "driven" else "passage of the section"
    if len(points) == 1:
        return f"1: the orbit closes after one {sample}"
    gaps = np.max(np.abs(points[1:] - points[0]) / scales, axis=1)
    return (
        f"{len(points)}: no other point comes nearer to the first than {gaps.min():.2g} of the state's range"
    )


def _multiplier_words(seen: Findings) -> str:
    if abs(seen.critical.imag) > REAL:
        critical = f"{seen.critical.real:.6g} and {abs(seen.critical.imag):.6g} i, both signs"
    else:
        critical = "-1" if seen.critical.real < 0 else "1"
    if not seen.others:
        return f"{critical}, no others"
    sizes = ", ".join(f"{abs(value):.4g}" for value in seen.others)
    where = "none of these on the unit circle" if seen.is_simple else "not all off the unit circle"
    return f"{critical}; the others have size {sizes}: {where}"


def _consequence(flow: FlowMap, kind: Kind, found: Solution, seen: Findings) -> str:
    system, period = flow.many.system, found.cycle.period
    if kind is Kind.PITCHFORK:
        broken = next(iter(symmetries(system, flow.many.parameter, found.cycle.r)), None)
        which = f"the symmetry {symmetry_words(system, broken)} breaks" if broken else "a symmetry breaks"
        how = {
            Criticality.SUPERCRITICAL: "two mirrored cycles take over softly",
            Criticality.SUBCRITICAL: "two mirrored unstable cycles meet it there, and orbits jump away",
        }.get(seen.criticality, "two mirrored cycles meet it there")
        return (
            f"{which}: the cycle of period {period} that is its own mirror image changes stability, and {how}"
        )
    if kind is Kind.NEIMARK_SACKER and seen.criticality is Criticality.SUBCRITICAL:
        return "the change is a jump: the closed curve around the cycle is unstable"
    return ""
