"""Where a cycle's points, or a reflection's centre, may be exactly: numbers and formulas of the parameter.

A curve is only suggested here, by numbers that are known to many digits; that anything holds on it is
shown by algebra afterwards.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction

from tinemark.verify import intervals as iv
from tinemark.verify.algebra import Field
from tinemark.verify.claims import Undecided
from tinemark.verify.cycles import XX, XXX, OneState, X
from tinemark.verify.formula import Instruction, Program, parse
from tinemark.verify.intervals import ONE, ZERO, Interval
from tinemark.verify.quotients import Quotient
from tinemark.verify.series import ONE_STATE, Evaluator, shape_of

LARGEST_DENOMINATOR = 10**6
LARGEST_TURNS = 60
FACTORS = tuple(map(Fraction, ("1", "2", "-1", "-2", "1/2", "-1/2")))
"""What a part of a formula may be multiplied by to be a curve."""
MOST_PARTS = 60
FIT_BITS, FIT_PLACES, FIT_DENOMINATOR = 200, 6, 10**5
NEWTON_STEPS = 30
ALONG = shape_of(((0,), (1,)))


@dataclass(frozen=True)
class Curve:
    """A formula of the parameter alone."""

    program: Program
    parameter: str

    def at(self, r: Interval, bits: int) -> tuple[Interval, Interval]:
        """Enclosures of its value and of its derivative on an interval of the parameter."""
        evaluate = Evaluator(self.program, ALONG, bits, {}, [self.parameter])
        series = evaluate({self.parameter: {0: r, 1: ONE}})
        return series[0], series.get(1, ZERO)

    def exact(self, field: Field, values: dict[str, Quotient]) -> Quotient:
        """Its value in algebra; raises `Untold`."""
        return field.value(self.program, values, {})

    def times(self, factor: Fraction) -> Curve:
        """A multiple of it."""
        count = len(self.program.steps)
        steps = (
            *self.program.steps,
            Instruction("number", value=factor),
            Instruction("mul", (count - 1, count)),
        )
        return Curve(Program(steps), self.parameter)


def known_number(value: Interval, bits: int) -> str | None:
    """A short rational, or one times pi, in an interval far narrower than such numbers lie apart."""
    low, high = iv.ends(value)
    middle = (low + high) / 2
    plain = middle.limit_denominator(LARGEST_DENOMINATOR)
    if low <= plain <= high:
        return _text(plain)
    quotient = iv.ends(iv.div(value, iv.pi(bits), bits))
    turns = (sum(quotient, Fraction(0)) / 2).limit_denominator(LARGEST_TURNS)
    return f"{_text(turns)}*pi" if turns and quotient[0] <= turns <= quotient[1] else None


def _text(value: Fraction) -> str:
    return f"({value.numerator}/{value.denominator})"


def curves_through(one: OneState, value: Interval, r: Interval, bits: int) -> Iterator[Curve]:
    """Curves that pass through an interval on an interval of the parameter, the simplest first."""
    text = known_number(value, bits)
    if text is not None:
        yield Curve(parse(text, (), {}), one.parameter)
    for part in _parts(one):
        for factor in FACTORS:
            curve = Curve(part, one.parameter)
            curve = curve if factor == 1 else curve.times(factor)
            try:
                there, _ = curve.at(r, bits)
            except Undecided:
                continue
            if iv.sign(iv.sub(there, value, bits)) == 0:
                yield curve


def _parts(one: OneState) -> Sequence[Program]:
    """Parts of the formula that hold the parameter and not the state."""
    steps = one.program.steps
    names: list[frozenset[str]] = []
    found = []
    for place, step in enumerate(steps):
        here = frozenset({step.name}) if step.op == "name" else frozenset()
        names.append(here.union(*(names[arg] for arg in step.args)))
        if names[-1] == {one.parameter}:
            found.append(one.program.upto(place))
    return found[:MOST_PARTS]


def fitted_centre(one: OneState, near: Interval, r: Interval) -> Curve | None:
    """A centre as a low polynomial or a fraction of two linear functions of the parameter, or none.

    A centre is an inflection, so Newton's method for f_xx = 0 follows it along the parameter.
    """
    bits = FIT_BITS
    x = iv.middle(near, bits)
    start = iv.ends(iv.middle(r, bits))[0].limit_denominator(1000)
    stride = max(abs(start), Fraction(1, 10)).limit_denominator(20) / 16
    places = []
    for count in range(FIT_PLACES):
        at = start + count * stride
        try:
            x = _inflection(one, x, iv.of_fraction(at, bits), bits)
        except Undecided:
            return None
        exact = iv.ends(x)[0].limit_denominator(FIT_DENOMINATOR)
        if abs(iv.ends(x)[0] - exact) > Fraction(1, 10**40):
            return None
        places.append((at, exact))
    text = _interpolated(places, one.parameter)
    return None if text is None else Curve(parse(text, (one.parameter,), {}), one.parameter)


def _inflection(one: OneState, x: Interval, r: Interval, bits: int) -> Interval:
    evaluate = Evaluator(one.program, ONE_STATE, bits, {one.parameter: {0: iv.middle(r, bits)}}, [one.state])
    for _ in range(NEWTON_STEPS):
        series = evaluate({one.state: {0: x, X: ONE}})
        three = iv.mul(iv.of_whole(3), series.get(XXX, ZERO), bits)
        move = iv.middle(iv.div(series.get(XX, ZERO), iv.middle(three, bits), bits), bits)
        x = iv.middle(iv.sub(x, move, bits), bits)
        if move == ZERO or iv.size_power(move) < 10 - bits + max(0, iv.size_power(x)):
            return x
    raise Undecided("no inflection was found")


def _interpolated(places: Sequence[tuple[Fraction, Fraction]], name: str) -> str | None:
    """A formula through all places: of second degree, or one linear function over another."""
    (r0, c0), (r1, c1), (r2, c2) = places[:3]
    first, second = (c1 - c0) / (r1 - r0), (c2 - c1) / (r2 - r1)
    third = (second - first) / (r2 - r0)
    if all(c0 + first * (r - r0) + third * (r - r0) * (r - r1) == c for r, c in places):
        linear = f"{_text(c0)} + {_text(first)}*({name} - {_text(r0)})"
        return f"{linear} + {_text(third)}*({name} - {_text(r0)})*({name} - {_text(r1)})"
    # c + d c r = a + b r at three places.
    rows = [[Fraction(1), r, -c * r, c] for r, c in places[:3]]
    solution = _solved(rows)
    if solution is None:
        return None
    a, b, d = solution
    if not all(c * (1 + d * r) == a + b * r for r, c in places):
        return None
    return f"({_text(a)} + {_text(b)}*{name})/(1 + {_text(d)}*{name})"


def _solved(rows: list[list[Fraction]]) -> list[Fraction] | None:
    size = len(rows)
    for column in range(size):
        pivot = next((i for i in range(column, size) if rows[i][column]), None)
        if pivot is None:
            return None
        rows[column], rows[pivot] = rows[pivot], rows[column]
        rows[column] = [entry / rows[column][column] for entry in rows[column]]
        for other in range(size):
            if other != column and rows[other][column]:
                factor = rows[other][column]
                rows[other] = [x - factor * y for x, y in zip(rows[other], rows[column], strict=True)]
    return [row[-1] for row in rows]
