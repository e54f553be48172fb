"""What was picked in a sweep, and what was not, in sentences."""

from __future__ import annotations

from tinemark.bench.bootstrap import FittedOnset
from tinemark.bench.sweep import BenchSweep

SCATTERED = 2.0
"""Chi-square per degree of freedom from which on the settings' scatter is worth a word."""


def _way(direction: int) -> str:
    return "up" if direction == 1 else "down"


def _branches(count: int) -> str:
    return "one branch" if count == 1 else f"{count} branches"


def _knob(sweep: BenchSweep, value: float) -> str:
    unit = f" {sweep.knob_unit}" if sweep.knob_unit else ""
    return f"{sweep.knob} = {value:.6g}{unit}"


def split_words(
    sweep: BenchSweep, direction: int, period: int, value: float, fitted: FittedOnset, settings: int
) -> str:
    """A split that opens continuously."""
    text = (
        f"On the way {_way(direction)}, {_branches(period)} split{'s' if period == 1 else ''} "
        f"into {2 * period} at {_knob(sweep, value)}; the opening law was fitted to {settings} settings."
    )
    if fitted.rounding > 0.5:
        text += " Noise inside the circuit rounds the opening, which the fit takes into account."
    if fitted.scale > SCATTERED:
        text += " Settings scatter by more than their samples explain, and the uncertainty is widened for it."
    return text


def jump_words(
    sweep: BenchSweep, direction: int, before: int, after: int, value: float, back: float | None
) -> str:
    """A jump, to more branches or to another level."""
    what = (
        f"{_branches(before)} jump{'s' if before == 1 else ''} apart into {after}"
        if after > before
        else "the level jumps"
    )
    text = f"On the way {_way(direction)}, {what} at {_knob(sweep, value)}, without opening from zero."
    if back is not None:
        text += f" On the way back it is undone at {_knob(sweep, back)}."
    return text


def hidden_words(level: int, reason: str, sweep: BenchSweep) -> str:
    """Why there is no split of a level."""
    return f"no split of level {level} in {sweep.sample}: {reason}" if reason else ""
