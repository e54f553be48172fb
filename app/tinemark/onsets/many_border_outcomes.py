"""What follows a border collision of several states, by the derivatives of f^p on both sides.

Feigin's classification (in English: di Bernardo, Feigin, Hogan & Homer, Chaos Sol. Fract. 10:1881, 1999):
the signs of det(1 - M) on the two sides tell a cycle that goes on from a pair that meets and vanishes,
and those of det(1 + M) whether a doubled cycle grows from the border. Beyond that, the two straight
pieces are followed: a cycle they settle on is shown to be there and stable in balls, and persists near
the border.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from flint import acb_mat, arb, arb_mat

from tinemark.onsets.many_map import Floats
from tinemark.onsets.many_shooting import entries
from tinemark.onsets.proofs import NotProved

SETTLING = 4000
RENORMALISED = 10
GROWING = 0.01
"""Lyapunov exponent a step above which the straight pieces count as chaotic."""
LONGEST_FOLLOWING = 24
ESCAPED = 1e6
SQUARINGS = 12


@dataclass(frozen=True)
class Side:
    """One side of a collision: M and f^p_r of its piece, the surface's gradient, and where its branch lies.

    Attributes
    ----------
    sign
        -1 where the surface's formula is less, +1 where it is more.
    below
        Whether the branch of this side exists for parameter values below the onset.
    stable
        Whether all its multipliers lie inside the unit circle, or one outside: shown.
    """

    monodromy: Any
    drift: Any
    gradient: list[Any]
    push: Any
    sign: int
    below: bool
    stable: bool

    @property
    def multipliers(self) -> list[complex]:
        """The one-sided multipliers in doubles, largest first."""
        n = self.monodromy.nrows()
        matrix = np.array([[float(self.monodromy[i, j]) for j in range(n)] for i in range(n)])
        return sorted((complex(value) for value in np.linalg.eigvals(matrix)), key=abs, reverse=True)


@dataclass(frozen=True)
class Outcome:
    """What follows.

    Attributes
    ----------
    before
        The side whose branch is there before the onset.
    rounds
        How many times the period the stable cycle after it has; 0 for none that was shown.
    opens
        Whether a pair of cycles meets on the surface and exists on one side of it alone.
    words
        The same in a sentence.
    """

    before: Side
    rounds: int
    opens: bool
    words: str


def is_stable(monodromy: Any) -> bool:
    """Whether all multipliers lie inside the unit circle (True), or one outside (False), shown in balls.

    Raises
    ------
    NotProved
        One may lie on it.
    """
    n = monodromy.nrows()
    try:
        values = acb_mat(monodromy).eig(multiple=True)
    except ValueError:
        values = []
    if values:
        if any(abs(value) > 1 for value in values):
            return False
        if all(abs(value) < 1 for value in values):
            return True
    power = monodromy
    for _ in range(SQUARINGS):
        if all(sum((abs(power[i, j]) for j in range(n)), arb(0)) < 1 for i in range(n)):
            return True
        trace = sum((power[i, i] for i in range(n)), arb(0))
        if abs(trace) > n:
            return False  # the trace of a power is the sum of the multipliers' powers
        power = power * power
    raise NotProved("a one-sided multiplier may lie on the unit circle: what follows is open")


def outcome_of(one: Side, other: Side, period: int) -> Outcome:
    """What follows the collision of a cycle of a continuous map.

    Raises
    ------
    NotProved
        A sign that decides stayed open.
    """
    plus = _sign(_determinant(one, -1)) * _sign(_determinant(other, -1))
    minus = _sign(_determinant(one, 1)) * _sign(_determinant(other, 1))
    before = other if other.stable and not one.stable else one
    after = one if before is other else other
    start = f"the one-sided multipliers are {_sizes(before)} before and {_sizes(after)} after"
    if plus < 0:
        if not before.stable:
            return Outcome(before, 0, True, f"{start}: both cycles of the pair that meets there are unstable")
        words = (
            f"{start}: a stable and an unstable cycle of period {period} meet on the surface and vanish "
            "together, and the behaviour jumps"
        )
        return Outcome(before, 0, True, words)
    if not before.stable:
        return Outcome(before, 1, False, f"{start}: the cycle is unstable on both sides")
    if after.stable:
        words = f"{start}: persistence, the cycle of period {period} stays stable"
        return Outcome(before, 1, False, words)
    followed = _followed(before, after)
    word = followed.word
    if followed.escapes:
        words = "no stable behaviour near the border was seen to follow: a jump"
        return Outcome(before, 0, False, f"{start}: {words}")
    if not word:
        words = "straight to chaos" if followed.chaotic else "wandering without a period"
        words += ", as far as the straight pieces beside the border were followed"
        return Outcome(before, 0, False, f"{start}: {words}")
    if not _is_there(word, before, after):
        words = f"a cycle of period {len(word) * period} was seen to follow, but not shown to"
        return Outcome(before, 0, False, f"{start}: {words}")
    rounds = len(word)
    if rounds == 2 and minus < 0:
        words = (
            f"{start}: doubling, a stable cycle of period {2 * period} grows from the border in proportion "
            "to the distance, with no cascade of doublings behind it"
        )
        return Outcome(before, 2, False, words)
    return Outcome(
        before, rounds, False, f"{start}: a stable cycle of period {rounds * period} follows at once"
    )


def feigin_words(one: Side, other: Side) -> str:
    """How many real one-sided multipliers lie above +1 and below -1, on both sides."""
    counts = []
    for side in (one, other):
        real = [value.real for value in side.multipliers if abs(value.imag) < 1e-12]
        counts.append((sum(value > 1 for value in real), sum(value < -1 for value in real)))
    (above, below), (above_too, below_too) = counts
    return f"above +1: {above} and {above_too}; below -1: {below} and {below_too}"


def _determinant(side: Side, sign: int) -> Any:
    n = side.monodromy.nrows()
    unit = arb_mat(n, n, [int(i == j) for i in range(n) for j in range(n)])
    return (unit + sign * side.monodromy).det()


def _sign(ball: Any) -> int:
    if ball > 0:
        return 1
    if ball < 0:
        return -1
    raise NotProved("a one-sided multiplier may be +1 or -1: what follows is open")


def _sizes(side: Side) -> str:
    values = []
    for value in side.multipliers:
        if abs(value.imag) < 1e-12:
            values.append(f"{value.real:.6g}")
        elif value.imag > 0:
            values.append(f"{value.real:.6g} ± {value.imag:.6g} i")
    return values[0] if len(values) == 1 else f"({', '.join(values)})"


@dataclass(frozen=True)
class _Followed:
    """What the straight pieces do past the onset: sides run through in turn, or none; whether they escape."""

    word: tuple[int, ...] = ()
    escapes: bool = False
    chaotic: bool = False


def _followed(before: Side, after: Side) -> _Followed:
    away = 1.0 if before.below else -1.0
    n = len(before.gradient)
    matrices, pushes = {}, {}
    for side in (before, after):
        matrices[side.sign] = np.array([[float(side.monodromy[i, j]) for j in range(n)] for i in range(n)])
        pushes[side.sign] = away * np.array([float(value) for value in entries(side.drift)])
    gradient = np.array([float(value) for value in before.gradient])
    offset = away * float(before.push)
    state, beside = np.zeros(n), np.full(n, 1.0 / n)
    growth, far = 0.0, ESCAPED * (1 + float(max(np.abs(push).max() for push in pushes.values())))
    states: list[Floats] = []
    signs: list[int] = []
    for count in range(SETTLING + LONGEST_FOLLOWING + 1):
        sign = -1 if float(gradient @ state) + offset < 0 else 1
        if count >= SETTLING:
            states.append(state)
            signs.append(sign)
        state, beside = matrices[sign] @ state + pushes[sign], matrices[sign] @ beside
        if count % RENORMALISED == 0:
            if not float(np.abs(state).max()) < far:
                return _Followed(escapes=True)
            length = float(np.linalg.norm(beside))
            if length == 0:
                beside, length = np.full(n, 1.0 / n), 1.0
            growth, beside = growth + float(np.log(length)), beside / length
    size = 1 + float(np.max(np.abs(states)))
    for count in range(1, LONGEST_FOLLOWING + 1):
        if np.max(np.abs(states[count] - states[0])) < 1e-9 * size:
            return _Followed(tuple(signs[:count]))
    return _Followed(chaotic=growth / SETTLING > GROWING)


def _is_there(word: Sequence[int], before: Side, after: Side) -> bool:
    """Whether the straight pieces have a stable cycle with these signs past the onset, shown in balls."""
    sides = {before.sign: before, after.sign: after}
    n = before.monodromy.nrows()
    away = 1 if before.below else -1
    unit = arb_mat(n, n, [int(i == j) for i in range(n) for j in range(n)])
    product, push = unit, arb_mat(n, 1)
    for sign in word:
        matrix = sides[sign].monodromy
        product, push = matrix * product, matrix * push + away * sides[sign].drift
    try:
        if not is_stable(product):
            return False
        state = (unit - product).solve(push)
    except (NotProved, ZeroDivisionError):
        return False
    for sign in word:
        value = sum((a * b for a, b in zip(before.gradient, entries(state), strict=True)), arb(0))
        value = value + away * before.push
        if not (value > 0 if sign > 0 else value < 0):
            return False
        state = sides[sign].monodromy * state + away * sides[sign].drift
    return True
