"""A measured sweep as a value: knob settings in the order in which they were visited, with their samples."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class BenchSource:
    """The file a sweep was read from, so that it can be recognised again."""

    name: str
    size: int
    sha256: str


@dataclass(frozen=True, eq=False)
class BenchSweep:
    """A measured sweep.

    Attributes
    ----------
    knob, knob_unit, sample, sample_unit
        Names and units of the columns, as the file gives them.
    settings
        float64, shape (settings,): knob values in the order in which they were visited. A setting visited
        on the way up and again on the way down stands here twice.
    offsets
        int64, shape (settings + 1,): samples of setting k are ``samples[offsets[k]:offsets[k + 1]]``.
    samples
        float64, shape (samples,): one sample a period, in the order of time.
    directions
        int8, shape (settings,): 1 while the knob goes up, -1 while it goes down.
    knob_uncertainty
        Standard uncertainty of a knob setting (type B), in the knob's unit; 0 when not known.
    notes
        What was understood of the file, a sentence each.
    """

    knob: str
    sample: str
    settings: NDArray[np.float64]
    offsets: NDArray[np.int64]
    samples: NDArray[np.float64]
    directions: NDArray[np.int8]
    source: BenchSource
    knob_unit: str = ""
    sample_unit: str = ""
    knob_uncertainty: float = 0.0
    notes: tuple[str, ...] = ()

    def at(self, setting: int) -> NDArray[np.float64]:
        """Samples of one setting, in the order of time."""
        return self.samples[self.offsets[setting] : self.offsets[setting + 1]]

    def visits(self, direction: int) -> NDArray[np.int64]:
        """The settings visited in one direction, in rising order of the knob."""
        found = np.flatnonzero(self.directions == direction)
        return found[np.argsort(self.settings[found], kind="stable")].astype(np.int64)
