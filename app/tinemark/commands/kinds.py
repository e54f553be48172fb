"""The argument of --kinds: kinds of onsets in words, separated by commas."""

from __future__ import annotations

from typing import TYPE_CHECKING

from tinemark.systems.errors import TinemarkError

if TYPE_CHECKING:
    from tinemark.onsets.results import Kind


def kinds_of(text: str | None) -> frozenset[Kind] | None:
    """Kinds named in a text; None, which means all, where there is no text.

    Raises
    ------
    TinemarkError
        A word that is no kind; lists those that are.
    """
    from tinemark.onsets.results import Kind

    if text is None:
        return None
    known = {kind.value.lower(): kind for kind in Kind if kind is not Kind.UNKNOWN}
    found = set()
    for word in text.split(","):
        kind = known.get(" ".join(word.lower().split()))
        if kind is None:
            shown = word.strip()[:40]
            raise TinemarkError(
                f'"{shown}" is no kind of onset' if shown else "a kind is missing",
                where="--kinds",
                what_to_do="separate by commas: " + ", ".join(kind.value for kind in known.values()),
            )
        found.add(kind)
    return frozenset(found)
