"""Edits of a system's text by field: each changes the TOML text and keeps its comments. No Qt here."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from typing import Any

from tinemark.systems.errors import SystemFileError
from tinemark.systems.system import formula_section
from tinemark.systems.system_text import edit_system_text
from tinemark.window.system_draft import Draft, DraftParameter, DraftState, read_draft, table_of


def edited(text: str, changes: Mapping[str, str | Sequence[str] | None]) -> str:
    """The text with some fields changed, comments kept (see `systems.system_file.edit_system_text`)."""
    return edit_system_text(text, changes)


def with_state(text: str) -> str:
    """One more state, which stays where it starts until its formula is edited."""
    draft = _draft_of(text)
    name = _free_name(draft.names, ("y", "z", "u", "v", "w", "s"))
    still = name if draft.section == "next" else "0"
    return edited(text, {f"states.{name}.start": "0", f"{draft.section}.{name}": still})


def with_parameter(text: str) -> str:
    """One more parameter, of value 1, which no formula uses yet."""
    name = _free_name(_draft_of(text).names, ("b", "c", "d", "k", "m", "q"))
    return edited(text, {f"parameters.{name}.value": "1"})


def without(text: str, section: str, name: str) -> str:
    """The text without one state ("states") or parameter ("parameters"), and without its formula."""
    gone: dict[str, str | Sequence[str] | None] = {f"{section}.{name}": None}
    if section == "states":
        gone[f"{_draft_of(text).section}.{name}"] = None
    return edited(text, gone)


def with_kind(text: str, kind: str) -> str:
    """The text as another kind of system: its formulas kept as they are, in their new section.

    A driven system is strobed every unit of time and a flow is sampled where its first state passes zero,
    until that is edited.
    """
    draft = _draft_of(text)
    if draft.kind == kind:
        return text
    old, new = draft.section, formula_section(kind)
    if old != new:
        text = _renamed_section(text, old, new)
    samples: dict[str, dict[str, str | Sequence[str] | None]] = {
        "map": {"sample": None},
        "driven": {"sample.every": draft.every or "1", "sample.crosses": None, "sample.direction": None},
        "flow": {
            "sample.crosses": draft.crosses or (draft.states[0].name if draft.states else ""),
            "sample.direction": draft.direction or "rising",
            "sample.every": None,
        },
    }
    return edited(text, {"kind": kind, **samples[kind]})


def _renamed_section(text: str, old: str, new: str) -> str:
    heading = re.compile(rf"^(\s*\[\s*){re.escape(old)}(\s*\])", re.MULTILINE)
    renamed_text, count = heading.subn(rf"\g<1>{new}\g<2>", text)
    if count == 1:
        return renamed_text
    # Written as inline table or dotted keys.
    import tomlkit

    document: Any = tomlkit.parse(text)
    if old in document:
        document[new] = document.pop(old).unwrap()
    return tomlkit.dumps(document)


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
            changes[f"{before.section}.{name}"] = word.sub(new, state.formula)
    for key, formula in (("every", before.every), ("crosses", before.crosses)):
        if word.search(formula):
            changes[f"sample.{key}"] = word.sub(new, formula)
    # What the text leaves to the defaults follows by itself.
    said = _said_of_diagram(text)
    if "observe" in said and word.search(before.observe):
        changes["diagram.observe"] = word.sub(new, before.observe)
    if "parameter" in said and section == "parameters" and before.parameter == old:
        changes["diagram.parameter"] = new
    return edited(kept, changes)


def _said_of_diagram(text: str) -> Mapping[str, Any]:
    import tomlkit

    return table_of(tomlkit.parse(text).get("diagram"))


def _renamed_headings(text: str, section: str, old: str, new: str) -> str:
    heading = re.compile(rf"^(\s*\[\s*{section}\s*\.\s*)(?:{re.escape(old)}|\"{re.escape(old)}\")(\s*\])")
    key = re.compile(rf"^(\s*)(?:{re.escape(old)}|\"{re.escape(old)}\")(\s*=)")
    inside, lines = "", []
    for line in text.splitlines(keepends=True):
        opened = re.match(r"^\s*\[\s*([^\]]*?)\s*\]", line)
        if opened:
            inside = opened[1]
            line = heading.sub(rf"\g<1>{new}\g<2>", line)
        elif section == "states" and inside in ("next", "rate"):
            line = key.sub(rf"\g<1>{new}\g<2>", line)
        lines.append(line)
    return "".join(lines)


def _renamed_keys(text: str, section: str, old: str, new: str) -> str:
    # Inline tables and dotted keys: rebuilt in order, which loses only the comments between them.
    import tomlkit

    document: Any = tomlkit.parse(text)
    sections = [section, "next", "rate"] if section == "states" else [section]
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
