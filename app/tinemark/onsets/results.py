"""What the onset engine is asked and what it answers. Everything here is frozen and crosses processes."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum
from fractions import Fraction

from tinemark.systems.system import System


class Kind(Enum):
    """Kind of an onset, in the trade's words."""

    FLIP = "flip"
    FOLD = "fold"
    UNKNOWN = "unknown"  # only of a pick read by eye, until it is refined


class Status(Enum):
    """How far a value can be relied on."""

    PROVED = "proved"
    ESTIMATED = "estimated"
    READ_BY_EYE = "read by eye"
    MEASURED = "measured"


class Criticality(Enum):
    """Whether the new behaviour appears softly (supercritical) or with a jump (subcritical)."""

    SUPERCRITICAL = "supercritical"
    SUBCRITICAL = "subcritical"
    UNDECIDED = "undecided"
    NOT_APPLICABLE = ""


@dataclass(frozen=True)
class Onset:
    """One onset.

    Attributes
    ----------
    parameter
        Name of the swept parameter.
    period_before, period_after
        Least periods of the cycle that splits and of the cycle that appears. A fold makes a
        pair of cycles out of none: `period_before` is 0.
    value, lower, upper
        Decimal texts. `lower <= onset <= upper`: rigorously when proved, at 95 % coverage
        when estimated; half a pixel each way when read by eye.
    digits
        Significant digits of `value` that hold.
    reason
        Why the value is not proved; empty when it is.
    states
        One point of the cycle at the onset, per state: (name, decimal text).
    evidence
        What was checked, as (claim, finding) pairs in words.
    """

    parameter: str
    kind: Kind
    period_before: int
    period_after: int
    criticality: Criticality
    value: str
    lower: str
    upper: str
    digits: int
    status: Status
    reason: str = ""
    states: tuple[tuple[str, str], ...] = ()
    evidence: tuple[tuple[str, str], ...] = ()

    @property
    def value_fraction(self) -> Fraction:
        """The value as an exact rational."""
        return Fraction(self.value)

    @property
    def half_width(self) -> Fraction:
        """Largest distance from the value to an end of its interval."""
        middle = Fraction(self.value)
        return max(Fraction(self.upper) - middle, middle - Fraction(self.lower))


@dataclass(frozen=True)
class RefineRequest:
    """A click.

    Attributes
    ----------
    near, observed
        Where the click fell: swept parameter, and observed quantity (None when unknown).
    width, height
        Extent of the view; the engine searches within it, nearest on screen first.
        `height` None: the distance is measured along the parameter alone.
    digits
        Significant digits wanted.
    """

    system: System
    parameter: str
    near: Fraction
    width: Fraction
    observed: Fraction | None = None
    height: Fraction | None = None
    digits: int = 20


@dataclass(frozen=True)
class LadderRequest:
    """A cascade to follow from `start` to `stop` (either order gives the direction)."""

    system: System
    parameter: str
    start: Fraction
    stop: Fraction
    base_period: int = 1
    levels: int = 8
    digits: int = 20


@dataclass(frozen=True)
class Step:
    """Progress of a running job: a sentence, and the share done where it is known (0 to 1)."""

    text: str
    share: float | None = None


@dataclass(frozen=True)
class RefineResult:
    """Candidates, nearest on screen first (a second only when it is close), and a sentence on them."""

    onsets: tuple[Onset, ...]
    message: str


@dataclass(frozen=True)
class LadderLevel:
    """One level of a ladder as it is found: level n is the n-th flip of the cascade."""

    level: int
    onset: Onset


@dataclass(frozen=True)
class LadderResult:
    """A finished ladder. `message` says why it ended before the levels asked for, if it did."""

    base_period: int
    levels: tuple[LadderLevel, ...]
    message: str = ""
