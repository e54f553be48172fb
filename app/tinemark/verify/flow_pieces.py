"""Steps of time for a return map: how long each is, by going along the orbit of one point.

Any steps are right: what is shown of a box is shown step by step, and steps that are too long or do not end
near the section show nothing.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace
from fractions import Fraction

from tinemark.verify import intervals as iv
from tinemark.verify.claims import NotCheckable, Undecided
from tinemark.verify.fixed import Jet
from tinemark.verify.flow_map import GUARD_BITS, FlowMap, Integrated, Passed, Piece
from tinemark.verify.intervals import Interval

MOST_PIECES = 5000
SPARE_BITS = 8
"""Bits by which remainders stay below the precision asked for."""
GRID = 2**12
"""Steps are whole numbers of this share of the time's unit."""
SHRINK, GROW = Fraction(3, 5), 2.0
NEWTON_STEPS = 12


def with_pieces(flow: FlowMap, start: Sequence[Interval], r: Interval, period: int, bits: int) -> FlowMap:
    """The map with steps for so many returns from a point.

    Raises
    ------
    Undecided, NotCheckable
        The orbit escapes, does not come back or takes too many steps.
    """
    local = Integrated(flow, 0, iv.middle(r, bits), bits)
    states = [{0: local.jets.side(iv.middle(side, bits))} for side in start]
    pilot = _Pilot(local, states)
    driven = local.equations.period is not None
    pieces: list[Piece] = []
    for done in range(period):
        own = pilot.strobe() if driven else pilot.way_round()
        for place, piece in enumerate(own):
            pieces.append(replace(piece, done=done) if place == 0 else piece)
            if len(pieces) > MOST_PIECES:
                raise NotCheckable(f"the integration takes more than {MOST_PIECES} steps")
    return replace(flow, pieces=tuple(pieces))


class _Pilot:
    def __init__(self, local: Integrated, states: list[Jet]) -> None:
        self.local, self.states = local, states
        self.length = Fraction(1, 8)
        self.limit = 1 << GUARD_BITS - SPARE_BITS

    def strobe(self) -> Iterator[Piece]:
        """Steps from one strobe to the next."""
        moment = Fraction(0)
        while moment < 1:
            passed, length = self.step(moment, 1 - moment)
            yield Piece(moment, length)
            moment += length
            self.go(self.local.ends(passed))

    def way_round(self) -> Iterator[Piece]:
        """Steps from a passage of the section to near the next one in the same direction, and a stop."""
        below = False
        while True:
            passed, length = self.step(Fraction(0), None)
            ends = self.local.ends(passed)
            value = self.value(ends)
            if below and value > 0:
                break
            below = below or value < 0
            yield Piece(Fraction(0), length)
            self.go(ends)
        share = self.share(passed, length)
        if share > 0:
            last = length * share
            yield Piece(Fraction(0), last)
            self.go(self.local.ends(self.local.passed(self.states, Fraction(0), last, self.local.terms)))
        yield Piece(Fraction(0), Fraction(0))
        self.go(self.local.stopped(self.states))

    def step(self, moment: Fraction, most: Fraction | None) -> tuple[Passed, Fraction]:
        """The next step, and its length."""
        local = self.local
        for _ in range(60):
            length = self.length if most is None else min(self.length, most)
            try:
                passed = local.passed(self.states, moment, length, local.terms)
            except Undecided:
                if length * GRID <= 1:
                    raise
                self.length = _rounded(length * SHRINK)
                continue
            largest = max(max(-low, high) for jet in passed.rest for low, high in jet.values())
            factor = 0.9 * min(GROW, (self.limit / max(largest, 1)) ** (1 / local.terms))
            if largest <= self.limit:
                if length == self.length or factor < 1:
                    self.length = _rounded(length * Fraction(factor))
                return passed, length
            self.length = _rounded(length * Fraction(factor))
        raise Undecided("no step of the integration is short enough")

    def go(self, ends: Sequence[Jet]) -> None:
        """Start again from the middle of where a step ended."""
        middles = []
        for jet in ends:
            low, high = jet.get(0, (0, 0))
            if high - low > 1 << self.local.jets.bits - 20:
                raise Undecided("the orbit is lost in rounding")
            middle = (low + high) // 2
            middles.append({0: (middle, middle)})
        self.states = middles

    def value(self, states: Sequence[Jet]) -> int:
        """About the section's formula, in units."""
        (low, high) = self.local.section(states, Fraction(1), 1)[0]
        return (low + high) // 2

    def share(self, passed: Passed, length: Fraction) -> Fraction:
        """Which share of a step goes up to the section, by regula falsi and then Newton's method."""
        jets = self.local.jets
        unit = 1 << jets.bits
        low, high = 0, unit
        at = unit // 2
        for count in range(NEWTON_STEPS + 8):
            states = [self.along(series, at) for series in passed.series]
            value, speed = (sum(side) // 2 for side in self.local.section(states, length, 2))
            low, high = (low, at) if value > 0 else (at, high)
            following = at - value * unit // speed if speed else low
            if not low < following < high and count < NEWTON_STEPS:
                following = (low + high) // 2
            if abs(following - at) <= 4:
                break
            at = following
        return Fraction(max(at, 0), unit)

    def along(self, series: Sequence[Jet], at: int) -> Jet:
        """A state at a share of a step."""
        jets = self.local.jets
        total: Jet = {}
        for jet in reversed(series):
            total = jets.sum(jets.product(total, {0: (at, at)}), jet)
        low, high = total.get(0, (0, 0))
        return {0: ((low + high) // 2,) * 2}


def _rounded(length: Fraction) -> Fraction:
    return Fraction(max(1, int(length * GRID)), GRID)
