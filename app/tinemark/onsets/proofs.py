"""Proofs of onsets of one-state maps: the Krawczyk test and the claims that go with it.

An onset of period p is a zero of F(x, r) = (f^p(x) - x, (f^p)'(x) - target), target -1 for a flip and
+1 for a fold. On a box [m] the Krawczyk operator K = m - C F(m) + (I - C F'([m]))([m] - m) that falls
strictly inside [m] shows exactly one zero in [m], and that it lies in K (Krawczyk, 1969; Moore, 1977).
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass
from decimal import ROUND_DOWN, Context, Decimal
from fractions import Fraction
from typing import Any

from flint import arb

from tinemark.onsets.ball_orbits import BallLoops, fraction_of, in_chunks, precision
from tinemark.onsets.results import Criticality, Kind, Step

Interval = tuple[Fraction, Fraction]
TARGETS = {Kind.FLIP: -1, Kind.FOLD: 1}
"""Multiplier of the cycle at an onset of each kind."""


class NotProved(Exception):
    """A test came out undecided at this precision; `refuted` where more bits cannot help."""

    def __init__(self, reason: str, *, refuted: bool = False) -> None:
        super().__init__(reason)
        self.reason = reason
        self.refuted = refuted


@dataclass(frozen=True)
class Box:
    """A box around a claimed onset: state and parameter, each a middle and a half-width (exact balls)."""

    x: Any
    r: Any
    half_x: Any
    half_r: Any


@dataclass(frozen=True)
class Correction:
    """Residual of the defining system at an exact point, through an approximate inverse: -C F(m)."""

    x: Any
    r: Any

    def sizes(self) -> tuple[float, float]:
        """Upper bounds of both components."""
        return float(self.x.abs_upper()), float(self.r.abs_upper())


@dataclass(frozen=True)
class Inverse:
    """Approximate inverse of the Jacobian of the defining system (exact balls)."""

    xx: Any
    xr: Any
    rx: Any
    rr: Any

    def times(self, first: Any, second: Any) -> tuple[Any, Any]:
        """Product with a column."""
        return self.xx * first + self.xr * second, self.rx * first + self.rr * second


@dataclass(frozen=True)
class Proof:
    """What was shown of the one onset in a box.

    Attributes
    ----------
    parameter, state
        Enclosures of the onset's parameter value and of the cycle point.
    criticality, degenerate
        Sign of the flip coefficient; `degenerate` says why it has none.
    evidence
        (claim, finding) pairs in words.
    """

    parameter: Interval
    state: Interval
    criticality: Criticality
    degenerate: str
    evidence: tuple[tuple[str, str], ...]


def inverse_of(u: Any, v: Any, w: Any, z: Any) -> Inverse:
    """Inverse of [[u - 1, v], [w, z]] at the midpoints, at the precision in force.

    Raises
    ------
    NotProved
        The matrix is singular as far as can be seen: no isolated onset of this kind.
    """
    u, v, w, z = (entry.mid() for entry in (u, v, w, z))
    determinant = (u - 1) * z - v * w
    if not determinant.is_finite() or determinant.contains(0):
        raise NotProved("the equations of the onset are singular there")
    return Inverse(
        *(
            entry.mid()
            for entry in (z / determinant, -v / determinant, -w / determinant, (u - 1) / determinant)
        )
    )


def correction_at(
    loops: BallLoops, kind: Kind, period: int, x: Any, r: Any, inverse: Inverse, bits: int
) -> Generator[Step, None, Correction]:
    """Rigorous -C F(m) at the exact point m = (x, r), with every rounding error included."""
    with precision(bits):
        one = arb(1)
    end, u = yield from in_chunks(
        lambda state, n: loops.point(state[0], r, state[1], n), (x, one), period, bits, "evaluating"
    )
    with precision(bits):
        shift_x, shift_r = inverse.times(end - x, u - TARGETS[kind])
        return Correction(-shift_x, -shift_r)


def box_around(x: Any, r: Any, correction: Correction, inverse: Inverse, bits: int) -> Box:
    """A box four times the correction, so that the test has room, and never empty."""
    with precision(bits):
        floor = arb(2) ** (16 - bits)
        # Of absolute values: entries that cancel must not leave a side without a width.
        least_x = (abs(inverse.xx) + abs(inverse.xr)) * floor
        least_r = (abs(inverse.rx) + abs(inverse.rr)) * floor
        half_x = 4 * correction.x.abs_upper() + least_x.abs_upper()
        half_r = 4 * correction.r.abs_upper() + least_r.abs_upper()
        return Box(x, r, half_x.abs_upper(), half_r.abs_upper())


def prove(
    loops: BallLoops, kind: Kind, period: int, box: Box, inverse: Inverse, correction: Correction, bits: int
) -> Generator[Step, None, Proof]:
    """Prove that a box holds exactly one onset of this kind and period.

    Raises
    ------
    NotProved
        A test failed or stayed undecided.
    SwitchingTouched
        The orbit's box touches a switching surface.
    """
    with precision(bits):
        state = (_ball(box.x, box.half_x), arb(1), arb(0), arb(0), arb(0), arb(0))
        whole_r = _ball(box.r, box.half_r)
        spread = whole_r - box.r
    first = state[0]

    def advance(now: tuple[Any, ...], count: int) -> tuple[Any, ...]:
        return loops.box(now[0], whole_r, box.r, spread, *now[1:], count)

    visited: list[tuple[int, Any]] = []
    done = 0
    for stop in sorted({*(period // prime for prime in prime_factors(period)), period}):
        state = yield from in_chunks(advance, state, stop - done, bits, "proving")
        done = stop
        if stop < period:
            visited.append((stop, state[0]))
    with precision(bits):
        image = krawczyk_image(box, inverse, correction, state)
        evidence = [("one onset in the box", box_words(box))]
        evidence += _least_period(period, first, visited)
        if kind is Kind.FLIP:
            criticality, degenerate, words = _flip_claims(state)
        else:
            criticality, degenerate, words = _fold_claims(state)
        return Proof(
            parameter=interval_of(box.r + image[1]),
            state=interval_of(box.x + image[0]),
            criticality=criticality,
            degenerate=degenerate,
            evidence=(*evidence, *words),
        )


def _ball(middle: Any, half: Any) -> Any:
    return arb(middle, half)


def krawczyk_image(
    box: Box, inverse: Inverse, correction: Correction, state: tuple[Any, ...]
) -> tuple[Any, Any]:
    """K([m]) - m, strictly inside the box."""
    _, u, v, w, z, _ = state
    span_x, span_r = arb(0, box.half_x), arb(0, box.half_r)
    one_x, mixed_x = inverse.times(u - 1, w)
    mixed_r, one_r = inverse.times(v, z)
    image_x = correction.x + (1 - one_x) * span_x - mixed_r * span_r
    image_r = correction.r - mixed_x * span_x + (1 - one_r) * span_r
    if not (image_x.abs_upper() < box.half_x and image_r.abs_upper() < box.half_r):
        raise NotProved("the interval Newton test did not map the box into itself")
    return image_x, image_r


def _least_period(period: int, first: Any, visited: list[tuple[int, Any]]) -> list[tuple[str, str]]:
    gaps = []
    for steps, point in visited:
        gap = (point - first).abs_lower()
        if not gap > 0:
            raise NotProved(
                f"the cycle closes after {steps} steps already: its least period is not {period}",
                refuted=True,
            )
        gaps.append(f"after {steps} steps at least {rounded_down(gap)} away")
    finding = "the point is " + ", ".join(gaps) if gaps else "a fixed point"
    return [(f"least period exactly {period}", finding)]


def _flip_claims(state: tuple[Any, ...]) -> tuple[Criticality, str, list[tuple[str, str]]]:
    _, _, v, w, z, schwarzian = state
    # Along the branch dx/dr = v / (1 - multiplier), and the multiplier is exactly -1.
    speed = z + w * v / 2
    if not speed.abs_lower() > 0:
        raise NotProved("the multiplier may touch -1 without crossing it")
    words = [
        ("multiplier exactly -1", "by the equations solved"),
        ("crosses -1 with speed", number_words(speed)),
    ]
    # f_xx^2/4 + f_xxx/6 of f^p where its derivative is -1 (Kuznetsov, 2004, section 4.5).
    coefficient = -schwarzian / 6
    if coefficient > 0:
        return Criticality.SUPERCRITICAL, "", [*words, ("flip coefficient", number_words(coefficient))]
    if coefficient < 0:
        return Criticality.SUBCRITICAL, "", [*words, ("flip coefficient", number_words(coefficient))]
    if not coefficient.is_finite():
        raise NotProved("the flip coefficient could not be bounded")
    return Criticality.UNDECIDED, "the flip coefficient may be zero, so the flip may be degenerate", words


def _fold_claims(state: tuple[Any, ...]) -> tuple[Criticality, str, list[tuple[str, str]]]:
    _, _, v, w, _, _ = state
    if not v.abs_lower() > 0:
        raise NotProved("the parameter may not move the cycle at first order: no true fold")
    if not w.abs_lower() > 0:
        raise NotProved("the tangency may be of higher order: no true fold")
    return (
        Criticality.NOT_APPLICABLE,
        "",
        [
            ("multiplier exactly +1", "by the equations solved"),
            ("speed of the parameter", number_words(v)),
            ("curvature at the tangency", number_words(w)),
        ],
    )


def interval_of(ball: Any) -> Interval:
    """Ends of a ball as rationals."""
    middle, half = fraction_of(ball.mid()), fraction_of(ball.rad())
    return middle - half, middle + half


def number_words(ball: Any) -> str:
    """A ball's middle to six digits."""
    return str(ball.str(6, radius=False))


def box_words(box: Box) -> str:
    """How the uniqueness of an onset was shown."""
    return f"interval Newton test on a box of half-width {rounded_down(box.half_r)} in the parameter"


def rounded_down(size: Any) -> str:
    """Two significant digits of a positive exact ball, never more than it is."""
    value = fraction_of(size)
    context = Context(prec=2, rounding=ROUND_DOWN)
    return f"{context.divide(Decimal(value.numerator), Decimal(value.denominator)):g}"


def prime_factors(number: int) -> list[int]:
    """Distinct prime factors, rising."""
    found, divisor = [], 2
    while divisor * divisor <= number:
        if number % divisor == 0:
            found.append(divisor)
            while number % divisor == 0:
                number //= divisor
        divisor += 1
    return [*found, number] if number > 1 else found
