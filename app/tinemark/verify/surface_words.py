"""The surface that a border collision's words name must be the one that is touched."""

from __future__ import annotations

import re
from collections.abc import Mapping
from fractions import Fraction

from tinemark.verify.algebra import Field
from tinemark.verify.claims import NotCheckable, Part, Refused
from tinemark.verify.formula import COMPARISONS, Program, parse
from tinemark.verify.quotients import Quotient, Untold, number
from tinemark.verify.watching import Watch

_NAMED = re.compile(r"touches the surface (.+?) = (.+?)(?:;|$)")
CUT_OFF = "\N{HORIZONTAL ELLIPSIS}"


def check_words(
    program: Program,
    touched: tuple[int, int],
    names: tuple[str, ...],
    constants: Mapping[str, Fraction],
    consequence: str,
    watch: Watch,
) -> None:
    """See that an equation in words is that of the touched surface.

    Parameters
    ----------
    touched
        A step of the program that switches there, and the value that its formula has on the surface.
    names, constants
        Names of the states and the swept parameter, and the values of the other parameters.

    Raises
    ------
    Refused
        The words name another surface, or none.
    NotCheckable
        The words are cut off, or algebra does not tell.
    """
    match = _NAMED.search(consequence)
    if match is None:
        raise Refused(Part.SURFACE, "the words do not say which surface is touched")
    if CUT_OFF in match[0]:
        raise NotCheckable("the words of the touched surface are cut off")
    place, level = touched
    algebra = Field(watch)
    values = {name: algebra.named(name) for name in names}
    try:
        said = [algebra.value(parse(text, names, constants), values, {}) for text in match.groups()]
        there = compared(algebra, program, place, values) - number(level)
    except Refused as error:
        raise Refused(
            Part.SURFACE, f"the words of the touched surface are no equation: {error.reason}"
        ) from error
    except Untold:
        _same_program(program, place, match, names, constants)
        return
    difference = said[0] - said[1]
    if not (difference.equals(there) or difference.equals(-there)):
        raise Refused(Part.SURFACE, "the words name another surface than the one that is touched")


def compared(algebra: Field, program: Program, place: int, values: Mapping[str, Quotient]) -> Quotient:
    """What the switch at a step compares, as one value; raises `Untold`."""
    step = program.steps[place]
    count = 2 if step.op in (*COMPARISONS, "min", "max") else 1
    parts = [algebra.value(program.upto(arg), values, {}) for arg in step.args[:count]]
    return parts[0] - parts[1] if count == 2 else parts[0]


def _same_program(
    program: Program,
    place: int,
    match: re.Match[str],
    names: tuple[str, ...],
    constants: Mapping[str, Fraction],
) -> None:
    """For surfaces that hold switches themselves: the words must be the very steps of the formula."""
    step = program.steps[place]
    texts = match.groups()
    written = [parse(text, names, constants).marks[-1] for text in texts]
    if len(step.args) == 1:
        written = written[:1]
    there = [program.marks[arg] for arg in step.args[: len(written)]]
    if written not in (there, there[::-1]):
        raise Refused(Part.SURFACE, "the words name another surface than the one that is touched")
