"""Proofs of pitchforks and transcritical points that an exact identity of the formula makes generic.

Two identities do. A map that commutes with a reflection S has cycles that are their own mirror image, and
these lose that symmetry where the half-way return map g = S f^q has multiplier -1: a flip of g, with all
of a flip's proof. A cycle that no parameter value moves can be divided out of f^p(x) - x, and another
branch crosses it where its multiplier is 1: transversally where (f^p)'' is not zero, as a pitchfork where
that is zero by the identity and (f^p)''' is not (Kuznetsov, 2004, sections 7.4 and 4.7).
"""

from __future__ import annotations

from collections.abc import Generator, Sequence
from dataclasses import dataclass
from typing import Any

from flint import arb

from tinemark.onsets.ball_orbits import BallLoops, in_chunks, precision
from tinemark.onsets.proofs import (
    Box,
    Correction,
    Inverse,
    NotProved,
    Proof,
    box_words,
    interval_of,
    inverse_of,
    krawczyk_image,
    number_words,
    prime_factors,
)
from tinemark.onsets.results import Criticality, Step
from tinemark.onsets.symmetry import Curve


@dataclass(frozen=True)
class MirroredStep:
    """One Newton step on a cycle that is its own mirror image: new point, inverse, size in r."""

    x: Any
    r: Any
    inverse: Inverse
    size: float


def mirrored_newton(
    loops: BallLoops, half: int, total: Curve, x: Any, r: Any, bits: int
) -> Generator[Step, None, MirroredStep]:
    """One Newton step on total - f^q(x) = x with (f^q)' = 1."""
    with precision(bits):
        zero = arb(0)
        start = (x, arb(1), zero, zero, zero)
    state = yield from in_chunks(
        lambda now, n: loops.newton(now[0], r, *now[1:], n), start, half, bits, "polishing the pitchfork"
    )
    with precision(bits):
        end, u, v, w, z = state
        inverse = inverse_of(-u, total.slope(r) - v, -w, -z)
        shift_x, shift_r = inverse.times(total.at(r).mid() - end - x, 1 - u.mid())
        if not (shift_x.is_finite() and shift_r.is_finite()):
            raise NotProved("the orbit escaped")
        return MirroredStep((x - shift_x).mid(), (r - shift_r).mid(), inverse, abs(float(shift_r)))


def mirrored_correction(
    loops: BallLoops, half: int, total: Curve, x: Any, r: Any, inverse: Inverse, bits: int
) -> Generator[Step, None, Correction]:
    """Rigorous -C G(m) of the mirrored equations at an exact point."""
    with precision(bits):
        one = arb(1)
    end, u = yield from in_chunks(
        lambda state, n: loops.point(state[0], r, state[1], n), (x, one), half, bits, "evaluating"
    )
    with precision(bits):
        shift_x, shift_r = inverse.times(total.at(r) - end - x, 1 - u)
        return Correction(-shift_x, -shift_r)


def prove_symmetry_breaking(
    loops: BallLoops, half: int, total: Curve, box: Box, inverse: Inverse, correction: Correction, bits: int
) -> Generator[Step, None, Proof]:
    """Prove one pitchfork of a cycle of period 2 * half that is its own mirror image.

    The map must commute with x -> total - x exactly around the cycle; that is the caller's to know.

    Raises
    ------
    NotProved, SwitchingTouched
        As `proofs.prove`.
    """
    with precision(bits):
        state = (arb(box.x, box.half_x), arb(1), arb(0), arb(0), arb(0), arb(0))
        whole_r = arb(box.r, box.half_r)
        spread = whole_r - box.r
    first = state[0]

    def advance(now: tuple[Any, ...], count: int) -> tuple[Any, ...]:
        return loops.box(now[0], whole_r, box.r, spread, *now[1:], count)

    visited = []
    done = 0
    odd = [prime for prime in prime_factors(half) if prime > 2] if half > 1 else []
    for stop in sorted({*(half // prime for prime in odd), half}):
        state = yield from in_chunks(advance, state, stop - done, bits, "proving")
        done = stop
        if stop < half:
            visited.append(state[0])
    # The mirrored half follows from the symmetry only where the formula is defined there as well.
    whole = yield from in_chunks(advance, state, half, bits, "proving")
    with precision(bits):
        if not (whole[0].is_finite() and whole[0].overlaps(first)):
            raise NotProved("the formula is not defined on the whole cycle")
        end, u, v, w, z, schwarzian = state
        drift = v - total.slope(whole_r)
        image_x, image_r = krawczyk_image(box, inverse, correction, (end, -u, -drift, -w, -z, schwarzian))
        # f^q(x) = total - x. The cycle closes early only at x = total/2, or where f^(q/l) has mirrored it.
        centre = total.at(whole_r)
        gaps = [(2 * first - centre).abs_lower()]
        gaps += [(point + first - centre).abs_lower() for point in visited]
        if not all(gap > 0 for gap in gaps):
            raise NotProved(f"the least period may be less than {2 * half}", refuted=True)
        # Of g = total - f^q along its branch, on which dx/dr = -drift / 2.
        speed = w * drift / 2 - z
        if not speed.abs_lower() > 0:
            raise NotProved("the symmetry may be touched without being lost")
        criticality, degenerate, words = _softness(-schwarzian / 6)
        return Proof(
            parameter=interval_of(box.r + image_r),
            state=interval_of(box.x + image_x),
            criticality=criticality,
            degenerate=degenerate,
            evidence=(
                ("one onset in the box", box_words(box)),
                (
                    f"least period exactly {2 * half}",
                    f"points at least {min(map(float, gaps)):.2g} apart",
                ),
                ("multiplier exactly +1", "by the equations solved for half the cycle"),
                ("the half-way multiplier passes with speed", number_words(speed)),
                *words,
            ),
        )


def fixed_cycle_newton(
    loops: BallLoops, period: int, point: Curve, r: Any, bits: int
) -> Generator[Step, None, tuple[Any, float]]:
    """One Newton step on the multiplier of a cycle known for every parameter value: new r, and its size."""
    with precision(bits):
        zero = arb(0)
        start = (point.at(r).mid(), arb(1), zero, zero, zero)
    state = yield from in_chunks(
        lambda now, n: loops.newton(now[0], r, *now[1:], n), start, period, bits, "polishing"
    )
    with precision(bits):
        _, u, _, w, z = state
        shift = ((u - 1) / (z + w * point.slope(r))).mid()
        if not shift.is_finite():
            raise NotProved("the multiplier does not move with the parameter")
        return (r - shift).mid(), abs(float(shift))


def prove_fixed_cycle(
    loops: BallLoops, points: Sequence[Curve], straight: bool, r: Any, half_r: Any, bits: int
) -> Generator[Step, None, Proof]:
    """Prove that a cycle known for every parameter value is crossed by another branch, once in an interval.

    Parameters
    ----------
    points
        The cycle's points, as they move with the parameter. That they are run through in turn for every
        parameter value is the caller's to know, exactly.
    straight
        Whether (f^p)'' is zero there by an exact identity: then the crossing is a pitchfork.

    Returns
    -------
    Proof
        Criticality "not applicable" says that the crossing is transcritical.
    """
    period = len(points)
    with precision(bits):
        whole_r = arb(r, half_r)
        places = [point.at(whole_r) for point in points]
        first, zero, moves = places[0], arb(0), points[0].slope(whole_r)
        middle = points[0].at(r)
        spread = whole_r - r
        start = (first, arb(1), zero, zero, zero, zero)
        gaps = [(place - first).abs_lower() for place in places[1:]]
        if not all(gap > 0 for gap in gaps):
            raise NotProved("the cycle's points are not distinct", refuted=True)
    _, at_middle = yield from in_chunks(
        lambda state, n: loops.point(state[0], r, state[1], n), (middle, start[1]), period, bits, "evaluating"
    )
    state = yield from in_chunks(
        lambda now, n: loops.box(now[0], whole_r, r, spread, *now[1:], n), start, period, bits, "proving"
    )
    with precision(bits):
        _, u, _, w, z, schwarzian = state
        # Along the cycle, whose point moves by `moves`.
        z = z + w * moves
        if not z.abs_lower() > 0:
            raise NotProved("the multiplier may touch +1 without crossing it")
        # A little wider than the Newton image, which is a point where everything came out exact: a printed
        # interval has to have an inside.
        image = r - (at_middle - 1) / z + arb(0, (half_r / 256).abs_upper())
        if not abs(image - r).abs_upper() < half_r:
            raise NotProved("the interval Newton test did not map the interval into itself")
        words = [
            (
                "one onset in the interval",
                f"interval Newton test on a half-width of {float(half_r):.2g} in the parameter",
            ),
            (
                f"least period exactly {period}",
                f"points at least {min(map(float, gaps)):.2g} apart" if gaps else "a fixed point",
            ),
            ("multiplier exactly +1", "by the equation solved"),
            ("crosses +1 with speed", number_words(z)),
        ]
        criticality, degenerate = Criticality.NOT_APPLICABLE, ""
        if straight:
            # (f^p)'' is zero, so the Schwarzian derivative is (f^p)'''; below zero the new pair is stable.
            criticality, degenerate, more = _softness(-schwarzian / (6 * u))
            words += more
        elif w.abs_lower() > 0:
            words.append(("the branches cross at an angle: curvature", number_words(w)))
        else:
            raise NotProved("the branches may touch instead of crossing")
        return Proof(interval_of(image), interval_of(first), criticality, degenerate, tuple(words))


def _softness(coefficient: Any) -> tuple[Criticality, str, list[tuple[str, str]]]:
    """Criticality by the cubic coefficient of the normal form, positive where the pair is stable."""
    words = [("cubic coefficient", number_words(coefficient))]
    if coefficient > 0:
        return Criticality.SUPERCRITICAL, "", words
    if coefficient < 0:
        return Criticality.SUBCRITICAL, "", words
    if not coefficient.is_finite():
        raise NotProved("the cubic coefficient could not be bounded")
    return Criticality.UNDECIDED, "the cubic coefficient may be zero, so the pitchfork may be degenerate", []
