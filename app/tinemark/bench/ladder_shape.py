"""Where in a row of branch counts a cascade splits."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tinemark.bench.branch_count import MORE, NOT_PERIODIC

LEAST_SPLIT = 3
"""A split is reported when so many settings past it show it; one or two may be chance."""

Counts = NDArray[np.int64]


@dataclass(frozen=True)
class Stretch:
    """The settings that tell about one split, as places in a row of settings along which cycles split.

    Attributes
    ----------
    level
        n of the n-th flip; the cycle of 2^(n-1) points splits.
    first, split, end
        From, the first one past the split, and up to (not with) which place.
    """

    level: int
    first: int
    split: int
    end: int


def splits_upwards(counts: Counts) -> bool:
    """Whether cycles split as the knob rises: the counts fit a rising ladder better than a falling."""
    return _boundary(counts, 1)[1] <= _boundary(counts[::-1], 1)[1]


def stretches_of(counts: Counts, levels: int) -> tuple[tuple[Stretch, ...], str]:
    """The splits of a row of counts, lowest level first, and why there is no further one."""
    found: list[Stretch] = []
    begin, reason = 0, ""
    for level in range(1, levels + 1):
        period = 2 ** (level - 1)
        if period > 8:
            reason = "cycles of more than sixteen points are not told apart"
            break
        split = begin + _boundary(counts[begin:], 2 * period)[0]
        shown = _shows(counts[split:], 2 * period)
        if split >= len(counts):
            reason = f"up to the end of the sweep no setting shows more than {_branches(period)}"
            break
        if split == 0 and level == 1:
            reason = "the first setting is already split"
            break
        if shown < LEAST_SPLIT:
            reason = (
                f"{shown} setting{'' if shown == 1 else 's'} past {_branches(period)} "
                f"show{'s' if shown == 1 else ''} {2 * period}, too few to tell a split from chance"
                if shown or period == 1
                else f"past {_branches(period)} no setting shows {2 * period}: noise hides the split, or the "
                "settings stand too far apart"
            )
            break
        found.append(Stretch(level, begin, split, len(counts)))
        begin = split
    # A stretch ends where the next split begins or where the cycle is lost.
    ends = [stretch.split for stretch in found[1:]]
    whole = []
    for k, stretch in enumerate(found):
        end = ends[k] if k < len(ends) else _lost(counts, stretch.split)
        whole.append(Stretch(stretch.level, stretch.first, stretch.split, end))
    return tuple(whole), reason


def _branches(count: int) -> str:
    return "one branch" if count == 1 else f"{count} branches"


def _is_past(counts: Counts, branches: int) -> NDArray[np.bool_]:
    return np.asarray((counts >= branches) | (counts == MORE) | (counts == NOT_PERIODIC))


def _boundary(counts: Counts, branches: int) -> tuple[int, int]:
    """Place from which the counts show so many branches with the fewest exceptions, and their number."""
    past = _is_past(counts, max(branches, 2))
    before = np.concatenate([[0], np.cumsum(past)])
    after = np.concatenate([np.cumsum(~past[::-1])[::-1], [0]])
    place = int(np.argmin(before + after))
    return place, int((before + after)[place])


def _shows(counts: Counts, branches: int) -> int:
    return int(((counts >= branches) | (counts == MORE)).sum())


def _lost(counts: Counts, split: int) -> int:
    """The place from which samples are not periodic twice in a row."""
    lost = counts[split:] == NOT_PERIODIC
    twice = np.flatnonzero(lost[:-1] & lost[1:])
    return split + int(twice[0]) if len(twice) else len(counts)
