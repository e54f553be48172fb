"""Coverage of measured onsets by simulation: ``python3 scripts/validate_picking.py [trials] [system...]``.

Sweeps are drawn from maps and a driven system whose first onset is known, with noise of the measurement at
three levels, noise inside the system at two, and drift; each is picked, and the share of 95 % intervals that
hold the true onset is printed, which must lie between 90 and 99 %. Beside it stand the sweeps of which the
program says that noise hides the split, the median standard uncertainty and the median error.
"""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from pathlib import Path

HOUSE = Path(__file__).resolve().parent.parent
sys.path[:0] = [str(HOUSE / "app"), str(HOUSE / "tests" / "bench")]

import numpy as np  # noqa: E402
from sweeps_from_maps import CASES, LOGISTIC, RICKER, KnownMap, draw, recorded  # noqa: E402

from tinemark.bench.picking import pick_near  # noqa: E402
from tinemark.bench.results import MeasuredOnset  # noqa: E402
from tinemark.bench.sweep import BenchSweep  # noqa: E402
from tinemark.systems.errors import NoOnsetFound  # noqa: E402

TRIALS = 500
TOGETHER = 25
"""Sweeps simulated at once. Each batch has knob settings of its own."""

WELL_ONSET = 0.2655820
"""First flip of the built-in two-well oscillator in F; `tinemark refine` gives its digits."""

Draw = Callable[[np.random.Generator, dict[str, float]], list[BenchSweep]]


def drawn_from(known: KnownMap) -> Draw:
    def sweeps(random: np.random.Generator, noise: dict[str, float]) -> list[BenchSweep]:
        additive, dynamic, drift = (noise.get(kind, 0.0) for kind in ("additive", "dynamic", "drift"))
        return draw(
            known, random, additive=additive, dynamic=dynamic, drift=drift, trials=TOGETHER, transient=1500
        )

    return sweeps


def two_well() -> Draw:
    """The driven system, its strobe samples kicked once a period where noise is inside."""
    from tinemark.equations.returns import return_map
    from tinemark.systems.library import builtin_system

    strobe = return_map(builtin_system("two_well_oscillator"), "F", 1e-9)

    def sweeps(random: np.random.Generator, noise: dict[str, float]) -> list[BenchSweep]:
        settings, length, transient = 45, 240, 600
        knobs = np.linspace(0.2555, 0.2885, settings) + random.uniform(-0.5, 0.5) * 0.033 / settings
        trials = TOGETHER if noise.get("dynamic") else 1
        swept = np.tile(knobs, trials)
        states = np.stack([np.full(len(swept), 0.43), np.full(len(swept), 0.33)])
        record = np.empty((trials, settings, length))
        for step in range(transient + length):
            states = strobe.step(states, swept)
            states = states + noise.get("dynamic", 0.0) * random.standard_normal(states.shape)
            if step >= transient:
                record[:, :, step - transient] = states[0].reshape(trials, settings)
        record = np.broadcast_to(record, (TOGETHER, settings, length))
        return recorded(knobs, record, random, noise.get("additive", 0.0), noise.get("drift", 0.0))

    return sweeps


def picked(sweeps: Draw, true: float, noise: dict[str, float], trials: int) -> Iterator[MeasuredOnset | None]:
    random = np.random.default_rng(2026)
    for _ in range(0, trials, TOGETHER):
        for sweep in sweeps(random, noise):
            job = pick_near(sweep, true)
            try:
                while True:
                    next(job)
            except StopIteration as end:
                yield end.value
            except NoOnsetFound:
                yield None


def main(words: list[str]) -> int:
    trials = int(words[0]) if words else TRIALS
    systems: dict[str, tuple[Draw, float, float]] = {
        "logistic": (drawn_from(LOGISTIC), LOGISTIC.onsets[0], 1.0),
        "Ricker": (drawn_from(RICKER), RICKER.onsets[0], 2.0),
    }
    if not words[1:] or "two-well" in words[1:]:
        systems["two-well"] = (two_well(), WELL_ONSET, 1.0)
    print("| system | noise | trials | told hidden | covered | median u | median error |")
    print("|---|---|---|---|---|---|---|")
    failed = False
    for name, (sweeps, true, size) in systems.items():
        if words[1:] and name not in words[1:]:
            continue
        for case, levels in CASES.items():
            noise = {kind: size * level for kind, level in levels.items()}
            found = list(picked(sweeps, true, noise, trials))
            onsets = [onset for onset in found if onset is not None]
            share = sum(onset.lower <= true <= onset.upper for onset in onsets) / max(len(onsets), 1)
            spread = float(np.median([onset.uncertainty for onset in onsets])) if onsets else float("nan")
            error = float(np.median([onset.value - true for onset in onsets])) if onsets else float("nan")
            hidden = len(found) - len(onsets)
            row = [name, case, len(found), hidden, f"{100 * share:.1f} %", f"{spread:.2g}", f"{error:.2g}"]
            print("| " + " | ".join(str(entry) for entry in row) + " |", flush=True)
            failed |= not 0.9 <= share <= 0.99
    return int(failed)


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
