"""A system as TOML text: written whole, or edited in place with its comments kept."""

from __future__ import annotations

from collections.abc import Mapping, MutableMapping, Sequence
from typing import Any

from tinemark.systems.errors import SystemFileError
from tinemark.systems.system import System, formula_section


def write_system_text(system: System) -> str:
    """The system as TOML text; reading it gives an equal system."""
    import tomlkit

    document = tomlkit.document()
    document["title"] = system.title
    document["kind"] = system.kind
    if system.notes:
        document["notes"] = system.notes
    states = tomlkit.table(is_super_table=True)
    for state in system.states:
        table = tomlkit.table()
        table["start"] = state.start.text
        if state.range:
            table["range"] = [end.text for end in state.range]
        if state.unit:
            table["unit"] = state.unit
        states[state.name] = table
    document["states"] = states
    parameters = tomlkit.table(is_super_table=True)
    for parameter in system.parameters:
        table = tomlkit.table()
        table["value"] = parameter.value.text
        if parameter.range:
            table["range"] = [end.text for end in parameter.range]
        if parameter.unit:
            table["unit"] = parameter.unit
        if parameter.tolerance is not None:
            table["tolerance"] = parameter.tolerance.text
        parameters[parameter.name] = table
    document["parameters"] = parameters
    following = tomlkit.table()
    for name, formula in zip(system.state_names, system.formulas, strict=True):
        following[name] = formula
    document[formula_section(system.kind)] = following
    if system.sample is not None:
        sample = tomlkit.table()
        if system.kind == "driven":
            sample["every"] = system.sample.every
        else:
            sample["crosses"] = system.sample.crosses
            sample["direction"] = system.sample.direction
        document["sample"] = sample
    diagram = tomlkit.table()
    diagram["parameter"] = system.diagram_parameter
    diagram["observe"] = system.observe
    document["diagram"] = diagram
    return tomlkit.dumps(document)


def edit_system_text(text: str, changes: Mapping[str, str | Sequence[str] | None]) -> str:
    """Change keys of a system's TOML text and keep its comments and layout.

    Parameters
    ----------
    text
        TOML text that can be parsed.
    changes
        Dotted key -> new text, list of texts, or None to remove the key. Sections are made
        where they are missing.

    Raises
    ------
    SystemFileError
        The text is no TOML, or has a plain value where a section is needed.
    """
    import tomlkit
    import tomlkit.exceptions

    try:
        document = tomlkit.parse(text)
    except tomlkit.exceptions.TOMLKitError as error:
        raise SystemFileError("is not TOML", what_to_do="mend the text before changing a field") from error
    for key, value in changes.items():
        *sections, last = key.split(".")
        table: Any = document
        for section in sections:
            if section not in table:
                table[section] = tomlkit.table()
            table = table[section]
            if not isinstance(table, MutableMapping):
                raise SystemFileError("should be a section", key=key, what_to_do=f"write it as [{section}]")
        if value is None:
            table.pop(last, None)
        else:
            table[last] = value if isinstance(value, str) else list(value)
    return tomlkit.dumps(document)
