"""System files: TOML in, TOML out, with every mistake named by file, key and place."""

from __future__ import annotations

import difflib
import re
import tomllib
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from tinemark.systems.errors import FormulaError, NumberError, SystemFileError
from tinemark.systems.exact import Exact, exact
from tinemark.systems.formula import MAX_NAME_LENGTH, NAME, RESERVED, read_formula
from tinemark.systems.system import (
    DIRECTIONS,
    KINDS,
    MAX_MAP_STATES,
    MAX_RATE_STATES,
    TIMELESS,
    Parameter,
    Sample,
    State,
    System,
    formula_names,
    formula_section,
)

MAX_FILE_BYTES = 256 * 1024
MAX_PARAMETERS = 40
_PLACE = re.compile(r"\(at (?:line (\d+), column (\d+)|end of document)\)")
_TOP_KEYS = ("title", "kind", "notes", "states", "parameters")
_SAMPLE_KEYS = {"driven": ("every",), "flow": ("crosses", "direction")}


def read_system_file(path: str | Path) -> System:
    """Read a system file.

    Raises
    ------
    SystemFileError, FormulaError
        What is wrong, with file, key and place.
    """
    file = Path(path)
    try:
        with file.open("rb") as handle:
            data = handle.read(MAX_FILE_BYTES + 1)
    except OSError as error:
        reason = error.strerror or str(error)
        raise SystemFileError(
            f"cannot be read ({reason.lower()})", file=str(path), what_to_do="check the path"
        ) from error
    return read_system_bytes(data, file=str(path))


def read_system_bytes(data: bytes, *, file: str = "") -> System:
    """Read a system from the bytes of its file; see `read_system_file`."""
    if len(data) > MAX_FILE_BYTES:
        raise SystemFileError(
            f"is larger than {MAX_FILE_BYTES // 1024} KiB",
            file=file,
            what_to_do="a system file is a short TOML text",
        )
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise SystemFileError(
            f"is not UTF-8 text (byte {error.start + 1})", file=file, what_to_do="save it as UTF-8"
        ) from error
    return read_system_text(text, file=file)


def read_system_text(text: str, *, file: str = "") -> System:
    """Read a system from TOML text; see `read_system_file`."""
    if not text.isascii() and any("\ud800" <= mark <= "\udfff" for mark in text):
        # Half a character, as a broken clipboard may hold; it could be read, but never saved.
        raise SystemFileError(
            "holds a broken character", file=file, what_to_do="type the text again instead of pasting it"
        )
    if not text.strip():
        raise SystemFileError("is empty", file=file, what_to_do='start with title = "…" and kind = "map"')
    try:
        # Floats stay texts: a decimal is the exact rational it spells.
        data = tomllib.loads(text, parse_float=str)
    except tomllib.TOMLDecodeError as error:
        place = _PLACE.search(str(error))
        line, column = (int(place[1]), int(place[2])) if place and place[1] else (text.count("\n") + 1, 0)
        message = _PLACE.sub("", str(error)).strip()
        raise SystemFileError(
            f"is not TOML here: {message[:1].lower()}{message[1:]}",
            file=file,
            line=line,
            column=column,
            what_to_do="check quotes, brackets and the = sign",
        ) from error
    except (RecursionError, ValueError) as error:
        raise SystemFileError(
            "holds nesting or numbers beyond all bounds", file=file, what_to_do="check the file"
        ) from error
    return _Reader(file).system(data)


class _Reader:
    def __init__(self, file: str) -> None:
        self.file = file

    def error(self, message: str, key: str, what_to_do: str = "") -> SystemFileError:
        return SystemFileError(message, file=self.file, key=key, what_to_do=what_to_do)

    def known(self, table: Mapping[str, Any], allowed: Sequence[str], key: str) -> None:
        for name in table:
            if name not in allowed:
                close = difflib.get_close_matches(name, allowed, 1)
                full = f"{key}.{_short(name)}" if key else _short(name)
                hint = f'did you mean "{close[0]}"?' if close else "allowed: " + ", ".join(allowed)
                raise self.error("this key is not known", full, hint)

    def table(self, data: Mapping[str, Any], name: str, key: str = "") -> dict[str, Any]:
        full = f"{key}.{name}" if key else name
        if name not in data:
            raise self.error("is missing", full, f"add a [{full}] section")
        value = data[name]
        if not isinstance(value, dict):
            raise self.error("should be a section", full, f"write it as [{full}]")
        return value

    def text(self, data: Mapping[str, Any], name: str, key: str, default: str | None = None) -> str:
        full = f"{key}.{name}" if key else name
        if name not in data:
            if default is not None:
                return default
            raise self.error("is missing", full, f'add {name} = "…"')
        value = data[name]
        if not isinstance(value, str):
            raise self.error("should be a text", full, "put it in quotes")
        return value

    def number(self, value: Any, key: str) -> Exact:
        if isinstance(value, bool) or not isinstance(value, (str, int)):
            raise self.error("should be a number", key, 'write a decimal such as "3.45"')
        try:
            return exact(value)
        except (NumberError, ValueError) as error:
            hint = error.what_to_do if isinstance(error, NumberError) else ""
            message = error.message if isinstance(error, NumberError) else "the number is too long"
            raise self.error(message, key, hint) from error

    def interval(self, data: Mapping[str, Any], key: str) -> tuple[Exact, Exact] | None:
        if "range" not in data:
            return None
        value = data["range"]
        full = f"{key}.range"
        if not isinstance(value, list) or len(value) != 2:
            raise self.error("should be two numbers", full, 'write it as ["2.8", "4.0"]')
        low, high = self.number(value[0], full), self.number(value[1], full)
        if low.fraction >= high.fraction:
            raise self.error(
                "the lower end is not below the upper end", full, "swap or widen the two numbers"
            )
        return low, high

    def system(self, data: Mapping[str, Any]) -> System:
        kind = self.text(data, "kind", "")
        if kind not in KINDS:
            raise self.error(
                f'the kind "{_short(kind)}" is not known', "kind", 'write "map", "driven" or "flow"'
            )
        section = formula_section(kind)
        self.own_sections(data, kind)
        states = self.states(self.table(data, "states"), kind)
        parameters = self.parameters(self.table(data, "parameters"))
        names = (*(state.name for state in states), *(parameter.name for parameter in parameters))
        self.names(names)
        formulas_table = self.table(data, section)
        state_names = [state.name for state in states]
        self.known(formulas_table, state_names, section)
        allowed = formula_names(kind, names)
        formulas = tuple(
            self.formula(formulas_table, name, section, allowed, TIMELESS[kind]) for name in state_names
        )
        sample = None if kind == "map" else self.sample(data, kind, names, parameters)
        parameter, observe = self.diagram(data, states, parameters, names)
        return System(
            title=self.text(data, "title", ""),
            kind=kind,
            states=states,
            parameters=parameters,
            formulas=formulas,
            diagram_parameter=parameter,
            observe=observe,
            notes=self.text(data, "notes", "", ""),
            sample=sample,
        )

    def own_sections(self, data: Mapping[str, Any], kind: str) -> None:
        """Sections of another kind are named as such: the mistake is then the kind, not the spelling."""
        if kind == "map":
            for name in ("rate", "sample"):
                if name in data:
                    raise self.error(
                        "has no place in a map", name, 'use [next], or kind = "driven" or "flow" with [rate]'
                    )
            self.known(data, (*_TOP_KEYS, "next", "diagram"), "")
            return
        if "next" in data:
            raise self.error(
                f'has no place in kind = "{kind}"',
                "next",
                'give time derivatives in [rate], or use kind = "map"',
            )
        self.known(data, (*_TOP_KEYS, "rate", "sample", "diagram"), "")

    def sample(
        self, data: Mapping[str, Any], kind: str, names: tuple[str, ...], parameters: tuple[Parameter, ...]
    ) -> Sample:
        table = self.table(data, "sample")
        other = _SAMPLE_KEYS["flow" if kind == "driven" else "driven"]
        for name in other:
            if name in table:
                hint = (
                    "a driven system is strobed: every = the drive period, a formula in the parameters"
                    if kind == "driven"
                    else "a free-running system is sampled at a section: crosses = a formula in the states"
                )
                raise self.error(f'has no place in kind = "{kind}"', f"sample.{name}", hint)
        self.known(table, _SAMPLE_KEYS[kind], "sample")
        if kind == "driven":
            known = [parameter.name for parameter in parameters]
            return Sample(every=self.formula(table, "every", "sample", known, TIMELESS["driven"]))
        crosses = self.formula(table, "crosses", "sample", names, TIMELESS["flow"])
        direction = self.text(table, "direction", "sample", "rising")
        if direction not in DIRECTIONS:
            raise self.error(
                f'"{_short(direction)}" is no direction', "sample.direction", 'write "rising" or "falling"'
            )
        return Sample(crosses=crosses, direction=direction)

    def states(self, table: Mapping[str, Any], kind: str) -> tuple[State, ...]:
        most = MAX_MAP_STATES if kind == "map" else MAX_RATE_STATES
        what = {"map": "a map", "driven": "a driven system", "flow": "a free-running system"}[kind]
        if not 1 <= len(table) <= most:
            raise self.error(f"has {len(table)} states", "states", f"{what} has 1 to {most}")
        found = []
        for name in table:
            key = f"states.{_short(name)}"
            entry = self.table(table, name, "states")
            self.known(entry, ("start", "range", "unit"), key)
            if "start" not in entry:
                raise self.error("is missing", f"{key}.start", 'add start = "0.4"')
            start = self.number(entry["start"], f"{key}.start")
            found.append(State(name, start, self.interval(entry, key), self.text(entry, "unit", key, "")))
        return tuple(found)

    def parameters(self, table: Mapping[str, Any]) -> tuple[Parameter, ...]:
        if not 1 <= len(table) <= MAX_PARAMETERS:
            raise self.error(
                f"has {len(table)} parameters", "parameters", f"a system has 1 to {MAX_PARAMETERS}"
            )
        found = []
        for name in table:
            key = f"parameters.{_short(name)}"
            entry = self.table(table, name, "parameters")
            self.known(entry, ("value", "range", "unit", "tolerance"), key)
            if "value" not in entry:
                raise self.error("is missing", f"{key}.value", 'add value = "3.2"')
            value = self.number(entry["value"], f"{key}.value")
            tolerance = None
            if "tolerance" in entry:
                tolerance = self.number(entry["tolerance"], f"{key}.tolerance")
                if tolerance.fraction < 0:
                    raise self.error(
                        "is negative", f"{key}.tolerance", "a standard uncertainty is zero or more"
                    )
            unit = self.text(entry, "unit", key, "")
            found.append(Parameter(name, value, self.interval(entry, key), unit, tolerance))
        return tuple(found)

    def names(self, names: Sequence[str]) -> None:
        seen: set[str] = set()
        for name in names:
            if not NAME.fullmatch(name) or len(name) > MAX_NAME_LENGTH:
                raise self.error(
                    f'"{_short(name)}" is no name',
                    "states or parameters",
                    f"use a letter, then letters, digits and _, at most {MAX_NAME_LENGTH} in all",
                )
            try:
                read_formula(name, [name])
            except FormulaError as error:
                raise self.error(
                    f'"{name}" cannot be a name', "states or parameters", "choose another name"
                ) from error
            if name in RESERVED:
                raise self.error(
                    f'"{name}" has a meaning of its own in formulas',
                    "states or parameters",
                    "choose another name",
                )
            if name in seen:
                raise self.error(
                    f'"{name}" is both a state and a parameter', "states or parameters", "rename one of them"
                )
            seen.add(name)

    def formula(
        self, data: Mapping[str, Any], name: str, key: str, names: Sequence[str], timeless: str
    ) -> str:
        text = self.text(data, name, key)
        self.check(text, f"{key}.{name}", names, timeless)
        return text

    def check(self, text: str, key: str, names: Sequence[str], timeless: str) -> None:
        try:
            read_formula(text, names, key=key, timeless=timeless)
        except FormulaError as error:
            if not self.file:
                raise
            raise FormulaError(
                error.message,
                column=error.column,
                key=f"{self.file}, {key}",
                what_to_do=error.what_to_do,
            ) from error

    def diagram(
        self,
        data: Mapping[str, Any],
        states: tuple[State, ...],
        parameters: tuple[Parameter, ...],
        names: Sequence[str],
    ) -> tuple[str, str]:
        default_observe = states[0].name
        if "diagram" not in data:
            return parameters[0].name, default_observe
        table = self.table(data, "diagram")
        self.known(table, ("parameter", "observe"), "diagram")
        parameter = self.text(table, "parameter", "diagram", parameters[0].name)
        known = [item.name for item in parameters]
        if parameter not in known:
            raise self.error(
                f'"{_short(parameter)}" is not a parameter', "diagram.parameter", "known: " + ", ".join(known)
            )
        observe = self.text(table, "observe", "diagram", default_observe)
        self.check(observe, "diagram.observe", names, TIMELESS["driven"])
        return parameter, observe


def _short(name: object) -> str:
    text = str(name)
    return text if len(text) <= MAX_NAME_LENGTH else text[: MAX_NAME_LENGTH - 3] + "..."
