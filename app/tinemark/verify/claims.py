"""What is checked and what comes out: claims, certificates and verdicts, as plain frozen values."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum
from fractions import Fraction

NEIMARK_SACKER = "Neimark-Sacker"
BORDER_COLLISION = "border collision"
BRANCH_POINTS = ("transcritical", "pitchfork")
KINDS = ("flip", "fold", NEIMARK_SACKER, BORDER_COLLISION, *BRANCH_POINTS)
"""Kinds of onsets whose proofs are checked."""


@dataclass(frozen=True)
class Paper:
    """A certificate as it was found in a file, untrusted. Texts are decimals as written.

    Attributes
    ----------
    system_text
        TOML text of the system with the values that held.
    kind, period, parameter, criticality
        The claim.
    precision
        Bits of the first proof; not used, but covered by the digest.
    parameter_box
        (middle, half-width) in the parameter.
    state_boxes
        (name, middle, half-width) of one cycle point.
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
class Claim:
    """A printed onset with its certificate.

    Attributes
    ----------
    name
        How the row is called in words.
    status, reason
        As printed. `waits` says that the row is only called estimated because it waits for this check.
    states
        (name, decimal text) of a printed cycle point.
    formulas, values
        What the row itself says of its system, where it does: (state, formula) and (parameter, decimal
        text) pairs that the certificate's system must agree with; None where nothing is said.
    consequence
        What the row says in words of what follows; empty where it says nothing.
    sample
        What the row itself says of how its system is sampled: kind, strobe period, section and direction;
        None where nothing is said.
    """

    name: str
    status: str
    waits: bool
    kind: str
    period_before: int
    period_after: int
    criticality: str
    parameter: str
    value: str
    lower: str
    upper: str
    states: tuple[tuple[str, str], ...]
    paper: Paper | None
    formulas: tuple[tuple[str, str], ...] | None = None
    values: tuple[tuple[str, str], ...] | None = None
    consequence: str = ""
    sample: tuple[str, str, str, str] | None = None


@dataclass(frozen=True)
class Numbers:
    """The claim's numbers: printed value, a unit of its last digit, how many digits it has, its ends, and
    (middle, half-width) of the box's sides.
    """

    value: Fraction
    unit: Fraction
    digits: int
    lower: Fraction
    upper: Fraction
    parameter: tuple[Fraction, Fraction]
    states: tuple[tuple[Fraction, Fraction], ...]


class Outcome(Enum):
    """How a check ended, in words."""

    CONFIRMED = "confirmed"
    REFUSED = "refused"
    NOT_CHECKABLE = "not checkable here"


class Part(Enum):
    """Names of what can be wrong."""

    STATUS = "status"
    VALUE = "value"
    BOX = "box"
    FORMULA = "formula"
    KIND = "kind"
    PERIOD = "period"
    CRITICALITY = "criticality"
    PARAMETER = "parameter"
    STATE = "state"
    SURFACE = "surface"
    SYSTEM = "system"
    DIGEST = "digest"
    NOTHING = ""


@dataclass(frozen=True)
class Verdict:
    """Outcome of one check: what is wrong by name (`Part.NOTHING` when nothing is), and a sentence."""

    outcome: Outcome
    part: Part
    reason: str

    @property
    def words(self) -> str:
        """The verdict as one phrase."""
        name = f" ({self.part.value})" if self.part is not Part.NOTHING else ""
        return f"{self.outcome.value}{name}: {self.reason}" if self.reason else self.outcome.value + name


class Refused(Exception):
    """The claim does not hold as written; says which part, and why."""

    def __init__(self, part: Part, reason: str) -> None:
        super().__init__(reason)
        self.part = part
        self.reason = reason


class NotCheckable(Exception):
    """The second implementation cannot tell; says why."""

    def __init__(self, reason: str) -> None:
        super().__init__(reason)
        self.reason = reason


class Undecided(Exception):
    """An interval was too wide to decide something, or left a function's domain; says what."""

    def __init__(self, reason: str) -> None:
        super().__init__(reason)
        self.reason = reason
