"""Switched linear systems: rates that are linear in the states between switchings.

Power converters and other circuits with ideal switches are of this kind. Their flow between switchings
is known exactly, so their samples need no error control, only the switching times.
"""

from __future__ import annotations

from dataclasses import dataclass

from tinemark.systems.derivatives import derivative
from tinemark.systems.expression import ZERO, Call, Cond, Expr, Name, Num, children, names_in
from tinemark.systems.system import TIME, System

MOST_SWITCHES = 12


@dataclass(frozen=True)
class Switch:
    """A place where formulas switch.

    Attributes
    ----------
    expr
        In states, parameters, time and the sides of earlier switches.
    whole
        False: it switches where `expr` is zero, and its side is 1 above, 0 below. True: it switches
        where `expr` is a whole number, and its side is the whole number below.
    """

    expr: Expr
    whole: bool


@dataclass(frozen=True)
class SwitchedMotion:
    """A driven system that is linear in its states between switchings.

    Attributes
    ----------
    states, swept, fixed
        Names of the states, of the swept parameter and of the others.
    rates
        Rates in states, parameters and sides (`side_name`); time enters through the sides alone.
    switches
        Each uses the sides of those before it only.
    period
        Strobe period, a formula in the parameters.
    """

    states: tuple[str, ...]
    swept: str
    fixed: tuple[str, ...]
    rates: tuple[Expr, ...]
    switches: tuple[Switch, ...]
    period: Expr

    @property
    def size(self) -> int:
        """Number of states."""
        return len(self.states)


def side_name(place: int) -> str:
    """Name of a switch's side in formulas; no formula of a user's can hold it."""
    return f"side {place}"


def switched_motion(system: System, parameter: str) -> SwitchedMotion | None:
    """The motion of a switched linear system; None where the system is no such one."""
    if system.kind != "driven" or not system.surfaces:
        return None
    swept = system.parameter(parameter).name
    splitter = _Splitter()
    try:
        rates = tuple(splitter.split(expr) for expr in system.expressions)
    except _TooMany:
        return None
    states = set(system.state_names)
    for rate in rates:
        if TIME in names_in(rate):
            return None
        for state in system.state_names:
            # Constant in the states: what is left of a formula that is linear in them.
            if names_in(derivative(rate, state)) & states:
                return None
    fixed = tuple(name for name in system.parameter_names if name != swept)
    return SwitchedMotion(
        system.state_names, swept, fixed, rates, tuple(splitter.switches), system.every_expression
    )


class _TooMany(Exception):
    pass


class _Splitter:
    """Puts the side of a switch in the place of every condition, operands first."""

    def __init__(self) -> None:
        self.switches: list[Switch] = []

    def split(self, expr: Expr) -> Expr:
        if isinstance(expr, Cond):
            left, right = self.split(expr.left), self.split(expr.right)
            then, other = self.split(expr.then), self.split(expr.other)
            above = self.side(_difference(left, right), False)
            return _chosen(above, then, other) if expr.op in (">", ">=") else _chosen(above, other, then)
        if not isinstance(expr, Call):
            return expr
        args = tuple(self.split(arg) for arg in children(expr))
        if expr.fn == "floor":
            return self.side(args[0], True)
        if expr.fn == "abs":
            return _chosen(self.side(args[0], False), args[0], Call("neg", args))
        if expr.fn in ("min", "max"):
            above = self.side(_difference(*args), False)
            return _chosen(above, *(args if expr.fn == "max" else args[::-1]))
        if expr.fn == "atan2":
            raise _TooMany
        return Call(expr.fn, args)

    def side(self, expr: Expr, whole: bool) -> Name:
        switch = Switch(expr, whole)
        if switch not in self.switches:
            if len(self.switches) == MOST_SWITCHES:
                raise _TooMany
            self.switches.append(switch)
        return Name(side_name(self.switches.index(switch)))


def _difference(left: Expr, right: Expr) -> Expr:
    return left if right == ZERO else Call("sub", (left, right))


def _chosen(side: Name, above: Expr, below: Expr) -> Expr:
    from fractions import Fraction

    return Cond(side, ">", Num(Fraction(1, 2)), above, below)
