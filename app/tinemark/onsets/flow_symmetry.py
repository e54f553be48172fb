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
from tinemark.systems.derivatives import derivative
from tinemark.systems.plain import plain_function
from tinemark.systems.system import TIME, System

PLACES = 60
"""Places rates are compared at: a pulse of a tenth of the period meets a few of them."""
SEED = 20240517
EQUAL = 1e-9
"""Relative difference below which rates count as equal."""
ROUNDING = 1e-12
"""Relative change of state and time whose effect on the rates counts as rounding."""
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
        # Their change in time tells a small drive beside rates that are large.
        changes = [derivative(rate, TIME) for rate in system.expressions]
        self._rates = plain_function((*system.expressions, *changes), (*names, TIME))
        self.period = 0.0
        if system.kind == "driven":
            (period,) = plain_function((system.every_expression,), system.parameter_names)(self._parameters)
            self.period = float(period)
        random = np.random.default_rng(SEED)
        self.states = np.array([_scattered(state, random) for state in system.states])
        self.times = (np.arange(PLACES) + random.uniform(0.0, 1.0, PLACES)) / PLACES * (self.period or 1.0)

    def at(self, states: Floats, times: Floats) -> Floats:
        """Rates of states (n, places), then how they change in time: (2 n, places)."""
        result = np.empty((2 * len(states), states.shape[1]))
        with np.errstate(all="ignore"):
            for place, value in enumerate(self._rates([*states, *self._parameters, times])):
                result[place] = value
        return result

    def alike(self, signs: Floats, later: float) -> bool:
        """Whether the rates of states with other signs (n, 1) are those with these signs, a time later."""
        here, times = np.vstack([signs, signs]) * self.at(self.states, self.times), self.times + later
        there = self.at(signs * self.states, times)
        shaken = self.at(signs * self.states * (1 + ROUNDING), times + ROUNDING * (self.period or 1.0))
        known = np.isfinite(here) & np.isfinite(there) & np.isfinite(shaken)
        with np.errstate(all="ignore"):
            # Place by place: rates that are huge somewhere say nothing of where they are small.
            size = np.maximum(np.abs(here), np.abs(there))
            return bool(np.all(~known | (np.abs(here - there) <= EQUAL * size + np.abs(shaken - there))))

    def repeat_after(self, time: float) -> bool:
        """Whether the rates are the same a time later."""
        return self.alike(np.ones((len(self.states), 1)), time)


def _scattered(state: object, random: np.random.Generator) -> Floats:
    start, shown = float(state.start), state.range  # type: ignore[attr-defined]
    if shown is not None:
        return random.uniform(float(shown[0]), float(shown[1]), PLACES)
    size = abs(start) or 1.0
    return random.uniform(start - size, start + size, PLACES)


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
    for later in shares:
        for signs in product((-1, 1), repeat=len(system.states)):
            if all(sign == 1 for sign in signs):
                continue
            mirror = np.array(signs, dtype=float)[:, None]
            if rates.alike(mirror, float(later) * rates.period):
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
