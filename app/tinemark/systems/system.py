"""A system as a value: states, parameters and formulas, frozen."""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass, replace
from functools import cached_property

from tinemark.systems.errors import SystemFileError
from tinemark.systems.exact import Exact, exact
from tinemark.systems.expression import Expr
from tinemark.systems.formula import read_formula
from tinemark.systems.surfaces import Surface, switching_surfaces

MAX_MAP_STATES = 6
MAX_RATE_STATES = 8
TIME = "t"
"""Name of time in the rates of a driven system."""

KINDS = ("map", "driven", "flow")
DIRECTIONS = ("rising", "falling")


TIMELESS = {
    "map": "time t has no meaning in a map",
    "driven": "time t has no meaning here",
    "flow": 'time t has no meaning in a free-running system; one with t in its rates is kind = "driven"',
}
"""Why a formula may not hold t."""


def formula_section(kind: str) -> str:
    """The section of a system file that holds the formulas."""
    return "next" if kind == "map" else "rate"


def formula_names(kind: str, names: tuple[str, ...]) -> tuple[str, ...]:
    """Names that the formulas may use."""
    return (*names, TIME) if kind == "driven" else names


@dataclass(frozen=True)
class State:
    """A state variable, where its orbit starts and the range it is first shown in."""

    name: str
    start: Exact
    range: tuple[Exact, Exact] | None = None
    unit: str = ""


@dataclass(frozen=True)
class Parameter:
    """A parameter; `tolerance` is its standard uncertainty in the parameter's unit."""

    name: str
    value: Exact
    range: tuple[Exact, Exact] | None = None
    unit: str = ""
    tolerance: Exact | None = None


@dataclass(frozen=True)
class Sample:
    """When a system of equations is looked at.

    Attributes
    ----------
    every
        Driven systems: the strobe period, a formula in the parameters. The first sample is the start, at
        time zero.
    crosses, direction
        Free-running systems: the section, a formula in states and parameters whose zero is passed
        "rising" or "falling".
    """

    every: str = ""
    crosses: str = ""
    direction: str = "rising"


@dataclass(frozen=True)
class System:
    """A return map, or a set of equations seen through one, with everything that is asked of it.

    Attributes
    ----------
    kind
        "map", "driven" (rates that depend on time, strobed once a period) or "flow" (rates that do not,
        sampled at a section).
    formulas
        One formula a state: of a map the state one step later, otherwise its rate of change.
    sample
        When a driven or free-running system is looked at; None for a map.
    diagram_parameter
        The parameter swept across a diagram.
    observe
        The observed quantity: a formula in the states and parameters.
    """

    title: str
    kind: str
    states: tuple[State, ...]
    parameters: tuple[Parameter, ...]
    formulas: tuple[str, ...]
    diagram_parameter: str
    observe: str
    notes: str = ""
    sample: Sample | None = None

    @property
    def is_map(self) -> bool:
        """Whether the formulas are the return map itself, with nothing to integrate."""
        return self.kind == "map"

    def must_be_map(self) -> None:
        """Stop work that reads the formulas as next states.

        Raises
        ------
        SystemFileError
            The formulas are rates.
        """
        if not self.is_map:
            raise SystemFileError(
                f'works on maps, and this system is of kind "{self.kind}"', key="kind", what_to_do=""
            )

    @property
    def state_names(self) -> tuple[str, ...]:
        """Names of the states, in order."""
        return tuple(state.name for state in self.states)

    @property
    def parameter_names(self) -> tuple[str, ...]:
        """Names of the parameters, in order."""
        return tuple(parameter.name for parameter in self.parameters)

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the states, then of the parameters."""
        return self.state_names + self.parameter_names

    @cached_property
    def expressions(self) -> tuple[Expr, ...]:
        """The formulas, read: next states of a map, rates otherwise; a driven system's may hold t."""
        section = formula_section(self.kind)
        names = formula_names(self.kind, self.names)
        return tuple(
            read_formula(text, names, key=f"{section}.{name}", timeless=TIMELESS[self.kind])
            for text, name in zip(self.formulas, self.state_names, strict=True)
        )

    @cached_property
    def every_expression(self) -> Expr:
        """The strobe period of a driven system, a formula in the parameters."""
        if self.sample is None or not self.sample.every:
            raise SystemFileError("has no strobe period", key="sample.every", what_to_do='add every = "…"')
        return read_formula(self.sample.every, self.parameter_names, key="sample.every")

    @cached_property
    def crosses_expression(self) -> Expr:
        """The section of a free-running system: sampled where this formula passes zero."""
        if self.sample is None or not self.sample.crosses:
            raise SystemFileError("has no section", key="sample.crosses", what_to_do='add crosses = "…"')
        return read_formula(self.sample.crosses, self.names, key="sample.crosses", timeless=TIMELESS["flow"])

    @cached_property
    def observe_expression(self) -> Expr:
        """The observed quantity, read."""
        return read_formula(self.observe, self.names, key="diagram.observe")

    @cached_property
    def surfaces(self) -> tuple[Surface, ...]:
        """Where the formulas switch between smooth pieces."""
        return switching_surfaces(self.expressions)

    @property
    def is_smooth(self) -> bool:
        """Whether the formulas have no switching surface."""
        return not self.surfaces

    @cached_property
    def key(self) -> str:
        """Hash of the mathematics alone: kind, names, formulas, sample. Values and texts do not count."""
        parts: list[object] = [self.kind, self.state_names, sorted(self.parameter_names), self.formulas]
        if self.sample is not None:
            parts.append([self.sample.every, self.sample.crosses, self.sample.direction])
        return hashlib.sha256(json.dumps(parts).encode()).hexdigest()

    def parameter(self, name: str) -> Parameter:
        """The parameter of that name.

        Raises
        ------
        SystemFileError
            There is none.
        """
        for parameter in self.parameters:
            if parameter.name == name:
                return parameter
        known = ", ".join(self.parameter_names)
        raise SystemFileError(f'there is no parameter "{name}"', what_to_do=f"known parameters: {known}")

    def with_value(self, name: str, value: Exact | str) -> System:
        """The same system with another value of one parameter."""
        self.parameter(name)
        number = value if isinstance(value, Exact) else exact(value)
        return replace(
            self,
            parameters=tuple(replace(p, value=number) if p.name == name else p for p in self.parameters),
        )

    def with_diagram(self, parameter: str, observe: str) -> System:
        """The same system with another diagram.

        Raises
        ------
        SystemFileError, FormulaError
            The parameter is not known, or the observed quantity cannot be read.
        """
        self.parameter(parameter)
        read_formula(observe, self.names, key="diagram.observe")
        return replace(self, diagram_parameter=parameter, observe=observe)

    def __getstate__(self) -> dict[str, object]:
        # Only the fields cross a process; what is cached is read again there.
        return {name: self.__dict__[name] for name in self.__dataclass_fields__}

    def __setstate__(self, state: dict[str, object]) -> None:
        self.__dict__.update(state)
