"""A system that is being typed: its text read leniently, edited by field, and every mistake found at once.

The TOML text is the one truth. The fields of the system card show what the text says, right or
wrong, and each edit of a field is an edit of the text (`draft_edits`). No Qt here.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from tinemark.systems.errors import FormulaError, NumberError, TinemarkError
from tinemark.systems.exact import exact
from tinemark.systems.formula import read_formula
from tinemark.systems.system import TIMELESS, System, formula_names, formula_section
from tinemark.systems.system_file import read_system_text

_QUOTED_NAME = re.compile(r'"([^"]*)"')


@dataclass(frozen=True)
class DraftState:
    """A state as typed; `formula` gives it one step later, or its rate of change."""

    name: str
    start: str = ""
    low: str = ""
    high: str = ""
    unit: str = ""
    formula: str = ""


@dataclass(frozen=True)
class DraftParameter:
    """A parameter as typed."""

    name: str
    value: str = ""
    low: str = ""
    high: str = ""
    unit: str = ""
    tolerance: str = ""


@dataclass(frozen=True)
class Draft:
    """What the fields show. Of the sample a driven system has `every`, a free-running one the others."""

    title: str
    kind: str
    notes: str
    states: tuple[DraftState, ...]
    parameters: tuple[DraftParameter, ...]
    parameter: str
    observe: str
    every: str = ""
    crosses: str = ""
    direction: str = ""

    @property
    def section(self) -> str:
        """The section that holds the formulas."""
        return formula_section(self.kind or "map")

    @property
    def names(self) -> tuple[str, ...]:
        """Names that a formula may use."""
        return tuple(item.name for item in (*self.states, *self.parameters))


@dataclass(frozen=True)
class Trouble:
    """One mistake: `key` names the field, `column` and `line` the place in it (0: unknown)."""

    key: str
    words: str
    line: int = 0
    column: int = 0


def read_draft(text: str) -> Draft | None:
    """What a system's text says, field by field; None where it is not even TOML."""
    import tomlkit
    from tomlkit.exceptions import TOMLKitError

    try:
        document = tomlkit.parse(text)
    except (TOMLKitError, ValueError, RecursionError):
        return None
    kind = _typed(document.get("kind"))
    formulas = table_of(document.get(formula_section(kind or "map")))
    sample = table_of(document.get("sample"))
    diagram = table_of(document.get("diagram"))
    states = []
    for name, entry in table_of(document.get("states")).items():
        table = table_of(entry)
        low, high = _pair(table.get("range"))
        formula = _typed(formulas.get(name))
        states.append(
            DraftState(str(name), _typed(table.get("start")), low, high, _typed(table.get("unit")), formula)
        )
    parameters = []
    for name, entry in table_of(document.get("parameters")).items():
        table = table_of(entry)
        low, high = _pair(table.get("range"))
        value, tolerance = _typed(table.get("value")), _typed(table.get("tolerance"))
        parameters.append(DraftParameter(str(name), value, low, high, _typed(table.get("unit")), tolerance))
    return Draft(
        title=_typed(document.get("title")),
        kind=kind,
        notes=_typed(document.get("notes")),
        states=tuple(states),
        parameters=tuple(parameters),
        parameter=_typed(diagram.get("parameter")) or (parameters[0].name if parameters else ""),
        observe=_typed(diagram.get("observe")) or (states[0].name if states else ""),
        every=_typed(sample.get("every")),
        crosses=_typed(sample.get("crosses")),
        direction=_typed(sample.get("direction")) or ("rising" if kind == "flow" else ""),
    )


def check_text(text: str) -> tuple[System | None, tuple[Trouble, ...]]:
    """Read a system's text; where that fails, list every mistake and not only the first."""
    try:
        system = read_system_text(text)
    except TinemarkError as error:
        first = trouble_of(error)
        rest = tuple(found for found in _field_troubles(read_draft(text)) if found.key != first.key)
        return None, (first, *rest)
    return system, ()


def trouble_of(error: TinemarkError) -> Trouble:
    """An error as a line under a field: what is wrong and what to do, without the field's own name."""
    key = str(getattr(error, "key", ""))
    column = int(getattr(error, "column", 0))
    line = int(getattr(error, "line", 0))
    # Mistakes in names come with both sections as their key; the field is the one of that name.
    if key == "states or parameters":
        quoted = _QUOTED_NAME.search(error.message)
        key = f"name.{quoted[1]}" if quoted else key
    place = f"Column {column}: " if column and not line else ""
    words = f"{place}{error.message}"
    if error.what_to_do:
        words = f"{words}; {error.what_to_do}"
    return Trouble(key, words[:1].upper() + words[1:], line, column)


def _field_troubles(draft: Draft | None) -> list[Trouble]:
    if draft is None:
        return []
    found: list[Trouble] = []
    for state in draft.states:
        found += _formula_trouble(
            state.formula, f"{draft.section}.{state.name}", formula_names(draft.kind, draft.names), draft.kind
        )
        found += _number_trouble(state.start, f"states.{state.name}.start")
        found += _range_trouble(state.low, state.high, f"states.{state.name}.range")
    for parameter in draft.parameters:
        key = f"parameters.{parameter.name}"
        found += _number_trouble(parameter.value, f"{key}.value")
        found += _range_trouble(parameter.low, parameter.high, f"{key}.range")
        if parameter.tolerance:
            found += _number_trouble(parameter.tolerance, f"{key}.tolerance")
    if draft.kind == "driven":
        parameters = tuple(parameter.name for parameter in draft.parameters)
        found += _formula_trouble(draft.every, "sample.every", parameters, draft.kind)
    elif draft.kind == "flow":
        found += _formula_trouble(draft.crosses, "sample.crosses", draft.names, draft.kind)
    found += _formula_trouble(draft.observe, "diagram.observe", draft.names, draft.kind)
    return found


def _formula_trouble(text: str, key: str, names: tuple[str, ...], kind: str) -> list[Trouble]:
    try:
        read_formula(text, names, key=key, timeless=TIMELESS.get(kind, TIMELESS["map"]))
    except FormulaError as error:
        return [trouble_of(error)]
    return []


def _number_trouble(text: str, key: str) -> list[Trouble]:
    try:
        exact(text)
    except NumberError as error:
        plain = trouble_of(error)
        return [Trouble(key, plain.words)]
    return []


def _range_trouble(low: str, high: str, key: str) -> list[Trouble]:
    if not low and not high:
        return []
    return _number_trouble(low, key) or _number_trouble(high, key)


def table_of(item: Any) -> Mapping[str, Any]:
    """An entry as a section, empty where it is none."""
    return item if isinstance(item, Mapping) else {}


def _pair(item: Any) -> tuple[str, str]:
    ends = [_typed(end) for end in item] if isinstance(item, list) else []
    return (ends[0] if ends else "", ends[1] if len(ends) > 1 else "")


def _typed(item: Any) -> str:
    """A value as the user typed it: 3.20 stays 3.20."""
    if item is None:
        return ""
    if isinstance(item, str):
        return str(item)
    raw = getattr(item, "as_string", None)
    return str(raw()) if callable(raw) else str(item)


def line_of(text: str, key: str) -> int:
    """Line (from 1) of a field in the text; that of its section where it is missing; 0 when unknown."""
    *sections, last = key.split(".")
    if sections and sections[0] == "name":
        sections, last = [], last
        wanted = re.compile(rf"^\s*(\[\s*(?:states|parameters)\s*\.\s*)?\"?{re.escape(last)}\"?\s*[\]=]")
        return next((n for n, line in enumerate(text.splitlines(), 1) if wanted.match(line)), 0)
    home, inside, best = ".".join(sections), "", 0
    for number, line in enumerate(text.splitlines(), 1):
        opened = re.match(r"^\s*\[\s*([^\]]*?)\s*\]", line)
        if opened:
            inside = re.sub(r"\s*\.\s*", ".", opened[1]).replace('"', "")
            if inside in (home, key):
                best = number
        elif inside == home and re.match(rf"^\s*\"?{re.escape(last)}\"?\s*=", line):
            return number
    return best
