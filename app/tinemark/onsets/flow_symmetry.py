"""What the rates of a system repeat after, and which changes of sign they commute with.

Tried with numbers at scattered states and times, where two analytic formulas agree only if they are equal.
The answers go into words, never into a value.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from itertools import product

import numpy as np

from tinemark.onsets.cycle_map import Floats
from tinemark.systems.plain import plain_function
from tinemark.systems.system import TIME, System

PLACES = 12
SEED = 20240517
EQUAL = 1e-9
"""Relative difference below which rates count as equal."""
LONGEST_REPEAT = 12
"""Strobe periods, and parts of one, in which a repeat of the rates is looked for."""


@dataclass(frozen=True)
class Symmetry:
    """A change of sign of some states that the rates commute with, after a share of the strobe period."""

    signs: tuple[int, ...]
    later: Fraction


class Rates:
    """The rates of a system in doubles, at scattered places around its ranges, with one parameter's value."""

    def __init__(self, system: System, parameter: str, value: float) -> None:
        self.system = system
        values = {p.name: float(p.value) for p in system.parameters}
        values[parameter] = value
        names = (*system.state_names, *system.parameter_names)
        self._parameters = [np.float64(values[name]) for name in system.parameter_names]
        self._rates = plain_function(system.expressions, (*names, TIME))
        self.period = 0.0
        if system.kind == "driven":
            (period,) = plain_function((system.every_expression,), system.parameter_names)(self._parameters)
            self.period = float(period)
        random = np.random.default_rng(SEED)
        self.states = np.array([_scattered(state, random) for state in system.states])
        self.times = random.uniform(0.0, 1.0, PLACES) * (self.period or 1.0)

    def at(self, states: Floats, times: Floats) -> Floats:
        """Rates of states (n, places)."""
        result = np.empty_like(states)
        with np.errstate(all="ignore"):
            for place, value in enumerate(self._rates([*states, *self._parameters, times])):
                result[place] = value
        return result

    def repeat_after(self, time: float) -> bool:
        """Whether the rates are the same a time later."""
        return _same(self.at(self.states, self.times), self.at(self.states, self.times + time))


def _scattered(state: object, random: np.random.Generator) -> Floats:
    start, shown = float(state.start), state.range  # type: ignore[attr-defined]
    if shown is not None:
        return random.uniform(float(shown[0]), float(shown[1]), PLACES)
    size = abs(start) or 1.0
    return random.uniform(start - size, start + size, PLACES)


def _same(a: Floats, b: Floats) -> bool:
    known = np.isfinite(a) & np.isfinite(b)
    if not known.any():
        return True
    # Rounding of the argument of a fast oscillation is that of its time.
    size = np.maximum(np.max(np.abs(np.where(known, a, 0.0)), axis=1, keepdims=True), 1e-300)
    return bool(np.all(~known | (np.abs(a - b) <= EQUAL * size)))


def true_period(rates: Rates) -> Fraction | None:
    """The shortest repeat of the rates in strobe periods; None where none was found, 1 where it is one."""
    shorter = [Fraction(1, k) for k in range(LONGEST_REPEAT, 1, -1)]
    longer = {Fraction(p, q) for p in range(1, LONGEST_REPEAT + 1) for q in range(1, 5)}
    for share in sorted({*shorter, *longer, Fraction(1)}):
        if rates.repeat_after(float(share) * rates.period):
            return share
    return None


def symmetries(system: System, parameter: str, value: float) -> Iterator[Symmetry]:
    """Changes of sign that the rates commute with, at once or half a strobe period later."""
    rates = Rates(system, parameter, value)
    shares = (Fraction(1, 2), Fraction(0)) if system.kind == "driven" else (Fraction(0),)
    here = rates.at(rates.states, rates.times)
    for later in shares:
        for signs in product((-1, 1), repeat=len(system.states)):
            if all(sign == 1 for sign in signs):
                continue
            mirror = np.array(signs, dtype=float)[:, None]
            there = rates.at(mirror * rates.states, rates.times + float(later) * rates.period)
            if _same(mirror * here, there):
                yield Symmetry(signs, later)


def symmetry_words(system: System, symmetry: Symmetry) -> str:
    """A symmetry as formulas: x(t + T/2) = -x(t)."""
    later = "t + T/2" if symmetry.later else "t"
    parts = [
        f"{name}({later}) = {'-' if sign < 0 else ''}{name}(t)"
        for name, sign in zip(system.state_names, symmetry.signs, strict=True)
    ]
    if symmetry.later:
        return f"{', '.join(parts)}, T the strobe period"
    flipped = [name for name, sign in zip(system.state_names, symmetry.signs, strict=True) if sign < 0]
    return ", ".join(f"{name} -> -{name}" for name in flipped)
