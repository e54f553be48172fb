"""One row of the ledger: a pick, where it belongs, and what was noted on it."""

from __future__ import annotations

from dataclasses import dataclass

from tinemark.onsets.results import Onset
from tinemark.systems.exact import fraction_text
from tinemark.systems.system import System


@dataclass(frozen=True)
class Place:
    """What an onset is an onset of.

    Attributes
    ----------
    system_key
        Key of the system's mathematics (`System.key`).
    parameter
        Name of the swept parameter.
    fixed
        (name, decimal text) of every other parameter, sorted by name, each value written one way
        (0.30 as 0.3). The key does not hold values, and onsets found at different values of another
        parameter are different onsets.
    """

    system_key: str
    parameter: str
    fixed: tuple[tuple[str, str], ...] = ()


def place_of(system: System, parameter: str) -> Place:
    """Place of the onsets of `system` in `parameter`, the other parameters at their present values."""
    fixed = tuple(
        sorted((p.name, fraction_text(p.value.fraction)) for p in system.parameters if p.name != parameter)
    )
    return Place(system.key, parameter, fixed)


@dataclass(frozen=True)
class Row:
    """One pick.

    Attributes
    ----------
    id
        Name of the row, unique in its ledger and never used again in it.
    onset
        The pick itself.
    system_key, fixed
        See `Place`.
    ladder
        Name of the ladder the row belongs to; empty when it belongs to none.
    level
        n for the n-th flip of the ladder, 0 for the fold that opens it, None outside a ladder.
    base_period
        Base period of the ladder; None outside a ladder.
    stated_base
        Base period as stated by who added the row (a followed ladder knows it); 0 when not stated.
        Ladders respect it.
    note
        The user's own words.
    """

    id: str
    onset: Onset
    system_key: str
    fixed: tuple[tuple[str, str], ...] = ()
    ladder: str = ""
    level: int | None = None
    base_period: int | None = None
    stated_base: int = 0
    note: str = ""

    @property
    def place(self) -> Place:
        """What the onset is an onset of."""
        return Place(self.system_key, self.onset.parameter, self.fixed)

    @property
    def number(self) -> int:
        """The number in the row's name: rows are numbered in the order in which they were added."""
        return int(self.id[1:])


def row_id(number: int) -> str:
    """Name of the row with a number."""
    return f"r{number}"
