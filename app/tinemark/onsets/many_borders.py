"""From the rough place of a border collision of several states to an `Onset`, proved where both sides can be
bounded.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import numpy as np

from tinemark.onsets.ball_orbits import ball_of, fraction_of, precision
from tinemark.onsets.decimals import GUARD_DIGITS, decimal_places
from tinemark.onsets.formula_words import equation_words, formula_words
from tinemark.onsets.many_border_outcomes import Outcome, Side, feigin_words, is_stable, outcome_of
from tinemark.onsets.many_border_proofs import SideProof, differ, is_continuous, prove_side, side_claims
from tinemark.onsets.many_border_search import (
    Touch,
    admissible,
    is_below,
    other_side,
    solve_touch,
    touches_near,
)
from tinemark.onsets.many_claims import Claims, number_words
from tinemark.onsets.many_cycles import Cycle, least_period
from tinemark.onsets.many_map import FloatManyMap, Floats, ManyMap
from tinemark.onsets.many_normal_form import Findings
from tinemark.onsets.many_onset import LEAST_SIZE, POINTS_ONE, PROOF_ATTEMPTS, Settled
from tinemark.onsets.many_pieces import WordMap, named_switch, switches, walk_pieces, word_at
from tinemark.onsets.many_polish import NotFound, working_bits
from tinemark.onsets.many_proof import ManyProof, interval_of
from tinemark.onsets.many_shooting import column, entries
from tinemark.onsets.many_texts import HOW_ESTIMATED, estimated_texts, proved_onset, with_certificate
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Criticality, Kind, Onset, Status, Step
from tinemark.systems.errors import Unbounded
from tinemark.systems.exact import fraction_text

NEAR_SURFACE = 1e-3
"""A rough place lies this near to a surface, in scaled states."""
MOST_STEPS = 40


@dataclass(frozen=True)
class Collision:
    """A proved border collision: the proof, and the periods before and after."""

    proof: ManyProof
    before: int
    after: int
    words: str


def settle_border(
    float_map: FloatManyMap, rough: Cycle, digits: int, scales: Floats, reach: float
) -> Generator[Step, None, Settled]:
    """Polish a border collision from a cycle whose first point is near the surface, and prove it.

    Raises
    ------
    NotFound
        No cycle reaches a switching surface there.
    """
    many, period = float_map.many, rough.period
    yield Step(f"polishing the border collision of period {period}")
    touch, cycle = _reached(float_map, rough, scales, reach)
    places = decimal_places(max(abs(Fraction(cycle.r)), LEAST_SIZE), digits + GUARD_DIGITS)
    bits = working_bits(places, period) + 8 * period
    reason = ""
    for _ in range(PROOF_ATTEMPTS):
        yield Step(f"proving the border collision of period {period}")
        x, r, last = polished(many, touch, cycle, bits)
        try:
            found = prove_collision(many, touch, x, r, scales, bits)
        except NotProved as error:
            if error.refuted:
                raise NotFound(error.reason) from error
            reason = error.reason
        except (ArithmeticError, Unbounded) as error:
            reason = str(error)
        else:
            low, high = found.proof.parameter
            if not low <= 0 <= high:
                places = max(places, decimal_places((low + high) / 2, digits + GUARD_DIGITS))
            if high - low <= Fraction(1, 10) ** (places + 1):
                onset = proved_onset(many, Kind.BORDER_COLLISION, found.proof, period, digits, places)
                onset = replace(
                    onset, period_before=found.before, period_after=found.after, consequence=found.words
                )
                return _settled(many, with_certificate(many, onset, found.proof, bits), cycle)
            reason = "the enclosure stayed wider than the digits asked for"
        bits = bits * 3 // 2
    bare = Onset(
        parameter=many.parameter,
        kind=Kind.BORDER_COLLISION,
        period_before=period,
        period_after=0,
        criticality=Criticality.NOT_APPLICABLE,
        value="0",
        lower="0",
        upper="0",
        digits=digits,
        status=Status.ESTIMATED,
        reason=f"{reason}; {HOW_ESTIMATED}",
        consequence=f"a point of the cycle touches the surface {surface_words(many, touch)}",
    )
    half = 4 * last + abs(fraction_of(r)) / Fraction(10) ** (digits + 2)
    states = [fraction_of(value) for value in x]
    return _settled(many, estimated_texts(many, bare, fraction_of(r), half, states, places), cycle)


def _settled(many: ManyMap, onset: Onset, cycle: Cycle) -> Settled:
    nothing = Findings(complex(0), (), True, False, 0.0, None, Criticality.NOT_APPLICABLE)
    return Settled(onset, cycle, np.zeros((cycle.period, many.size)), nothing)


def _reached(float_map: FloatManyMap, rough: Cycle, scales: Floats, reach: float) -> tuple[Touch, Cycle]:
    """The touch a rough place belongs to, solved for: on the side where a cycle reaches the surface."""
    for touch in touches_near(float_map.many, rough, scales, NEAR_SURFACE):
        found = solve_touch(float_map, touch, rough, scales)
        if found is None or abs(found.r - rough.r) > reach:
            continue
        if least_period(found.points, scales, POINTS_ONE) == found.period and admissible(
            float_map.many, touch, found, scales
        ):
            return touch, found
    raise NotFound("no cycle reaches a switching surface there")


def polished(many: ManyMap, touch: Touch, rough: Cycle, bits: int) -> tuple[list[Any], Any, Fraction]:
    """Newton's method at a precision: the touching point and the parameter, exact balls, and the last step.

    Raises
    ------
    NotFound
        No convergence.
    """
    n, last = many.size, float("inf")
    with precision(bits):
        here = [ball_of(Fraction(float(value))).mid() for value in rough.points[0]]
        at = ball_of(Fraction(rough.r)).mid()
        for _ in range(MOST_STEPS):
            walk = walk_pieces(many, touch.word, here, at)
            g, gx, gr = walk.first[touch.place]
            rows: list[Any] = []
            for i in range(n):
                rows += [(walk.monodromy[i, j] - int(i == j)).mid() for j in range(n)]
                rows.append(walk.drift[i, 0].mid())
            rows += [*(value.mid() for value in gx), gr.mid()]
            gaps = [(a - b).mid() for a, b in zip(entries(walk.end), here, strict=True)]
            matrix = type(walk.monodromy)(n + 1, n + 1, rows)
            try:
                moves = entries(matrix.solve(column([*gaps, (g - touch.level).mid()]), algorithm="approx"))
            except ZeroDivisionError as error:
                raise NotFound("the equations of the border collision are singular there") from error
            here = [(value - move).mid() for value, move in zip(here, moves[:n], strict=True)]
            at = (at - moves[n]).mid()
            size = max(abs(float(move)) for move in moves)
            if not size < float("inf"):
                raise NotFound("the orbit left the domain of the formula")
            scale = max(abs(float(value)) for value in (*here, at))
            if size <= 2.0 ** (-0.85 * bits) * scale or (last < 2.0 ** (-bits / 2) and size >= last / 2):
                return here, at, abs(fraction_of(moves[n].mid()))
            last = size
    raise NotFound("Newton's method did not converge")


def prove_collision(
    many: ManyMap, touch: Touch, x: list[Any], r: Any, scales: Floats, bits: int
) -> Collision:
    """Prove a border collision in a box around exact balls.

    Raises
    ------
    NotProved
        A test failed, or the formula is neither continuous across the surface nor jumps there for certain.
    """
    with precision(bits):
        here = prove_side(many, touch, x, r, scales, bits)
        jumps, kinked = differ(many, touch, here.x, here.r)
        if is_continuous(many, touch):
            if not kinked:
                reason = "the formula may have one and the same slope on both sides of the surface: no kink"
                raise NotProved(reason, refuted=True)
            return _continuous(many, touch, here)
        if jumps:
            return _jumping(many, touch, here)
    raise NotProved("it was not shown whether the formula is continuous across the surface")


def _continuous(many: ManyMap, touch: Touch, here: SideProof) -> Collision:
    period, beyond = len(touch.word), other_side(many, touch)
    across = walk_pieces(many, beyond.word, here.x, here.r)
    speed = side_claims(many, beyond, across)
    own = _side(many, touch, here.monodromy, here.drift, here.speed, across)
    other = _side(many, beyond, across.monodromy, across.drift, speed, across)
    follows = outcome_of(own, other, period)
    before, after = (0, period) if follows.opens else (period, follows.rounds * period)
    evidence = (
        *here.evidence,
        ("formula continuous across the surface", "by an exact identity"),
        ("real one-sided multipliers", feigin_words(own, other)),
        ("crosses the surface with speeds", f"{number_words(here.speed)} and {number_words(speed)}"),
    )
    words = f"{_touching_words(many, touch, here)}; coming from {_coming(follows)}, {follows.words}"
    return Collision(_proof(here, evidence), before, after, words)


def _coming(follows: Outcome) -> str:
    return "below" if follows.before.below else "above"


def _side(many: ManyMap, touch: Touch, monodromy: Any, drift: Any, speed: Any, at: Any) -> Side:
    _, gradient, push = at.first[touch.place]
    sign = -1 if is_below(many, touch) else 1
    below = (sign < 0) == bool(speed > 0)
    return Side(monodromy, drift, gradient, push, sign, below, is_stable(monodromy))


def _jumping(many: ManyMap, touch: Touch, here: SideProof) -> Collision:
    period = len(touch.word)
    past = "above" if is_below(many, touch) == bool(here.speed > 0) else "below"
    words = (
        f"{_touching_words(many, touch, here)}; the formula jumps there, so the cycle ends: {past} the onset "
        f"no cycle of period {period} goes on from it"
    )
    evidence = (
        *here.evidence,
        ("formula jumps across the surface", "its two pieces differ there for certain"),
        ("crosses the surface with speed", number_words(here.speed)),
    )
    return Collision(_proof(here, evidence), period, 0, words)


def _proof(here: SideProof, evidence: tuple[tuple[str, str], ...]) -> ManyProof:
    nothing = Criticality.NOT_APPLICABLE
    claims = Claims(complex(0), (), here.speed, None, nothing, "", "", ())
    return ManyProof(
        _roomy(here.r, here.box[0][1]),
        tuple(_roomy(value, half) for value, (_, half) in zip(here.x, here.box[1:], strict=True)),
        tuple(interval_of(middle + type(middle)(0, half)) for middle, half in here.box),
        claims,
        evidence,
    )


def _roomy(ball: Any, half: Any) -> tuple[Fraction, Fraction]:
    """Both ends, a little farther out: where all came out exact a printed interval still needs an inside."""
    return interval_of(ball + type(ball)(0, (half / 256).abs_upper()))


def _touching_words(many: ManyMap, touch: Touch, here: SideProof) -> str:
    period = len(touch.word)
    point = "the cycle's one point" if period == 1 else f"one of the {period} points of the cycle"
    place = ", ".join(
        f"{name} = {_place_text(value)}" for name, value in zip(many.states, here.x, strict=True)
    )
    return f"{point}, {place}, touches the surface {surface_words(many, touch)}"


def _place_text(ball: Any) -> str:
    low, high = interval_of(ball)
    return "0" if low <= 0 <= high else fraction_text((low + high) / 2, 8)


def surface_words(many: ManyMap, touch: Touch) -> str:
    """The surface touched, in the words of the user's formula."""
    surface = named_switch(many, touch.place)
    if switches(many)[touch.place].kind == "integer":
        return f"{formula_words(surface.expr)} = {touch.level}"
    return equation_words(surface.expr)


def prove_claim(
    float_map: FloatManyMap, period: int, x: list[Fraction], r: Fraction, scales: Floats, bits: int
) -> Collision:
    """Prove a border collision that was printed: its touching point and parameter; nothing is searched for.

    Raises
    ------
    NotProved
        The claim does not hold, or could not be shown.
    """
    many = float_map.many
    first = np.array([float(value) for value in x])
    refused = NotProved("no cycle reaches a switching surface there", refuted=True)
    for touch in touches_near(many, Cycle(first[None], float(r)), scales, NEAR_SURFACE):
        points = [first]
        image = WordMap(float_map, touch.word).linearised(first[None], float(r)).image[0]
        while len(points) < period:
            points.append(image)
            image = float_map.step(image[:, None], float(r))[:, 0]
        rough = Cycle(np.array(points), float(r))
        if not np.isfinite(rough.points).all():
            continue
        others = word_at(many, rough.points, rough.r)[1:]
        whole = Touch(touch.place, touch.level, (touch.word[0], *others))
        try:
            at, value, _ = polished(many, whole, rough, bits)
            return prove_collision(many, whole, at, value, scales, bits)
        except NotProved as error:
            refused = error
        except (NotFound, ArithmeticError) as error:
            refused = NotProved(str(error), refuted=True)
    raise refused
