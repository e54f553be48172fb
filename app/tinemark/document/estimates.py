"""What the onsets of a ladder say together: gaps, ratios, limit, class and the next onset."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction


@dataclass(frozen=True)
class Estimate:
    """A number with its expanded uncertainty: the true one lies in value ± uncertainty (95 % coverage)."""

    value: Fraction
    uncertainty: Fraction


@dataclass(frozen=True)
class LevelEstimate:
    """One level of a ladder.

    Attributes
    ----------
    level
        1 and up; missing levels between known ones are listed too.
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
        One entry per level, from 1 (or the lowest known) to the highest known.
    classes
        Reference values to draw.
    limit, limit_reason
        Where the ladder accumulates; None, and then why, in words.
    delta, delta_reason
        Extrapolated limit of the ratios; None, and then why, in words.
    class_name
        One of design §7: "quadratic maximum", "quartic maximum", "order-N maximum",
        "conservative", "none", "undecided".
    verdict
        The same as a sentence for people.
    consistent
        Whether the ratios agree with the class within their uncertainties; None when undecided.
    predictions
        Next onsets, nearest first; empty when nothing can be said.
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
