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
from tinemark.verify.formula import Program, parse

MOST_CHARACTERS = 256 * 1024
MOST_STATES = 6
MOST_PARAMETERS = 64


@dataclass(frozen=True)
class Plain:
    """States, parameters with their exact values, and the formula texts, as the TOML spells them."""

    states: tuple[str, ...]
    values: tuple[tuple[str, Fraction], ...]
    formulas: tuple[str, ...]


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
    if data.get("kind") != "map":
        raise NotCheckable("only maps are checked here")
    states, parameters, following = (_table(data, key) for key in ("states", "parameters", "next"))
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
    return Plain(tuple(states), tuple(values), formulas)


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
    return tuple(parse(formula, names, constants) for formula in plain.formulas)
