"""The system of a certificate: its TOML read by the standard library, its formulas by our parser."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import Any

from tinemark.verify.claims import NotCheckable, Part, Refused
from tinemark.verify.decimals import rational
from tinemark.verify.formula import Instruction, Program, parse

MOST_CHARACTERS = 256 * 1024
MOST_STATES = 6
MOST_PARAMETERS = 64
TIME = "t"
FORMULAS = {"map": "next", "driven": "rate", "flow": "rate"}
"""Section of the formulas of each kind of system."""
RISING, FALLING = "rising", "falling"


@dataclass(frozen=True)
class Sample:
    """How a system is sampled: a map at every step, a driven one at every strobe, a flow at a section.

    Attributes
    ----------
    kind
        "map", "driven" or "flow".
    every
        Driven: formula of the strobe period.
    crosses, direction
        Flow: formula that passes zero, and which way.
    """

    kind: str = "map"
    every: str = ""
    crosses: str = ""
    direction: str = RISING

    @property
    def texts(self) -> tuple[str, str, str, str]:
        """All of it."""
        return self.kind, self.every, self.crosses, self.direction


@dataclass(frozen=True)
class Plain:
    """States, parameters with their exact values, formula texts and sampling, as the TOML spells them."""

    states: tuple[str, ...]
    values: tuple[tuple[str, Fraction], ...]
    formulas: tuple[str, ...]
    sample: Sample = Sample()


@lru_cache(maxsize=64)
def read(text: str) -> Plain:
    """Read a system's TOML text; formulas stay texts.

    Raises
    ------
    Refused
        It is no system (`Part.SYSTEM`).
    NotCheckable
        It is a kind of system that is not checked here.
    """
    if len(text) > MOST_CHARACTERS:
        raise Refused(Part.SYSTEM, "the system's text is too long")
    try:
        data = tomllib.loads(text, parse_float=str)
    except (tomllib.TOMLDecodeError, RecursionError, ValueError) as error:
        raise Refused(Part.SYSTEM, "the system's text is not TOML") from error
    kind = data.get("kind")
    if not isinstance(kind, str) or kind not in FORMULAS:
        raise NotCheckable("only maps, driven and free-running systems are checked here")
    states, parameters, following = (_table(data, key) for key in ("states", "parameters", FORMULAS[kind]))
    if kind != "map" and len(states) > MOST_STATES:
        raise NotCheckable(f"equations of more than {MOST_STATES} states are not checked here")
    if not 1 <= len(states) <= MOST_STATES or len(parameters) > MOST_PARAMETERS:
        raise Refused(Part.SYSTEM, "the system has too many states or parameters, or none")
    if set(following) != set(states) or set(states) & set(parameters):
        raise Refused(Part.SYSTEM, "states and formulas do not belong to each other")
    values = []
    for name in parameters:
        entry = _table(parameters, name)
        written = entry.get("value")
        number = None
        if isinstance(written, (str, int)) and not isinstance(written, bool):
            try:
                number = rational(str(written).strip())
            except ValueError:  # more digits than Python converts
                number = None
        if number is None:
            raise Refused(Part.SYSTEM, f'the value of "{name[:40]}" is no number')
        values.append((name, number))
    formulas = tuple(following[name] for name in states)
    if not all(isinstance(formula, str) for formula in formulas):
        raise Refused(Part.FORMULA, "a formula is no text")
    return Plain(tuple(states), tuple(values), formulas, _sample(data, kind))


def _sample(data: Mapping[str, Any], kind: str) -> Sample:
    if kind == "map":
        return Sample()
    table = _table(data, "sample")
    needed = ("every",) if kind == "driven" else ("crosses", "direction")
    wanted = {"direction": RISING, **table}
    texts = {key: wanted.get(key) for key in needed}
    if not set(table) <= set(needed) or not all(isinstance(text, str) for text in texts.values()):
        raise Refused(Part.SYSTEM, "how the system is sampled cannot be read")
    if kind == "flow" and texts["direction"] not in (RISING, FALLING):
        raise Refused(Part.SYSTEM, "the section is passed in no direction")
    return Sample(kind, **{key: str(text) for key, text in texts.items()})


def _table(data: Mapping[str, Any], key: str) -> dict[str, Any]:
    value = data.get(key)
    if not isinstance(value, dict):
        raise Refused(Part.SYSTEM, f'the system has no section "{key[:40]}"')
    return value


def programs(plain: Plain, parameter: str) -> tuple[Program, ...]:
    """The formulas in the states and the swept parameter, all other parameters put in exactly.

    Raises
    ------
    Refused, NotCheckable
        The parameter is not there, or a formula cannot be read.
    """
    values = dict(plain.values)
    if parameter not in values:
        raise Refused(Part.PARAMETER, f'the system has no parameter "{parameter[:40]}"')
    constants = {name: value for name, value in values.items() if name != parameter}
    names = {*plain.states, parameter}
    if plain.sample.kind == "driven":
        if TIME in names or TIME in constants:
            raise Refused(Part.SYSTEM, "the time's name is taken")
        names.add(TIME)
    return tuple(parse(formula, names, constants) for formula in plain.formulas)


def sampling(plain: Plain, parameter: str) -> Program:
    """Formula of the strobe period in the swept parameter, or of the section in it and the states; a section
    that is passed falling with its sign turned.

    Raises
    ------
    Refused, NotCheckable
        It cannot be read.
    """
    constants = {name: value for name, value in plain.values if name != parameter}
    if plain.sample.kind == "driven":
        return parse(plain.sample.every, {parameter}, constants)
    text = plain.sample.crosses
    found = parse(text, {*plain.states, parameter}, constants)
    if plain.sample.direction == FALLING:
        turned = Instruction("neg", (len(found.steps) - 1,))
        return Program((*found.steps, turned))
    return found
