"""Proofs of onsets of maps of several states: the Krawczyk test on all points of the cycle at once.

On a box Z around a middle m, in the frames of `many_shooting`, K = -C F(m) - C (F'(Z) - F'(m)) Z with
C the inverse of F'(m). K strictly inside Z shows exactly one zero of the defining equations F in
the box, and that it lies in K (Krawczyk 1969; Moore 1977). C is applied by the condensed recurrences, so
no matrix larger than a few times the number of states is formed, and the cost grows linearly with the period.
"""

from __future__ import annotations

from collections.abc import Generator, Sequence
from dataclasses import dataclass
from typing import Any

from flint import arb

from tinemark.onsets.ball_orbits import fraction_of, precision
from tinemark.onsets.many_claims import Claims, claims_of
from tinemark.onsets.many_conservative import conservative_claims, preserves_areas
from tinemark.onsets.many_jets import jets_along
from tinemark.onsets.many_map import Floats, ManyMap
from tinemark.onsets.many_preparation import worked_out
from tinemark.onsets.many_shooting import (
    Condensed,
    Frames,
    Local,
    Place,
    Right,
    Shift,
    closing_blocks,
    column,
    entries,
    frames_along,
    in_turn,
    local_at,
)
from tinemark.onsets.proofs import Interval, NotProved, prime_factors, rounded_down
from tinemark.onsets.results import Kind, Step

FLOOR_BITS = 12
"""Residuals are taken as no smaller than 2**(this - precision), so that no box is empty."""


@dataclass(frozen=True)
class ManyProof:
    """What was shown of the one onset in a box.

    Attributes
    ----------
    parameter, states
        Enclosures of the onset's parameter value and of the first cycle point.
    box
        Balls of the interval Newton test, in which there is no other zero: the parameter, then each state.
    claims
        Everything else that was shown.
    evidence
        (claim, finding) pairs in words.
    conservative
        Whether both multipliers are critical because the map preserves areas.
    """

    parameter: Interval
    states: tuple[Interval, ...]
    box: tuple[Interval, ...]
    claims: Claims
    evidence: tuple[tuple[str, str], ...]
    conservative: bool = False


@dataclass(frozen=True)
class Enclosed:
    """The one zero of the defining equations in a box.

    Attributes
    ----------
    box
        Balls around all unknowns that hold exactly one zero.
    first, r
        Tighter balls around the first point and the parameter.
    frames, local
        Frames, and the map's derivatives on the box.
    half_r
        Half-width of the box in the parameter, an exact ball.
    """

    box: Place
    first: list[Any]
    r: Any
    frames: Frames
    local: Local
    half_r: Any


def prove_many(
    many: ManyMap, kind: Kind, middle: Place, scales: Floats, bits: int
) -> Generator[Step, None, ManyProof]:
    """Prove that a box around a middle holds exactly one onset of this kind and of this least period.

    Parameters
    ----------
    middle
        Exact balls near a solution of the defining equations.
    scales
        Length typical of each state.

    Raises
    ------
    NotProved
        A test failed or stayed undecided.
    SwitchingTouched
        The box of a cycle point touches a switching surface or an edge of the domain.
    """
    found = yield from enclose(many, kind, middle, scales, bits)
    with precision(bits):
        evidence = [("one onset in the box", newton_words(found.half_r, middle.period))]
        evidence += least_period_words(found.box.points, scales)
    parts = found.box, found.frames, found.local, scales, bits
    conservative = kind is not Kind.NEIMARK_SACKER and preserves_areas(many, middle.period)
    if conservative:
        claims = yield from conservative_claims(many, kind, *parts)
    else:
        claims = yield from claims_of(many, kind, *parts)
    with precision(bits):
        return ManyProof(
            interval_of(found.r),
            tuple(interval_of(value) for value in found.first),
            tuple(interval_of(value) for value in (found.box.r, *found.box.points[0])),
            claims,
            (*evidence, *claims.evidence),
            conservative,
        )


def enclose(
    many: ManyMap, kind: Kind, middle: Place, scales: Floats, bits: int
) -> Generator[Step, None, Enclosed]:
    """The interval Newton test.

    Raises
    ------
    NotProved
        It failed.
    SwitchingTouched
        As `prove_many`.
    """
    text = f"proving the {kind.value} of period {middle.period}"
    try:
        frames = yield from frames_along(many, middle, scales, bits, text)
        local = yield from local_at(many, kind, middle, frames, bits, text)
        condensed = Condensed(kind, middle, frames, local)
        yield from condensed.condense(bits, text)
    except ArithmeticError as error:
        raise NotProved("the equations of the onset are singular there") from error
    with precision(bits):
        right = _right(local, middle)
        floor = arb(0, arb(2) ** (FLOOR_BITS - bits))
        wide = Right(
            [_widened(part, floor) for part in right.points],
            [[_widened(part, floor) for part in parts] for parts in right.vectors],
            right.circle + floor,
        )
    first = yield from condensed.solve(wide, bits, text)
    with precision(bits):
        box = _box_of(first, arb(2) ** -bits)
        balls = _around(middle, frames, box)
    for each in dict.fromkeys(many.steps or (many,)):
        yield from worked_out(each, 3)
    yield Step(text)
    jets = jets_along(many, middle.period)
    yield Step(text)

    def check(at: int, x: Sequence[Any], r: Any) -> None:
        jets[at].check_sides(x, r)

    on_box = yield from local_at(many, kind, balls, frames, bits, text, check)
    curved = yield from _curved(kind, middle, balls, frames, local, on_box, box, right, bits, text)
    image = yield from condensed.solve(curved, bits, text)
    with precision(bits):
        if not _inside(image, box):
            raise NotProved("the interval Newton test did not map the box into itself")
        tight = frames.bases[0] * image.points[0] + column(middle.points[0])
        return Enclosed(balls, entries(tight), middle.r + image.r, frames, on_box, box.r.rad())


def _right(local: Local, middle: Place) -> Right:
    circle = arb(0)
    if middle.angle is not None:
        c, s = middle.angle
        circle = c * c + s * s - 1
    return Right(local.gaps, local.gaps_v, circle)


def _widened(part: Any, floor: Any) -> Any:
    return column([value + floor for value in entries(part)])


def _box_of(shift: Shift, least: Any) -> Shift:
    """Balls around zero, twice as wide as a shift and a little more, so that the test has room."""

    def twice(value: Any) -> Any:
        return arb(0, (2 * value.abs_upper() + least).abs_upper())

    def columns(parts: list[Any]) -> list[Any]:
        return [column([twice(value) for value in entries(part)]) for part in parts]

    return Shift(
        columns(shift.points),
        [columns(parts) for parts in shift.vectors],
        twice(shift.r),
        [twice(value) for value in shift.angle],
    )


def _around(middle: Place, frames: Frames, box: Shift) -> Place:
    points, vectors = [], []
    for at in range(middle.period):
        basis = frames.bases[at]
        points.append(entries(column(middle.points[at]) + basis * box.points[at]))
        vectors.append(
            [
                entries(column(vector) + basis * part)
                for vector, part in zip(middle.vectors[at], box.vectors[at], strict=True)
            ]
        )
    angle = None
    if middle.angle is not None:
        angle = (middle.angle[0] + box.angle[0], middle.angle[1] + box.angle[1])
    return Place(points, vectors, middle.r + box.r, angle)


def _curved(
    kind: Kind,
    middle: Place,
    balls: Place,
    frames: Frames,
    local: Local,
    on_box: Local,
    box: Shift,
    right: Right,
    bits: int,
    text: str,
) -> Generator[Step, None, Right]:
    """F(m) + (F'(Z) - F'(m)) Z, row by row."""
    points: list[Any] = []
    vectors: list[list[Any]] = []

    def one(at: int) -> None:
        turn = on_box.turn[at] - local.turn[at]
        shift = box.points[at]
        points.append(right.points[at] + turn * shift + (on_box.slope[at] - local.slope[at]) * box.r)
        vectors.append(
            [
                right.vectors[at][which]
                + turn * box.vectors[at][which]
                + (on_box.bend[at][which] - local.bend[at][which]) * shift
                + (on_box.bend_r[at][which] - local.bend_r[at][which]) * box.r
                for which in range(middle.width)
            ]
        )

    yield from in_turn(middle.period, bits, text, one)
    with precision(bits):
        circle = right.circle
        if middle.angle is not None and balls.angle is not None:
            # Only here do the closing equations bend: products of the angle's pair with the vectors.
            blocks, columns = closing_blocks(kind, balls, frames)
            blocks_m, columns_m = closing_blocks(kind, middle, frames)
            for which in range(middle.width):
                for other in range(middle.width):
                    bend = blocks[which][other] - blocks_m[which][other]
                    vectors[-1][which] -= bend * box.vectors[0][other]
                for place, part in enumerate(box.angle):
                    vectors[-1][which] -= (columns[which][place] - columns_m[which][place]) * part
            for wide, exact, part in zip(balls.angle, middle.angle, box.angle, strict=True):
                circle = circle + 2 * (wide - exact) * part
        return Right(points, vectors, circle)


def _inside(image: Shift, box: Shift) -> bool:
    pairs = [(image.r, box.r), *zip(image.angle, box.angle, strict=True)]
    for part, whole in zip(image.points, box.points, strict=True):
        pairs += zip(entries(part), entries(whole), strict=True)
    for parts, wholes in zip(image.vectors, box.vectors, strict=True):
        for part, whole in zip(parts, wholes, strict=True):
            pairs += zip(entries(part), entries(whole), strict=True)
    # `abs_lower` of a ball around zero is zero: its half-width is its radius, an exact ball.
    return all(part.abs_upper() < whole.rad() for part, whole in pairs)


def newton_words(half_r: Any, period: int) -> str:
    """What the interval Newton test was made on."""
    half = f"half-width {rounded_down(half_r)} in the parameter"
    return f"interval Newton test on {period} points with their critical vectors, {half}"


def least_period_words(points: Sequence[Sequence[Any]], scales: Floats) -> list[tuple[str, str]]:
    """The claim that a cycle of so many enclosed points has no smaller period, shown.

    Raises
    ------
    NotProved
        The cycle may close earlier.
    """
    period = len(points)
    gaps = []
    for steps in sorted(period // prime for prime in prime_factors(period)):
        apart = [
            ((a - b) / float(scale)).abs_lower()
            for a, b, scale in zip(points[steps], points[0], scales, strict=True)
        ]
        clear = [gap for gap in apart if gap > 0]
        if not clear:
            raise NotProved(
                f"the cycle closes after {steps} steps already: its least period is not {period}",
                refuted=True,
            )
        widest = max(clear, key=float)
        gaps.append(f"after {steps} steps at least {rounded_down(widest)} of a state's range away")
    finding = "the point is " + ", ".join(gaps) if gaps else "a steady state"
    return [(f"least period exactly {period}", finding)]


def interval_of(ball: Any) -> Interval:
    """Both ends of a ball."""
    middle, half = fraction_of(ball.mid()), fraction_of(ball.rad())
    return middle - half, middle + half
