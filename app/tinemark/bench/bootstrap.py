"""An onset with its uncertainty: the opening law fitted to sweeps that might as well have been measured."""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tinemark.bench.opening_law import GRID, LawBases, LawFit, fit_law, law_bases
from tinemark.onsets.results import Step

SHARES = 5
SHARE = 60
"""The replicates come in so many shares of so many, a step between two."""

ROUNDINGS = 6

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class FittedOnset:
    """An onset fitted to squared separations.

    Attributes
    ----------
    value
        Mean over the models by Akaike's weights.
    replicates
        float64: where the onset would be if it were `value` and the sweep were measured again, by replicate.
    chi_square, degrees
        Of the best model.
    scale
        What chi-square is larger than noise within settings explains, at least 1.
    curve
        Fitted squared separation at each setting.
    rounding
        Weight of the models with a corner rounded by dynamic noise.
    """

    value: float
    replicates: Floats
    chi_square: float
    degrees: int
    scale: float
    curve: Floats
    rounding: float


def candidate_widths(knobs: Floats) -> Floats:
    """Roundings to try, from what the settings' spacing hides to a third of their range."""
    spacing = float(np.median(np.diff(knobs)))
    return np.geomspace(0.4 * spacing, max(0.3 * float(np.ptp(knobs)), spacing), ROUNDINGS)


def rough_fit(knobs: Floats, squared: Floats, spread: Floats) -> LawFit:
    """The law fitted to one curve, the onset anywhere among its settings."""
    spacing = float(np.median(np.diff(knobs)))
    coarse = np.linspace(knobs[0] - 3 * spacing, knobs[-1] - spacing / 2, GRID)
    widths = candidate_widths(knobs)
    found = fit_law(law_bases(knobs, spread, coarse, widths), squared[None])
    best = float(found.onsets[int(np.argmin(found.criteria[:, 0])), 0])
    step = float(coarse[1] - coarse[0])
    # Where noise is low, chi-square between two coarse candidates is no parabola.
    near = np.linspace(best - 2 * step, min(best + 2 * step, _last(knobs)), GRID)
    closer = fit_law(law_bases(knobs, spread, near, widths), squared[None])
    return closer if closer.criteria[:, 0].min() < found.criteria[:, 0].min() else found


def _fine_bases(knobs: Floats, squared: Floats, spread: Floats) -> LawBases:
    """Candidates around the onset of one curve, for it and its replicates."""
    spacing = float(np.median(np.diff(knobs)))
    rough = rough_fit(knobs, squared, spread)
    weights = rough.weights(excess(rough, len(knobs)))[:, 0]
    # Wherever a model of weight puts the onset, a replicate may have it.
    centre = float(weights @ rough.onsets[:, 0])
    reach = 4 * float(np.sqrt(weights @ (rough.onsets[:, 0] - centre) ** 2)) + 3 * spacing
    fine = np.linspace(centre - reach, min(centre + reach, _last(knobs)), GRID)
    return law_bases(knobs, spread, fine, candidate_widths(knobs))


def _last(knobs: Floats) -> float:
    """The last candidate: an onset past the last setting has no opening to be told by."""
    return float(knobs[-1] - (knobs[-1] - knobs[-2]) / 4)


def excess(fit: LawFit, settings: int) -> float:
    """How many times chi-square is larger than noise within settings explains, at least 1."""
    best = int(np.argmin(fit.criteria[:, 0]))
    return max(1.0, float(fit.chi_squares[best, 0]) / max(settings - fit.unknowns[best], 1))


def bootstrap_onset(
    knobs: Floats,
    squared: Floats,
    spread: Floats,
    deviations: Floats,
    stretches: NDArray[np.int64],
    random: np.random.Generator,
) -> Generator[Step, None, FittedOnset]:
    """Fit the opening law and say by bootstrap how far the onset may be off.

    Parameters
    ----------
    knobs, squared, spread
        Shape (settings,), in the order in which the cycle splits.
    deviations, stretches
        As in `Separations`: what stretches of time within the settings scatter by.

    Notes
    -----
    A replicate is the fitted curve, plus at each setting the mean of stretches of time drawn with
    replacement (bootstrap over samples, in blocks so that noise keeps its memory), plus, where settings
    scatter by more than that, a residual of a setting drawn with replacement (bootstrap over settings; Efron
    and Tibshirani 1993). Every replicate chooses among the models anew.
    """
    law = _fine_bases(knobs, squared, spread)
    parts: list[Floats] = []
    centre, reach = 0.0, 0.0
    for share in range(SHARES + 1):
        if share < 2:
            # The first share only shows how finely the candidates must stand.
            if share == 1:
                fine = np.linspace(centre - reach, min(centre + reach, _last(knobs)), GRID)
                law = law_bases(knobs, spread, fine, candidate_widths(knobs))
            fit = fit_law(law, squared[None])
            scale = excess(fit, len(knobs))
            weights = fit.weights(scale)[:, 0]
            curve = weights @ fit.curves
            residuals = (squared - curve) / spread
            residuals = residuals - residuals.mean()
            size = float(np.sqrt(np.mean(residuals**2))) or 1.0
        noise = _resampled(deviations, stretches, SHARE, random)
        if scale > 1:
            drawn = residuals[random.integers(len(residuals), size=(SHARE, len(knobs)))] / size
            noise = noise + np.sqrt(scale - 1) * drawn
        again = fit_law(law, curve + spread * noise)
        chosen = (again.weights(scale).cumsum(axis=0) < random.random(SHARE)).sum(axis=0)
        found = again.onsets[np.minimum(chosen, len(again.onsets) - 1), np.arange(SHARE)]
        if share == 0:
            everything = np.concatenate([found, fit.onsets[:, 0][weights > 1e-3]])
            centre = float(weights @ fit.onsets[:, 0])
            reach = 1.5 * float(np.abs(everything - centre).max()) + 1e-6 * float(np.ptp(knobs))
        else:
            parts.append(found)
        yield Step("fitting sweeps that might as well have been measured", share / SHARES)
    value = float(weights @ fit.onsets[:, 0])
    best = int(np.argmin(fit.criteria[:, 0]))
    rounding = float(weights[np.array(fit.is_rounded)].sum())
    return FittedOnset(
        value,
        np.concatenate(parts),
        float(fit.chi_squares[best, 0]),
        len(knobs) - fit.unknowns[best],
        scale,
        curve,
        rounding,
    )


def _resampled(
    deviations: Floats, stretches: NDArray[np.int64], count: int, random: np.random.Generator
) -> Floats:
    """Means of stretches drawn with replacement, in units of their spread; shape (count, settings)."""
    most = int(stretches.max())
    drawn = deviations[random.integers(len(deviations), size=(count, len(stretches), most))]
    # Settings of fewer stretches leave out the last ones.
    used = np.arange(most) < stretches[:, None]
    return np.asarray((drawn * used).sum(axis=2) / np.sqrt(stretches))
