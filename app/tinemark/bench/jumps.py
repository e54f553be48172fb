"""Jumps: openings that start from a step, and where they are undone on the way back."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tinemark.bench.opening_law import LawFit, fit_law, law_bases

CLEARLY_BETTER = 16.0
"""A step is believed when its fit's AICc, scaled, is lower by so much: it claims more than curvature."""

STEEPER = 4.0
"""How many times larger than what follows a step must be. An opening from zero begins as it goes on; even one
with the square root of the distance is only three times as steep in its first gap as in the next ones."""

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Jump:
    """The two neighbouring settings between which something jumps: places in a row of settings."""

    before: int
    after: int


def opening_jump(knobs: Floats, squared: Floats, spread: Floats, smooth: LawFit, scale: float) -> Jump | None:
    """Whether an opening starts from a step, which the law of a flip, however curved, does not fit.

    Parameters
    ----------
    smooth
        The continuous law fitted to the same settings.
    scale
        What both chi-squares are divided by, from the better of the two fits.
    """
    # Within a gap a step may be anywhere: one candidate a gap.
    middles = (knobs[:-1] + knobs[1:]) / 2
    fit = fit_law(law_bases(knobs, spread, middles[1:-2], np.empty(0), is_jump=True), squared[None])
    model = int(np.argmin(fit.criteria[:, 0]))
    place = int(np.argmin(np.abs(middles - fit.onsets[model, 0])))
    own = float(fit.chi_squares[model, 0]) / max(len(knobs) - fit.unknowns[model], 1)
    gain = (float(smooth.criteria[:, 0].min()) - float(fit.criteria[model, 0])) / max(1.0, min(scale, own))
    step = float(squared[place + 1] - squared[place])
    after = float(np.abs(np.diff(squared[place + 1 : place + 5])).mean())
    is_clear = gain > CLEARLY_BETTER and step > STEEPER * after and step > 5 * float(spread[place + 1])
    return Jump(place, place + 1) if is_clear else None


def level_jumps(levels: Floats, scatter: Floats) -> tuple[Jump, ...]:
    """Settings between which the level of one branch jumps, though no cycle splits.

    Parameters
    ----------
    levels
        Shape (settings,): means of the samples.
    scatter
        Shape (settings,): their standard deviations.

    Notes
    -----
    A step between neighbours is held against the steps around it: it is a jump where the lines through
    three settings on either side miss each other by far more than they miss their own settings, and by more
    than the samples scatter.
    """
    found: list[Jump] = []
    typical = float(np.median(np.abs(np.diff(levels, 2)))) if len(levels) > 4 else 0.0
    for place in range(2, len(levels) - 3):
        left, right = levels[place - 2 : place + 1], levels[place + 1 : place + 4]
        gap = (2 * right[0] - right[1]) - left[2]
        gap_back = right[0] - (2 * left[2] - left[1])
        own = max(abs(left[0] - 2 * left[1] + left[2]), abs(right[0] - 2 * right[1] + right[2]), typical)
        noise = float(scatter[place - 2 : place + 4].max())
        clear = min(abs(gap), abs(gap_back), abs(right[0] - left[2]))
        if clear > 12 * own and clear > 6 * noise and gap * gap_back > 0:
            found.append(Jump(place, place + 1))
    return tuple(found)
