"""Counting passages of a section: that a free-running orbit is stopped at the first one that counts.

Every step is divided until on each part the section's formula keeps its sign, or rises or falls throughout.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from tinemark.verify.claims import Undecided
from tinemark.verify.fixed import Jet
from tinemark.verify.flow_map import FlowMap, Integrated, Passed, Piece
from tinemark.verify.intervals import Interval

DEEPEST = 12
ABOVE, BELOW, RISES, FALLS = "above", "below", "rises", "falls"


def see_passages(flow: FlowMap, box: Sequence[Interval], r: Interval, bits: int) -> None:
    """See that the cycle in a box passes the section, upward and with speed, only where each return stops.

    Raises
    ------
    Undecided
        It may pass at other moments too, or touch the section.
    """
    local = Integrated(flow, 0, r, bits)
    here = [{0: local.jets.side(side)} for side in box]
    parts: list[str] = []
    for piece in flow.pieces:
        if piece.length:
            passed = local.passed(here, piece.start, piece.length, local.terms)
            parts += _parts(local, passed, piece, Fraction(0), Fraction(1), DEEPEST)
            here = local.ends(passed)
        else:
            # Around the stop the formula rises: `stopped` sees to that.
            here = local.stopped(here)
            see_once(parts)
            parts = []


def see_once(parts: Sequence[str]) -> None:
    """See that a return leaves the section upward, comes back below and ends rising at the section.

    Raises
    ------
    Undecided
        The order of the parts leaves something else open.
    """
    runs: list[str] = []
    for part in parts:
        if not runs or runs[-1] != part:
            runs.append(part)
    if len(runs) < 2 or runs[0] != RISES or runs[-1] != RISES:
        raise Undecided("the orbit may not leave its section and come back to it in one direction")
    side, moved = "", ""
    for run in runs[:-1]:
        if run in (RISES, FALLS):
            if moved:
                raise Undecided("the orbit may graze its section")
            moved = run
            continue
        if not side and (run != ABOVE or moved != RISES):
            raise Undecided("the orbit may not leave its section in the counted direction")
        if side and run != side:
            if run == ABOVE:
                raise Undecided("the orbit may pass its section before it is stopped")
            if moved != FALLS:
                raise Undecided("the orbit may graze its section")
        side, moved = run, ""
    if moved or side != BELOW:
        raise Undecided("the orbit may not come back to its section from the other side")


def _parts(
    local: Integrated, passed: Passed, piece: Piece, first: Fraction, last: Fraction, deep: int
) -> list[str]:
    """What the section's formula does on consecutive parts of a step."""
    pairs = zip(passed.series, passed.rest, strict=True)
    states = [_between(local, one, rest, first, last) for one, rest in pairs]
    value, speed = local.section(states, piece.length, 2)
    for side, rising, falling in ((value, ABOVE, BELOW), (speed, RISES, FALLS)):
        if side[0] > 0:
            return [rising]
        if side[1] < 0:
            return [falling]
    if deep == 0:
        raise Undecided("the orbit grazes its section")
    middle = (first + last) / 2
    return [
        *_parts(local, passed, piece, first, middle, deep - 1),
        *_parts(local, passed, piece, middle, last, deep - 1),
    ]


def _between(local: Integrated, series: Sequence[Jet], rest: Jet, first: Fraction, last: Fraction) -> Jet:
    """A state on a part of a step."""
    jets = local.jets
    low, high = jets.constant(first).get(0, (0, 0))[0], jets.constant(last).get(0, (0, 0))[1]
    moment: Jet = {0: (low, high)}
    total = rest
    for jet in reversed(series):
        total = jets.sum(jets.product(total, moment), jet)
    return total
