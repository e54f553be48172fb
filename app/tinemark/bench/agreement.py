"""Do a model's onsets and measured ones agree: each by itself, together, and what would explain it if not."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tinemark.bench.calibration import calibration_uncertainty, fitted_calibration, to_parameter
from tinemark.bench.results import Agreement, Calibration, MeasuredOnset, OnsetAgreement
from tinemark.bench.verdict import verdict_words
from tinemark.systems.errors import TinemarkError

COVERAGE = 2.0
"""Coverage factor of expanded uncertainties."""

REACH_OF_TOLERANCE = 3.0
"""A parameter off by more than so many of its standard uncertainties is no explanation."""

TELLING = 3.84
"""A change that lowers chi-square by less explains nothing: its 95 % point with one degree of freedom."""

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class ModelOnset:
    """One onset of the model.

    Attributes
    ----------
    own_uncertainty
        Standard uncertainty of the value itself.
    shifts
        (parameter, derivative times its standard uncertainty) for each parameter with a tolerance: how far
        one standard uncertainty of it moves the onset. They move all onsets together.
    """

    level: int
    value: float
    own_uncertainty: float = 0.0
    shifts: tuple[tuple[str, float], ...] = ()

    @property
    def uncertainty(self) -> float:
        """Combined standard uncertainty."""
        return float(np.sqrt(self.own_uncertainty**2 + sum(shift**2 for _, shift in self.shifts)))


def compare_onsets(
    model: Sequence[ModelOnset],
    measured: Sequence[MeasuredOnset],
    calibration: Calibration | None = None,
    parameter: str = "",
) -> Agreement:
    """Compare onsets level by level.

    Parameters
    ----------
    calibration
        From knob to parameter; None to fit it to the onsets themselves, which uses up two degrees of freedom.

    Notes
    -----
    Per onset the normalised error of ISO 13528, E_n = (measured - model)/sqrt(U^2 + U^2) with k = 2. Overall
    chi-square with the whole covariance: tolerances and a given calibration move all onsets together.

    Raises
    ------
    TinemarkError
        No level has an onset on both sides, or too few to fit a calibration.
    """
    by_level = {onset.level: onset for onset in measured if onset.level > 0}
    pairs = [(onset, by_level[onset.level]) for onset in model if onset.level in by_level]
    if not pairs:
        raise TinemarkError(
            "no level has an onset of the model and a measured one",
            what_to_do="follow the model's ladder and pick the measured splits at the same levels",
        )
    pairs.sort(key=lambda pair: pair[0].level)
    knobs = np.array([found.value for _, found in pairs])
    spreads = np.array([found.uncertainty for _, found in pairs])
    values = np.array([own.value for own, _ in pairs])
    if calibration is None:
        own = np.array([onset.uncertainty for onset, _ in pairs])
        calibration = fitted_calibration(knobs.tolist(), spreads.tolist(), values.tolist(), own.tolist())
    seen = np.array([to_parameter(calibration, knob) for knob in knobs])
    away = seen - values
    onsets = []
    for (own_onset, found), there in zip(pairs, seen, strict=True):
        spread = abs(calibration.scale) * found.uncertainty
        if not calibration.is_fitted:
            spread = float(np.hypot(spread, calibration_uncertainty(calibration, found.value)))
        both = float(np.hypot(spread, own_onset.uncertainty))
        error = (there - own_onset.value) / (COVERAGE * both) if both > 0 else _sign(there - own_onset.value)
        onsets.append(
            OnsetAgreement(
                own_onset.level, own_onset.value, own_onset.uncertainty, float(there), spread, float(error)
            )
        )
    covariance = _covariance(pairs, knobs, calibration)
    weight = np.linalg.inv(covariance)
    if calibration.is_fitted:
        # What a line of any scale and offset could take away says nothing against the model.
        line = np.column_stack([np.ones_like(knobs), knobs - knobs.mean()])
        across = weight @ line
        weight = weight - across @ np.linalg.solve(line.T @ across, across.T)
    chi_square = max(float(away @ weight @ away), 0.0)
    degrees = len(pairs) - (2 if calibration.is_fitted else 0)
    probability = _probability(chi_square, degrees)
    worst = max(onsets, key=lambda onset: abs(onset.normalised_error)).level
    suspect, amount = _suspect(pairs, away, covariance)
    ratios = _ratios(pairs)
    bare = Agreement(calibration, tuple(onsets), chi_square, degrees, probability, ratios, worst, suspect, "")
    return Agreement(**{**bare.__dict__, "verdict": verdict_words(bare, parameter, amount)})


def _sign(away: float) -> float:
    return 0.0 if away == 0 else float(np.copysign(np.inf, away))


def _covariance(
    pairs: Sequence[tuple[ModelOnset, MeasuredOnset]], knobs: Floats, calibration: Calibration
) -> Floats:
    """Covariance of measured minus model, tolerances and calibration shared by all onsets."""
    independent = np.array(
        [(calibration.scale * found.uncertainty) ** 2 + own.own_uncertainty**2 for own, found in pairs]
    )
    covariance = np.diag(independent)
    for name in _parameters(pairs):
        shift = _shift(pairs, name)
        covariance = covariance + np.outer(shift, shift)
    if not calibration.is_fitted:
        ones = np.ones_like(knobs)
        covariance = covariance + calibration.offset_uncertainty**2 * np.outer(ones, ones)
        covariance = covariance + calibration.scale_uncertainty**2 * np.outer(knobs, knobs)
        covariance = covariance + calibration.covariance * (np.outer(knobs, ones) + np.outer(ones, knobs))
    # Exact values on both sides would leave nothing to divide by.
    floor = max(float(np.max(np.abs(covariance))), 1e-300) * 1e-14
    return np.asarray(covariance + floor * np.eye(len(pairs)))


def _parameters(pairs: Sequence[tuple[ModelOnset, MeasuredOnset]]) -> list[str]:
    return sorted({name for own, _ in pairs for name, _ in own.shifts})


def _shift(pairs: Sequence[tuple[ModelOnset, MeasuredOnset]], name: str) -> Floats:
    return np.array([dict(own.shifts).get(name, 0.0) for own, _ in pairs])


def _probability(chi_square: float, degrees: int) -> float | None:
    if degrees < 1:
        return None
    from scipy.stats import chi2

    return float(chi2.sf(chi_square, degrees))


def _suspect(
    pairs: Sequence[tuple[ModelOnset, MeasuredOnset]], away: Floats, covariance: Floats
) -> tuple[str, float]:
    """The parameter whose being off would explain most, and by how many of its standard uncertainties."""
    best, name_of_best, amount_of_best = TELLING, "", 0.0
    for name in _parameters(pairs):
        shift = _shift(pairs, name)
        # Without its own part in the covariance, the parameter is free.
        rest = covariance - np.outer(shift, shift)
        weighted = np.linalg.solve(rest, shift)
        strength = float(shift @ weighted)
        if strength <= 0:
            continue
        amount = float(away @ weighted) / strength
        gain = amount**2 * strength
        if gain > best and abs(amount) <= REACH_OF_TOLERANCE:
            best, name_of_best, amount_of_best = gain, name, amount
    return name_of_best, amount_of_best


def _ratios(
    pairs: Sequence[tuple[ModelOnset, MeasuredOnset]],
) -> tuple[tuple[int, float, float, float], ...]:
    """Ratios of gaps where three levels follow each other, measured beside the model's."""
    from uncertainties import ufloat

    found = []
    for place in range(len(pairs) - 2):
        three = pairs[place : place + 3]
        levels = [own.level for own, _ in three]
        if levels != [levels[0], levels[0] + 1, levels[0] + 2]:
            continue
        a, b, c = (ufloat(onset.value, onset.uncertainty) for _, onset in three)
        if c.nominal_value == b.nominal_value:
            continue
        ratio = (b - a) / (c - b)
        values = [own.value for own, _ in three]
        model_ratio = (values[1] - values[0]) / (values[2] - values[1])
        found.append((levels[0], float(ratio.nominal_value), float(ratio.std_dev), float(model_ratio)))
    return tuple(found)
