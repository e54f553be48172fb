"""Newton polishing of an onset in high precision, then its proof: from a rough place to an `Onset`.

One pass with all derivatives gives a Newton step and an inverse Jacobian. Further corrections come
from the much cheaper rigorous evaluation at a point, through the same inverse (chord steps); the last
of them is already the -C F(m) that the Krawczyk test needs.
"""

from __future__ import annotations

import math
from collections.abc import Generator
from dataclasses import dataclass
from fractions import Fraction
from itertools import pairwise
from typing import Any

import flint
from flint import arb

from tinemark.onsets.ball_orbits import BallLoops, ball_loops, ball_of, fraction_of, in_chunks, precision
from tinemark.onsets.branches import Cycle, crossing_at, cycle_with_multiplier, least_period
from tinemark.onsets.certificates import certified
from tinemark.onsets.decimals import (
    GUARD_DIGITS,
    decimal_places,
    enclosure_texts,
    fixed_text,
    leading_power,
    places_shown,
    rounded,
)
from tinemark.onsets.float_map import float_map
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.proofs import (
    TARGETS,
    Box,
    Inverse,
    NotProved,
    Proof,
    box_around,
    correction_at,
    inverse_of,
    prove,
)
from tinemark.onsets.results import Criticality, Kind, Onset, Status, Step
from tinemark.systems.errors import SwitchingTouched, Unbounded

ATTEMPTS = 4
MOST_STEPS = 30
SLOW_STEPS = 6
"""So many Newton steps in a row that each shrink by a factor near a constant: the equations are singular."""
LEAST_SIZE = Fraction(1, 10**40)
"""An onset at zero has no significant digits: it is worked out as one of this size."""


@dataclass(frozen=True)
class Rough:
    """Where an onset is thought to be: kind, period of the cycle, a cycle point, the parameter."""

    kind: Kind
    period: int
    x: Fraction
    r: Fraction


@dataclass(frozen=True)
class Settled:
    """An onset with the exact cycle point and parameter it was polished to, for what follows on it."""

    onset: Onset
    x: Fraction
    r: Fraction


class Lost(Exception):
    """Newton's method left the neighbourhood or went to another cycle; says why."""


def settle_onset(
    one: OneMap, rough: Rough, digits: int, *, reach: Fraction | None = None, show_after: int = 0
) -> Generator[Step, None, Settled]:
    """Polish an onset from a rough place and prove it.

    Parameters
    ----------
    digits
        Significant digits wanted of the parameter value.
    reach
        How far from the rough parameter value the onset may lie; beyond, the search counts as lost.
    show_after
        Steps from the rough cycle point to the one that the onset shows.

    Returns
    -------
    Settled
        With status proved, or estimated with the reason.

    Raises
    ------
    Lost
        There is no such onset in reach.
    """
    loops = ball_loops(one)
    places = decimal_places(max(abs(rough.r), LEAST_SIZE), digits + GUARD_DIGITS)
    wanted = Fraction(1, 10) ** (places + 1)
    bits = first_bits(rough, max(places, digits))
    reason = ""
    last_step: float | None = None
    failures = 0
    while failures < ATTEMPTS:
        try:
            polished = yield from _polish(loops, rough, float(wanted), bits, reach)
        except SwitchingTouched as error:
            reason = error.message
            break
        except NotProved as error:
            raise Lost(error.reason) from error
        last_step = polished.last_step
        x = yield from _steps_on(loops, polished, show_after, bits)
        try:
            rough = Rough(rough.kind, rough.period, fraction_of(x), fraction_of(polished.r))
        except Unbounded as error:
            raise Lost(error.message) from error
        finer = decimal_places(max(abs(rough.r), LEAST_SIZE), digits + GUARD_DIGITS)
        if show_after or finer > places:
            # The point to show is proved itself; a smaller value than thought needs more decimals.
            show_after, places = 0, max(places, finer)
            wanted = Fraction(1, 10) ** (places + 1)
            bits = max(bits, first_bits(rough, max(places, digits)))
            continue
        try:
            correction = polished.correction
            box = box_around(polished.x, polished.r, correction, polished.inverse, bits)
            proof = yield from prove(loops, rough.kind, rough.period, box, polished.inverse, correction, bits)
        except SwitchingTouched as error:
            reason = error.message
            break
        except NotProved as error:
            if error.refuted:
                raise Lost(error.reason) from error
            reason = error.reason
            failures, bits = failures + 1, bits * 3 // 2
            continue
        if proof.parameter[1] - proof.parameter[0] > wanted:
            reason = "the enclosure stayed wider than the digits asked for"
            failures, bits = failures + 1, bits * 3 // 2
            continue
        onset = _with_certificate(one, _onset_of(one, rough, proof, digits, places), box, proof, bits)
        return Settled(onset, rough.x, rough.r)
    else:
        # A regular onset is proved with bits enough. What is left are pitchforks, transcritical points and
        # tangencies of higher order, where the equations are singular: none of them is an onset of this kind.
        raise Lost(f"no isolated {rough.kind.value} there: {reason}")
    onset = yield from _touching(one, rough, digits, wanted, bits, last_step, reason)
    return Settled(onset, rough.x, rough.r)


def first_bits(rough: Rough, places: int) -> int:
    """Precision for a first attempt: the digits wanted, and room for what a long cycle loses."""
    return math.ceil(max(places, 10) * math.log2(10)) + 40 + 3 * rough.period.bit_length()


@dataclass(frozen=True)
class _Polished:
    x: Any
    r: Any
    inverse: Inverse
    correction: Any
    last_step: float


def _polish(
    loops: BallLoops, rough: Rough, wanted: float, bits: int, reach: Fraction | None
) -> Generator[Step, None, _Polished]:
    with precision(bits):
        x, r = ball_of(rough.x).mid(), ball_of(rough.r).mid()
        start_r = r
        far = None if reach is None else ball_of(reach)
    text = f"polishing the {rough.kind.value} of period {rough.period}"
    previous = math.inf
    steps: list[float] = []
    for _ in range(MOST_STEPS):
        x, r, inverse, step = yield from newton_step(loops, rough.kind, rough.period, x, r, bits, text)
        steps.append(step)
        if _is_slow(steps):
            raise Lost(f"no isolated {rough.kind.value} there: Newton's method converges slowly")
        if far is not None and not abs(r - start_r) < far:
            raise Lost("Newton's method left the neighbourhood")
        # Chord steps: each shrinks the error by about the relative size of the step before it.
        while True:
            correction = yield from correction_at(loops, rough.kind, rough.period, x, r, inverse, bits)
            size = correction.sizes()[1]
            if size <= wanted / 8 or size >= previous:
                break
            if not size < step / 8:
                break
            previous = step = size
            with precision(bits):
                x, r = _moved(x, correction.x), _moved(r, correction.r)
        if size <= wanted / 8:
            return _Polished(x, r, inverse, correction, size)
        if math.isnan(size):
            raise NotProved("the orbit left the domain of the formula")
        if size >= previous and previous < math.inf:
            # No progress: either at the rounding level, where the caller adds bits, or not converging.
            return _Polished(x, r, inverse, correction, size)
        previous = math.inf if step > wanted else step
    raise Lost("Newton's method did not converge")


def _is_slow(steps: list[float]) -> bool:
    last = steps[-SLOW_STEPS - 1 :]
    return len(last) > SLOW_STEPS and all(0.1 * before < after < before for before, after in pairwise(last))


def newton_step(
    loops: BallLoops, kind: Kind, period: int, x: Any, r: Any, bits: int, text: str
) -> Generator[Step, None, tuple[Any, Any, Inverse, float]]:
    """One Newton step on the defining system; gives the new point, the inverse, and |dr|."""
    with precision(bits):
        zero = arb(0)
        state = (x, arb(1), zero, zero, zero)
    state = yield from in_chunks(
        lambda now, n: loops.newton(now[0], r, *now[1:], n), state, period, bits, text
    )
    with precision(bits):
        end, u, v, w, z = state
        inverse = inverse_of(u, v, w, z)
        shift_x, shift_r = inverse.times(end - x, u.mid() - TARGETS[kind])
        if not (shift_x.is_finite() and shift_r.is_finite()):
            raise NotProved("the orbit escaped")
        return _moved(x, -shift_x), _moved(r, -shift_r), inverse, abs(float(shift_r))


def _moved(value: Any, shift: Any) -> Any:
    """A number a step on; zero where the step cancels it to less than the precision in force tells.

    Newton's method squares the error in every step: towards zero it would never come to rest, and its
    numbers would soon have billions of decimals.
    """
    total = (value + shift).mid()
    return arb(0) if abs(total) < abs(value) * arb(2) ** -flint.ctx.prec else total


def _steps_on(loops: BallLoops, polished: _Polished, steps: int, bits: int) -> Generator[Step, None, Any]:
    """The point of a polished cycle some steps on, where it can be followed."""
    x = yield from in_chunks(
        lambda now, n: loops.orbit(now, polished.r, n), polished.x, steps, bits, "following the cycle"
    )
    return x if x.is_finite() else polished.x


def shown_state(loops: BallLoops, proof: Proof, steps: int, bits: int) -> Generator[Step, None, Fraction]:
    """The cycle point that an onset shows: middle of the proved one, some steps on."""
    with precision(bits):
        x = ball_of(sum(proof.state, Fraction(0)) / 2).mid()
        r = ball_of(sum(proof.parameter, Fraction(0)) / 2).mid()
    x = yield from in_chunks(lambda now, n: loops.orbit(now, r, n), x, steps, bits, "following the cycle")
    return fraction_of(x)


def _onset_of(one: OneMap, rough: Rough, proof: Proof, digits: int, places: int) -> Onset:
    places = places_shown(*proof.parameter, places, digits, one.parameter_size)
    texts = enclosure_texts(*proof.parameter, places)
    flip = rough.kind is Kind.FLIP
    return Onset(
        parameter=one.parameter,
        kind=rough.kind,
        period_before=rough.period if flip else 0,
        period_after=2 * rough.period if flip else rough.period,
        criticality=proof.criticality,
        value=texts.value,
        lower=texts.lower,
        upper=texts.upper,
        digits=digits,
        status=Status.ESTIMATED if proof.degenerate else Status.PROVED,
        reason=proof.degenerate,
        states=((one.state, enclosed_state_text(one, proof.state, digits)),),
        evidence=proof.evidence,
    )


def _with_certificate(one: OneMap, onset: Onset, box: Box, proof: Proof, bits: int) -> Onset:
    x, half_x, r, half_r = (fraction_of(side) for side in (box.x, box.half_x, box.r, box.half_r))
    return certified(
        onset,
        one.system,
        bits,
        (r, half_r),
        [(one.state, (x, half_x))],
        keep_within=(proof.parameter, proof.state),
    )


def state_text(value: Fraction, digits: int) -> str:
    """A state value to a number of significant digits."""
    places = decimal_places(value, digits)
    return fixed_text(rounded(value, places), places)


def enclosed_state_text(one: OneMap, ends: tuple[Fraction, Fraction], digits: int) -> str:
    """Text of a state value that is known between two ends: no more digits than hold."""
    middle, half = (ends[0] + ends[1]) / 2, (ends[1] - ends[0]) / 2
    if ends[0] <= 0 <= ends[1]:
        # Zero, as far as it can be told, has no significant digits: decimals of the state's own size then.
        size = abs(one.start) if one.extent is None else one.extent[1] - one.extent[0]
        places = decimal_places(size or Fraction(1), digits)
    else:
        places = decimal_places(middle, digits)
    if half > 0:
        places = min(places, -leading_power(half) - 2)
    return fixed_text(rounded(middle, places), places)


def _estimate_of(one: OneMap, rough: Rough, digits: int, half: Fraction, reason: str) -> Onset:
    """An onset that could not be proved, with an error estimate."""
    flip = rough.kind is Kind.FLIP
    places = decimal_places(half, 2)
    places = places_shown(rough.r - half, rough.r + half, places, digits, one.parameter_size)
    texts = enclosure_texts(rough.r - half, rough.r + half, places)
    hold = leading_power(rough.r) - leading_power(half) if rough.r else 1
    return Onset(
        parameter=one.parameter,
        kind=rough.kind,
        period_before=rough.period if flip else 0,
        period_after=2 * rough.period if flip else rough.period,
        criticality=Criticality.UNDECIDED if flip else Criticality.NOT_APPLICABLE,
        value=texts.value,
        lower=texts.lower,
        upper=texts.upper,
        digits=min(digits, max(1, hold)),
        status=Status.ESTIMATED,
        reason=reason,
        states=((one.state, state_text(rough.x, min(digits, 12))),),
    )


def _touching(
    one: OneMap,
    rough: Rough,
    digits: int,
    wanted: Fraction,
    bits: int,
    polished: float | None,
    reason: str,
) -> Generator[Step, None, Onset]:
    """An onset whose cycle touches a switching surface, as far as doubles bear it out.

    Raises
    ------
    Lost
        On neither side of the surface do the equations of the onset hold.
    """
    cycles = float_map(one)
    target = TARGETS[rough.kind]
    found = cycle_with_multiplier(cycles, float(rough.x), float(rough.r), rough.period, target)
    if found is None:
        raise Lost("the orbit jumps at a switching surface there")
    x, r, step = found
    if least_period(cycles, x, r, rough.period) != rough.period:
        raise Lost(f"the cycle's least period is not {rough.period}")
    crossing = crossing_at(cycles, Cycle(rough.period, x, r, float(target)), rough.kind)
    if crossing is None or crossing.extent > 1e6 * max(abs(r), 1e-6):
        raise Lost(f"no isolated {rough.kind.value} there")
    if polished is not None:
        half = max(4 * Fraction(polished), 10 * wanted)
    else:
        # Doubles alone: a formula that switches on the cycle has no derivative to polish with.
        rough = Rough(rough.kind, rough.period, Fraction(x), Fraction(r))
        half = max(10 * Fraction(abs(step.shift_r)), max(abs(rough.r), Fraction(1, 10**6)) / 10**8)
        half = max(half, 10 * (yield from _rounding_of_doubles(ball_loops(one), rough, bits)))
    return _estimate_of(one, rough, digits, half, reason)


def _rounding_of_doubles(loops: BallLoops, rough: Rough, bits: int) -> Generator[Step, None, Fraction]:
    """How far doubles are off by rounding alone: the exact formula's Newton step from where they stopped.

    Zero where the formula switches exactly there.
    """
    with precision(bits):
        x, r = ball_of(rough.x).mid(), ball_of(rough.r).mid()
    try:
        _, moved, _, _ = yield from newton_step(loops, rough.kind, rough.period, x, r, bits, "estimating")
    except (SwitchingTouched, NotProved):
        return Fraction(0)
    return abs(fraction_of(moved) - rough.r)
