"""From the rough place of an onset of any kind to its polished, proved or estimated value."""

from __future__ import annotations

from collections.abc import Generator
from fractions import Fraction

from tinemark.onsets.one_map import OneMap
from tinemark.onsets.polish import Rough, Settled, settle_onset
from tinemark.onsets.results import Kind, Step

ONE_STATE_KINDS = frozenset(
    {Kind.FLIP, Kind.FOLD, Kind.TRANSCRITICAL, Kind.PITCHFORK, Kind.BORDER_COLLISION, Kind.CRISIS}
)
"""Kinds that a map of one state can show."""


def settle_any(
    one: OneMap, rough: Rough, digits: int, *, reach: Fraction | None = None, show_after: int = 0
) -> Generator[Step, None, Settled]:
    """Polish an onset of any kind from a rough place, and prove it where that can be done.

    What `rough` holds depends on its kind: for a border collision the cycle point that touches the
    surface, for a crisis the point of the unstable cycle that the attractor meets; a cycle point else.
    Parameters and errors are those of `polish.settle_onset`.
    """
    if rough.kind in (Kind.TRANSCRITICAL, Kind.PITCHFORK):
        from tinemark.onsets.branch_point_onsets import settle_branch_point

        return (yield from settle_branch_point(one, rough, digits, reach=reach, show_after=show_after))
    if rough.kind is Kind.BORDER_COLLISION:
        from tinemark.onsets.border_onsets import settle_border

        return (yield from settle_border(one, rough, digits, reach=reach))
    if rough.kind is Kind.CRISIS:
        from tinemark.onsets.crises import settle_crisis

        return (yield from settle_crisis(one, rough, digits, reach=reach))
    return (yield from settle_onset(one, rough, digits, reach=reach, show_after=show_after))
