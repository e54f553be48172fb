"""Finding the ladders among the rows of a ledger.

The flips of one cascade have periods p·2^(n-1), lie in one direction, and their gaps shrink level
by level. Several cascades of the same base period can stand in one ledger (both ends of a bubble;
several windows of period 5), so periods alone do not tell them apart: position does. Rows are
joined nearest first (single linkage along the parameter), and only where the joined row of
onsets can still be one cascade.
"""

from __future__ import annotations

import math
from bisect import bisect_right
from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import pairwise

from tinemark.document.row import Place, Row
from tinemark.onsets.results import Criticality, Kind, Onset, Status

STEEPEST = 40
"""Largest ratio of successive gaps taken for a cascade: the ratios of an order-12 maximum tend to
13.5, those of conservative maps to 8.7, and first ratios stay near them."""

QUADRATIC_RATE = 4.669  # what ratios of nearly every cascade tend to, to break ties between rows

SPEED_WORDS = "crosses -1 with speed"
"""Name of the evidence that tells how fast a flip's multiplier passes -1."""

NEAREST, FARTHEST = Fraction(1, 12), Fraction(8)
"""Between what the way to a later flip lies, times the speed with which the multiplier passes -1. The doubled
cycle's multiplier leaves +1 four times as fast, so the next flip is about half the inverse of the speed away:
the product is 0.46 for a quadratic maximum, 1.2 for order 8, and up to 2.5 for first gaps."""

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


@dataclass(frozen=True, eq=False)
class _Link:
    """A row on its way into a chain.

    Attributes
    ----------
    order
        2*log2(period / odd part), one less for a fold, which comes before the flip of its cycle.
    value, spread
        The onset and its half-width, as whole numbers of one common unit: whole numbers compare fast.
    speed
        How fast the multiplier passes -1 at a flip, per that unit; None where it is not known.
    """

    row: Row
    order: int
    value: int
    spread: int
    speed: Fraction | None = None

    @property
    def is_fold(self) -> bool:
        return self.row.onset.kind is Kind.FOLD

    @property
    def by_eye(self) -> bool:
        return self.row.onset.status is Status.READ_BY_EYE


_Chain = tuple[_Link, ...]  # by order
_Pair = tuple[str, str, bool]  # names of two rows, and whether rows of levels between lie between them


def _chains(rows: Sequence[Row]) -> list[_Chain]:
    # Measured onsets make ladders of their own, to be compared with the model's.
    families: dict[tuple[Place, bool], list[Row]] = defaultdict(list)
    for row in rows:
        onset = row.onset
        doubles = onset.kind is Kind.FLIP and onset.period_after == 2 * onset.period_before > 0
        if doubles or (onset.kind is Kind.FOLD and onset.period_after > 0):
            families[row.place, onset.status is Status.MEASURED].append(row)
    chains: list[_Chain] = []
    for family in families.values():
        unit = math.lcm(*(number.denominator for row in family for number in _numbers(row)))
        by_odd: dict[int, list[_Link]] = defaultdict(list)
        for row in family:
            odd, power = _odd_part(row)
            value, spread = (int(number * unit) for number in _numbers(row))
            speed = _speed(row.onset)
            by_odd[odd].append(
                _Link(
                    row,
                    2 * power - (row.onset.kind is Kind.FOLD),
                    value,
                    spread,
                    None if speed is None else speed / unit,
                )
            )
        for odd, links in by_odd.items():
            foreign = sorted(link.value for other in by_odd if other != odd for link in by_odd[other])
            chains += _join(links, foreign)
    # A fold alone opens no ladder yet.
    return [chain for chain in chains if not all(link.is_fold for link in chain)]


def _speed(onset: Onset) -> Fraction | None:
    """How fast the multiplier passes -1 at a soft flip, as its evidence says."""
    if onset.kind is not Kind.FLIP or onset.criticality is Criticality.SUBCRITICAL:
        return None
    words = dict(onset.evidence).get(SPEED_WORDS, "").split()
    try:
        return Fraction(words[0]) if words else None
    except (ValueError, ZeroDivisionError):
        return None


def _numbers(row: Row) -> tuple[Fraction, Fraction]:
    return row.onset.value_fraction, row.onset.half_width


def _odd_part(row: Row) -> tuple[int, int]:
    """Odd part of the period that a row's cascade begins or goes on with, and the power of two beside it."""
    onset = row.onset
    period = onset.period_after if onset.kind is Kind.FOLD else onset.period_before
    two = period & -period
    return period // two, two.bit_length() - 1


def _join(links: list[_Link], foreign: list[int]) -> list[_Chain]:
    """Single linkage: calculated rows first, so that a coarse reading cannot take a proved one's place."""
    links = sorted(links, key=lambda link: (link.value, link.row.number))
    chain_of: dict[str, _Chain] = {link.row.id: (link,) for link in links}
    calculated = [link for link in links if not link.by_eye]
    for members in (calculated, links):
        pairs = _pairs(members)
        _link_nearest(pairs, chain_of, foreign)
        if _swap_better(members, chain_of, foreign):
            _link_nearest(pairs, chain_of, foreign)
    return _distinct(chain_of)


def _link_nearest(pairs: list[_Pair], chain_of: dict[str, _Chain], foreign: list[int]) -> None:
    """Join what can be one cascade, nearest pair first."""
    refused: set[tuple[str, int, str, int]] = set()
    for _ in range(_PASSES):
        joined = False
        for first, second, apart in pairs:
            ours, theirs = chain_of[first], chain_of[second]
            # Here chains only grow, so the first row and the length name one of them.
            both = (ours[0].row.id, len(ours), theirs[0].row.id, len(theirs))
            if ours is theirs or both in refused:
                continue
            chain = tuple(sorted(ours + theirs, key=lambda link: link.order))
            # Two rows alone do not reach across levels between them: those belong to another cascade.
            if _is_cascade(chain, foreign) and not (apart and len(chain) == 2):
                chain_of.update((link.row.id, chain) for link in chain)
                joined = True
            else:
                refused.add(both)
        if not joined:
            return


def _swap_better(members: list[_Link], chain_of: dict[str, _Chain], foreign: list[int]) -> bool:
    """Where a lone row continues a chain better than its nearer end does, let the two change places.

    A map of several states can split twice, say, with both first flips before the second. Whether
    anything changed.
    """
    changed = False
    for chain in _distinct(chain_of):
        for end in {chain[0].order: chain[0], chain[-1].order: chain[-1]}.values():
            chain = chain_of[end.row.id]
            rest = tuple(link for link in chain if link is not end)
            if end.is_fold or len(rest) < 2:
                continue
            lone = [
                link
                for link in members
                if link.order == end.order
                and link is not end
                and len(chain_of[link.row.id]) <= 2
                and (end.by_eye or not link.by_eye)
            ]
            best = min(lone, key=lambda link: _misfit(link, rest), default=end)
            swapped = tuple(sorted((*rest, best), key=lambda link: link.order))
            if _misfit(best, rest) < _misfit(end, rest) and _is_cascade(swapped, foreign):
                for left in (end, *chain_of[best.row.id]):
                    chain_of[left.row.id] = (left,)
                chain_of.update((link.row.id, swapped) for link in swapped)
                changed = True
    return changed


def _distinct(chain_of: dict[str, _Chain]) -> list[_Chain]:
    return list({id(chain): chain for chain in chain_of.values()}.values())


def _misfit(link: _Link, chain: _Chain) -> float:
    """How far a row lies from where a chain goes on, in powers of e of the gap; at either end of it."""
    flips = [item for item in chain if not item.is_fold]
    if len(flips) < 2:
        return 0.0
    if link.order > flips[-1].order:  # going on: the same as going back, with the ratios inverted
        flips.reverse()
    steps = [abs(b.value - a.value) for a, b in pairwise(flips)]
    spans = [abs(b.order - a.order) // 2 for a, b in pairwise(flips)]
    rate = QUADRATIC_RATE if link.order < flips[0].order else 1 / QUADRATIC_RATE
    if len(steps) > 1 and spans[0] == spans[1] == 1 and steps[0] and steps[1]:
        rate = steps[0] / steps[1]
    levels = abs(flips[0].order - link.order) // 2
    # Gaps grow by `rate` a level on the way from the chain to the row.
    expected = sum(rate**n for n in range(1, levels + 1)) / sum(rate**-n for n in range(spans[0]))
    gap = abs(flips[0].value - link.value)
    if not gap or not steps[0]:
        return math.inf
    return abs(math.log(gap) - math.log(steps[0]) - math.log(expected))


def _pairs(links: Sequence[_Link]) -> list[_Pair]:
    """Pairs of different levels, nearest first. `links` lie in order of value."""
    pairs = []
    for i, link in enumerate(links):
        between: set[int] = set()
        found = 0
        for other in links[i + 1 :]:
            if other.order != link.order:
                low, high = sorted((link.order, other.order))
                apart = any(low < order < high for order in between)
                key = (other.value - link.value, link.row.number, other.row.number)
                pairs.append((key, (link.row.id, other.row.id, apart)))
                found += 1
                if found == _NEIGHBOURS:
                    break
            between.add(other.order)
    return [pair for _, pair in sorted(pairs)]


def _base(chain: _Chain) -> int:
    """Base period: of the fold at the head, else as stated, else the odd part of the periods."""
    if chain[0].is_fold:
        return chain[0].row.onset.period_after
    return max(link.row.stated_base for link in chain) or _odd_part(chain[0].row)[0]


def _is_cascade(chain: _Chain, foreign: Sequence[int]) -> bool:
    """Whether onsets, in order of level, can be those of one cascade as far as can be told."""
    orders = [link.order for link in chain]
    if len(set(orders)) < len(orders) or any(link.is_fold for link in chain[1:]):
        return False
    base = _base(chain)
    if any(link.row.stated_base not in (0, base) for link in chain):
        return False
    if any(not link.is_fold and link.row.onset.period_before % base for link in chain):
        return False
    if not all(_speeds_fit(a, b) for a, b in pairwise(chain)):
        return False
    if len(chain) == 2:
        # With no second gap to compare, an onset of another family in between tells against it:
        # between two flips of a cascade the cycle of that very cascade is what is stable.
        low, high = sorted(link.value for link in chain)
        between = bisect_right(foreign, low)
        return between == len(foreign) or foreign[between] >= high
    return all(_gaps_fit(*chain[i : i + 3]) for i in range(len(chain) - 2))


def _speeds_fit(a: _Link, b: _Link) -> bool:
    """Whether a later flip lies on the side, and about as far off, as the speed at the earlier one foretells.

    A multiplier that falls through -1 as the parameter rises leads to a cascade that rises, and all its
    multipliers fall.
    """
    if a.row.stated_base and a.row.stated_base == b.row.stated_base:
        return True  # followed or said to be one ladder
    if a.speed and b.speed and (a.speed > 0) != (b.speed > 0):
        return False
    loose = a.spread + b.spread
    if not a.speed:
        # The later flip tells the side alone.
        step = b.value - a.value
        return not b.speed or abs(step) <= loose or step * b.speed < 0
    way = -(b.value - a.value) * a.speed
    room = loose * abs(a.speed)
    return NEAREST - room <= way <= FARTHEST + room


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
    levels = (b.order - a.order + 1) // 2  # a fold stands half a level before the flip of its cycle
    steepest = int(STEEPEST**levels)
    return abs(first) <= steepest * abs(second) + STEEPEST * slack


def direction(rows: Iterable[Row]) -> int:
    """1 when the levels of a ladder rise with the parameter, -1 when they fall, 0 when unknown."""
    levels = sorted((row.level, row.onset.value_fraction) for row in rows if row.level is not None)
    if len(levels) < 2 or levels[0][1] == levels[-1][1]:
        return 0
    return 1 if levels[-1][1] > levels[0][1] else -1
