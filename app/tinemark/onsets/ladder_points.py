"""Gaps and ratios of a ladder, with the uncertainty that its onsets hand on.

Gap n is onset n+1 minus onset n; ratio n is gap n over gap n+1. Proved onsets hand on enclosures; others
hand on standard uncertainties by the law of propagation with the shared end point taken once (JCGM 100:2008,
equations 10 and 13).
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from decimal import Context, Decimal, localcontext
from fractions import Fraction
from itertools import pairwise

from tinemark.onsets.results import LadderLevel, Status
from tinemark.systems.exact import fraction_text

ENCLOSURE = "enclosure"
STANDARD = "standard uncertainty"
COVERAGE = "95 % coverage"
WORKING_DIGITS = 90
"""Digits of the working precision for numbers that carry up to about 60."""


@dataclass(frozen=True)
class Estimate:
    """A number and its uncertainty, as decimal texts.

    Attributes
    ----------
    value, uncertainty
        Rounded alike; the uncertainty has two significant digits and is never rounded down.
    basis
        What the uncertainty is: "enclosure" (the number lies in value ± uncertainty for certain,
        given proved onsets), "standard uncertainty" (one standard deviation, as the GUM defines it) or
        "95 % coverage" (half-width of an interval that contains the number with at least that coverage).
    """

    value: str
    uncertainty: str
    basis: str

    @property
    def value_fraction(self) -> Fraction:
        """The value as an exact rational."""
        return Fraction(self.value)

    @property
    def uncertainty_fraction(self) -> Fraction:
        """The uncertainty as an exact rational."""
        return Fraction(self.uncertainty)

    @property
    def expanded_fraction(self) -> Fraction:
        """Half-width of an interval of at least 95 % coverage."""
        return self.uncertainty_fraction * (2 if self.basis == STANDARD else 1)

    @property
    def expanded_text(self) -> str:
        """`expanded_fraction` as a decimal text."""
        return fraction_text(self.expanded_fraction, 2)

    @property
    def lower(self) -> Fraction:
        """Lower end of the interval of at least 95 % coverage."""
        return self.value_fraction - self.expanded_fraction

    @property
    def upper(self) -> Fraction:
        """Upper end of the interval of at least 95 % coverage."""
        return self.value_fraction + self.expanded_fraction


@dataclass(frozen=True)
class LadderPoint:
    """One onset of a ladder, as the scaling needs it.

    Attributes
    ----------
    level
        1 and up.
    value, lower, upper
        `lower <= onset <= upper` in the sense of `Onset`.
    status
        Decides how the interval is read: proved, an enclosure; estimated and measured, 95 % coverage;
        read by eye, a rectangular distribution.
    """

    level: int
    value: Fraction
    lower: Fraction
    upper: Fraction
    status: Status

    def __post_init__(self) -> None:
        if not self.lower <= self.value <= self.upper:
            raise ValueError(f"level {self.level}: the value lies outside its own interval")

    @property
    def half_width(self) -> Fraction:
        """Largest distance from the value to an end of its interval."""
        return max(self.upper - self.value, self.value - self.lower)

    @property
    def is_proved(self) -> bool:
        """Whether the interval is an enclosure."""
        return self.status is Status.PROVED

    @property
    def standard_uncertainty(self) -> Fraction:
        """Standard uncertainty (JCGM 100:2008, 4.3): an enclosure and a reading count as rectangular."""
        if self.status in (Status.PROVED, Status.READ_BY_EYE):
            return self.half_width * Fraction(57735, 100000)  # 1 / sqrt(3)
        return self.half_width / 2


@dataclass(frozen=True)
class LevelScaling:
    """Gap and ratio that start at a level; None where they cannot be given, with the reason."""

    level: int
    gap: Estimate | None
    gap_reason: str
    ratio: Estimate | None
    ratio_reason: str


def points_of(levels: Iterable[LadderLevel]) -> tuple[LadderPoint, ...]:
    """The levels of a finished or growing ladder as points, sorted by level."""
    points = [
        LadderPoint(
            item.level,
            Fraction(item.onset.value),
            Fraction(item.onset.lower),
            Fraction(item.onset.upper),
            item.onset.status,
        )
        for item in levels
    ]
    return tuple(sorted(points, key=lambda point: point.level))


def checked(points: Sequence[LadderPoint]) -> tuple[LadderPoint, ...]:
    """Points sorted by level.

    Raises
    ------
    ValueError
        A level is given twice, or is below 1.
    """
    ordered = tuple(sorted(points, key=lambda point: point.level))
    for earlier, later in pairwise(ordered):
        if earlier.level == later.level:
            raise ValueError(f"level {later.level} is given twice")
    if ordered and ordered[0].level < 1:
        raise ValueError("levels count from 1")
    return ordered


def level_scalings(points: Sequence[LadderPoint]) -> tuple[LevelScaling, ...]:
    """Gap and ratio at every level from the lowest given to the highest; missing levels are listed too."""
    ordered = checked(points)
    if not ordered:
        return ()
    known = {point.level: point for point in ordered}
    return tuple(_level(known, level) for level in range(ordered[0].level, ordered[-1].level + 1))


def _level(known: dict[int, LadderPoint], level: int) -> LevelScaling:
    highest = max(known)

    def missing(last: int) -> str:
        absent = [n for n in range(level, last + 1) if n not in known]
        if not absent:
            return ""
        if absent[0] > highest:
            return f"needs level {absent[0]}, which is not known yet"
        return f"level {absent[0]} is missing"

    gap_reason, ratio_reason = missing(level + 1), missing(level + 2)
    estimate = None if gap_reason else gap(known[level], known[level + 1])
    ratio_estimate: Estimate | None = None
    if not ratio_reason:
        here, middle, beyond = (known[n] for n in (level, level + 1, level + 2))
        ratio_estimate, ratio_reason = ratio(here, middle, beyond)
    return LevelScaling(level, estimate, gap_reason, ratio_estimate, ratio_reason)


def gap(first: LadderPoint, second: LadderPoint) -> Estimate:
    """Distance between two successive onsets, with its sign."""
    value = second.value - first.value
    if first.is_proved and second.is_proved:
        low, high = second.lower - first.upper, second.upper - first.lower
        return estimate(value, max(high - value, value - low), ENCLOSURE)
    u = _root_sum_square((first.standard_uncertainty, second.standard_uncertainty))
    return estimate(value, u, STANDARD)


def ratio(first: LadderPoint, second: LadderPoint, third: LadderPoint) -> tuple[Estimate | None, str]:
    """Gap over next gap, or the reason why there is none.

    With all three proved the uncertainty encloses. Otherwise u(ratio) follows from the sensitivities
    -1, 1 + ratio and -ratio (over the second gap): the shared onset enters once.
    """
    if not gap_is_known(first, second) or not gap_is_known(second, third):
        level = first.level if not gap_is_known(first, second) else second.level
        return None, f"gap {level} is not larger than its own uncertainty"
    before, after = second.value - first.value, third.value - second.value
    value = before / after
    if first.is_proved and second.is_proved and third.is_proved:
        # Monotone in each onset where both gaps keep their signs, so the ends come from the corners.
        corners = [
            (b - a) / (c - b)
            for a in (first.lower, first.upper)
            for b in (second.lower, second.upper)
            for c in (third.lower, third.upper)
        ]
        return estimate(value, max(max(corners) - value, value - min(corners)), ENCLOSURE), ""
    u = _root_sum_square(
        (
            first.standard_uncertainty / abs(after),
            second.standard_uncertainty * abs(1 + value) / abs(after),
            third.standard_uncertainty * abs(value) / abs(after),
        )
    )
    return estimate(value, u, STANDARD), ""


def gap_is_known(first: LadderPoint, second: LadderPoint) -> bool:
    """Whether the gap is told apart from zero: outside its enclosure, or twice its standard uncertainty."""
    size = abs(second.value - first.value)
    if first.is_proved and second.is_proved:
        return first.upper < second.lower or second.upper < first.lower
    u = _root_sum_square((first.standard_uncertainty, second.standard_uncertainty))
    return size > 2 * u


def estimate(value: Fraction | Decimal, uncertainty: Fraction | Decimal, basis: str) -> Estimate:
    """Round a number to its uncertainty: two significant digits, rounded so that nothing is lost.

    What rounding the value takes away is added to the uncertainty, which is rounded up.
    """
    exact_value, exact_u = Fraction(value), Fraction(uncertainty)
    if exact_u < 0:
        raise ValueError("an uncertainty is not negative")
    if exact_u == 0:
        text = fraction_text(exact_value, WORKING_DIGITS // 2)
        # A rational with no short decimal is off by what its text leaves out.
        left_out = abs(exact_value - Fraction(text))
        return Estimate(text, _rounded_up(left_out) if left_out else "0", basis)
    places = 1 - _power(exact_u)
    middle = round(exact_value * Fraction(10) ** places) / Fraction(10) ** places
    total = exact_u + abs(exact_value - middle)
    if 1 - _power(total) < places:  # 9.96 became 10.4: one place fewer holds two digits
        places = 1 - _power(total)
        middle = round(exact_value * Fraction(10) ** places) / Fraction(10) ** places
        total = exact_u + abs(exact_value - middle)
    return Estimate(_fixed(middle, places), _rounded_up(total, places), basis)


def _rounded_up(value: Fraction, places: int | None = None) -> str:
    if places is None:
        places = 1 - _power(value)
    scale = Fraction(10) ** places
    return _fixed(Fraction(-((-value * scale) // 1)) / scale, places)


def _power(value: Fraction) -> int:
    with localcontext(Context(prec=12)):
        power = (Decimal(value.numerator) / Decimal(value.denominator)).adjusted()
    # The quotient was rounded: 9.999…9 may have become 10.
    return power if Fraction(10) ** power <= value else power - 1


def _fixed(value: Fraction, places: int) -> str:
    scaled = value * Fraction(10) ** places
    assert scaled.denominator == 1
    with localcontext(Context(prec=max(400, abs(places) + 400))):
        number = Decimal(int(scaled)).scaleb(-places)
        text = format(number, "f")
    return "0" if Fraction(text) == 0 else text


def _root_sum_square(parts: Iterable[Fraction]) -> Fraction:
    with localcontext(Context(prec=WORKING_DIGITS)):
        total = sum((decimal(part) ** 2 for part in parts), Decimal(0))
        return Fraction(total.sqrt())


def decimal(value: Fraction) -> Decimal:
    """A rational in the caller's decimal context."""
    return Decimal(value.numerator) / Decimal(value.denominator)
