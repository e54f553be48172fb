"""From the rough place of a transcritical point or a pitchfork to an `Onset`, proved where that can be."""

from __future__ import annotations

from collections.abc import Generator, Iterator
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from flint import arb

from tinemark.onsets.ball_orbits import ball_loops, ball_of, fraction_of, precision
from tinemark.onsets.border_search import on_side
from tinemark.onsets.branch_point_proofs import (
    fixed_cycle_newton,
    mirrored_correction,
    mirrored_newton,
    prove_fixed_cycle,
    prove_symmetry_breaking,
)
from tinemark.onsets.branch_points import BranchPoint, polished_branch_point
from tinemark.onsets.certificates import certified
from tinemark.onsets.decimals import GUARD_DIGITS, decimal_places
from tinemark.onsets.exact_identities import is_fixed_cycle, is_straight_at
from tinemark.onsets.float_map import float_map
from tinemark.onsets.formula_words import formula_words
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.onset_values import Naming, estimated_onset, proved_onset
from tinemark.onsets.polish import LEAST_SIZE, Lost, Rough, Settled, first_bits, shown_state
from tinemark.onsets.proofs import Box, NotProved, Proof, box_around
from tinemark.onsets.results import Criticality, Kind, Onset, Step
from tinemark.onsets.smooth_pieces import Sides as Pieces
from tinemark.onsets.smooth_pieces import sides_at, switches, walk_pieces
from tinemark.onsets.symmetry import Curve, curves_through, total_of_cycle
from tinemark.systems.errors import SwitchingTouched
from tinemark.systems.expression import ZERO, Call, Name

LONGEST_IDENTITY = 8
"""Longest cycle whose points are tried as known curves."""
LONGEST_WORD = 4096
"""Longest cycle of a piecewise map whose pieces are told at each point."""
ATTEMPTS = 3


@dataclass(frozen=True)
class Identity:
    """What holds exactly of the map and the cycle, around it and for every parameter value nearby.

    Attributes
    ----------
    word
        The smooth pieces of the formula that hold at the cycle's points, told by doubles.
    total
        The map commutes with x -> total - x, and the cycle is its own mirror image.
    points
        The cycle's points, where they are known curves of the parameter.
    straight
        Whether (f^p)'' is zero on such a cycle for every value of the parameter.
    """

    word: tuple[Pieces, ...]
    total: Curve | None = None
    points: tuple[Curve, ...] = ()
    straight: bool = False


def identity_at(one: OneMap, x: float, r: float, period: int) -> Identity | None:
    """The exact identity that makes two branches meet there; None where none is found."""
    cycles = float_map(one)
    orbit = [float(point) for point in cycles.points(x, r, period)]
    if period > LONGEST_WORD and switches(one):
        return None
    if period % 2 == 0 or period == 1:
        half = period // 2
        totals = [orbit[place] + orbit[(place + half) % period] for place in range(max(half, 1))]
        if max(totals) - min(totals) <= 1e-8 * cycles.scale:
            mirrored = total_of_cycle(one, orbit, r)
            if mirrored is not None:
                total, word = mirrored
                # A reflection's own centre stays put, whatever the parameter.
                points = (total.times(Fraction(1, 2)),) if period == 1 else ()
                return Identity(word, total=total, points=points, straight=period == 1)
    if period > LONGEST_IDENTITY:
        return None
    word = tuple(sides_at(one, point, r) for point in orbit)
    for known in _known_cycles(one, orbit, r):
        exprs = tuple(point.expr for point in known)
        if is_fixed_cycle(one, exprs, word):
            straight = period == 1 and is_straight_at(one, exprs[0], word[0])
            return Identity(word, points=known, straight=straight)
    return None


def _known_cycles(one: OneMap, orbit: list[float], r: float) -> Iterator[tuple[Curve, ...]]:
    """Curves that a cycle's points may lie on: of a fixed point any, of a longer cycle numbers alone."""
    scale = float_map(one).scale
    if len(orbit) == 1:
        yield from ((curve,) for curve in curves_through(one, orbit[0], r, scale))
        return
    curves = [next(curves_through(one, point, r, scale), None) for point in orbit]
    known = tuple(curve for curve in curves if curve is not None and not curve.moves)
    if len(known) == len(orbit):
        yield known


def _certain(one: OneMap, identity: Identity, x: Any, r: Any, bits: int) -> None:
    """Make sure that the pieces which doubles tell hold at the orbit of a point of the box.

    The proof itself shows that no surface is touched anywhere in the box, so that they hold in all of it.

    Raises
    ------
    NotProved
        They do not, or it cannot be told.
    """
    if not switches(one):
        return
    with precision(bits):
        walk = walk_pieces(one, identity.word, x, r)
        first = tuple(surface[0] for surface in walk.first)
        for sides, values in zip(identity.word, (first, *walk.surfaces), strict=True):
            if not all(on_side(one, place, values[place], side) for place, side in enumerate(sides)):
                raise NotProved("which piece of the formula holds on the cycle could not be told")


def settle_branch_point(
    one: OneMap, rough: Rough, digits: int, *, reach: Fraction | None = None, show_after: int = 0
) -> Generator[Step, None, Settled]:
    """Polish a transcritical point or a pitchfork, and prove it where an identity makes it generic.

    Parameters and errors are those of `polish.settle_onset`; the kind of the answer is the one that
    holds, which may be the other of the two.
    """
    loops = ball_loops(one)
    places = decimal_places(max(abs(rough.r), LEAST_SIZE), digits + GUARD_DIGITS)
    bits = first_bits(rough, max(places, digits))
    point = yield from polished_branch_point(loops, rough.x, rough.r, rough.period, 2 * bits)
    if point is None:
        raise Lost("no two branches meet there")
    if reach is not None and not abs(point.r - rough.r) < reach:
        raise Lost("Newton's method left the neighbourhood")
    # A smaller value than thought needs more decimals.
    places = max(places, decimal_places(max(abs(point.r), LEAST_SIZE), digits + GUARD_DIGITS))
    bits = max(bits, first_bits(rough, max(places, digits)))
    scale = Fraction(float_map(one).scale)
    if abs(point.miss) > scale / 2 ** (bits // 2):
        raise Lost("the branches pass each other without meeting")
    if point.curvature * point.bend - point.speed**2 >= 0:
        raise Lost("a single cycle appears and vanishes there: no branches cross")
    if _is_straight(one, point, rough.period):
        raise Lost("the formula is straight there, so every state is a cycle and no branches cross")
    identity = identity_at(one, float(point.x), float(point.r), rough.period)
    reason = ""
    if identity is not None:
        wanted = Fraction(1, 10) ** (places + 1)
        for _ in range(ATTEMPTS):
            try:
                proof, sides = yield from _proved(one, identity, point, rough.period, bits)
            except SwitchingTouched as error:
                reason = error.message
                break
            except NotProved as error:
                if error.refuted:
                    raise Lost(error.reason) from error
                reason, bits = error.reason, bits * 3 // 2
                continue
            if proof.parameter[1] - proof.parameter[0] > wanted:
                reason, bits = "the enclosure stayed wider than the digits asked for", bits * 3 // 2
                continue
            shown = yield from shown_state(loops, proof, show_after, bits)
            naming = _naming(one, rough.period, identity, proof, point)
            onset = proved_onset(one, naming, proof, digits, places, shown)
            return Settled(_certified(one, onset, proof, sides, bits), point.x, point.r)
    return Settled(_estimate(one, rough, point, digits, identity, reason), point.x, point.r)


def _is_straight(one: OneMap, point: BranchPoint, period: int) -> bool:
    cycles, step = float_map(one), 1e-3 * float_map(one).scale
    x, r = float(point.x), float(point.r)
    bends = [cycles.slopes(x + side, r, period)[2] for side in (-step, 0.0, step)]
    return not any(bends)


Sides = tuple[tuple[Fraction, Fraction], tuple[Fraction, Fraction]]
"""Middle and half-width of the proved box: the parameter, then the state."""


def _proved(
    one: OneMap, identity: Identity, point: BranchPoint, period: int, bits: int
) -> Generator[Step, None, tuple[Proof, Sides]]:
    loops = ball_loops(one)
    with precision(bits):
        x, r = ball_of(point.x).mid(), ball_of(point.r).mid()
    if identity.points:
        for _ in range(4):
            r, size = yield from fixed_cycle_newton(loops, period, identity.points[0], r, bits)
            if size < 2.0 ** (-0.9 * bits):
                break
        with precision(bits):
            half = (abs(r) * 2 ** (24 - bits) + ball_of(Fraction(1, 2 ** (bits - 24)))).abs_upper()
            place = identity.points[0].at(arb(r, half))
        _certain(one, identity, place.mid(), r, bits)
        proof = yield from prove_fixed_cycle(loops, identity.points, identity.straight, r, half, bits)
        # Wider than the place is known, so that a certificate's rounded side still holds all of it.
        at, around = fraction_of(place.mid()), max(2 * fraction_of(place.rad()), fraction_of(half))
        return proof, ((fraction_of(r), fraction_of(half)), (at, around))
    assert identity.total is not None
    for _ in range(4):
        step = yield from mirrored_newton(loops, period // 2, identity.total, x, r, bits)
        x, r = step.x, step.r
        if step.size < 2.0 ** (-0.9 * bits):
            break
    _certain(one, identity, x, r, bits)
    correction = yield from mirrored_correction(loops, period // 2, identity.total, x, r, step.inverse, bits)
    box = box_around(x, r, correction, step.inverse, bits)
    proof = yield from prove_symmetry_breaking(
        loops, period // 2, identity.total, box, step.inverse, correction, bits
    )
    sides = [fraction_of(side) for side in (box.r, box.half_r, box.x, box.half_x)]
    return proof, ((sides[0], sides[1]), (sides[2], sides[3]))


def _certified(one: OneMap, onset: Onset, proof: Proof, sides: Sides, bits: int) -> Onset:
    parameter, state = sides
    return certified(
        onset,
        one.system,
        bits,
        parameter,
        [(one.state, state)],
        keep_within=(proof.parameter, proof.state),
    )


def prove_claim(one: OneMap, kind: Kind, period: int, box: Box, bits: int) -> Generator[Step, None, Proof]:
    """Prove a pitchfork or a transcritical point in a box that was printed; nothing is searched for.

    Raises
    ------
    NotProved
        No exact identity makes two branches meet there, the point is of the other kind, or a test failed.
    """
    loops = ball_loops(one)
    identity = identity_at(one, float(box.x), float(box.r), period)
    if identity is None:
        raise NotProved("no exact identity of the formula makes two branches meet there", refuted=True)
    if (kind is Kind.PITCHFORK) is not (identity.straight or not identity.points):
        raise NotProved(f"what happens there is no {kind.value}", refuted=True)
    if identity.points:
        with precision(bits):
            place = identity.points[0].at(box.r)
            if not abs(place - box.x).abs_upper() < box.half_x:
                raise NotProved("the cycle's point is not in the box", refuted=True)
        _certain(one, identity, place.mid(), box.r, bits)
        proof = yield from prove_fixed_cycle(
            loops, identity.points, identity.straight, box.r, box.half_r, bits
        )
        return proof
    assert identity.total is not None
    _certain(one, identity, box.x, box.r, bits)
    step = yield from mirrored_newton(loops, period // 2, identity.total, box.x, box.r, bits)
    correction = yield from mirrored_correction(
        loops, period // 2, identity.total, box.x, box.r, step.inverse, bits
    )
    return (
        yield from prove_symmetry_breaking(
            loops, period // 2, identity.total, box, step.inverse, correction, bits
        )
    )


def _naming(one: OneMap, period: int, identity: Identity, proof: Proof, point: BranchPoint) -> Naming:
    rising = point.speed > 0
    if identity.total is not None:
        words = _symmetry_words(one, period, identity.total, proof.criticality)
        return Naming(Kind.PITCHFORK, period, period, words)
    before, after = ("below", "above") if rising else ("above", "below")
    if identity.straight:
        pair = "soft" if proof.criticality is Criticality.SUPERCRITICAL else "with a jump"
        words = (
            f"a pair of cycles of period {period} branches off the one at {one.state} = "
            f"{formula_words(identity.points[0].expr)}, {pair}; "
            "the formula has no second-order term there, though no symmetry was recognised"
        )
        return Naming(Kind.PITCHFORK, period, period, words)
    cycle = ", ".join(formula_words(place.expr) for place in identity.points)
    if any(place.moves for place in identity.points):
        known = f"which stays one for every {one.parameter}"
    else:
        known = f"which {one.parameter} does not move"
    words = (
        f"two cycles of period {period} cross and exchange stability: the one at {one.state} = {cycle}, "
        f"{known}, is stable {before} the onset and unstable {after} it, the "
        "other one the other way round"
    )
    return Naming(Kind.TRANSCRITICAL, period, period, words)


def _symmetry_words(one: OneMap, period: int, total: Curve, criticality: Criticality) -> str:
    state = Name(one.state)
    mirror = formula_words(Call("neg", (state,)) if total.expr == ZERO else Call("sub", (total.expr, state)))
    of_pieces = " of the pieces visited" if switches(one) else ""
    words = (
        f"the symmetry {one.state} -> {mirror}{of_pieces} breaks: the cycle of period {period} that is "
        "its own mirror image loses its stability"
    )
    if criticality is Criticality.SUPERCRITICAL:
        return f"{words} to a pair of cycles of the same period that are each other's mirror images"
    if criticality is Criticality.SUBCRITICAL:
        return f"{words}, and the pair of mirror images that meets it there is unstable"
    return words


def _estimate(
    one: OneMap, rough: Rough, point: BranchPoint, digits: int, identity: Identity | None, reason: str
) -> Onset:
    beside = max(abs(point.curvature), 1e-300)
    pitchfork = beside * float_map(one).scale < 1e-9 * max(1.0, abs(point.speed))
    kind = Kind.PITCHFORK if pitchfork else Kind.TRANSCRITICAL
    if not reason:
        reason = (
            "two branches cross only where an equality holds exactly, which no enclosure can show, and no "
            "identity of the formula that makes it hold was recognised"
        )
    evidence = (
        ("the branches miss each other by at most", f"{abs(float(point.miss)):.2g}"),
        ("multiplier", "+1, by the equations solved"),
    )
    words = (
        f"a pair of cycles of period {rough.period} branches off"
        if pitchfork
        else f"two cycles of period {rough.period} cross and exchange stability"
    )
    half = max(
        Fraction(point.last_step) * 4,
        abs(rough.r) / Fraction(10) ** (digits + 1),
        Fraction(1, 10 ** (digits + 20)),
    )
    return estimated_onset(
        one,
        Naming(kind, rough.period, rough.period, words if identity is None else ""),
        (point.x, point.r),
        digits,
        half,
        reason,
        criticality=Criticality.UNDECIDED if pitchfork else Criticality.NOT_APPLICABLE,
        evidence=evidence,
    )
