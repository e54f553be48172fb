"""The switches of a formula: where it goes over from one smooth piece to the next.

A switch is named by what is compared in it, so that comparisons, smaller and larger ones, and sizes of
the same two values are one switch. Its side is -1 where the first is less than the second, and 1 where it
is more; of a whole part the side is the whole number.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from tinemark.verify.formula import COMPARISONS, Program


@dataclass(frozen=True)
class Switch:
    """What is compared, by steps of a formula: (the formula's place, the step's).

    `kind` "zero" is left against right, or against zero where that is None; "whole" is a whole part.
    """

    kind: str
    left: tuple[int, int]
    right: tuple[int, int] | None = None


Sides = Mapping[Switch, int]


def switch_of(program: Program, place: int, at: int = 0) -> Switch | None:
    """The switch that a step is, if it is one. `at` is the formula's place among those of a system."""
    step = program.steps[place]
    if step.op in COMPARISONS or step.op in ("min", "max"):
        return Switch("zero", (at, step.args[0]), (at, step.args[1]))
    if step.op == "abs":
        inner = program.steps[step.args[0]]
        if inner.op == "sub":
            return Switch("zero", (at, inner.args[0]), (at, inner.args[1]))
        return Switch("zero", (at, step.args[0]))
    if step.op == "floor":
        return Switch("whole", (at, step.args[0]))
    return None


def switches(program: Program) -> dict[Switch, int]:
    """The switches of a formula, each with one of its steps."""
    found: dict[Switch, int] = {}
    for place in range(len(program.steps)):
        switch = switch_of(program, place)
        if switch is not None:
            found.setdefault(switch, place)
    return found


def always(program: Program) -> list[int]:
    """Places of the steps that are needed whatever branch is taken, rising."""
    needed, waiting = set(), [len(program.steps) - 1]
    while waiting:
        place = waiting.pop()
        if place not in needed:
            needed.add(place)
            step = program.steps[place]
            waiting.extend(step.args[:2] if step.op in COMPARISONS else step.args)
    return sorted(needed)
