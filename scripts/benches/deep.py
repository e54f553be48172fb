"""Deep ladders: 20 levels, cycles of up to 524,288 points that split into 1,048,576, and what bounds them.

Each ladder runs in a fresh process, so that its peak memory is its own. Seconds are processor seconds beyond
imports. What bounds a deep ladder is stated in its last lines: the time doubles with the period, it goes into
three passes along the cycle, and of a step of those a good half stays when the numbers shrink to one word,
so that it goes into calls from Python into the ball arithmetic rather than into its digits.
"""

from __future__ import annotations

import json
import subprocess
import sys
import time
from collections import defaultdict
from collections.abc import Callable, Iterator
from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from benches.measuring import Figure

LEVELS, DIGITS = 20, 25
LADDERS = {"logistic": ("r", "2.8", "4"), "ricker": ("r", "1.6", "3.3")}
MOST_SECONDS, MOST_MEMORY_MB, LONGEST_PAUSE_S = 60.0, 400.0, 0.05
PHASES = {
    "polishing": "Newton steps with all derivatives",
    "evaluating": "rigorous residuals at a point",
    "proving": "the rigorous pass over the box",
}
SHORT_BITS, TIMED_STEPS = 64, 20_000


def figures() -> Iterator[Figure]:
    """Time, memory and pauses of 20 levels, and where the time goes."""
    from benches.measuring import at_least, at_most, reading

    for name in LADDERS:
        told = _in_a_process_of_its_own(name)
        head = f"{LEVELS}-level {name} ladder, {DIGITS} digits"
        yield at_least(f"{head}: levels proved and right", told["right"], LEVELS)
        yield at_most(f"{head}: process seconds beyond imports", told["seconds"], MOST_SECONDS)
        if told["memory"]:
            yield at_most(f"{head}: peak memory, imports included (MB)", told["memory"], MOST_MEMORY_MB)
            yield at_most(f"{head}: memory added from level 12 on (MB)", told["grown"], 50.0)
        yield at_most(
            f"{head}: longest stretch without a chance to cancel (s)", told["pause"], LONGEST_PAUSE_S
        )
        yield reading(f"{head}: time of the last level over the one before", told["growth"])
        for phase, words in PHASES.items():
            yield reading(f"{head}: share of time in {words}", told["shares"].get(phase, 0.0))
        yield reading(f"{head}: microseconds a step of the Newton loop, {told['bits']} bits", told["step"])
        yield reading(f"{head}: share of that which {SHORT_BITS} bits take too", told["fixed"])


def _in_a_process_of_its_own(name: str) -> dict[str, Any]:
    command = [sys.executable, __file__, name]
    ended = subprocess.run(command, check=True, capture_output=True, text=True)
    told: dict[str, Any] = json.loads(ended.stdout)
    return told


def _follow(name: str) -> dict[str, Any]:
    """What a ladder took, in this process."""
    import flint  # noqa: F401  imports are not part of the figure
    import numba  # noqa: F401
    import sympy  # noqa: F401

    from tinemark.onsets.engine import ladder
    from tinemark.onsets.results import LadderLevel, LadderRequest, LadderResult
    from tinemark.systems.library import builtin_system

    parameter, start, stop = LADDERS[name]
    system = builtin_system(name)
    request = LadderRequest(system, parameter, Fraction(start), Fraction(stop), 1, LEVELS, DIGITS)
    job = ladder(request)
    shares: dict[str, float] = defaultdict(float)
    at_level: list[float] = []
    memory: list[float] = []
    pause = 0.0
    began = last = time.process_time()
    while True:
        try:
            item = next(job)
        except StopIteration as done:
            result: LadderResult = done.value
            break
        now = time.process_time()
        # Before the second level the loops are compiled, once a system.
        pause = max(pause, now - last) if at_level else 0.0
        if isinstance(item, LadderLevel):
            at_level.append(now)
            memory.append(_peak_memory())
        else:
            shares[item.text.partition(" ")[0]] += now - last
        last = now
    total = last - began
    return {
        "right": _right(name, result),
        "seconds": total,
        "memory": _peak_memory(),
        "grown": memory[-1] - memory[min(11, len(memory) - 1)],
        "pause": pause,
        "growth": (at_level[-1] - at_level[-2]) / (at_level[-2] - at_level[-3]),
        "shares": {phase: seconds / total for phase, seconds in shares.items()},
        **_cost_of_a_step(system, parameter, result),
    }


def _right(name: str, result: Any) -> int:
    """Levels proved to all their digits whose interval holds the known value or, beyond those, continues."""
    sys.path.insert(0, str(Path(__file__).resolve().parents[2] / "tests" / "onsets"))
    import known_onsets

    from tinemark.onsets.results import Status

    known = known_onsets.ladder(name).onsets
    right = 0
    values = [level.onset.value_fraction for level in result.levels]
    for place, level in enumerate(result.levels):
        onset = level.onset
        width = Fraction(onset.upper) - Fraction(onset.lower)
        sound = onset.status is Status.PROVED and width < abs(values[place]) / 10**DIGITS
        if place < len(known):
            unit = Fraction(1, 10 ** len(known[place].partition(".")[2]))
            sound = sound and Fraction(onset.lower) - unit <= Fraction(known[place])
            sound = sound and Fraction(known[place]) <= Fraction(onset.upper) + unit
        elif place >= 2:
            # Beyond the table: the ratio of the gaps is Feigenbaum's delta, to what levels so deep allow.
            ratio = (values[place - 1] - values[place - 2]) / (values[place] - values[place - 1])
            sound = sound and abs(ratio - Fraction("4.669201609102990671853")) < Fraction(1, 10**5)
        right += sound
    return right


def _cost_of_a_step(system: Any, parameter: str, result: Any) -> dict[str, Any]:
    from tinemark.onsets.ball_orbits import ball_loops, ball_of, precision
    from tinemark.onsets.one_map import one_map
    from tinemark.onsets.polish import Rough, first_bits
    from tinemark.onsets.results import Kind

    loops = ball_loops(one_map(system, parameter))
    onset = result.levels[-1].onset
    x, r = Fraction(onset.states[0][1]), onset.value_fraction
    bits = first_bits(Rough(Kind.FLIP, onset.period_before, x, r), DIGITS + 3)

    def seconds(at: int) -> float:
        with precision(at):
            state = (ball_of(x).mid(), ball_of(r).mid())
            zero, one = ball_of(Fraction(0)), ball_of(Fraction(1))
            return _quickest(lambda: loops.newton(*state, one, zero, zero, zero, TIMED_STEPS))

    long, short = seconds(bits), seconds(SHORT_BITS)
    return {"bits": bits, "step": 1e6 * long / TIMED_STEPS, "fixed": short / long}


def _quickest(work: Callable[[], object]) -> float:
    times = []
    for _ in range(5):
        before = time.process_time()
        work()
        times.append(time.process_time() - before)
    return min(times)


def _peak_memory() -> float:
    """Megabytes; 0 where the system does not tell."""
    try:
        import resource
    except ImportError:
        return 0.0
    unit = 1024**2 if sys.platform == "darwin" else 1024
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / unit


if __name__ == "__main__":
    print(json.dumps(_follow(sys.argv[1])))
