"""Predicting the next of a sequence whose gaps shrink by a converging ratio."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from itertools import pairwise


def extrapolated(values: Sequence[Fraction]) -> Fraction | None:
    """The next of a sequence whose gaps shrink by a converging ratio.

    The ratio itself is taken one step further on the same assumption (Aitken, 1926). None where the
    ratios still wander, or do not shrink the gaps.
    """
    if len(values) < 4:
        return None
    gaps = [after - before for before, after in pairwise(values)]
    if any(gap == 0 for gap in gaps):
        return None
    ratios = [float(before / after) for before, after in pairwise(gaps)]
    change = ratios[-1] - ratios[-2]
    if abs(change) > 0.3 * abs(ratios[-1]) or abs(ratios[-1]) < 1.2:
        return None
    ratio = ratios[-1]
    if len(ratios) >= 3 and ratios[-2] != ratios[-3]:
        shrink = change / (ratios[-2] - ratios[-3])
        if abs(shrink) < 0.7:
            ratio += change * shrink
    return values[-1] + gaps[-1] / Fraction(ratio)
