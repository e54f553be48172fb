"""From the rough place of a border collision to an `Onset`, proved where both sides can be bounded."""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from tinemark.onsets.ball_orbits import ball_of, fraction_of, precision
from tinemark.onsets.border_outcomes import outcome
from tinemark.onsets.border_proofs import (
    SideProof,
    bends_sharply,
    exact_sides,
    fitted_box,
    is_continuous,
    jumps,
    other_side,
    prove_side,
    proved_ball,
    side_claims,
    sides_of,
)
from tinemark.onsets.border_search import SEARCH_BITS, Touch, admissible, solve_touch
from tinemark.onsets.certificates import certified
from tinemark.onsets.decimals import GUARD_DIGITS, decimal_places
from tinemark.onsets.float_map import float_map
from tinemark.onsets.formula_words import equation_words, formula_words
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.onset_values import Naming, estimated_onset, proved_onset
from tinemark.onsets.polish import LEAST_SIZE, Lost, Rough, Settled, first_bits
from tinemark.onsets.proofs import Box, NotProved, Proof, box_words, inverse_of, number_words
from tinemark.onsets.results import Criticality, Kind, Step
from tinemark.onsets.smooth_pieces import (
    Sides,
    named_surface,
    sides_at,
    smooth_piece,
    switches,
    walk_pieces,
)
from tinemark.systems.exact import fraction_text

ATTEMPTS = 3
NEAR_SURFACE = 1e-3
"""A rough place lies this near to a surface, in units of the state's scale."""


@dataclass(frozen=True)
class _Found:
    """A proved collision: naming, the proof, the box it was made in."""

    naming: Naming
    proof: Proof
    box: Box


def settle_border(
    one: OneMap, rough: Rough, digits: int, *, reach: Fraction | None = None
) -> Generator[Step, None, Settled]:
    """Polish a border collision from its touching point, and prove it.

    Parameters and errors are those of `polish.settle_onset`. What is shown is the touching point.
    """
    yield Step(f"polishing the border collision of period {rough.period}")
    places = decimal_places(max(abs(rough.r), LEAST_SIZE), digits + GUARD_DIGITS)
    wanted = Fraction(1, 10) ** (places + 1)
    bits = first_bits(rough, max(places, digits)) + 2 * rough.period
    touch, x, r, last = _reached(one, rough, bits)
    if reach is not None and not abs(r - rough.r) < reach:
        raise Lost("Newton's method left the neighbourhood")
    reason = ""
    for _ in range(ATTEMPTS):
        yield Step(f"proving the border collision of period {rough.period}")
        try:
            found = _proved(one, touch, x, r, bits)
        except NotProved as error:
            if error.refuted:
                raise Lost(error.reason) from error
            reason, bits = error.reason, bits * 3 // 2
            continue
        if found.proof.parameter[1] - found.proof.parameter[0] > wanted:
            reason, bits = "the enclosure stayed wider than the digits asked for", bits * 3 // 2
            continue
        middle = sum(found.proof.state, Fraction(0)) / 2
        onset = proved_onset(one, found.naming, found.proof, digits, places, middle)
        parameter, state = exact_sides(found.box)
        within = (found.proof.parameter, found.proof.state)
        return Settled(
            certified(onset, one.system, bits, parameter, [(one.state, state)], keep_within=within), x, r
        )
    half = max(Fraction(last) * 4, abs(r) / Fraction(10) ** (digits + 1), Fraction(1, 10 ** (digits + 20)))
    surface = surface_words(one, touch)
    words = f"the cycle touches the surface {surface} at {one.state} = {fraction_text(x, 8)}"
    naming = Naming(Kind.BORDER_COLLISION, rough.period, 0, words)
    return Settled(estimated_onset(one, naming, (x, r), digits, half, reason), x, r)


def _reached(one: OneMap, rough: Rough, bits: int) -> tuple[Touch, Fraction, Fraction, float]:
    """The touch a rough place belongs to, solved for: on the side where a cycle reaches the surface."""
    for touch in touches_near(one, rough):
        solved = solve_touch(one, touch, rough.x, rough.r, bits)
        if solved is None:
            continue
        x, r, _, last = solved
        if abs(x - rough.x) <= Fraction(float_map(one).scale) / 10 and admissible(one, touch, x, r):
            return touch, x, r, last
    raise Lost("no cycle reaches a switching surface there")


def touches_near(one: OneMap, rough: Rough) -> list[Touch]:
    """The surface nearest to a rough touching point, from either side."""
    x, r = float(rough.x), float(rough.r)
    sides = sides_at(one, x, r)
    nearest: tuple[float, int, int] | None = None
    with precision(SEARCH_BITS):
        values = smooth_piece(one, sides).evaluate(ball_of(rough.x), ball_of(rough.r))
    for place, surface in enumerate(switches(one)):
        g, gx = float(values[3 + 3 * place]), float(values[4 + 3 * place])
        level = round(g) if surface.kind == "integer" else 0
        size = abs(g - level) / (abs(gx) or 1.0)
        if nearest is None or size < nearest[0]:
            nearest = (size, place, level)
    if nearest is None or not nearest[0] <= NEAR_SURFACE * float_map(one).scale:
        return []
    _, place, level = nearest
    touches = []
    for side in sides_of(one, Touch(place, level, (sides,))):
        first = (*sides[:place], side, *sides[place + 1 :])
        touches.append(Touch(place, level, _word_from(one, first, rough)))
    return touches


def _word_from(one: OneMap, first: Sides, rough: Rough) -> tuple[Sides, ...]:
    word = [first]
    with precision(SEARCH_BITS):
        x, r = ball_of(rough.x).mid(), ball_of(rough.r).mid()
        for _ in range(rough.period - 1):
            x = smooth_piece(one, word[-1]).evaluate(x, r)[0].mid()
            word.append(sides_at(one, float(x), float(r)))
    return tuple(word)


def _proved(one: OneMap, touch: Touch, x: Fraction, r: Fraction, bits: int) -> _Found:
    solved = solve_touch(one, touch, x, r, bits)
    if solved is None:
        raise NotProved("Newton's method did not converge")
    with precision(bits):
        middle_x, middle_r = ball_of(solved[0]).mid(), ball_of(solved[1]).mid()
        box = fitted_box(one, touch, middle_x, middle_r, solved[2], bits)
    return prove_in(one, touch, box, bits)


def prove_in(one: OneMap, touch: Touch, box: Box, bits: int) -> _Found:
    """Prove a border collision in a given box, whatever it came from.

    Raises
    ------
    NotProved
        A test failed, or the formula is neither continuous across the surface nor jumps there for certain.
    """
    with precision(bits):
        walk = walk_pieces(one, touch.word, box.x, box.r)
        _, gx, gr = walk.first[touch.place]
        inverse = inverse_of(walk.multiplier, walk.drift, gx, gr)
        here = prove_side(one, touch, box, inverse)
        x, r = proved_ball(here.state), proved_ball(here.parameter)
        if is_continuous(one, touch):
            if not bends_sharply(one, touch, x, r):
                reason = "the formula may have one and the same slope on both sides of the surface: no kink"
                raise NotProved(reason, refuted=True)
            beyond = other_side(one, touch)
            across = walk_pieces(one, beyond.word, x, r)
            _, speed = side_claims(one, beyond, across)
            return _continuous(one, touch, here, across.multiplier, speed)
        if jumps(one, touch, x, r):
            return _jumping(one, touch, here)
    raise NotProved("it was not shown whether the formula is continuous across the surface")


def _continuous(one: OneMap, touch: Touch, here: SideProof, across: Any, speed: Any) -> _Found:
    period = len(touch.word)
    a, b = here.multiplier, across
    follows = outcome(float(a), float(b), period)
    _decided(a, b)
    if not follows.certain:
        raise NotProved("the one-sided multipliers lie where one outcome gives way to another")
    before, after = (0, period) if follows.opens else (period, follows.rounds * period)
    # A pair that meets on the surface exists on one side of the onset, whichever of its cycles is asked.
    from_here = follows.opens or follows.before == float(a)
    coming = "below" if _exists_below(one, touch, here) == from_here else "above"
    words = f"{_touching_words(one, touch, here)}; coming from {coming}, {follows.words}"
    evidence = (
        *_evidence(touch, here),
        ("formula continuous across the surface", "by an exact identity"),
        ("one-sided multipliers", f"{number_words(a)} and {number_words(b)}"),
        ("crosses the surface with speeds", f"{number_words(here.speed)} and {number_words(speed)}"),
    )
    naming = Naming(Kind.BORDER_COLLISION, before, after, words)
    return _Found(naming, _proof(here, evidence), here.box)


def _decided(a: Any, b: Any) -> None:
    """Raise where a bound that decides what follows lies inside a multiplier's ball."""
    # The product decides only where one side is stable and the other one overshoots.
    balls = (a, b, a * b) if (a < -1) is not (b < -1) else (a, b)
    for ball in balls:
        if any((ball - bound).contains(0) for bound in (1, -1)):
            raise NotProved("a one-sided multiplier, or their product, may be +1 or -1: what follows is open")


def _jumping(one: OneMap, touch: Touch, here: SideProof) -> _Found:
    period = len(touch.word)
    past = "above" if _exists_below(one, touch, here) else "below"
    words = (
        f"{_touching_words(one, touch, here)}; the formula jumps there, so the cycle ends: {past} the onset "
        f"no cycle of period {period} goes on from it"
    )
    evidence = (
        *_evidence(touch, here),
        ("formula jumps across the surface", "its two pieces differ there for certain"),
        ("multiplier at the border", number_words(here.multiplier)),
        ("crosses the surface with speed", number_words(here.speed)),
    )
    return _Found(Naming(Kind.BORDER_COLLISION, period, 0, words), _proof(here, evidence), here.box)


def _exists_below(one: OneMap, touch: Touch, here: SideProof) -> bool:
    """Whether the cycle of this side exists for parameter values below the onset."""
    below, _ = sides_of(one, touch)
    return (touch.word[0][touch.place] == below) == bool(here.speed > 0)


def _evidence(touch: Touch, here: SideProof) -> tuple[tuple[str, str], ...]:
    finding = f"points at least {here.gap:.2g} apart" if here.gap else "a fixed point"
    return (
        ("one onset in the box", box_words(here.box)),
        (f"least period exactly {len(touch.word)}", finding),
        ("all other points off every surface", "by balls around them"),
    )


def _proof(here: SideProof, evidence: tuple[tuple[str, str], ...]) -> Proof:
    return Proof(here.parameter, here.state, Criticality.NOT_APPLICABLE, "", evidence)


def _touching_words(one: OneMap, touch: Touch, here: SideProof) -> str:
    x = place_text(here.state)
    period = len(touch.word)
    point = "the cycle's one point" if period == 1 else f"one of the {period} points of the cycle"
    return f"{point}, {one.state} = {x}, touches the surface {surface_words(one, touch)}"


def place_text(state: tuple[Fraction, Fraction]) -> str:
    """A proved state to eight digits; zero where the enclosure holds it."""
    low, high = state
    return "0" if low <= 0 <= high else fraction_text((low + high) / 2, 8)


def surface_words(one: OneMap, touch: Touch) -> str:
    """The surface touched, in the words of the user's formula."""
    surface = named_surface(one, touch.place)
    if surface.kind == "integer":
        return f"{formula_words(surface.expr)} = {touch.level}"
    return equation_words(surface.expr)


def prove_claim(one: OneMap, before: int, after: int, box: Box, bits: int) -> Proof:
    """Prove a border collision that was printed: its box, and the periods before and after it.

    Raises
    ------
    NotProved
        The claim does not hold, or could not be shown.
    """
    period = before or after
    rough = Rough(Kind.BORDER_COLLISION, period, fraction_of(box.x), fraction_of(box.r))
    refused = NotProved("no cycle reaches a switching surface there", refuted=True)
    for touch in touches_near(one, rough):
        try:
            found = prove_in(one, touch, box, bits)
        except NotProved as error:
            refused = error
            continue
        if (found.naming.period_before, found.naming.period_after) != (before, after):
            raise NotProved("the periods before and after do not belong to such an onset", refuted=True)
        return found.proof
    raise refused
