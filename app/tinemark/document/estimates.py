"""What the onsets of a ladder say together: gaps, ratios, limit, class and the next onset."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import lru_cache

from tinemark.document.rounding import ELLIPSIS, concise, group_digits, held_digits, minus_sign, plus_minus
from tinemark.document.row import Row
from tinemark.onsets import ladder_points
from tinemark.onsets.class_values import CLASSES, CONSERVATIVE, QUADRATIC
from tinemark.onsets.results import Kind
from tinemark.onsets.scaling import LadderPoint, Scaling, scaling

ROOT_THIRD = Fraction(57735, 100000)
SHORT_DIGITS = 9

_ALWAYS_SHOWN = (QUADRATIC.name, "quartic maximum", CONSERVATIVE.name)


@dataclass(frozen=True)
class Estimate:
    """A number and how far it can be off.

    Attributes
    ----------
    value
        The number.
    uncertainty
        Expanded uncertainty: the true number lies in value ± uncertainty, for certain when
        `enclosed`, at 95 % coverage otherwise. It goes with ± and with bars.
    enclosed
        Whether the interval is an enclosure: it follows from proved onsets alone.
    """

    value: Fraction
    uncertainty: Fraction
    enclosed: bool = False

    @property
    def standard(self) -> Fraction:
        """Standard uncertainty, for brackets (JCGM 100:2008, 7.2.2); an enclosure counts as rectangular."""
        return self.uncertainty * ROOT_THIRD if self.enclosed else self.uncertainty / 2


@dataclass(frozen=True)
class LevelEstimate:
    """One level of a ladder.

    Attributes
    ----------
    level
        From the lowest known to the highest known; missing ones are listed too.
    row_id
        The ledger's row, empty when the level is missing.
    onset
        The onset with its uncertainty; None when the level is missing.
    gap, gap_reason
        Onset n+1 minus onset n; None, and then the reason in words.
    ratio, ratio_reason
        Gap n over gap n+1; None, and then the reason in words ("level 3 is missing").
    """

    level: int
    row_id: str
    onset: Estimate | None
    gap: Estimate | None
    gap_reason: str
    ratio: Estimate | None
    ratio_reason: str


@dataclass(frozen=True)
class ClassValue:
    """Reference line of the ratio panel: what the ratios of a class tend to."""

    name: str
    delta: Fraction


@dataclass(frozen=True)
class Prediction:
    """Where the next onset of a ladder is expected."""

    level: int
    onset: Estimate


@dataclass(frozen=True)
class LadderEstimates:
    """All that the ratio panel shows of one ladder.

    Attributes
    ----------
    ladder, parameter, base_period
        Which ladder it is.
    levels
        One entry per level from the lowest known to the highest known.
    classes
        Reference values to draw: the commonest classes, and the ladder's own.
    limit, limit_reason
        Where the ladder accumulates; None, and then why, in words.
    delta, delta_reason
        Extrapolated limit of the ratios; None, and then why, in words.
    class_name
        "quadratic maximum", "quartic maximum", "order-N maximum", "conservative", "none" or
        "undecided", as files write it.
    verdict
        The same as a sentence for people.
    consistent
        Whether the ratios agree with the class within their uncertainties; None when undecided.
    predictions
        Next onsets, nearest first; empty when nothing can be said.
    class_limit
        The limit if the class is taken for granted; None without one.
    used_levels
        Levels that limit, delta and predictions rest on.
    alpha, alpha_reason
        How the cycles shrink from level to level, known where the whole ladder was followed at once; None,
        and then why, in words. Both empty where it was not worked out.
    """

    ladder: str
    parameter: str
    base_period: int
    levels: tuple[LevelEstimate, ...]
    classes: tuple[ClassValue, ...]
    limit: Estimate | None
    limit_reason: str
    delta: Estimate | None
    delta_reason: str
    class_name: str
    verdict: str
    consistent: bool | None
    predictions: tuple[Prediction, ...]
    class_limit: Estimate | None = None
    used_levels: tuple[int, ...] = ()
    alpha: Estimate | None = None
    alpha_reason: str = ""


def with_alpha(estimates: LadderEstimates, alpha: tuple[str, str] | None, reason: str) -> LadderEstimates:
    """The same with the alpha of a followed ladder: its value and uncertainty, or why there is none."""
    number = None if alpha is None else Estimate(Fraction(alpha[0]), Fraction(alpha[1]))
    return replace(estimates, alpha=number, alpha_reason=reason)


def estimates_of(ladder: str, rows: Sequence[Row]) -> LadderEstimates:
    """What the rows of one ladder say together; see `tinemark.onsets.scaling` for the method.

    Parameters
    ----------
    rows
        Rows of one ladder, at least one, in any order. The fold at its head carries no ratio.
    """
    flips = _flips(rows)
    found = scaling_of(rows)
    levels = tuple(
        LevelEstimate(
            level=item.level,
            row_id=flips[item.level].id if item.level in flips else "",
            onset=_onset(flips[item.level]) if item.level in flips else None,
            gap=_taken(item.gap),
            gap_reason=item.gap_reason,
            ratio=_taken(item.ratio),
            ratio_reason=item.ratio_reason,
        )
        for item in found.levels
    )
    verdict = found.verdict
    return LadderEstimates(
        ladder=ladder,
        parameter=rows[0].onset.parameter,
        base_period=rows[0].base_period or 1,
        levels=levels,
        classes=tuple(
            ClassValue(item.name, item.delta_fraction)
            for item in CLASSES
            if item.name in _ALWAYS_SHOWN or item.name == verdict.name
        ),
        limit=_taken(found.limit),
        limit_reason=found.limit_reason,
        delta=_taken(found.delta),
        delta_reason=found.delta_reason,
        class_name=verdict.name,
        verdict=verdict.sentence,
        consistent=verdict.consistent,
        predictions=tuple(Prediction(item.level, _sure(item.onset)) for item in found.predictions),
        class_limit=_taken(found.class_limit),
        used_levels=found.used_levels,
    )


def scaling_of(rows: Sequence[Row]) -> Scaling:
    """The same as the engine's own result."""
    return _scaling(tuple(_point(row) for row in _flips(rows).values()))


def _flips(rows: Sequence[Row]) -> dict[int, Row]:
    return {row.level: row for row in reversed(rows) if row.level and row.onset.kind is Kind.FLIP}


@lru_cache(maxsize=64)
def _scaling(points: tuple[LadderPoint, ...]) -> Scaling:
    # The window asks again on every change of the ledger; most ladders have not changed.
    return scaling(points)


def _point(row: Row) -> LadderPoint:
    onset = row.onset
    assert row.level is not None
    return LadderPoint(
        row.level, onset.value_fraction, Fraction(onset.lower), Fraction(onset.upper), onset.status
    )


def _onset(row: Row) -> Estimate:
    return Estimate(row.onset.value_fraction, row.onset.half_width, _point(row).is_proved)


def _sure(number: ladder_points.Estimate) -> Estimate:
    enclosed = number.basis == ladder_points.ENCLOSURE
    return Estimate(number.value_fraction, number.expanded_fraction, enclosed)


def _taken(number: ladder_points.Estimate | None) -> Estimate | None:
    return None if number is None else _sure(number)


def estimate_text(number: Estimate, *, full: bool = False, grouped: bool = True) -> str:
    """A derived number as tables show it.

    An enclosed number shows digits that hold, the first `SHORT_DIGITS` or all with `full`. Any other
    is rounded to its uncertainty: the standard one in brackets or, with `full`, the expanded one
    after ±.
    """
    if number.enclosed:
        low, high = number.value - number.uncertainty, number.value + number.uncertainty
        everything = held_digits(low, high)
        if everything:
            text = everything if full else held_digits(low, high, most=SHORT_DIGITS)
            if not grouped:
                return text
            return minus_sign(group_digits(text)) + (ELLIPSIS if text != everything else "")
        return plus_minus(number.value, number.uncertainty, grouped=grouped, rigorous=True)
    if full:
        return plus_minus(number.value, number.uncertainty, grouped=grouped)
    return concise(number.value, number.standard, grouped=grouped)
