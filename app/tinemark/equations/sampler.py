"""Moves orbits by one sample each: compiled on first use, kept on disk for the next run."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tinemark.equations.motion import Motion
from tinemark.equations.tableau import Method, tableau

Floats = NDArray[np.float64]

STEP_LIMIT = 20_000
"""Integration steps that one sample may take."""


@dataclass(frozen=True)
class Sampled:
    """Where orbits stand at their next sample.

    Attributes
    ----------
    rows
        (rows, orbits): states, then the motion's rows; nan where there is no sample.
    codes
        (orbits,): why not, as values of `Reason`; 0 where there is a sample.
    times
        (orbits,): time it took.
    steps, refused
        (orbits,): integration steps tried, and how many of them were refused.
    slope_share, nearest_miss
        (orbits,): how steeply the section was passed, as a share of its formula's largest slope on the
        way; and how near it was met without being passed, as a share of its formula's largest value
        (negative, 0 is a touch). Of driven systems 1 and -inf.
    """

    rows: Floats
    codes: NDArray[np.uint8]
    times: Floats
    steps: NDArray[np.int64]
    refused: NDArray[np.int64]
    slope_share: Floats
    nearest_miss: Floats


@dataclass(frozen=True)
class Allowance:
    """What a step may err.

    Attributes
    ----------
    relative
        Error allowed in one step as a share of the number itself …
    floors
        (rows,): … and in addition, whatever the number's size.
    """

    relative: float
    floors: Floats


@dataclass(frozen=True)
class Frame:
    """What an orbit is held against.

    Attributes
    ----------
    bounds
        (states,): sizes beyond which an orbit has escaped.
    near
        Values of the section's formula below zero that count as on the section at the start.
    limit
        Integration steps that one sample may take.
    """

    bounds: Floats
    near: float
    limit: int = STEP_LIMIT


def sampled(
    motion: Motion,
    method: Method,
    rows: Floats,
    swept: Floats,
    fixed: Floats,
    allowance: Allowance,
    frame: Frame,
    stop: NDArray[np.uint8] | None = None,
) -> Sampled:
    """Move orbits on to their next sample: one period on, or to the next passage of the section.

    A start on the section does not count as a passage. Holds no interpreter lock.

    Parameters
    ----------
    rows
        (states and motion's rows, orbits): where each orbit starts.
    swept
        (orbits,): swept parameter of each.
    fixed
        Values of `motion.fixed`.
    stop
        A cell that ends the run early when it is set.
    """
    orbits = rows.shape[1]
    clocked = 0 if motion.is_driven else 1
    moved = np.zeros((rows.shape[0] + clocked, orbits))
    moved[: rows.shape[0]] = rows
    codes = np.zeros(orbits, np.uint8)
    counts = np.zeros((2, orbits), np.int64)
    times = np.zeros(orbits)
    grazing = np.empty((2, orbits))
    grazing[0], grazing[1] = 1.0, -np.inf
    _compiled(motion, method)(
        moved,
        np.ascontiguousarray(np.broadcast_to(swept, (orbits,)), dtype=np.float64),
        fixed,
        allowance.floors,
        allowance.relative,
        frame.bounds,
        frame.near,
        frame.limit,
        codes,
        counts,
        times,
        grazing,
        np.zeros(1, np.uint8) if stop is None else stop,
    )
    return Sampled(moved[: rows.shape[0]], codes, times, counts[0], counts[1], grazing[0], grazing[1])


@lru_cache(maxsize=64)
def _compiled(motion: Motion, method: Method) -> Any:
    from tinemark.equations.sample_source import sample_source
    from tinemark.systems.native import native_module

    source = sample_source(motion, tableau(method))
    return native_module(source, "equations", BUILT_ON).sample


BUILT_ON = tuple(Path(__file__).with_name(name) for name in ("lane_control.py", "lane_memory.py"))
"""Compiled code that printed kernels call: a change there must not meet an old cache."""
