"""How the benches measure: ours and the peers in turn, medians, ratios."""

from __future__ import annotations

import statistics
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TypedDict


class Figure(TypedDict):
    """One line of a bench.

    `target` None marks a plain reading that nothing is asked of; `holds` is then true.
    """

    figure: str
    value: float
    target: float | None
    holds: bool


@dataclass(frozen=True)
class Timing:
    """Seconds that one candidate took, round by round."""

    seconds: tuple[float, ...]

    @property
    def median(self) -> float:
        """Middle of the rounds."""
        return statistics.median(self.seconds)


def alternately(
    candidates: Mapping[str, Callable[[], object]],
    rounds: int = 7,
    warm_ups: int = 1,
    clock: Callable[[], float] = time.perf_counter,
) -> dict[str, Timing]:
    """Time every candidate once in each round, so that a slower minute of the machine meets them all.

    Parameters
    ----------
    candidates
        Name and work of each. The order turns by one place from round to round.
    warm_ups
        Calls before the first round that are not counted: compilation, caches.
    clock
        Seconds; `time.process_time` counts the work of this process alone.
    """
    for work in candidates.values():
        for _ in range(warm_ups):
            work()
    names = list(candidates)
    seconds: dict[str, list[float]] = {name: [] for name in names}
    for turn in range(rounds):
        start = turn % len(names)
        for name in names[start:] + names[:start]:
            before = clock()
            candidates[name]()
            seconds[name].append(clock() - before)
    return {name: Timing(tuple(values)) for name, values in seconds.items()}


def times_faster(ours: Timing, peer: Timing) -> float:
    """Median over the rounds of the peer's time divided by ours in the same round."""
    return statistics.median(b / a for a, b in zip(ours.seconds, peer.seconds, strict=True))


def at_least(figure: str, value: float, target: float) -> Figure:
    """A figure that should not fall below its target."""
    return {"figure": figure, "value": value, "target": target, "holds": value >= target}


def at_most(figure: str, value: float, target: float) -> Figure:
    """A figure that should not rise above its target."""
    return {"figure": figure, "value": value, "target": target, "holds": value <= target}


def reading(figure: str, value: float) -> Figure:
    """A figure for information."""
    return {"figure": figure, "value": value, "target": None, "holds": True}
