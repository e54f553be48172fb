"""Running the engine's generators to their end, and short ways to ask it."""

from __future__ import annotations

from collections.abc import Generator
from fractions import Fraction
from typing import Any, TypeVar

from tinemark.onsets.engine import ladder, refine
from tinemark.onsets.results import LadderRequest, LadderResult, RefineRequest, RefineResult
from tinemark.systems.library import builtin_system
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text

Result = TypeVar("Result")


def finish(job: Generator[Any, None, Result]) -> Result:
    """The value of a generator."""
    while True:
        try:
            next(job)
        except StopIteration as done:
            result: Result = done.value
            return result


def system_of(name: str, values: tuple[tuple[str, str], ...] = ()) -> System:
    """A built-in system with some parameters set."""
    system = builtin_system(name)
    for parameter, value in values:
        system = system.with_value(parameter, value)
    return system


def own_map(
    formula: str, *, start: str = "0.1", low: str | None = "-1", high: str = "1", value: str = "1"
) -> System:
    """A one-state map of x along r, as a user would type it; `low` None leaves the range out."""
    limits = "" if low is None else f'range = ["{low}", "{high}"]'
    return read_system_text(
        f"""
title = "own map"
kind = "map"
[states.x]
start = "{start}"
{limits}
[parameters.r]
value = "{value}"
[next]
x = "{formula}"
[diagram]
parameter = "r"
observe = "x"
"""
    )


def click(
    system: System,
    near: str | Fraction,
    width: str | Fraction,
    observed: str | None = None,
    height: str | None = None,
    digits: int = 20,
) -> RefineResult:
    """What a click finds."""
    return finish(
        refine(
            RefineRequest(
                system,
                system.diagram_parameter,
                Fraction(near),
                Fraction(width),
                None if observed is None else Fraction(observed),
                None if height is None else Fraction(height),
                digits,
            )
        )
    )


def climb(
    system: System, start: str, stop: str, *, base: int = 1, levels: int = 8, digits: int = 20
) -> LadderResult:
    """What a ladder request finds."""
    return finish(
        ladder(
            LadderRequest(
                system, system.diagram_parameter, Fraction(start), Fraction(stop), base, levels, digits
            )
        )
    )
