"""How far the phases of a cycle lie apart at each setting, with the noise floor taken out."""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tinemark.bench.sweep import BenchSweep
from tinemark.onsets.results import Step

FIRST_LAG = 3
"""Products of samples nearer than so many periods would share noise through the filter."""

LAGS = (8, 4, 2)
"""Numbers of lags averaged, as many as the samples allow. Eight in a row add up to nothing for every other
line that cycles of up to sixteen points have."""

MOST_SAMPLES = 65536
"""Of longer settings only the last so many samples are used: they have settled best."""

BATCH = 100_000
"""Samples taken at once, so that no step lasts long."""

STANDS_OUT = 1.5
"""A setting whose own variance is so many times that of its neighbours keeps its own: in dynamic noise the
variance peaks at the onset."""

MOST_SHARED = 0.7

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Separations:
    """Squared separations of one splitting at all settings of a direction.

    Attributes
    ----------
    period
        Points of the cycle that splits.
    squared
        float64, shape (settings,): mean over the phases of the squared half distance between the two points
        that a phase splits into; its mean is zero without a split. NaN where samples are too few.
    spread
        float64, shape (settings,): its standard deviation.
    deviations
        float64: deviations of single stretches of time from their setting's mean, of all settings, with mean
        square 1.
    stretches
        int64, shape (settings,): stretches of time that each setting was divided into.
    """

    period: int
    squared: Floats
    spread: Floats
    deviations: Floats
    stretches: NDArray[np.int64]


def batches(sweep: BenchSweep, visits: NDArray[np.int64]) -> list[tuple[NDArray[np.int64], Floats]]:
    """Settings of equal length together: (places within the visits, samples of shape (settings, length))."""
    lengths = np.minimum(sweep.offsets[visits + 1] - sweep.offsets[visits], MOST_SAMPLES)
    found = []
    for length in np.unique(lengths):
        if length < 1:
            continue
        places = np.flatnonzero(lengths == length)
        size = max(1, BATCH // int(length))
        for first in range(0, len(places), size):
            part = places[first : first + size]
            found.append((part, np.stack([sweep.at(visits[k])[-length:] for k in part])))
    return found


def lags_for(length: int, period: int) -> int:
    """How many lags settings of so many samples allow; 0 when they are too short."""
    for count in LAGS:
        kept = length - (FIRST_LAG + count + 1) * period
        if kept >= max(4 * period, length // 3) and kept >= 8:
            return count
    return 0


def squared_separation(samples: Floats, period: int) -> tuple[Floats, Floats]:
    """Squared half distance of the points that the phases of a cycle split into, and its course in time.

    Parameters
    ----------
    samples
        Shape (settings, length), in the order of time.

    Returns
    -------
    squared
        Shape (settings,).
    stretches
        Shape (settings, stretches of time): the same from each stretch; their number follows from the length.

    Notes
    -----
    Samples a period apart are filtered by (-1/4, 1/2, -1/4), which passes what alternates from period to
    period and stops what drifts, and multiplied with those at least three periods later, with the sign that
    alternation gives them. White noise of the measurement has left such products: the floor 2 sigma^2/m of
    the squared distance of two means is not there to be subtracted. A cycle that noise makes change its
    phase keeps its separation.
    """
    length = samples.shape[1]
    count = lags_for(length, period)
    if not count:
        return np.full(len(samples), np.nan), np.empty((len(samples), 0))
    z = samples[:, period:-period] / 2 - (samples[:, : -2 * period] + samples[:, 2 * period :]) / 4
    kept = z.shape[1] - (FIRST_LAG + count - 1) * period
    kept -= kept % (2 * period) if kept >= 4 * period else 0
    later = np.zeros((len(samples), kept))
    for lag in range(FIRST_LAG, FIRST_LAG + count):
        part = z[:, lag * period : lag * period + kept]
        later += part if lag % 2 == 0 else -part
    product = z[:, :kept] * later / count
    stretches = int(np.clip(kept // (24 * period), 4, 24))
    each = max(kept // stretches // period, 1) * period
    stretches = kept // each
    in_time = product[:, : stretches * each].reshape(len(samples), stretches, each).mean(axis=2)
    return product.mean(axis=1), in_time


def separations(
    grouped: list[tuple[NDArray[np.int64], Floats]], settings: int, period: int
) -> Generator[Step, None, Separations]:
    """Squared separations of one splitting at all settings of a direction."""
    squared, variance, shared = (np.full(settings, np.nan) for _ in range(3))
    stretches = np.zeros(settings, np.int64)
    courses: list[tuple[NDArray[np.int64], Floats]] = []
    for places, samples in grouped:
        found, in_time = squared_separation(samples, period)
        squared[places] = found
        if in_time.shape[1] > 1:
            count = in_time.shape[1]
            away = in_time - in_time.mean(axis=1, keepdims=True)
            variance[places] = in_time.var(axis=1, ddof=1) / count
            # Neighbouring stretches go together near an onset in dynamic noise. Taking the mean away lowers
            # their covariance by that of the mean.
            shared[places] = (away[:, 1:] * away[:, :-1]).mean(axis=1) / count + variance[places] / count
            stretches[places] = count
            courses.append((places, away))
        yield Step(f"measuring how far {2 * period} points lie apart")
    # A record without any noise still rounds its numbers.
    floor = max(1e-12 * float(np.nanmax(variance, initial=0.0)), 1e-300)
    smooth = np.maximum(smoothed(variance), floor)
    # What stretches share falls off as a first-order process forgets.
    kept = np.clip(smoothed(shared) / smooth, 0.0, MOST_SHARED)
    own = np.where(variance > STANDS_OUT * smooth, variance, smooth)
    spread = np.sqrt(own * (1 + kept) / (1 - kept))
    scaled = [
        (course / np.sqrt(smooth[places] * stretches[places])[:, None]).ravel() for places, course in courses
    ]
    deviations = np.concatenate(scaled) if scaled else np.empty(0)
    deviations = deviations[np.isfinite(deviations)]
    size = float(np.sqrt(np.mean(deviations**2))) if deviations.size else 1.0
    return Separations(period, squared, spread, deviations / (size or 1.0), stretches)


def smoothed(values: Floats) -> Floats:
    """Values averaged with those of the neighbours: a few stretches of time alone tell too little."""
    known = np.isfinite(values)
    if not known.any():
        return values
    kernel = np.array([1.0, 2.0, 1.0])
    reach = len(kernel) // 2
    total = np.convolve(np.where(known, values, 0.0), kernel)[reach:-reach]
    weight = np.convolve(known.astype(np.float64), kernel)[reach:-reach]
    return np.where(known, total / np.where(weight > 0, weight, 1.0), np.nan)
