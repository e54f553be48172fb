"""What follows a border collision, by the one-sided multipliers of the cycle that touches the surface.

To first order the return map in the surface's formula s is s' = a s + m on one side and b s + m on the other,
with m passing zero at the collision. Its scale does not matter, so a and b alone decide (Nusse & Yorke, 1992;
Banerjee & Grebogi, 1999; di Bernardo, Budd, Champneys & Kowalczyk, 2008, section 3.1).
"""

from __future__ import annotations

from dataclasses import dataclass

LONGEST_FOLLOWING = 24
"""Longest cycle of the two straight pieces that is told from chaos, in rounds of the cycle that collides."""
SETTLING = 5000
NEARBY = (-1e-6, 1e-6)
"""Relative changes of the multipliers that must leave the outcome as it is."""


@dataclass(frozen=True)
class Outcome:
    """What follows.

    Attributes
    ----------
    before, after
        Multipliers on the side where the stable cycle is before the collision, and on the other side.
    rounds
        Period that follows over the period before: 1 persistence, 2 doubling, more; 0 none.
    opens
        Whether the collision makes a pair of cycles appear or vanish, as a fold does.
    words
        The same in a sentence without its subject.
    certain
        False where multipliers a little different would have another outcome.
    """

    before: float
    after: float
    rounds: int
    opens: bool
    words: str
    certain: bool = True


def outcome(a: float, b: float, period: int) -> Outcome:
    """What follows the collision of a cycle of a continuous map.

    Parameters
    ----------
    a, b
        One-sided multipliers; that of the stable cycle comes first in the answer. Where both are stable
        or both unstable, a is taken as the one before.
    """
    if abs(a) >= 1 and abs(b) < 1:
        a, b = b, a
    start = f"the one-sided multipliers are {a:.6g} before and {b:.6g} after"
    if abs(a) >= 1:
        if (a > 1) != (b > 1):
            return Outcome(a, b, 0, True, f"{start}: both cycles of the pair that meets there are unstable")
        return Outcome(a, b, 1, False, f"{start}: the cycle is unstable on both sides")
    if b > 1:
        words = (
            f"{start}: a stable and an unstable cycle of period {period} meet on the surface and vanish "
            "together, and the behaviour jumps"
        )
        return Outcome(a, b, 0, True, words)
    if b > -1:
        return Outcome(a, b, 1, False, f"{start}: persistence, the cycle of period {period} stays stable")
    if -1 < a * b < 1:
        words = (
            f"{start}: doubling, a stable cycle of period {2 * period} with multiplier {a * b:.6g} grows "
            "from the border in proportion to the distance, with no cascade of doublings behind it"
        )
        return Outcome(a, b, 2, False, words)
    rounds = _following(a, b)
    beside = [_following(a * (1 + shift), b * (1 + other)) for shift in NEARBY for other in NEARBY]
    if any(each != rounds for each in beside):
        words = f"{start}: on the edge between two outcomes"
        return Outcome(a, b, 0, False, words, certain=False)
    if rounds < 0:
        return Outcome(a, b, 0, False, f"{start}: no stable behaviour near the border follows, a jump")
    if rounds:
        words = f"{start}: a stable cycle of period {rounds * period} follows at once"
        return Outcome(a, b, rounds, False, words)
    return Outcome(a, b, 0, False, f"{start}: straight to chaos, no stable cycle follows near the border")


def _following(a: float, b: float) -> int:
    """Period that the two straight pieces settle on past the collision; 0 none, -1 they escape."""
    s = 0.0
    for _ in range(SETTLING):
        s = (a if s < 0 else b) * s + 1.0
        if abs(s) > 1e6:
            return -1
    back = s
    for count in range(1, LONGEST_FOLLOWING + 1):
        s = (a if s < 0 else b) * s + 1.0
        if abs(s - back) < 1e-9 * (1 + abs(back)):
            return count
    return 0
