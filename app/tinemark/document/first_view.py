"""Where a diagram is first looked at, from a system's own ranges or from a short look at its orbits."""

from __future__ import annotations

import math
import operator
from collections.abc import Callable, Mapping
from fractions import Fraction

from tinemark.density.request import View
from tinemark.document.views import tidy
from tinemark.systems.expression import Call, Cond, Expr, Name, Num, Pi
from tinemark.systems.system import System

MARGIN = Fraction(1, 20)
_COLUMNS, _TRANSIENT, _STEPS = 41, 150, 40
_TOO_FAR = 1e6


def first_view(system: System) -> View:
    """View of the whole diagram as its system means it.

    The swept parameter's range, or its value half as far again each way; for the observed quantity the
    range of that state, or what orbits across the sweep reach, with a margin.
    """
    left, right = parameter_range(system)
    ranges = {state.name: state.range for state in system.states}
    given = ranges.get(system.observe.strip())
    if given is not None:
        return View(left, right, given[0].fraction, given[1].fraction)
    bottom, top = _reached(system, left, right)
    return tidy(View(left, right, bottom, top))


def parameter_range(system: System) -> tuple[Fraction, Fraction]:
    """Range of the swept parameter."""
    swept = system.parameter(system.diagram_parameter)
    if swept.range is not None:
        return swept.range[0].fraction, swept.range[1].fraction
    middle = swept.value.fraction
    reach = abs(middle) / 2 or Fraction(1)
    return middle - reach, middle + reach


def _reached(system: System, left: Fraction, right: Fraction) -> tuple[Fraction, Fraction]:
    """Extent of the observed quantity on settled orbits across the sweep, escaped ones left out."""
    seen: list[float] = []
    for column in range(_COLUMNS):
        value = float(left + (right - left) * column / (_COLUMNS - 1))
        names = {parameter.name: float(parameter.value) for parameter in system.parameters}
        names |= {state.name: float(state.start) for state in system.states}
        names[system.diagram_parameter] = value
        try:
            seen += _orbit(system, names)
        except (ArithmeticError, ValueError):  # escaped, or left a formula's domain
            continue
    if not seen:
        return Fraction(-1), Fraction(1)
    low, high = Fraction(min(seen)), Fraction(max(seen))
    room = (high - low) * MARGIN or max(abs(high), Fraction(1)) * MARGIN
    return low - room, high + room


def _orbit(system: System, names: dict[str, float]) -> list[float]:
    observed = []
    for step in range(_TRANSIENT + _STEPS):
        new = [evaluate(expr, names) for expr in system.expressions]
        if any(
            not abs(x) < _TOO_FAR * (1 + abs(names[n])) for x, n in zip(new, system.state_names, strict=True)
        ):
            raise OverflowError
        names.update(zip(system.state_names, new, strict=True))
        if step >= _TRANSIENT:
            observed.append(evaluate(system.observe_expression, names))
    return [value for value in observed if math.isfinite(value)]


_FUNCTIONS: dict[str, Callable[..., float]] = {
    "add": operator.add,
    "sub": operator.sub,
    "mul": operator.mul,
    "div": operator.truediv,
    "pow": math.pow,
    "neg": operator.neg,
    "abs": abs,
    "min": min,
    "max": max,
    "floor": math.floor,
    "sin": math.sin,
    "cos": math.cos,
    "tan": math.tan,
    "asin": math.asin,
    "acos": math.acos,
    "atan": math.atan,
    "atan2": math.atan2,
    "sinh": math.sinh,
    "cosh": math.cosh,
    "tanh": math.tanh,
    "exp": math.exp,
    "log": math.log,
    "sqrt": math.sqrt,
}
_COMPARISONS: dict[str, Callable[[float, float], bool]] = {
    "<": operator.lt,
    "<=": operator.le,
    ">": operator.gt,
    ">=": operator.ge,
}


def evaluate(expr: Expr, names: Mapping[str, float]) -> float:
    """Value of a formula in doubles: slow and plain, for a few orbits without compiling anything.

    Raises
    ------
    ArithmeticError, ValueError
        The formula has no finite value there. Only the branch of a condition that holds is asked.
    """
    match expr:
        case Num(value):
            return float(value)
        case Name(name):
            return names[name]
        case Pi():
            return math.pi
        case Cond():
            left, right = evaluate(expr.left, names), evaluate(expr.right, names)
            return evaluate(expr.then if _COMPARISONS[expr.op](left, right) else expr.other, names)
        case Call():
            return float(_FUNCTIONS[expr.fn](*(evaluate(argument, names) for argument in expr.args)))
