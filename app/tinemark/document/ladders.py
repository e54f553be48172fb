"""Finding the ladders among the rows of a ledger.

The flips of one cascade have periods p·2^(n-1), lie in one direction, and their gaps shrink level
by level. Several cascades of the same base period can stand in one ledger (both ends of a bubble;
several windows of period 5), so periods alone do not tell them apart: position does. Rows are
joined nearest first (single linkage along the parameter), and only where the joined row of
onsets can still be one cascade.
"""

from __future__ import annotations

from bisect import bisect_right
from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from tinemark.document.row import Place, Row
from tinemark.onsets.results import Kind, Status

STEEPEST = 40
"""Largest ratio of successive gaps taken for a cascade: the ratios of an order-12 maximum tend to
13.5, those of conservative maps to 8.7, and first ratios stay near them."""

_LEAST_FOLD_SHARE = 4
"""A fold may stand closer to the first flip than that to the second, but not this many times."""

MAX_LEVEL = 60
"""Deepest level that a period of at most 2**53 can have, and some more."""

_NEIGHBOURS = 12  # pairs tried on each side of a row
_PASSES = 4  # what could not join a pair may still fit a longer chain, so the pairs are tried again


def grouped(rows: Sequence[Row]) -> tuple[Row, ...]:
    """The rows, in their order, with ladder, level and base period worked out anew.

    The outcome depends on the rows alone, not on their order or on what was worked out before.
    A ladder is named after its earliest row, so that later picks do not rename it.
    """
    found: dict[str, Row] = {}
    for chain in _chains(rows):
        base = _base(chain)
        ladder = f"L{min(link.row.number for link in chain)}"
        for link in chain:
            level = 0 if link.is_fold else (link.row.onset.period_before // base).bit_length()
            found[link.row.id] = replace(link.row, ladder=ladder, level=level, base_period=base)
    return tuple(found.get(row.id) or replace(row, ladder="", level=None, base_period=None) for row in rows)


@dataclass(frozen=True)
class _Link:
    """A row on its way into a chain. `order` is log2(period / odd part), half less for a fold."""

    row: Row
    order: Fraction
    value: Fraction
    spread: Fraction

    @property
    def is_fold(self) -> bool:
        return self.row.onset.kind is Kind.FOLD


_Chain = tuple[_Link, ...]  # by order


def _chains(rows: Sequence[Row]) -> list[_Chain]:
    # Measured onsets make ladders of their own, to be compared with the model's.
    families: dict[tuple[Place, bool, int], list[_Link]] = defaultdict(list)
    others: dict[tuple[Place, bool], list[tuple[int, Fraction]]] = defaultdict(list)
    for row in rows:
        onset = row.onset
        period = onset.period_after if onset.kind is Kind.FOLD else onset.period_before
        if onset.kind is Kind.FLIP and onset.period_after != 2 * period:
            continue
        if onset.kind not in (Kind.FLIP, Kind.FOLD) or period < 1:
            continue
        odd = period // (period & -period)
        order = Fraction((period & -period).bit_length() - 1)
        if onset.kind is Kind.FOLD:
            order -= Fraction(1, 2)
        measured = onset.status is Status.MEASURED
        families[row.place, measured, odd].append(_Link(row, order, onset.value_fraction, onset.half_width))
        others[row.place, measured].append((odd, onset.value_fraction))
    chains: list[_Chain] = []
    for (place, measured, odd), links in families.items():
        foreign = sorted(value for other, value in others[place, measured] if other != odd)
        chains += _join(links, foreign)
    # A fold alone opens no ladder yet.
    return [chain for chain in chains if not all(link.is_fold for link in chain)]


def _join(links: list[_Link], foreign: list[Fraction]) -> list[_Chain]:
    """Single linkage: calculated rows first, so that a coarse reading cannot take a proved one's place."""
    links = sorted(links, key=lambda link: (link.value, link.row.number))
    chain_of: dict[str, _Chain] = {link.row.id: (link,) for link in links}
    calculated = [link for link in links if link.row.onset.status is not Status.READ_BY_EYE]
    refused: set[tuple[str, int, str, int]] = set()
    for members in (calculated, links):
        pairs = _pairs(members)
        for _ in range(_PASSES):
            joined = False
            for first, second in pairs:
                ours, theirs = chain_of[first], chain_of[second]
                # Chains only grow, so the first row and the length name one of them.
                both = (ours[0].row.id, len(ours), theirs[0].row.id, len(theirs))
                if ours is theirs or both in refused:
                    continue
                chain = tuple(sorted(ours + theirs, key=lambda link: link.order))
                if _is_cascade(chain, foreign):
                    chain_of.update((link.row.id, chain) for link in chain)
                    joined = True
                else:
                    refused.add(both)
            if not joined:
                break
    return list({id(chain): chain for chain in chain_of.values()}.values())


def _pairs(links: Sequence[_Link]) -> list[tuple[str, str]]:
    """Pairs of different levels, nearest first. `links` lie in order of value."""
    pairs = []
    for i, link in enumerate(links):
        beside = (other for other in links[i + 1 :] if other.order != link.order)
        for other, _ in zip(beside, range(_NEIGHBOURS), strict=False):
            pairs.append(
                (other.value - link.value, link.row.number, other.row.number, link.row.id, other.row.id)
            )
    return [(first, second) for _, _, _, first, second in sorted(pairs)]


def _base(chain: _Chain) -> int:
    """Base period: of the fold at the head, else as stated, else the odd part of the periods."""
    stated = max(link.row.stated_base for link in chain)
    if chain[0].is_fold:
        return chain[0].row.onset.period_after
    if stated:
        return stated
    period = chain[0].row.onset.period_before
    return period // (period & -period)


def _is_cascade(chain: _Chain, foreign: Sequence[Fraction]) -> bool:
    """Whether onsets, in order of level, can be those of one cascade as far as can be told."""
    orders = [link.order for link in chain]
    if len(set(orders)) < len(orders) or any(link.is_fold for link in chain[1:]):
        return False
    base = _base(chain)
    if any(link.row.stated_base not in (0, base) for link in chain):
        return False
    if any(not link.is_fold and link.row.onset.period_before % base for link in chain):
        return False
    if len(chain) == 2:
        # With no second gap to compare, an onset of another family in between tells against it:
        # between two flips of a cascade the cycle of that very cascade is what is stable.
        low, high = sorted(link.value for link in chain)
        between = bisect_right(foreign, low)
        return between == len(foreign) or foreign[between] >= high
    return all(_gaps_fit(*chain[i : i + 3]) for i in range(len(chain) - 2))


def _gaps_fit(a: _Link, b: _Link, c: _Link) -> bool:
    """Whether two successive gaps point one way and shrink, within the uncertainties."""
    first, second = b.value - a.value, c.value - b.value
    loose_first, loose_second = a.spread + b.spread, b.spread + c.spread
    if first * second < 0 and abs(first) > loose_first and abs(second) > loose_second:
        return False
    slack = loose_first + loose_second
    least = _LEAST_FOLD_SHARE if a.is_fold else 1
    if abs(second) > least * abs(first) + slack:
        return False
    levels = -((a.order - b.order) // 1)
    return abs(first) <= Fraction(STEEPEST) ** levels * abs(second) + STEEPEST * slack


def direction(rows: Iterable[Row]) -> int:
    """1 when the levels of a ladder rise with the parameter, -1 when they fall, 0 when unknown."""
    levels = sorted((row.level, row.onset.value_fraction) for row in rows if row.level is not None)
    if len(levels) < 2 or levels[0][1] == levels[-1][1]:
        return 0
    return 1 if levels[-1][1] > levels[0][1] else -1
