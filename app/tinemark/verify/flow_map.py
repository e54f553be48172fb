"""Driven and free-running systems as maps of several states: an orbit in steps of a Taylor series.

Every step of time is a map of its own, told with its derivatives by Taylor coefficients of the solution as a
power series in its start and the parameter, and carried on like a step of a map. A driven system's time
is counted in strobe periods. A free-running one is stopped at its section after fixed steps that come near.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import comb

from tinemark.verify import intervals as iv
from tinemark.verify.claims import Undecided
from tinemark.verify.courses import Course, Plan
from tinemark.verify.fixed import Jet, Jets, Side
from tinemark.verify.intervals import Interval
from tinemark.verify.many_cycles import Local, ManyStates
from tinemark.verify.series import Series
from tinemark.verify.switches import Switch
from tinemark.verify.system import TIME

GUARD_BITS = 24
ROOM = 40
"""How far, in bits below one, a remainder may lie from zero for the step to be believed."""
TERMS_A_BIT = 0.4
"""Order of the series per bit of precision: what costs least over a stretch of time."""
LEAST_TERMS = 12
WINDOW = 24
"""The stop at a section is told for moments up to 2^-WINDOW from the last step's end."""
WINDOW_TERMS = 10


@dataclass(frozen=True)
class Piece:
    """One step: from a moment on for so long; a stop at the section where `length` is zero.

    `done` counts the returns that are done before it where it is the first of one, else it is None.
    """

    start: Fraction
    length: Fraction
    done: int | None = None


@dataclass(frozen=True)
class Equations:
    """Rates and sampling as plans of operations.

    Attributes
    ----------
    states, parameter
        Names.
    rates
        One formula a state; of a free-running system the section's besides, as the last.
    period
        Driven: the strobe period. None: free-running.
    """

    states: tuple[str, ...]
    parameter: str
    rates: Plan
    period: Plan | None


@dataclass(frozen=True)
class FlowMap(ManyStates):
    """A return map that is told by integration in these steps."""

    equations: Equations | None = None
    pieces: tuple[Piece, ...] = ()

    def steps_of(self, period: int) -> int:
        """How many steps of an orbit are so many returns."""
        starts = [place for place, piece in enumerate(self.pieces) if piece.done == period]
        return starts[0] if starts else len(self.pieces)

    def passed(self, step: int) -> int | None:
        """How many returns are done at a step; None within one of them."""
        return self.pieces[step].done

    def local(self, order: int, r: Interval, bits: int) -> Local:
        """What tells the derivatives of each step up to an order."""
        return Integrated(self, order, r, bits)

    def cost(self, bits: int, order: int) -> float:
        """Work is counted where it is done."""
        del bits, order
        return 0.0


@dataclass(frozen=True)
class Passed:
    """One step of time of a box, in units.

    Attributes
    ----------
    series
        Coefficients of each state in powers of time, the step's length being one.
    rest
        What is beyond them, times the next power of time; holds on the whole step.
    tube
        Holds every state on the whole step.
    """

    series: list[list[Jet]]
    rest: list[Jet]
    tube: list[Jet]


class Integrated(Local):
    """Steps of time with their derivatives."""

    def __init__(self, flow: FlowMap, order: int, r: Interval, bits: int) -> None:
        super().__init__(flow, order, r, bits)
        self.flow = flow
        assert flow.equations is not None
        self.equations = flow.equations
        self.jets = Jets(self.shape, bits + GUARD_BITS, flow.watch)
        self.terms = max(LEAST_TERMS, int(TERMS_A_BIT * self.jets.bits))
        self.fixed_parameter = self.jets.jet(self.parameter())
        self.period: Jet | None = None
        if self.equations.period is not None:
            names = {flow.parameter: [self.fixed_parameter]}
            (self.period,) = Course(self.equations.period, self.jets, names).advance()
            if self.period.get(0, (0, 0))[0] <= 0:
                raise Undecided("the strobe period is not positive there")

    def at(self, step: int, box: Sequence[Interval], sides: dict[Switch, int] | None = None) -> list[Series]:
        """One series a state."""
        del sides
        start = [self.jets.jet(self.values(box)[name]) for name in self.flow.states]
        piece = self.flow.pieces[step]
        if piece.length:
            found = self.ends(self.passed(start, piece.start, piece.length, self.terms))
        else:
            found = self.stopped(start)
        return [self.jets.series(jet) for jet in found]

    def coefficients(
        self, start: Sequence[Jet], begin: Side, length: Fraction, terms: int
    ) -> tuple[list[list[Jet]], Course]:
        """Coefficients of each state up to a power of time, the step's length being one."""
        jets = self.jets
        states = [[jet] for jet in start]
        names: dict[str, list[Jet]] = dict(zip(self.flow.states, states, strict=True))
        names[self.flow.parameter] = [self.fixed_parameter]
        if self.period is not None:
            long = jets.scaled(self.period, length)
            names[TIME] = [jets.product(self.period, {0: begin}), long]
        course = Course(self.equations.rates, jets, names)
        for k in range(1, terms + 1):
            for series, rate in zip(states, course.advance(), strict=False):
                moved = rate if self.period is None else jets.product(self.period, rate)
                series.append(jets.scaled(moved, length / k))
        return states, course

    def passed(
        self, start: Sequence[Jet], begin: Fraction, length: Fraction, terms: int, *, back: bool = False
    ) -> Passed:
        """One step of time of a box; `back`, both ways from it.

        The solution stays in the tube on the whole step, as the series up to it and what the tube says of the
        remainder lie in the tube's inside (Corliss & Rihm, 1996).

        Raises
        ------
        Undecided
            That is not so: the step is too long.
        """
        jets = self.jets
        series, _ = self.coefficients(start, _moment(jets, begin), length, terms - 1)
        room = 1 << jets.bits - ROOM
        near = [_swept(one, back) for one in series]
        tube = [{place: (low - room, high + room) for place, (low, high) in one.items()} for one in near]
        first, last = begin - (length if back else 0), begin + length
        moments = (_moment(jets, first)[0], _moment(jets, last)[1])
        beyond, _ = self.coefficients(tube, moments, length, terms)
        rest = [one[terms] for one in beyond]
        for held, one in zip(tube, beyond, strict=True):
            # What is zero at first stays zero where nothing in the tube moves it.
            if any(not jet.keys() <= held.keys() for jet in one):
                raise Undecided("a step of the integration is too short to tell what moves")
            if any(max(-low, high) >= room for low, high in one[terms].values()):
                raise Undecided("a step of the integration is too long for its remainder")
        return Passed(series, rest, tube)

    def ends(self, passed: Passed) -> list[Jet]:
        """The states at the end of a step."""
        found = []
        for series, rest in zip(passed.series, passed.rest, strict=True):
            total = rest
            for jet in reversed(series):
                total = self.jets.sum(total, jet)
            found.append(total)
        return found

    def stopped(self, start: Sequence[Jet]) -> list[Jet]:
        """The states where the solution passes the section, near by."""
        jets = self.jets
        length = Fraction(1, 2**WINDOW)
        passed = self.passed(start, Fraction(0), length, WINDOW_TERMS, back=True)
        moment = self.moment(start, passed, length)
        # Coefficients in time about the moment of passing, which lies in that interval for every start.
        order = self.shape.order
        powers: list[Jet] = [jets.one]
        for _ in range(WINDOW_TERMS):
            powers.append(jets.product(powers[-1], {0: moment}))
        moved: list[list[Jet]] = []
        for series, rest in zip(passed.series, passed.rest, strict=True):
            whole = [*series, rest]
            moved.append(
                [
                    jets.products(
                        (comb(k, m), whole[k], powers[k - m]) for k in range(m, len(whole)) if whole[k]
                    )
                    for m in range(order + 1)
                ]
            )
        names = dict(zip(self.flow.states, moved, strict=True))
        names[self.flow.parameter] = [self.fixed_parameter]
        course = Course(self.equations.rates, jets, names)
        section = [course.advance()[-1] for _ in range(order + 1)]
        late = self._delay(section)
        found = []
        for series in moved:
            total = series[order]
            for jet in reversed(series[:order]):
                total = jets.sum(jets.product(total, late), jet)
            found.append(total)
        return found

    def moment(self, start: Sequence[Jet], passed: Passed, length: Fraction) -> Side:
        """When every solution from a box passes the section, rising: by the mean value theorem.

        Raises
        ------
        Undecided
            It may not within the window, or at no speed.
        """
        jets = self.jets
        (value,), (_, speed) = self.section(start, length, 1), self.section(passed.tube, length, 2)
        if speed[0] <= 0:
            raise Undecided("the orbit may pass its section without speed")
        whole = iv.div(jets.interval(value), jets.interval(speed), jets.bits + GUARD_BITS)
        found = jets.side(iv.neg(whole))
        if max(-found[0], found[1]) >= 1 << jets.bits:
            raise Undecided("the orbit does not come near enough to its section")
        return found

    def section(self, states: Sequence[Jet], length: Fraction, count: int) -> list[Side]:
        """The section's formula on a box, and its change with time."""
        _, course = self.coefficients(states, (0, 0), length, count)
        place = self.equations.rates.outputs[-1]
        return [jet.get(0, (0, 0)) for jet in course.values[place][:count]]

    def _delay(self, section: Sequence[Jet]) -> Jet:
        """How much later than at the box's moment solutions from elsewhere pass, as a series."""
        if self.shape.order == 0:
            return {}
        jets = self.jets
        inverse = jets.inverse({0: section[1].get(0, (0, 0))})
        slope = _without_value(section[1])
        found: Jet = {}
        for _ in range(self.shape.order):
            total = jets.sum(_without_value(section[0]), jets.product(slope, found))
            power = found
            for jet in section[2:]:
                power = jets.product(power, found)
                total = jets.sum(total, jets.product(jet, power))
            found = jets.negative(jets.product(inverse, total))
        return found


def _moment(jets: Jets, moment: Fraction) -> Side:
    return jets.constant(moment).get(0, (0, 0))


def _swept(series: Sequence[Jet], back: bool) -> Jet:
    """What a series takes on from time zero to one, or from minus one to one."""
    found = dict(series[0])
    for k, jet in enumerate(series[1:], 1):
        for place, (low, high) in jet.items():
            if back:
                most = max(-low, high)
                low, high = (min(low, -most) if k & 1 else min(low, 0)), (most if k & 1 else max(high, 0))
            here = found.get(place, (0, 0))
            found[place] = (here[0] + min(low, 0), here[1] + max(high, 0))
    return found


def _without_value(jet: Jet) -> Jet:
    return {place: side for place, side in jet.items() if place}
