"""All superstable cycles of a one-state map in a range: found and counted in ball arithmetic.

A cycle of period p is superstable where a turning point c of the map is one of its points: a zero of
g(r) = f^p(c(r), r) - c(r). An interval of the parameter is dropped where g's enclosure excludes zero, kept
where g' excludes zero and g changes sign (one zero, exactly), and halved otherwise (Moore 1977; Tucker
2011). g is enclosed in mean-value form with the derivative carried along the orbit, so that intervals need
not be much narrower than the distances between zeros.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

from tinemark.onsets.ball_orbits import ball_of, precision
from tinemark.onsets.float_map import float_map
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.results import Step
from tinemark.onsets.smooth_pieces import switches
from tinemark.onsets.turning_points import SlopeBalls, Turning, contracted, turning_points
from tinemark.systems.balls import ball_function
from tinemark.systems.errors import SwitchingTouched

BITS = 80
MOST_BOXES, MOST_SWITCHING = 40_000, 4_000
"""Intervals looked at, over all turning points, of smooth maps and of those that switch, where orbits
that touch a surface cannot be told. The work is bounded, and what is left is reported."""
NARROWEST = Fraction(1, 10**13)
"""Intervals are not halved below this share of the parameter."""
MOST_SPLITS, HOPELESS = 100, 30
THINNEST = 512
"""The range is divided into parts no thinner than one in so many to tell turning points apart."""
SAME = 1e-11
"""Relative distance of parameters within which two superstable cycles may be one."""
SLICE = 24
"""Intervals between two chances to cancel."""


@dataclass(frozen=True)
class Superstable:
    """A superstable cycle: least period, the turning point on it, the parameter."""

    period: int
    x: float
    r: float


@dataclass
class SuperstableSearch:
    """What a search found.

    Attributes
    ----------
    found
        Superstable cycles, by parameter.
    undecided
        (period, low, high): intervals in which more may lie.
    unknown
        (low, high): intervals in which the turning points could not be told apart.
    turning
        Turning points of the map, at most, over the range.
    sure_of_turning
        Whether there are certainly no other turning points in the state's range.
    """

    found: list[Superstable] = field(default_factory=list)
    undecided: list[tuple[int, Fraction, Fraction]] = field(default_factory=list)
    unknown: list[tuple[Fraction, Fraction]] = field(default_factory=list)
    turning: int = 0
    sure_of_turning: bool = True

    @property
    def complete(self) -> bool:
        """Whether every superstable cycle of the range was found, given the turning points."""
        return not self.undecided and not self.unknown


class _Orbits:
    """Enclosures of g and g' for the periods up to a longest one."""

    def __init__(self, one: OneMap) -> None:
        exprs, names = one.exact_derivatives, (one.state, one.parameter)
        self.slopes = SlopeBalls(one)
        self.value = ball_function((exprs["f"],), names)
        self.first = ball_function((exprs["fx"], exprs["fr"]), names)

    def over(self, turning: Turning, low: Fraction, high: Fraction, most: int) -> list[tuple[Any, Any]]:
        """(g, g') over an interval for periods 1, 2 … as far as the orbit could be enclosed."""
        a, b = ball_of(low), ball_of(high)
        rs = a.union(b)
        middle = rs.mid()
        spread = rs - middle
        found: list[tuple[Any, Any]] = []
        try:
            c, d = contracted(self.slopes, turning, rs)
            at, _ = contracted(self.slopes, turning, middle)
            x, dx, centre = at, d, at
            xs = c
            for _ in range(most):
                self.slopes.check_smooth(xs, rs)
                fx, fr = self.first(xs, rs)
                (x,) = self.value(x, middle)
                dx = fx * dx + fr
                if not (dx.is_finite() and x.is_finite()):
                    break
                slope = dx - d
                xs = x + dx * spread
                found.append((x - centre + slope * spread, slope))
        except SwitchingTouched:
            pass
        return found

    def at(self, turning: Turning, r: Fraction, period: int) -> Any:
        """Enclosure of g at one parameter value."""
        point = ball_of(r)
        c, _ = contracted(self.slopes, turning, point)
        x = c
        for _ in range(period):
            (x,) = self.value(x, point)
        return x - c


def superstable_cycles(
    one: OneMap,
    start: Fraction,
    stop: Fraction,
    extent: tuple[Fraction, Fraction],
    max_period: int,
) -> Generator[Step, None, SuperstableSearch]:
    """Find every superstable cycle of least period up to `max_period` between two parameter values.

    Parameters
    ----------
    extent
        Range of the state in which turning points count.
    """
    search = SuperstableSearch()
    orbits = _Orbits(one)
    room = (stop - start) / 10**6
    parts = yield from _parts(one, orbits.slopes, start - room, stop + room, extent, search)
    if not search.turning:
        return search
    boxes, most = 0, MOST_SWITCHING if switches(one) else MOST_BOXES
    for low, high, found in parts:
        for turning in found:
            waiting = [(low, high, frozenset(range(1, max_period + 1)))]
            isolated: list[tuple[int, Fraction, Fraction]] = []
            while waiting:
                a, b, periods = waiting.pop()
                boxes += 1
                if boxes > most or b - a < NARROWEST * max(abs(a), abs(b)):
                    if b >= start and a <= stop:
                        search.undecided += [(period, a, b) for period in sorted(periods)]
                    continue
                with precision(BITS):
                    left = _sort(orbits, turning, a, b, periods, isolated)
                if left:
                    middle = (a * 487 + b * 513) / 1000
                    waiting += [(middle, b, left), (a, middle, left)]
                if boxes % SLICE == 0:
                    share = float((a - start) / (stop - start))
                    yield Step("looking for superstable cycles", min(max(share, 0.0), 1.0))
            with precision(BITS):
                search.found += _narrowed(orbits, turning, isolated)
    search.found = _distinct(one, search.found)
    return search


def _distinct(one: OneMap, found: list[Superstable]) -> list[Superstable]:
    """Superstable cycles by parameter, one that holds two turning points counted once."""
    cycles = float_map(one)
    kept: list[Superstable] = []
    for item in sorted(found, key=lambda item: (item.r, item.x)):
        near = [
            other
            for other in kept[-8:]
            if other.period == item.period and abs(other.r - item.r) <= SAME * max(abs(item.r), SAME)
        ]
        points = cycles.points(item.x, item.r, item.period)
        if not any(min(abs(points - other.x)) < 1e-6 * cycles.scale for other in near):
            kept.append(item)
    return kept


def _parts(
    one: OneMap,
    slopes: SlopeBalls,
    low: Fraction,
    high: Fraction,
    extent: tuple[Fraction, Fraction],
    search: SuperstableSearch,
) -> Generator[Step, None, list[tuple[Fraction, Fraction, tuple[Turning, ...]]]]:
    """The range in parts, in each of which the turning points are told apart."""
    parts: list[tuple[Fraction, Fraction, tuple[Turning, ...]]] = []
    waiting = [(low, high)]
    looked = 0
    room = (extent[1] - extent[0]) / 128
    wider = (extent[0] - room, extent[1] + room)
    while waiting:
        a, b = waiting.pop()
        looked += 1
        with precision(BITS):
            rs = ball_of(a).union(ball_of(b))
            # A little wider where that helps: a turning point on the very edge is no rarity.
            points = turning_points(one, slopes, rs, extent) or turning_points(one, slopes, rs, wider)
        yield Step("enclosing the turning points of the map")
        if points is None:
            if b - a < (high - low) / THINNEST or looked > (MOST_SPLITS if parts else HOPELESS):
                # Turning points meet here, or a switching surface runs through: nothing is said of it.
                search.unknown.append((a, b))
                continue
            middle = (a * 487 + b * 513) / 1000
            waiting += [(middle, b), (a, middle)]
            continue
        parts.append((a, b, points.found))
        search.turning = max(search.turning, len(points.found))
        search.sure_of_turning &= points.proved
    return parts


def _sort(
    orbits: _Orbits,
    turning: Turning,
    a: Fraction,
    b: Fraction,
    periods: frozenset[int],
    isolated: list[tuple[int, Fraction, Fraction]],
) -> frozenset[int]:
    """Settle what can be settled on an interval; gives the periods for which it must be halved."""
    enclosures = orbits.over(turning, a, b, max(periods))
    left = set()
    for period in periods:
        if period > len(enclosures):
            left.add(period)
            continue
        g, slope = enclosures[period - 1]
        if not g.contains(0) or (g.is_zero() and slope.is_zero()):
            continue
        if slope.contains(0):
            left.add(period)
            continue
        try:
            ends = [orbits.at(turning, end, period) for end in (a, b)]
        except SwitchingTouched:
            left.add(period)
            continue
        if any(end.contains(0) for end in ends):
            left.add(period)
        elif (ends[0] < 0) != (ends[1] < 0):
            isolated.append((period, a, b))
    return frozenset(left)


def _narrowed(
    orbits: _Orbits, turning: Turning, isolated: list[tuple[int, Fraction, Fraction]]
) -> list[Superstable]:
    """Isolated zeros to the accuracy of doubles, without those that have a lower period."""
    known: list[tuple[int, Fraction]] = []
    found = []
    for period, low, high in sorted(isolated):
        # A zero for a divisor of the period is a zero here, and here there is one only.
        if any(period % other == 0 and period > other and low <= r <= high for other, r in known):
            continue
        r = _zero(orbits, turning, period, low, high)
        known.append((period, r))
        c, _ = contracted(orbits.slopes, turning, ball_of(r))
        found.append(Superstable(period, float(c.mid()), float(r)))
    return found


def _zero(orbits: _Orbits, turning: Turning, period: int, low: Fraction, high: Fraction) -> Fraction:
    """A zero in an interval with one, by the secant method with bisection as its safeguard."""
    at_low, at_high = (float(orbits.at(turning, end, period).mid()) for end in (low, high))
    narrow = NARROWEST * max(abs(low), abs(high)) / 100
    for _ in range(80):
        share = at_low / (at_low - at_high) if at_low != at_high else 0.5
        r = low + (high - low) * Fraction(min(max(share, 1e-3), 1 - 1e-3)).limit_denominator(10**6)
        value = float(orbits.at(turning, r, period).mid())
        if value == 0 or high - low < narrow:
            return r
        # Illinois rule: the end that stays is weighted down, so that it cannot stick.
        if (value < 0) == (at_low < 0):
            low, at_low, at_high = r, value, at_high / 2
        else:
            high, at_high, at_low = r, value, at_low / 2
    return (low + high) / 2
