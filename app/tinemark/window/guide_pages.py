"""The pages of the in-app guide, with the table of keys made from the list of actions."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from tinemark.resources_path import resource

KEYS_MARK = "<!-- keys -->"


@dataclass(frozen=True)
class GuidePage:
    """One page: its file's stem, its title and its Markdown text."""

    name: str
    title: str
    text: str


def guide_pages(
    keys: Sequence[tuple[str, str, str]] = (), folder: Path | None = None
) -> tuple[GuidePage, ...]:
    """All pages in their order.

    Parameters
    ----------
    keys
        (menu, what it does, keys) of every action; they go where a page has `KEYS_MARK`.
    folder
        Where the pages lie; None for those that ship with the program.
    """
    home = resource("guide") if folder is None else folder
    pages = []
    for file in sorted(home.glob("*.md")):
        text = file.read_text(encoding="utf-8").replace(KEYS_MARK, key_table(keys))
        first = next((line for line in text.splitlines() if line.startswith("# ")), f"# {file.stem}")
        pages.append(GuidePage(file.stem, first[2:].strip(), text))
    return tuple(pages)


def key_table(keys: Sequence[tuple[str, str, str]]) -> str:
    """The keys as Markdown, a table for each menu."""
    parts: list[str] = []
    for menu in dict.fromkeys(menu for menu, _, _ in keys):
        rows = [f"| {words} | {_cell(combination)} |" for name, words, combination in keys if name == menu]
        parts += [f"## {menu.replace('/', ', ')}", "", "| do | keys |", "|---|---|", *rows, ""]
    return "\n".join(parts)


def _cell(text: str) -> str:
    return text.replace("|", "\\|")
