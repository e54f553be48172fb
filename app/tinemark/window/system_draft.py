"""A system that is being typed: its text read leniently, edited by field, and every mistake found at once.

The TOML text is the one truth. The fields of the system card show what the text says, right or
wrong, and each edit of a field is an edit of the text. No Qt here.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from tinemark.systems.errors import FormulaError, NumberError, SystemFileError, TinemarkError
from tinemark.systems.exact import exact
from tinemark.systems.formula import read_formula
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text
from tinemark.systems.system_text import edit_system_text

_QUOTED_NAME = re.compile(r'"([^"]*)"')


@dataclass(frozen=True)
class DraftState:
    """A state as typed; `formula` gives it one step later."""

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
    """What the fields show."""

    title: str
    kind: str
    notes: str
    states: tuple[DraftState, ...]
    parameters: tuple[DraftParameter, ...]
    parameter: str
    observe: str

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
    following = _table(document.get("next"))
    diagram = _table(document.get("diagram"))
    states = []
    for name, entry in _table(document.get("states")).items():
        table = _table(entry)
        low, high = _pair(table.get("range"))
        formula = _typed(following.get(name))
        states.append(
            DraftState(str(name), _typed(table.get("start")), low, high, _typed(table.get("unit")), formula)
        )
    parameters = []
    for name, entry in _table(document.get("parameters")).items():
        table = _table(entry)
        low, high = _pair(table.get("range"))
        value, tolerance = _typed(table.get("value")), _typed(table.get("tolerance"))
        parameters.append(DraftParameter(str(name), value, low, high, _typed(table.get("unit")), tolerance))
    return Draft(
        title=_typed(document.get("title")),
        kind=_typed(document.get("kind")),
        notes=_typed(document.get("notes")),
        states=tuple(states),
        parameters=tuple(parameters),
        parameter=_typed(diagram.get("parameter")) or (parameters[0].name if parameters else ""),
        observe=_typed(diagram.get("observe")) or (states[0].name if states else ""),
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
        found += _formula_trouble(state.formula, f"next.{state.name}", draft.names)
        found += _number_trouble(state.start, f"states.{state.name}.start")
        found += _range_trouble(state.low, state.high, f"states.{state.name}.range")
    for parameter in draft.parameters:
        key = f"parameters.{parameter.name}"
        found += _number_trouble(parameter.value, f"{key}.value")
        found += _range_trouble(parameter.low, parameter.high, f"{key}.range")
        if parameter.tolerance:
            found += _number_trouble(parameter.tolerance, f"{key}.tolerance")
    found += _formula_trouble(draft.observe, "diagram.observe", draft.names)
    return found


def _formula_trouble(text: str, key: str, names: Sequence[str]) -> list[Trouble]:
    try:
        read_formula(text, names, key=key)
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


def edited(text: str, changes: Mapping[str, str | Sequence[str] | None]) -> str:
    """The text with some fields changed, comments kept (see `systems.system_file.edit_system_text`)."""
    return edit_system_text(text, changes)


def with_state(text: str) -> str:
    """One more state, which stays where it starts until its formula is edited."""
    draft = _draft_of(text)
    name = _free_name(draft.names, ("y", "z", "u", "v", "w", "s"))
    return edited(text, {f"states.{name}.start": "0", f"next.{name}": name})


def with_parameter(text: str) -> str:
    """One more parameter, of value 1, which no formula uses yet."""
    name = _free_name(_draft_of(text).names, ("b", "c", "d", "k", "m", "q"))
    return edited(text, {f"parameters.{name}.value": "1"})


def without(text: str, section: str, name: str) -> str:
    """The text without one state ("states") or parameter ("parameters"), and without its formula."""
    gone: dict[str, str | Sequence[str] | None] = {f"{section}.{name}": None}
    if section == "states":
        gone[f"next.{name}"] = None
    return edited(text, gone)


def renamed(text: str, section: str, old: str, new: str) -> str:
    """The text with a state or parameter renamed, in its section, in every formula and in the diagram.

    Section headings and keys are changed where they stand, so that order and comments stay.
    """
    before = _draft_of(text)
    kept = _renamed_headings(text, section, old, new)
    after = read_draft(kept)
    wanted = [new if item.name == old else item.name for item in _items(before, section)]
    if after is None or [item.name for item in _items(after, section)] != wanted:
        kept = _renamed_keys(text, section, old, new)
    word = re.compile(rf"(?<![A-Za-z0-9_.]){re.escape(old)}(?![A-Za-z0-9_])")
    changes: dict[str, str | Sequence[str] | None] = {}
    for state in before.states:
        name = new if section == "states" and state.name == old else state.name
        if word.search(state.formula):
            changes[f"next.{name}"] = word.sub(new, state.formula)
    # What the text leaves to the defaults follows by itself.
    said = _said_of_diagram(text)
    if "observe" in said and word.search(before.observe):
        changes["diagram.observe"] = word.sub(new, before.observe)
    if "parameter" in said and section == "parameters" and before.parameter == old:
        changes["diagram.parameter"] = new
    return edited(kept, changes)


def _said_of_diagram(text: str) -> Mapping[str, Any]:
    import tomlkit

    return _table(tomlkit.parse(text).get("diagram"))


def _renamed_headings(text: str, section: str, old: str, new: str) -> str:
    heading = re.compile(rf"^(\s*\[\s*{section}\s*\.\s*)(?:{re.escape(old)}|\"{re.escape(old)}\")(\s*\])")
    key = re.compile(rf"^(\s*)(?:{re.escape(old)}|\"{re.escape(old)}\")(\s*=)")
    inside, lines = "", []
    for line in text.splitlines(keepends=True):
        opened = re.match(r"^\s*\[\s*([^\]]*?)\s*\]", line)
        if opened:
            inside = opened[1]
            line = heading.sub(rf"\g<1>{new}\g<2>", line)
        elif section == "states" and inside == "next":
            line = key.sub(rf"\g<1>{new}\g<2>", line)
        lines.append(line)
    return "".join(lines)


def _renamed_keys(text: str, section: str, old: str, new: str) -> str:
    # Inline tables and dotted keys: rebuilt in order, which loses only the comments between them.
    import tomlkit

    document: Any = tomlkit.parse(text)
    sections = [section, "next"] if section == "states" else [section]
    for name in sections:
        if name in document:
            document[name] = {
                new if key == old else key: value for key, value in document[name].unwrap().items()
            }
    return tomlkit.dumps(document)


def _items(draft: Draft, section: str) -> tuple[DraftState, ...] | tuple[DraftParameter, ...]:
    return draft.states if section == "states" else draft.parameters


def _draft_of(text: str) -> Draft:
    draft = read_draft(text)
    if draft is None:
        raise SystemFileError("is not TOML", what_to_do="mend the text first")
    return draft


def _free_name(taken: Sequence[str], wished: Sequence[str]) -> str:
    numbered = (f"{wished[0]}{number}" for number in range(2, 100))
    return next(name for name in (*wished, *numbered) if name not in taken)


def _table(item: Any) -> Mapping[str, Any]:
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
