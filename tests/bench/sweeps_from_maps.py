"""Sweeps drawn from maps whose onsets are known, with noise of every kind a bench has.

Everything is invented; the onsets are those of the check values or of exact arithmetic.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tinemark.bench.sweep import BenchSource, BenchSweep

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class KnownMap:
    """x' = step(x, r), with its first flips and a stretch of the parameter around them."""

    name: str
    step: Callable[[Floats, Floats], Floats]
    start: float
    onsets: tuple[float, ...]
    left: float
    right: float


# Flips of the logistic map: 3 and 1 + sqrt(6) exactly, the third from the check values.
LOGISTIC = KnownMap(
    "logistic", lambda x, r: r * x * (1 - x), 0.4, (3.0, 1 + 6**0.5, 3.5440903595519228), 2.7, 3.62
)
# x' = x exp(r (1 - x)) splits at exactly 2; the second flip follows from
# x + y = 2, (1 - r x)(1 - r y) = -1 on its cycle.
RICKER = KnownMap("Ricker", lambda x, r: x * np.exp(r * (1 - x)), 0.9, (2.0, 2.526468171464), 1.7, 2.62)


CASES = {
    "additive, low": {"additive": 0.002},
    "additive, middle": {"additive": 0.01},
    "additive, high": {"additive": 0.04},
    "dynamic, low": {"dynamic": 0.001},
    "dynamic, high": {"dynamic": 0.004},
    "drift": {"additive": 0.01, "drift": 0.3},
}
"""Noise to validate with, in units of the sample (maps of unit size)."""


def draw(
    known: KnownMap,
    random: np.random.Generator,
    settings: int = 45,
    length: int = 240,
    additive: float = 0.0,
    dynamic: float = 0.0,
    drift: float = 0.0,
    left: float | None = None,
    right: float | None = None,
    transient: int = 400,
    trials: int = 1,
) -> list[BenchSweep]:
    """Sweeps as a bench would record them.

    Parameters
    ----------
    additive, dynamic
        Standard deviations of the noise of the measurement and of the noise inside the map.
    drift
        How far the level creeps over the whole sweep; a random walk of a tenth of it comes on top.
    """
    low = known.left if left is None else left
    high = known.right if right is None else right
    knobs = np.linspace(low, high, settings) + random.uniform(-0.5, 0.5) * (high - low) / settings
    r = np.broadcast_to(knobs, (trials, settings))
    x = known.start + 0.05 * random.random((trials, settings))
    record = np.empty((trials, settings, length))
    for step in range(transient + length):
        x = known.step(x, r)
        if dynamic:
            x = x + dynamic * random.standard_normal(x.shape)
        if step >= transient:
            record[:, :, step - transient] = x
    return recorded(knobs, record, random, additive, drift)


def recorded(
    knobs: Floats,
    record: Floats,
    random: np.random.Generator,
    additive: float = 0.0,
    drift: float = 0.0,
    knob_uncertainty: float = 0.0,
) -> list[BenchSweep]:
    """Sweeps from noiseless records of shape (trials, settings, length), noise of the measurement added."""
    record = record + additive * random.standard_normal(record.shape)
    trials, settings, length = record.shape
    if drift:
        creep = np.linspace(0.0, drift, settings * length)
        walk = np.cumsum(random.standard_normal((trials, settings * length)), axis=1)
        creep = creep + 0.1 * drift * walk / (settings * length) ** 0.5
        record = record + creep.reshape(trials, settings, length)
    return [as_sweep(knobs, part, knob_uncertainty=knob_uncertainty) for part in record]


def as_sweep(knobs: Floats, record: Floats, direction: int = 1, knob_uncertainty: float = 0.0) -> BenchSweep:
    """One sweep of a record of shape (settings, length)."""
    settings, length = record.shape
    return BenchSweep(
        "drive",
        "reading",
        np.asarray(knobs, dtype=np.float64),
        np.arange(settings + 1, dtype=np.int64) * length,
        np.ascontiguousarray(record).ravel(),
        np.full(settings, direction, np.int8),
        BenchSource("invented.csv", 0, ""),
        knob_uncertainty=knob_uncertainty,
    )


def up_and_down(up: BenchSweep, down: BenchSweep) -> BenchSweep:
    """One sweep up and then down again."""
    return BenchSweep(
        up.knob,
        up.sample,
        np.concatenate([up.settings, down.settings]),
        np.concatenate([up.offsets, down.offsets[1:] + up.offsets[-1]]),
        np.concatenate([up.samples, down.samples]),
        np.concatenate([up.directions, down.directions]),
        up.source,
        knob_uncertainty=up.knob_uncertainty,
    )
