"""What is found in a measured sweep, and how it agrees with a model. Frozen; crosses processes."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class MeasuredOnset:
    """A split found in a sweep.

    Attributes
    ----------
    level
        n for the n-th flip of the sweep's ladder; 0 for a jump that opens another behaviour.
    direction
        1 found on the way up, -1 on the way down.
    branches_before, branches_after
        Branches that the noise lets one tell, on either side.
    value
        Onset in the knob's unit.
    type_a, type_b
        Standard uncertainties: of the fit by bootstrap over settings and samples, and of the knob itself.
    lower, upper
        Interval of 95 % coverage, both parts together.
    is_jump
        Whether the change is a jump (subcritical) instead of an opening.
    back
        Knob value at which the jump is undone on the way back, None where there is no hysteresis to see.
    words
        What was found, in a sentence.
    """

    level: int
    direction: int
    branches_before: int
    branches_after: int
    value: float
    type_a: float
    type_b: float
    lower: float
    upper: float
    is_jump: bool = False
    back: float | None = None
    words: str = ""

    @property
    def uncertainty(self) -> float:
        """Combined standard uncertainty."""
        return float((self.type_a**2 + self.type_b**2) ** 0.5)


@dataclass(frozen=True)
class BenchPicks:
    """All splits of a sweep in one direction.

    Attributes
    ----------
    branches
        Branches told apart at each setting of that direction in rising order of the knob: 1, 2, 4, 8, -1 for
        more, 0 for not periodic.
    hidden
        Why no further level is reported, in words: noise, too few settings, the end of the sweep.
    """

    onsets: tuple[MeasuredOnset, ...]
    branches: tuple[int, ...]
    hidden: str = ""


@dataclass(frozen=True)
class Calibration:
    """Model parameter = offset + scale * knob.

    Attributes
    ----------
    scale_uncertainty, offset_uncertainty, covariance
        Standard uncertainties and covariance of the two; zero when given by the user as exact.
    is_fitted
        Whether it was fitted to the onsets themselves.
    """

    scale: float
    offset: float
    scale_uncertainty: float = 0.0
    offset_uncertainty: float = 0.0
    covariance: float = 0.0
    is_fitted: bool = False


@dataclass(frozen=True)
class OnsetAgreement:
    """One onset of the model against its measured counterpart, in the model's parameter.

    Attributes
    ----------
    measured_uncertainty, model_uncertainty
        Combined standard uncertainties.
    normalised_error
        E_n of ISO 13528 with expanded uncertainties of k = 2; within ±1 they agree.
    """

    level: int
    model: float
    model_uncertainty: float
    measured: float
    measured_uncertainty: float
    normalised_error: float


@dataclass(frozen=True)
class Agreement:
    """The comparison of a model's onsets with measured ones.

    Attributes
    ----------
    chi_square, degrees, probability
        Overall; probability of a larger chi-square by chance. None without degrees of freedom.
    ratios
        (level, measured ratio, its standard uncertainty, model ratio) where three levels follow each other.
    worst
        Level of the onset that disagrees most.
    suspect
        Name of the parameter whose tolerance would explain it best; empty when none would.
    verdict
        In plain words.
    """

    calibration: Calibration
    onsets: tuple[OnsetAgreement, ...]
    chi_square: float
    degrees: int
    probability: float | None
    ratios: tuple[tuple[int, float, float, float], ...]
    worst: int
    suspect: str
    verdict: str
