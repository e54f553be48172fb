"""Compiled travel of a switched linear system over one strobe period: exact between switchings.

Between switchings x' = M x + b with constant M and b, whose Taylor series (that of the matrix exponential)
is summed to rounding over steps with |M| h <= 1/2. A switching time is where a side changes along that
series, found by halving. The derivatives in the start and in the swept parameter travel by the same
series and jump at a switching by the saltation matrix (Aizerman & Gantmakher 1958; di Bernardo et al.,
Piecewise-smooth Dynamical Systems, 2008, section 2.5).
"""

from __future__ import annotations

import textwrap
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

from tinemark.equations.switched import SwitchedMotion, side_name
from tinemark.systems.derivatives import derivative
from tinemark.systems.emit import emit
from tinemark.systems.expression import ARITIES, ZERO, Call, Cond, Expr, Name
from tinemark.systems.native import native_module
from tinemark.systems.system import TIME

TERMS = 20
"""Terms of the series: (1/2)^20/20! is far below rounding."""

LEAST_STEPS = 16
"""Steps of a period when nothing else is said; a switch that goes over and back within a quarter of a step is
not seen."""

MOST_SWITCHINGS = 400
"""Switchings of a period at most."""


@dataclass(frozen=True)
class SwitchedKernel:
    """The compiled travel.

    Attributes
    ----------
    travel
        ``(states, swept, fixed, least_steps, varied, bounds, stop, image, jacobian, slope, times, codes)``:
        carries the states, shape (n, lanes), over one period into `image`; where `varied`, fills
        `jacobian` (lanes, n, n) and `slope` (lanes, n). The codes are those of `tinemark.equations.reasons`.
    """

    travel: Callable[..., None]


@lru_cache(maxsize=32)
def switched_kernel(motion: SwitchedMotion) -> SwitchedKernel:
    """The kernel of a motion, compiled on first use unless an earlier run left it on disk."""
    module: Any = native_module(_Template(motion).source(), "switched")
    return SwitchedKernel(module.travel)


class _Template:
    def __init__(self, motion: SwitchedMotion) -> None:
        self.motion = motion
        self.n, self.count = motion.size, len(motion.switches)
        self.bind = {name: f"x[{i}]" for i, name in enumerate(motion.states)}
        self.bind |= {motion.swept: "p", TIME: "t"}
        self.bind |= {name: f"fixed[{i}]" for i, name in enumerate(motion.fixed)}
        self.bind |= {side_name(k): f"sides[{k}]" for k in range(self.count)}

    def source(self) -> str:
        names = ", ".join(f"lane_{fn}" for fn in [*ARITIES, "pow"])
        head = (
            "import numpy as np\n\n"
            f"from tinemark.systems.lane_math import {names}\n"
            "from tinemark.systems.native import jit\n"
        )
        constants = {
            "COUNT": self.count,
            "TERMS": TERMS,
            "MOST_SWITCHINGS": MOST_SWITCHINGS,
            "WHOLE": "np.array(" + repr([int(s.whole) for s in self.motion.switches]) + ")",
        }
        head += "\n" + "".join(f"{name} = {value}\n" for name, value in constants.items())
        return "\n\n".join(
            [head, self.period(), self.pieces(), self.levels(), self.level_slopes(), _TRAVEL.strip() + "\n"]
        )

    def function(self, name: str, arguments: str, targets: Sequence[tuple[str, Expr]]) -> str:
        lines = emit(targets, self.bind, "native", "g")
        return f"@jit\ndef {name}({arguments}):\n" + textwrap.indent("\n".join(lines), "    ") + "\n"

    def period(self) -> str:
        period = self.motion.period
        targets = [("out[0]", period), ("out[1]", derivative(period, self.motion.swept))]
        return self.function("period", "p, fixed, out", targets)

    def pieces(self) -> str:
        """M, b and their derivatives in the parameter, for given sides."""
        motion, swept = self.motion, self.motion.swept
        targets: list[tuple[str, Expr]] = []
        for i, rate in enumerate(motion.rates):
            row = [derivative(rate, state) for state in motion.states]
            rest = _at_zero(rate, frozenset(motion.states))
            targets += [(f"matrix[{i}, {j}]", entry) for j, entry in enumerate(row)]
            targets += [(f"by_p[{i}, {j}]", derivative(entry, swept)) for j, entry in enumerate(row)]
            targets += [(f"matrix[{i}, {self.n}]", rest), (f"by_p[{i}, {self.n}]", derivative(rest, swept))]
        return self.function("pieces", "p, fixed, sides, matrix, by_p", targets)

    def levels(self) -> str:
        targets = [(f"level[{k}]", switch.expr) for k, switch in enumerate(self.motion.switches)]
        return self.function("levels", "x, t, p, fixed, sides, level", targets)

    def level_slopes(self) -> str:
        names = (*self.motion.states, TIME, self.motion.swept)
        targets = [
            (f"grade[{k}, {j}]", derivative(switch.expr, name))
            for k, switch in enumerate(self.motion.switches)
            for j, name in enumerate(names)
        ]
        return self.function("level_slopes", "x, t, p, fixed, sides, grade", targets)


def _at_zero(expr: Expr, states: frozenset[str]) -> Expr:
    """The formula with every state at zero."""
    if isinstance(expr, Name):
        return ZERO if expr.name in states else expr
    if isinstance(expr, Call):
        return Call(expr.fn, tuple(_at_zero(arg, states) for arg in expr.args))
    if isinstance(expr, Cond):
        parts = [_at_zero(part, states) for part in (expr.left, expr.right, expr.then, expr.other)]
        return Cond(parts[0], expr.op, *parts[1:])
    return expr


_TRAVEL = '''
@jit
def series(matrix, by_p, x, around, h, varied, terms, turned):
    """Taylor terms over a step h: of the states, and of columns in the start and one in the parameter."""
    n = x.shape[0]
    for i in range(n):
        terms[0, i] = x[i]
    for k in range(TERMS):
        for i in range(n):
            total = matrix[i, n] if k == 0 else 0.0
            for j in range(n):
                total += matrix[i, j] * terms[k, j]
            terms[k + 1, i] = total * h / (k + 1)
    if varied:
        for i in range(n):
            for c in range(n + 1):
                turned[0, i, c] = around[i, c]
        for k in range(TERMS):
            for i in range(n):
                for c in range(n + 1):
                    total = 0.0
                    for j in range(n):
                        total += matrix[i, j] * turned[k, j, c]
                    if c == n:
                        total += by_p[i, n] if k == 0 else 0.0
                        for j in range(n):
                            total += by_p[i, j] * terms[k, j]
                    turned[k + 1, i, c] = total * h / (k + 1)


@jit
def summed(terms, share, x):
    n = x.shape[0]
    for i in range(n):
        total = terms[TERMS, i]
        for k in range(TERMS - 1, -1, -1):
            total = total * share + terms[k, i]
        x[i] = total


@jit
def first_changed(x, t, p, fixed, sides, level):
    """The first switch whose side is no longer what it was, or -1."""
    levels(x, t, p, fixed, sides, level)
    for k in range(level.shape[0]):
        if WHOLE[k] == 1:
            if np.floor(level[k]) != sides[k]:
                return k
        elif (level[k] > 0.0) != (sides[k] > 0.5):
            return k
    return -1


@jit
def settle_sides(x, t, p, fixed, sides, level):
    # Each switch may use the sides of those before it, so they are set one after another.
    for k in range(level.shape[0]):
        levels(x, t, p, fixed, sides, level)
        if WHOLE[k] == 1:
            sides[k] = np.floor(level[k])
        else:
            sides[k] = 1.0 if level[k] > 0.0 else 0.0


@jit
def travel(states, swept, fixed, least_steps, varied, bounds, stop, image, jacobian, slope, times, codes):
    n = states.shape[0]
    x, y = np.empty(n), np.empty(n)
    around = np.empty((n, n + 1))
    terms, turned = np.empty((TERMS + 1, n)), np.empty((TERMS + 1, n, n + 1))
    matrix, by_p = np.empty((n, n + 1)), np.empty((n, n + 1))
    sides, level, grade = np.empty(COUNT), np.empty(COUNT), np.empty((COUNT, n + 2))
    before, after, clock = np.empty(n), np.empty(n), np.empty(2)
    for lane in range(states.shape[1]):
        p = swept[lane]
        period(p, fixed, clock)
        whole = clock[0]
        for i in range(n):
            x[i] = states[i, lane]
            for c in range(n + 1):
                around[i, c] = 1.0 if c == i else 0.0
        t = 0.0
        code = 0 if whole > 0.0 and whole < np.inf else 2
        for k in range(level.shape[0]):
            sides[k] = 0.0
        settle_sides(x, t, p, fixed, sides, level)
        pieces(p, fixed, sides, matrix, by_p)
        switchings = 0
        while t < whole and code == 0:
            if stop[0] != 0:
                code = 3
                break
            size = 0.0
            for i in range(n):
                row = 0.0
                for j in range(n):
                    row += abs(matrix[i, j])
                size = max(size, row)
            h = whole / least_steps
            if size * h > 0.5:
                h = 0.5 / size
            if not h > 1e-7 * whole:
                code = 2
                break
            last = t + h >= whole * (1.0 - 1e-12)
            if last:
                h = whole - t
            series(matrix, by_p, x, around, h, varied, terms, turned)
            low, high, changed = 0.0, 0.0, -1
            for quarter in range(1, 5):
                high = 0.25 * quarter
                summed(terms, high, y)
                changed = first_changed(y, t + high * h, p, fixed, sides, level)
                if changed >= 0:
                    break
                low = high
            share = 1.0
            if changed >= 0:
                for _ in range(60):
                    middle = 0.5 * (low + high)
                    if middle <= low or middle >= high:
                        break
                    summed(terms, middle, y)
                    found = first_changed(y, t + middle * h, p, fixed, sides, level)
                    if found >= 0:
                        high, changed = middle, found
                    else:
                        low = middle
                share = high
            # What switches at the very end of the period belongs to the next one.
            if changed >= 0 and last and t + share * h >= whole * (1.0 - 1e-13):
                changed, share = -1, 1.0
            summed(terms, share, x)
            if varied:
                for i in range(n):
                    for c in range(n + 1):
                        total = turned[TERMS, i, c]
                        for k in range(TERMS - 1, -1, -1):
                            total = total * share + turned[k, i, c]
                        around[i, c] = total
            t = whole if last and changed < 0 else t + share * h
            for i in range(n):
                if not abs(x[i]) < bounds[i]:
                    code = 1
            if changed >= 0 and code == 0:
                switchings += 1
                if switchings > MOST_SWITCHINGS:
                    code = 2
                for i in range(n):
                    before[i] = matrix[i, n]
                    for j in range(n):
                        before[i] += matrix[i, j] * x[j]
                level_slopes(x, t, p, fixed, sides, grade)
                speed = grade[changed, n]
                for j in range(n):
                    speed += grade[changed, j] * before[j]
                settle_sides(x, t, p, fixed, sides, level)
                pieces(p, fixed, sides, matrix, by_p)
                if varied:
                    if speed == 0.0:
                        code = 4
                    for i in range(n):
                        after[i] = matrix[i, n]
                        for j in range(n):
                            after[i] += matrix[i, j] * x[j]
                    for c in range(n + 1):
                        moved = grade[changed, n + 1] if c == n else 0.0
                        for j in range(n):
                            moved += grade[changed, j] * around[j, c]
                        later = -moved / speed
                        for i in range(n):
                            around[i, c] += (before[i] - after[i]) * later
        codes[lane] = code
        times[lane] = whole
        for i in range(n):
            image[i, lane] = x[i] if code == 0 else np.nan
        if varied:
            for i in range(n):
                rate = matrix[i, n]
                for j in range(n):
                    rate += matrix[i, j] * x[j]
                    jacobian[lane, i, j] = around[i, j]
                slope[lane, i] = around[i, n] + rate * clock[1]
'''
