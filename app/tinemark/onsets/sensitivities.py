"""How an onset moves with the other parameters, by implicit differentiation of what defines it.

An onset r of a cycle x of f^p is a regular solution of F(x, r; q) = 0, so its derivative with respect to
another parameter q solves F_(x,r) (dx, dr)/dq = -F_q (implicit function theorem). F is

    f^p(x) - x = 0 and g = 0,

where g is the bordering function of the matrix f^p_x - mu, which is smooth and zero exactly where mu is a
multiplier (Govaerts 2000, Numerical Methods for Bifurcations of Dynamical Equilibria, chapter 4): mu is -1 at
a flip, 1 at a fold, and exp(i theta) with theta unknown at a Neimark-Sacker point. Where two branches cross
(transcritical, pitchfork) F_(x,r) is singular; there the onset is where the slope of f^p - x in x and
its slope in r vanish together, as long as the crossing itself persists. At a border collision g is the
formula of the surface that the cycle touches.
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Generator
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import numpy as np
from flint import acb, acb_mat, arb, arb_mat

from tinemark.onsets.ball_orbits import ball_of, fraction_of, precision
from tinemark.onsets.decimals import decimal_places, fixed_text, rounded
from tinemark.onsets.results import Kind, Onset, Sensitivity, Status, Step
from tinemark.onsets.sensitivity_borders import Border, border_pass, borders_at
from tinemark.onsets.sensitivity_passes import CRITICAL, SWEPT, Course, Passed, course_of, run_pass
from tinemark.systems.errors import FormulaError, SwitchingTouched
from tinemark.systems.system import System

DIGITS = 12
"""Significant digits of a derivative."""
LONGEST_UNASKED = 4096
"""Longest cycle for which derivatives are made without being asked for."""
FIRST_BITS = 160
BITS_PER_DOUBLING = 10
"""Second derivatives of f^p grow by a factor with every doubling of the period; this holds them."""
ATTEMPTS = 3
MOST_PASSES = 8
AGREEMENT = 1e-14
"""Relative difference between two passes, the later at the corrected point, at which both hold."""
NOTHING = 1e-20
"""A shift of the onset below this share of it, for a change of a parameter by its own size, is none."""
KEEPS_CROSSING = 1e-12
"""Two branches go on crossing where a parameter changes f^p there by no more than this."""

REGULAR = (Kind.FLIP, Kind.FOLD, Kind.NEIMARK_SACKER, Kind.BORDER_COLLISION)
CROSSINGS = (Kind.TRANSCRITICAL, Kind.PITCHFORK)


@dataclass(frozen=True)
class Moves:
    """How an onset moves: one entry a parameter, and the reason where there is none.

    Attributes
    ----------
    found
        In the system's order of parameters.
    missing
        (parameter, why its derivative is not known); all of them where nothing could be solved.
    """

    found: tuple[Sensitivity, ...]
    missing: tuple[tuple[str, str], ...] = ()


class _Unsolved(Exception):
    """The defining system could not be solved at this precision; says why."""


@dataclass(frozen=True)
class _Place:
    x: list[Any]
    r: Any
    angle: Any = None  # of the critical multiplier; None where it is real
    border: Border | None = None


@dataclass(frozen=True)
class _Pass:
    """Newton shift of (x, r[, angle]), and dr/dq of every other parameter, at one place."""

    shift: list[Any]
    slopes: list[Any]
    unsound: frozenset[int] = frozenset()  # parameters with which the onset falls apart


def with_sensitivities(
    system: System, onset: Onset, *, longest: int | None = None
) -> Generator[Step, None, Onset]:
    """The onset with its derivatives filled in; as it was where it has them, or where none are known.

    Parameters
    ----------
    longest
        Longest period for which they are made; None for any.
    """
    if not system.is_map:
        from tinemark.onsets.flow_sensitivities import with_flow_sensitivities

        return (yield from with_flow_sensitivities(system, onset, longest=longest))
    if onset.sensitivities or (longest is not None and _period(onset) > longest):
        return onset
    moves = yield from sensitivities(system, onset)
    return replace(onset, sensitivities=moves.found) if moves.found else onset


def sensitivities(system: System, onset: Onset) -> Generator[Step, None, Moves]:
    """Derivative of an onset with respect to every parameter but the swept one.

    The onset is solved for once more from its printed point and value, so that a few digits are
    enough to begin with, and the derivatives of two passes must agree.

    Parameters
    ----------
    system
        The system, every parameter at the value at which the onset was found.
    """
    course = _differentiable(course_of(system, onset.parameter))
    dropped = [name for name in system.parameter_names if name not in (*course.others, onset.parameter)]
    missing = [(name, f"the formulas have no derivative in {name}") for name in dropped]
    why = _refusal(system, onset)
    if not course.others or why:
        return Moves((), (*missing, *((name, why) for name in course.others)))
    bits = FIRST_BITS + BITS_PER_DOUBLING * _period(onset).bit_length()
    reason = ""
    borders = _borders(course, onset)
    if not borders:
        reason = "the cycle's point lies on no switching surface"
    for attempt in range(ATTEMPTS * len(borders)):
        try:
            done = yield from _solved(course, onset, borders[attempt % len(borders)], bits)
        except _Unsolved as error:
            reason = str(error)
            bits *= 2 if attempt % len(borders) == len(borders) - 1 else 1
            continue
        except (SwitchingTouched, FormulaError) as error:
            reason = error.message
            break
        return _moves(course, done, bits, missing)
    return Moves((), (*missing, *((name, reason) for name in course.others)))


def _refusal(system: System, onset: Onset) -> str:
    if onset.status in (Status.READ_BY_EYE, Status.MEASURED):
        return f"the onset is {onset.status.value}: only a refined onset has derivatives"
    one_state = len(system.states) == 1
    if onset.kind not in (*REGULAR, *(CROSSINGS if one_state else ())):
        return f"no equations are set up that define the {onset.kind.value}"
    if dict(onset.states).keys() != set(system.state_names) or _period(onset) < 1:
        return "no point of the cycle is known"
    return ""


def _borders(course: Course, onset: Onset) -> tuple[Border | None, ...]:
    """Both sides of the surface that a border collision touches; for all other kinds one that is None."""
    if onset.kind is not Kind.BORDER_COLLISION:
        return (None,)
    point = {name: Fraction(text) for name, text in onset.states}
    return borders_at(course, point, onset.value_fraction)


def _period(onset: Onset) -> int:
    return onset.period_before or onset.period_after


def _differentiable(course: Course) -> Course:
    from tinemark.systems.derivatives import derivative

    def fits(name: str) -> bool:
        try:
            for formula in course.formulas:
                derivative(formula, name)
        except FormulaError:
            return False
        return True

    return replace(course, others=tuple(name for name in course.others if fits(name)))


def _moves(course: Course, done: _Pass, bits: int, missing: list[tuple[str, str]]) -> Moves:
    found = []
    for place, (name, slope) in enumerate(zip(course.others, done.slopes, strict=True)):
        if place in done.unsound:
            missing.append((name, f"the branches cross no longer where {name} changes"))
        elif not slope.is_finite():
            missing.append((name, f"the formulas have no finite derivative in {name} on the cycle"))
        else:
            with precision(bits):
                value = fraction_of(slope)
            found.append(Sensitivity(name, derivative_text(value)))
    return Moves(tuple(found), tuple(missing))


def derivative_text(value: Fraction) -> str:
    """Decimal text of a derivative, to `DIGITS` significant digits."""
    if value == 0:
        return "0"
    places = decimal_places(value, DIGITS)
    if len(str(abs(rounded(value, places)))) > DIGITS:  # 0.99…9 became 1.00…0: one place fewer
        places -= 1
    return fixed_text(rounded(value, places), places)


def _solved(course: Course, onset: Onset, border: Border | None, bits: int) -> Generator[Step, None, _Pass]:
    """Newton's method until two passes in a row give the same derivatives."""
    point = dict(onset.states)
    with precision(bits):
        x = [ball_of(Fraction(point[name])).mid() for name in course.states]
        place = _Place(x, ball_of(onset.value_fraction).mid(), border=border)
        sizes = [max(abs(float(_value_of(course, name))), 1e-3) for name in course.others]
    before: _Pass | None = None
    for _ in range(MOST_PASSES):
        place, now = yield from _one_pass(course, onset, place, bits)
        with precision(bits):
            if not all(value.is_finite() for value in now.shift):
                raise _Unsolved("the equations that define the onset are singular here")
            now = replace(now, slopes=_cleared(now.slopes, place.r, sizes))
            states = len(place.x)
            moved = [(value + shift).mid() for value, shift in zip(place.x, now.shift[:states], strict=True)]
            angle = None if place.angle is None else (place.angle + now.shift[states + 1]).mid()
            place = replace(place, x=moved, r=(place.r + now.shift[states]).mid(), angle=angle)
            if before is not None and _agree(before, now):
                if not _inside(onset, fraction_of(place.r)):
                    raise _Unsolved("Newton's method went to another onset")
                return now
        before = now
    raise _Unsolved("Newton's method did not converge on the equations that define the onset")


def _value_of(course: Course, name: str) -> Fraction:
    return course.system.parameter(name).value.fraction


def _cleared(slopes: list[Any], r: Any, sizes: list[float]) -> list[Any]:
    """Slopes that are nothing but rounding set to zero."""
    least = NOTHING * max(abs(float(r)), 1e-3)
    return [
        arb(0) if slope.is_finite() and abs(float(slope)) * size < least else slope
        for slope, size in zip(slopes, sizes, strict=True)
    ]


def _agree(before: _Pass, now: _Pass) -> bool:
    for one, other in zip(before.slopes, now.slopes, strict=True):
        if one.is_finite() != other.is_finite():
            return False
        if one.is_finite() and not abs(float(one - other)) <= AGREEMENT * abs(float(other)):
            return False
    return before.unsound == now.unsound


def _inside(onset: Onset, r: Fraction) -> bool:
    # The interval of an estimated onset has 95 % coverage, so one such interval more on either side.
    room = 3 * onset.half_width + abs(onset.value_fraction) / 10**12
    return abs(r - onset.value_fraction) <= room


def _one_pass(
    course: Course, onset: Onset, place: _Place, bits: int
) -> Generator[Step, None, tuple[_Place, _Pass]]:
    period = _period(onset)
    if onset.kind in CROSSINGS:
        return place, (yield from _crossing_pass(course, place, period, bits))
    if place.border is not None:
        return place, (yield from _border_pass(course, place, place.border, period, bits))
    if onset.kind is Kind.NEIMARK_SACKER:
        return (yield from _rotating_pass(course, place, period, bits))
    target = -1 if onset.kind is Kind.FLIP else 1
    return place, (yield from _real_pass(course, place, target, period, bits))


def _real_pass(
    course: Course, place: _Place, target: int, period: int, bits: int
) -> Generator[Step, None, _Pass]:
    """Flip and fold: unknowns x and r, equations f^p(x) - x and g."""
    n = len(course.states)
    if n == 1:
        with precision(bits):
            left, right, value = [arb(1)], [arb(1)], None
    else:
        plain = yield from run_pass(course, (), [], place.x, place.r, period, bits)
        with precision(bits):
            left, right, value = _bordered(arb_mat, _shifted(plain.first, n, target))
    passed = yield from run_pass(course, (CRITICAL,), [right], place.x, place.r, period, bits)
    with precision(bits):
        if value is None:
            value = target - passed.first[0][0]
        slopes = _weighted(left, passed.second[0])
        matrix = _closing(passed, n)
        rows = [[-entry for entry in slopes]]
        misses = [end - start for end, start in zip(passed.end, place.x, strict=True)]
        return _pass(matrix + rows, [*misses, value], n + 1, n)


def _rotating_pass(
    course: Course, place: _Place, period: int, bits: int
) -> Generator[Step, None, tuple[_Place, _Pass]]:
    """Neimark-Sacker: the angle of the critical multiplier is a third unknown, and g is complex."""
    n = len(course.states)
    plain = yield from run_pass(course, (), [], place.x, place.r, period, bits)
    with precision(bits):
        if place.angle is None:
            place = replace(place, angle=arb(_critical_angle(plain.first, n)))
        multiplier = acb(place.angle.cos(), place.angle.sin()).mid()
        left, right, value = _bordered(acb_mat, _shifted(plain.first, n, multiplier))
        halves = [[entry.real for entry in right], [entry.imag for entry in right]]
    passed = yield from run_pass(course, (CRITICAL, CRITICAL), halves, place.x, place.r, period, bits)
    with precision(bits):
        whole = [
            [acb(real, imag) for real, imag in zip(*rows, strict=True)]
            for rows in zip(*passed.second, strict=True)
        ]
        slopes = [-entry for entry in _weighted(left, whole)]
        turn = acb(0, 1) * multiplier * sum((a * b for a, b in zip(left, right, strict=True)), acb(0))
        # The angle is one more column, between the swept parameter and the others.
        closing = [[*row[: n + 1], arb(0), *row[n + 1 :]] for row in _closing(passed, n)]
        slopes = [*slopes[: n + 1], turn, *slopes[n + 1 :]]
        rows = [*closing, [entry.real for entry in slopes], [entry.imag for entry in slopes]]
        misses = [end - start for end, start in zip(passed.end, place.x, strict=True)]
        return place, _pass(rows, [*misses, value.real, value.imag], n + 2, n)


def _crossing_pass(course: Course, place: _Place, period: int, bits: int) -> Generator[Step, None, _Pass]:
    """Transcritical and pitchfork, one state: f^p(x) - x has no slope in x and none in r."""
    with precision(bits):
        vectors = [[arb(1)], [arb(0)]]
    passed = yield from run_pass(course, (CRITICAL, SWEPT), vectors, place.x, place.r, period, bits)
    with precision(bits):
        rows = [passed.second[0][0], passed.second[1][0]]
        misses = [passed.first[0][0] - 1, passed.first[0][1]]
        done = _pass(rows, misses, 2, 1)
        pushes = [abs(float(value)) for value in passed.first[0][2:]]
        return replace(done, unsound=frozenset(i for i, push in enumerate(pushes) if push > KEEPS_CROSSING))


def _border_pass(
    course: Course, place: _Place, border: Border, period: int, bits: int
) -> Generator[Step, None, _Pass]:
    """Border collision: unknowns x and r, equations f^p(x) - x and the surface's formula."""
    n = len(course.states)
    passed, slopes, height = yield from border_pass(course, border, place.x, place.r, period, bits)
    with precision(bits):
        misses = [end - start for end, start in zip(passed.end, place.x, strict=True)]
        return _pass([*_closing(passed, n), slopes], [*misses, height], n + 1, n)


def _closing(passed: Passed, n: int) -> list[list[Any]]:
    """Derivatives of f^p(x) - x in all directions."""
    return [
        [entry - 1 if i == j else entry for j, entry in enumerate(row)] for i, row in enumerate(passed.first)
    ][:n]


def _shifted(first: list[list[Any]], n: int, multiplier: Any) -> list[list[Any]]:
    return [[first[i][j] - (multiplier if i == j else 0) for j in range(n)] for i in range(n)]


def _bordered(matrix_of: Any, rows: list[list[Any]]) -> tuple[list[Any], list[Any], Any]:
    """Left and right vectors and the bordering function of a matrix that is all but singular.

    [M b; c* 0] (v, g) = (0, 1), and the same transposed for w; then dg = -w dM v for any change of M.
    """
    n = len(rows)
    rough = np.array([[complex(entry) for entry in row] for row in rows])
    if not np.isfinite(rough).all():
        raise _Unsolved("the orbit left the domain of the formula")
    if matrix_of is arb_mat:
        rough = rough.real
    try:
        left, _, right = np.linalg.svd(rough)
    except np.linalg.LinAlgError as error:
        raise _Unsolved("the critical multiplier is not a simple one") from error
    border, normal = left[:, -1], right[-1].conj()
    number = float if matrix_of is arb_mat else complex
    top = [[*row, number(b)] for row, b in zip(rows, border, strict=True)]
    whole = matrix_of(
        n + 1, n + 1, [entry for row in [*top, [*map(number, normal.conj()), 0]] for entry in row]
    )
    one = matrix_of(n + 1, 1, [0] * n + [1])
    try:
        v = whole.mid().solve(one, algorithm="approx").mid()
        w = whole.transpose().mid().solve(one, algorithm="approx").mid()
    except (ZeroDivisionError, ValueError) as error:
        raise _Unsolved("the critical multiplier is not a simple one") from error
    return [w[i, 0] for i in range(n)], [v[i, 0] for i in range(n)], v[n, 0]


def _weighted(left: list[Any], rows: list[list[Any]]) -> list[Any]:
    return [
        sum((a * b for a, b in zip(left, column, strict=True)), 0 * left[0])
        for column in zip(*rows, strict=True)
    ]


def _critical_angle(first: list[list[Any]], n: int) -> float:
    matrix = np.array([[float(first[i][j]) for j in range(n)] for i in range(n)])
    if not np.isfinite(matrix).all():
        raise _Unsolved("the orbit left the domain of the formula")
    values = np.linalg.eigvals(matrix)
    turning = [value for value in values if value.imag > 0]
    if not turning:
        raise _Unsolved("no pair of complex multipliers was found")
    return cmath.phase(min(turning, key=lambda value: abs(math.log(abs(value)))))


def _pass(rows: list[list[Any]], misses: list[Any], unknowns: int, swept: int) -> _Pass:
    """Newton shift and dr/dq from the rows (unknowns first, other parameters after) and the misses."""
    matrix = arb_mat(unknowns, unknowns, [entry for row in rows for entry in row[:unknowns]]).mid()
    others = len(rows[0]) - unknowns
    right = arb_mat(
        unknowns,
        1 + others,
        [entry for row, miss in zip(rows, misses, strict=True) for entry in [miss, *row[unknowns:]]],
    ).mid()
    try:
        inverse = matrix.inv().mid()
    except ZeroDivisionError as error:
        raise _Unsolved("the equations that define the onset are singular here") from error

    # Not by one product of matrices: a column that is not a number must stay alone.
    def solved(row: int, column: int) -> Any:
        return -sum((inverse[row, k] * right[k, column] for k in range(unknowns)), arb(0)).mid()

    return _Pass([solved(i, 0) for i in range(unknowns)], [solved(swept, 1 + j) for j in range(others)])
