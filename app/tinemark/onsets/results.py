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
    NEIMARK_SACKER = "Neimark-Sacker"
    TRANSCRITICAL = "transcritical"
    PITCHFORK = "pitchfork"
    BORDER_COLLISION = "border collision"
    CRISIS = "crisis"
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
class Sensitivity:
    """How the onset moves with another parameter.

    Attributes
    ----------
    name
        The other parameter.
    derivative
        Decimal text of d(onset)/d(parameter), in the onset's unit per the parameter's unit.
    """

    name: str
    derivative: str


@dataclass(frozen=True)
class Certificate:
    """What others need to check a proof again without our solver.

    Attributes
    ----------
    system_text
        TOML text of the system with the values that held.
    kind, period, parameter
        The claim: an onset of this kind, of a cycle of exactly this least period.
    criticality
        Claimed sign of the normal-form coefficient, in words.
    precision
        Bits the proof worked with.
    parameter_box
        (middle, half-width) of the proved box in the parameter, exact decimal texts.
    state_boxes
        For each state (name, middle, half-width) of one cycle point, exact decimal texts.
    digest
        SHA-256 over all of the above and the printed value, lower and upper.
    """

    system_text: str
    kind: str
    period: int
    parameter: str
    criticality: str
    precision: int
    parameter_box: tuple[str, str]
    state_boxes: tuple[tuple[str, str, str], ...]
    digest: str


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
        Significant digits of `value` that hold; of a value that may be zero, those of a number as large as
        the parameter's range.
    reason
        Why the value is not proved; empty when it is.
    states
        One point of the cycle at the onset, per state: (name, decimal text).
    evidence
        What was checked, as (claim, finding) pairs in words.
    consequence
        What follows past the onset where it is more than the period says, in words: a jump and how far
        back it holds, which symmetry breaks, which surface is touched.
    sensitivities
        Derivative with respect to each other parameter.
    certificate
        How to check the proof again; None where there is none.
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
    consequence: str = ""
    sensitivities: tuple[Sensitivity, ...] = ()
    certificate: Certificate | None = None

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
    kinds
        Kinds to look for; None for all.
    """

    system: System
    parameter: str
    near: Fraction
    width: Fraction
    observed: Fraction | None = None
    height: Fraction | None = None
    digits: int = 20
    kinds: frozenset[Kind] | None = None


@dataclass(frozen=True)
class SharpenRequest:
    """More digits of an onset of equations that was found in doubles, and its proof where that closes.

    Answered by a `RefineResult` with this one onset.
    """

    system: System
    onset: Onset
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
    """A finished ladder.

    Attributes
    ----------
    message
        Why it ended before the levels asked for, if it did, and what else was met on the way.
    alpha
        How its cycles shrink from level to level, a decimal text and its uncertainty at 95 % coverage;
        None, and then `alpha_reason` says why.
    besides
        Onsets met on the way that are no levels: pitchforks passed, and folds that bound the hysteresis of
        a subcritical level.
    """

    base_period: int
    levels: tuple[LadderLevel, ...]
    message: str = ""
    alpha: tuple[str, str] | None = None
    alpha_reason: str = ""
    besides: tuple[Onset, ...] = ()


@dataclass(frozen=True)
class SurveyRequest:
    """Every onset of a range, of cycles of least period up to `max_period`.

    `kinds` None: all kinds. The observed quantity is not limited.
    """

    system: System
    parameter: str
    start: Fraction
    stop: Fraction
    max_period: int
    digits: int = 20
    kinds: frozenset[Kind] | None = None


@dataclass(frozen=True)
class SurveyFind:
    """One onset of a survey as it is found."""

    onset: Onset


@dataclass(frozen=True)
class SurveyResult:
    """A finished survey: onsets in order of the parameter, and a sentence on what may be missing."""

    onsets: tuple[Onset, ...]
    message: str


@dataclass(frozen=True)
class BranchRequest:
    """The cycles of a view, followed as branches.

    Attributes
    ----------
    left, right, bottom, top
        The view: swept parameter and observed quantity.
    max_period
        Longest period of the cycles followed.
    """

    system: System
    parameter: str
    observe: str
    left: Fraction
    right: Fraction
    bottom: Fraction
    top: Fraction
    max_period: int = 16


@dataclass(frozen=True)
class BranchPiece:
    """A stretch of one branch between two changes of stability.

    Attributes
    ----------
    period, stable
        Least period, and whether all multipliers lie inside the unit circle.
    parameter
        Offsets of the swept parameter from the view's left edge, as shares of its width; rising or
        falling along the branch.
    observed
        One sequence a cycle point: heights above the view's bottom, as shares of its height.
    multipliers
        Largest multiplier by modulus at each place, as (real, imaginary).
    """

    period: int
    stable: bool
    parameter: tuple[float, ...]
    observed: tuple[tuple[float, ...], ...]
    multipliers: tuple[tuple[float, float], ...]


@dataclass(frozen=True)
class BranchResult:
    """All pieces; onsets passed as (kind, period, parameter share, observed share); and a sentence."""

    pieces: tuple[BranchPiece, ...]
    passed: tuple[tuple[Kind, int, float, float], ...]
    message: str
