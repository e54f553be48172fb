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
    """What is compared, by the marks of steps (`Program.marks`).

    `kind` "zero" is left against right, or against zero where that is None; "whole" is a whole part.
    """

    kind: str
    left: str
    right: str | None = None


Sides = Mapping[Switch, int]


def switch_of(program: Program, place: int) -> Switch | None:
    """The switch that a step is, if it is one."""
    step, marks = program.steps[place], program.marks
    if step.op in COMPARISONS or step.op in ("min", "max"):
        return Switch("zero", marks[step.args[0]], marks[step.args[1]])
    if step.op == "abs":
        inner = program.steps[step.args[0]]
        if inner.op == "sub":
            return Switch("zero", marks[inner.args[0]], marks[inner.args[1]])
        return Switch("zero", marks[step.args[0]])
    if step.op == "floor":
        return Switch("whole", marks[step.args[0]])
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
