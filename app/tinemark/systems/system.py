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
class System:
    """A return map with everything that is asked of it.

    Attributes
    ----------
    formulas
        One formula a state: the state one step later.
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
        """The formulas, read."""
        return tuple(
            read_formula(text, self.names, key=f"next.{name}")
            for text, name in zip(self.formulas, self.state_names, strict=True)
        )

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
        """Hash of the mathematics alone: kind, names and formulas. Values and texts do not count."""
        text = json.dumps([self.kind, self.state_names, sorted(self.parameter_names), self.formulas])
        return hashlib.sha256(text.encode()).hexdigest()

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
