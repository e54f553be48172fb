"""What a polished flip or fold of several states is like: multipliers, crossing speed, criticality.

Flip (Kuznetsov, Elements of Applied Bifurcation Theory, 5.4.2): with A q = -q, p A = -p, <p, q> = 1,
c = <p, C(q, q, q) + 3 B(q, (I - A)^-1 B(q, q))> / 6. On the curve x_0 + e q + e^2 (I - A)^-1 B(q, q) / 2 the
third-order term of f^p is exactly the bracket over 6, so c comes from two differences of f^p along curves,
taken in high precision. c > 0: the doubled cycle appears softly, on the far side of the onset.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass
from typing import Any

import numpy as np
from flint import arb, arb_mat

from tinemark.onsets.ball_orbits import precision
from tinemark.onsets.many_map import Floats, ManyMap, ball_evaluators
from tinemark.onsets.many_polish import Polished
from tinemark.onsets.results import Criticality, Kind, Step

CHUNK = 500
"""Orbit steps between two chances to cancel."""
DIFFERENCE_BITS = 40
"""Steps of the differences are the state's scale times 2**-this."""
ON_THE_CIRCLE = 1e-6
DEFECTIVE = 1e-6
"""Left and right critical vectors whose cosine is smaller than this mean a double multiplier."""
ONE_SIGN = 1e-9
FLAT = 1e-8
"""Size, in scaled states, below which a fold's bend, or its push over `reach`, counts as none."""


@dataclass(frozen=True)
class Findings:
    """What was found of an onset.

    Attributes
    ----------
    critical
        The critical multiplier.
    others
        The other multipliers.
    is_simple
        Whether the critical multiplier is the only one of its value, and no other lies on the unit circle.
    doubled
        Whether two multipliers meet at the critical value, as they must where the map preserves areas.
    crossing
        Flip: derivative of the critical multiplier in the parameter. Fold: <p, df^p/dr>.
    coefficient
        Flip: c of the normal form. Fold: <p, B(q, q)> / 2. None where it is not defined.
    is_degenerate
        Whether a fold lacks what makes it one: branches cross there (a pitchfork or a transcritical point)
        or touch.
    criticality
        From the sign of c where it is clearly one sign.
    """

    critical: complex
    others: tuple[complex, ...]
    is_simple: bool
    doubled: bool
    crossing: float
    coefficient: float | None
    criticality: Criticality
    is_degenerate: bool = False


def findings(
    many: ManyMap, kind: Kind, found: Polished, scales: Floats, reach: float
) -> Generator[Step, None, Findings]:
    """Check a polished onset; `reach` is a length typical of the parameter."""
    if kind is Kind.NEIMARK_SACKER:
        return _rotating(found)
    target = -1.0 if kind is Kind.FLIP else 1.0
    n = many.size
    matrix = _floats(found.monodromy)
    values = [complex(value) for value in np.linalg.eigvals(matrix)]
    values.sort(key=lambda value: abs(value - target))
    critical, others = values[0], tuple(values[1:])
    q = np.array([float(value) for value in found.vectors[0]])
    left = _left_null(matrix - target * np.eye(n))
    cosine = float(left @ q) / float(np.linalg.norm(left) * np.linalg.norm(q))
    near = [value for value in others if abs(value - target) < 1e-3]
    doubled = bool(near) or abs(cosine) < DEFECTIVE
    is_simple = not doubled and all(abs(abs(value) - 1) > ON_THE_CIRCLE for value in others)
    slope = np.array([float(value) for value in found.slope])
    size = float(np.linalg.norm(q / scales))
    if doubled:
        # A fold that the parameter does not push is none, whether its multiplier is a simple one or not.
        push = abs(float((left * scales) @ (slope / scales))) / float(np.linalg.norm(left * scales))
        flat = kind is Kind.FOLD and push * reach < FLAT
        return Findings(critical, others, False, True, 0.0, None, _undecided(kind), flat)
    turn, turn_r = _floats(found.turn), np.array([float(value) for value in found.turn_r])
    p = left / float(left @ q)
    if kind is Kind.FOLD:
        bend = float(p @ turn @ q) / 2 / size
        crossing = float(p @ slope) * size
        flat = abs(crossing) * reach < FLAT or abs(bend) < FLAT
        return Findings(critical, others, is_simple, False, crossing, bend, _undecided(kind), flat)
    drift = np.linalg.lstsq(np.eye(n) - matrix, slope, rcond=None)[0]
    crossing = float(p @ (turn @ drift + turn_r))
    try:
        coefficient, spread = yield from _flip_coefficient(many, found, matrix, p * size, q / size)
    except ZeroDivisionError:
        # Another multiplier is +1: there the coefficient is not defined.
        return Findings(critical, others, False, False, crossing, None, Criticality.UNDECIDED)
    clear = abs(coefficient) > ONE_SIGN and spread < abs(coefficient) / 10
    criticality = Criticality.UNDECIDED
    if clear and is_simple:
        criticality = Criticality.SUPERCRITICAL if coefficient > 0 else Criticality.SUBCRITICAL
    return Findings(critical, others, is_simple, False, crossing, coefficient, criticality)


def _rotating(found: Polished) -> Findings:
    """A Neimark-Sacker point that was not proved: its multipliers alone."""
    assert found.place.angle is not None
    target = complex(*(float(value) for value in found.place.angle))
    values = [complex(value) for value in np.linalg.eigvals(_floats(found.monodromy))]
    values.sort(key=lambda value: min(abs(value - target), abs(value - target.conjugate())))
    others = tuple(values[2:])
    is_simple = all(abs(abs(value) - 1) > ON_THE_CIRCLE for value in others)
    return Findings(target, others, is_simple, False, 0.0, None, Criticality.UNDECIDED)


def _undecided(kind: Kind) -> Criticality:
    return Criticality.UNDECIDED if kind is Kind.FLIP else Criticality.NOT_APPLICABLE


def _flip_coefficient(
    many: ManyMap, found: Polished, matrix: Floats, p: Floats, q: Floats
) -> Generator[Step, None, tuple[float, float]]:
    """Coefficient for a critical vector of length 1 in scaled states, and how far two step sizes disagree."""
    coefficients = []
    for extra in (0, 5):
        # Long cycles are fine structures: their points lie closer the longer they are.
        finer = DIFFERENCE_BITS + extra + 3 * len(found.points).bit_length()
        bits = max(found.bits, 5 * finer + 60)
        coefficients.append((yield from _third_order(many, found, matrix, p, q, finer, bits)))
    return coefficients[1], abs(coefficients[1] - coefficients[0])


def _third_order(
    many: ManyMap, found: Polished, matrix: Floats, p: Floats, q: Floats, finer: int, bits: int
) -> Generator[Step, None, float]:
    n, x0 = many.size, found.points[0]
    with precision(bits):
        h = arb(2) ** (-finer)
        direction = [arb(float(value)) for value in q]

    def image(share: int, second: list[Any]) -> Generator[Step, None, list[Any]]:
        with precision(bits):
            e = share * h
            point = [(x0[i] + e * direction[i] + e * e * second[i]).mid() for i in range(n)]
        return (yield from _carried(many, point, found, bits))

    straight = [0] * n
    plus = yield from image(1, straight)
    middle = yield from image(0, straight)
    minus = yield from image(-1, straight)
    with precision(bits):
        half_bend = [((plus[i] - 2 * middle[i] + minus[i]) / (2 * h * h)).mid() for i in range(n)]
        entries = [(1 if i == j else 0) - arb(float(matrix[i, j])) for i in range(n) for j in range(n)]
        second = arb_mat(n, n, entries).solve(arb_mat(n, 1, half_bend), algorithm="approx")
        curve = [second[i, 0].mid() for i in range(n)]
    far = yield from image(2, curve)
    near = yield from image(1, curve)
    back = yield from image(-1, curve)
    far_back = yield from image(-2, curve)
    with precision(bits):
        third = [(far[i] - 2 * near[i] + 2 * back[i] - far_back[i]) / (12 * h**3) for i in range(n)]
        return float(sum((arb(float(p[i])) * third[i] for i in range(n)), arb(0)))


def _carried(many: ManyMap, point: list[Any], found: Polished, bits: int) -> Generator[Step, None, list[Any]]:
    """The point after one period, by midpoints."""
    step = ball_evaluators(many).step
    left = len(found.points)
    while left:
        with precision(bits):
            for _ in range(min(left, CHUNK)):
                point = [arb(value).mid() for value in step(*point, found.r)]
        left -= min(left, CHUNK)
        yield Step("checking how the cycle splits")
    return point


def _left_null(matrix: Floats) -> Floats:
    left: Floats = np.linalg.svd(matrix)[0][:, -1]
    return left


def _floats(matrix: Any) -> Floats:
    rows, columns = matrix.nrows(), matrix.ncols()
    return np.array([[float(matrix[i, j]) for j in range(columns)] for i in range(rows)])
