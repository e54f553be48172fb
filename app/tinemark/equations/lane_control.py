"""Step control of lanes: what every system's kernel does between its rates, compiled once for all of them.

Each lane has its own step and its own time; a lane whose step is refused, or that is done, keeps its
state while the others go on. The rows named here lie at the same places in every kernel's memory,
before the blocks of states and stages.

Loops without branches that load before they choose become vector code; the passage of a section is
decided lane by lane.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from tinemark.equations.lane_memory import LANES, get, put
from tinemark.systems.lane_math import lane_pow
from tinemark.systems.native import jit

Memory = NDArray[np.float64]

STEP, TIME, SWEPT, WANTED, LAST, SCALE = (LANES * place for place in range(6))
"""The step that is tried; the time since the last sample; the swept parameter; the step that errors would
allow; whether the step tried ends at the sample; what the rates are multiplied by."""

FIRST_SUM, SECOND_SUM, MOVED = (LANES * place for place in range(6, 9))
"""Sums of squares of the error estimates and of the movement."""

GOING, CODE, ACCEPTED, LANDED, OUT, TRIES, REFUSED, STILL = (LANES * place for place in range(9, 17))
"""Whether a lane is under way, the reason why not, whether its step was allowed, whether it stands at its
sample, whether it left every bound; steps tried and refused; steps in a row that moved nothing."""

PERIOD = LANES * 17
"""Strobe period."""

LANDING, LEVEL, SLOPE, START_LEVEL, START_SLOPE, REACH = (LANES * place for place in range(18, 24))
"""Whether a lane is on its last way to the section; the section's formula and its rate at the new point and
where the step starts; how far a step of the formula may reach."""

ARMED, LEFT, LOOKS, STEEPEST, HIGHEST, MISSED = (LANES * place for place in range(24, 30))
"""Whether a passage counts; whether the section was left; closer looks; the formula's largest rate and size
on the way, and the highest peak below zero."""

BLOCKS = LANES * 30
"""Where the blocks of rows begin."""

ESCAPED, TOO_MANY, STOPPED, GRAZES, RESTS, UNDEFINED = 1.0, 2.0, 3.0, 4.0, 5.0, 6.0
"""Codes, as in `Reason`."""

VANISHED = 1e-200
"""Steps shorter than this are no steps: they were refused over and over, as the rates have no value there."""

RESTING_STEPS, RESTING_MOVE = 40.0, 100.0
"""Steps in a row that move less than some times what is allowed as an error: the orbit has come to rest.
An explicit method hovers about a resting point by a few times that. The move is squared."""

CLOSER_LOOKS = 60.0
"""Looks after which a section met along its own direction counts as grazed."""

SAFETY, SMALLEST_FACTOR, LARGEST_FACTOR, WARY_BELOW = 0.86, 0.2, 5.0, 2.0

ROOT_BITS = np.uint64(int(1023 * 17 / 16 * 2**52) - (1 << 46))
"""Bits from which a sixteenth of a number's bits are taken for about the inverse of its sixteenth root."""


@jit
def clear(W: Memory) -> None:
    """Forget everything of the orbits before."""
    for index in range(W.size):
        put(W, index, 0.0)


@jit
def depart(W: Memory, lanes: int, near: float) -> None:
    """Lanes set out for their first sample; the section's formula has been computed where they stand."""
    for k in range(lanes):
        put(W, GOING + k, 1.0)
        put(W, STEEPEST + k, 0.0)
        put(W, HIGHEST + k, 0.0)
        put(W, MISSED + k, -np.inf)
        put(W, REACH + k, np.inf)
        level = get(W, LEVEL + k)
        put(W, START_LEVEL + k, level)
        put(W, START_SLOPE + k, get(W, SLOPE + k))
        # On or just before the section an orbit has to leave it before a passage counts.
        put(W, ARMED + k, 1.0 if level < -near else 0.0)
        put(W, LEFT + k, 1.0 if level >= 0.0 else 0.0)


@jit
def first_steps(
    W: Memory, lanes: int, X: int, F: int, states: int, allowed: Memory, relative: float, longest: float
) -> None:
    """A first step that moves the states by a hundredth of their size (Hairer et al. 1993, II.4)."""
    # Rates that are zero or undefined tell nothing of the first step.
    longest = longest if longest < np.inf else 1.0
    for k in range(lanes):
        size, speed = 1e-4, 0.0
        for i in range(states):
            state, rate = get(W, X + i * LANES + k), get(W, F + i * LANES + k)
            unit = allowed[i] / relative + abs(state)
            size += (state / unit) ** 2
            speed += (rate / unit) ** 2
        guess = 0.01 * np.sqrt(size / speed) if speed > 0.0 else longest
        put(W, WANTED + k, guess if guess < longest else longest)  # noqa: FURB136


@jit
def begin_driven(W: Memory, lanes: int) -> None:
    """The step of each lane: even pieces, so that no splinter is left at the end of the period."""
    for k in range(lanes):
        rest, wanted, going = get(W, PERIOD + k) - get(W, TIME + k), get(W, WANTED + k), get(W, GOING + k)
        pieces = np.ceil(rest / wanted)
        piece = rest / pieces
        put(W, LAST + k, 1.0 if pieces < 1.5 else 0.0)
        put(W, STEP + k, piece if going > 0.5 else 0.0)
        put(W, SCALE + k, 1.0)


@jit
def begin_flow(W: Memory, lanes: int) -> None:
    """The step of each lane: in time, or in the section's formula where it is landing (Hénon 1982)."""
    for k in range(lanes):
        level, reach, wanted = get(W, START_LEVEL + k), get(W, REACH + k), get(W, WANTED + k)
        landing, going, steepness = get(W, LANDING + k), get(W, GOING + k), 1.0 / get(W, START_SLOPE + k)
        size = abs(level)
        away = -reach if level > 0.0 else reach
        across = -level if size < reach else away
        put(W, LAST + k, 1.0 if size < reach else 0.0)
        step = across if landing > 0.5 else wanted
        put(W, STEP + k, step if going > 0.5 else 0.0)
        put(W, SCALE + k, steepness if landing > 0.5 else 1.0)


@jit
def end_scale(W: Memory, lanes: int) -> None:
    """SCALE for the rates at the new point, of a landing lane by the section's rate there."""
    for k in range(lanes):
        landing, steepness = get(W, LANDING + k), 1.0 / get(W, SLOPE + k)
        put(W, SCALE + k, steepness if landing > 0.5 else 1.0)


@jit
def judge(W: Memory, lanes: int, checked: int, order: int) -> None:
    """What each lane's error means: whether the step is allowed, and by which factor to change it.

    ACCEPTED is set where it is, LANDED gets the factor.
    """
    count = float(checked)
    for k in range(lanes):
        step, going, first, second = (
            get(W, STEP + k),
            get(W, GOING + k),
            get(W, FIRST_SUM + k),
            get(W, SECOND_SUM + k),
        )
        tries, refused = get(W, TRIES + k), get(W, REFUSED + k)
        # The error's square, in units of what is allowed: a comparison needs no root.
        if order == 8:
            # What is added keeps 0 by 0 from being undefined; not-a-number stays one.
            square = step * step * first * first / ((first + 0.01 * second) * count + 1e-300)
            # The sixteenth root, inverted, from the bits: within a few hundredths, enough for control.
            bits = ROOT_BITS - (np.float64(square).view(np.uint64) >> np.uint64(4))
            factor = float(SAFETY * np.uint64(bits).view(np.float64))
        else:
            square = step * step * first / count
            factor = SAFETY / lane_pow(square, 0.5 / order)
        # An undefined error counts as far too large.
        factor = factor if square < 1e60 else SMALLEST_FACTOR
        factor = factor if factor > SMALLEST_FACTOR else SMALLEST_FACTOR  # noqa: FURB136
        factor = factor if factor < LARGEST_FACTOR else LARGEST_FACTOR  # noqa: FURB136
        # A step that grows a little is mostly refused next; far too small a one grows freely.
        wary = 0.5 * factor + 0.5
        factor = wary if 1.0 < factor < WARY_BELOW else factor
        accepted = going if square <= 1.0 else 0.0
        put(W, TRIES + k, tries + going)
        put(W, REFUSED + k, refused + going - accepted)
        put(W, ACCEPTED + k, accepted)
        put(W, LANDED + k, factor)


@jit
def end_driven(W: Memory, lanes: int) -> None:
    """Times and next steps after `judge`; LANDED where the period is over."""
    for k in range(lanes):
        before, step, factor = get(W, WANTED + k), get(W, STEP + k), get(W, LANDED + k)
        going, accepted, last = get(W, GOING + k), get(W, ACCEPTED + k), get(W, LAST + k)
        time, period = get(W, TIME + k), get(W, PERIOD + k)
        wanted = step * factor
        kept = wanted if wanted > before else before  # noqa: FURB136
        wanted = kept if factor >= 1.0 else wanted
        put(W, WANTED + k, wanted if going > 0.5 else before)
        landed = accepted * last
        later = time + step * accepted
        put(W, TIME + k, period if landed > 0.5 else later)
        put(W, LANDED + k, landed)


@jit
def end_flow(W: Memory, lanes: int, near: float) -> None:
    """Next steps after `judge`, and what the step means for the section; LANDED where it was reached."""
    # Most lanes are far from the section: they are done side by side, the others are marked.
    for k in range(lanes):
        factor, step, wanted = get(W, LANDED + k), get(W, STEP + k), get(W, WANTED + k)
        going, accepted, landing = get(W, GOING + k), get(W, ACCEPTED + k), get(W, LANDING + k)
        g0, g1, d0, d1 = (
            get(W, START_LEVEL + k),
            get(W, LEVEL + k),
            get(W, START_SLOPE + k),
            get(W, SLOPE + k),
        )
        armed, left, looks, still = get(W, ARMED + k), get(W, LEFT + k), get(W, LOOKS + k), get(W, STILL + k)
        steepest, highest, moved = get(W, STEEPEST + k), get(W, HIGHEST + k), get(W, MOVED + k)
        code = get(W, CODE + k)
        # A peak within the step, below the section or above it.
        turned = (1.0 if d0 > 0.0 else 0.0) * (1.0 if d1 < 0.0 else 0.0)
        met = armed * (1.0 if g1 >= 0.0 else turned)
        marked = going * (1.0 if landing + accepted * met > 0.5 else 0.0)
        plain = going - marked
        taken = accepted * plain
        wanted = step * factor if plain > 0.5 else wanted
        still = (still + 1.0 if moved < RESTING_MOVE else 0.0) if taken > 0.5 else still
        below = 1.0 if g1 < -near else left
        armed = below if taken * (1.0 if g1 <= 0.0 else 0.0) > armed else armed
        steeper = abs(d1) if abs(d1) > steepest else steepest  # noqa: FURB136
        higher = abs(g1) if abs(g1) > highest else highest  # noqa: FURB136
        put(W, WANTED + k, wanted)
        put(W, STILL + k, still)
        put(W, ARMED + k, armed)
        put(W, LEFT + k, 1.0 if taken * (1.0 if g1 > 0.0 else 0.0) > 0.5 else left)
        put(W, LOOKS + k, 0.0 if taken > 0.5 else looks)
        put(W, STEEPEST + k, steeper if taken > 0.5 else steepest)
        put(W, HIGHEST + k, higher if taken > 0.5 else highest)
        put(W, START_LEVEL + k, g1 if taken > 0.5 else g0)
        put(W, START_SLOPE + k, d1 if taken > 0.5 else d0)
        put(W, CODE + k, RESTS if (still - RESTING_STEPS) > code * 1e9 else code)
        put(W, ACCEPTED + k, taken)
        put(W, LANDED + k, 0.0)
        put(W, SCALE + k, factor)
        put(W, OUT + k, marked * (1.0 + accepted))
    for k in range(lanes):
        mark = get(W, OUT + k)
        if mark > 0.5:
            _met(W, k, mark > 1.5)


@jit
def _met(W: Memory, k: int, is_allowed: bool) -> None:
    """A lane on its last way to the section, or one that may have passed it in the step."""
    factor, step = get(W, SCALE + k), get(W, STEP + k)
    if get(W, LANDING + k) > 0.5:
        if is_allowed:
            put(W, ACCEPTED + k, 1.0)
            put(W, LANDED + k, get(W, LAST + k))
        else:
            put(W, REACH + k, abs(step) * factor)
            put(W, LOOKS + k, get(W, LOOKS + k) + 1.0)
    else:
        put(W, ACCEPTED + k, _passed(W, k, step, factor))
    if get(W, LOOKS + k) > CLOSER_LOOKS:
        put(W, CODE + k, GRAZES)
    if get(W, ACCEPTED + k) > 0.5:
        put(W, START_LEVEL + k, get(W, LEVEL + k))
        put(W, START_SLOPE + k, get(W, SLOPE + k))


@jit
def _passed(W: Memory, k: int, step: float, factor: float) -> float:
    """An armed lane's step in time whose error is allowed: 1 where it is taken, 0 for a closer look."""
    g0, g1, d0, d1 = (
        get(W, START_LEVEL + k),
        get(W, LEVEL + k),
        get(W, START_SLOPE + k),
        get(W, SLOPE + k),
    )
    if g1 >= 0.0 and d1 <= 0.0:
        # Through the section and turned round within the step.
        put(W, WANTED + k, 0.5 * step)
        put(W, LOOKS + k, get(W, LOOKS + k) + 1.0)
        return 0.0
    if g1 < 0.0:
        # Highest point of the cubic through both ends and their slopes.
        two = 3.0 * (g1 - g0) - step * (2.0 * d0 + d1)
        three = 2.0 * (g0 - g1) + step * (d0 + d1)
        place = step * d0 / (np.sqrt(two * two - 3.0 * three * step * d0) - two)
        peak = g0 + place * (step * d0 + place * (two + place * three))
        if peak > 0.0 or (peak > -0.02 * (peak - g0) and 0.05 < place < 0.95):
            put(W, WANTED + k, step * place)
            put(W, LOOKS + k, get(W, LOOKS + k) + 1.0)
            return 0.0
        put(W, MISSED + k, max(get(W, MISSED + k), peak))
    else:
        put(W, LANDING + k, 1.0)
    put(W, LOOKS + k, 0.0)
    put(W, STEEPEST + k, max(get(W, STEEPEST + k), abs(d1)))
    put(W, HIGHEST + k, max(get(W, HIGHEST + k), abs(g1)))
    put(W, STILL + k, get(W, STILL + k) + 1.0 if get(W, MOVED + k) < RESTING_MOVE else 0.0)
    put(W, WANTED + k, step * factor)
    return 1.0


@jit
def rearm(W: Memory, k: int) -> None:
    """A lane at its sample sets out for the next one."""
    put(W, TIME + k, 0.0)
    put(W, LANDING + k, 0.0)
    put(W, REACH + k, np.inf)
    put(W, ARMED + k, 0.0)
    put(W, LEFT + k, 0.0)
    put(W, STEEPEST + k, 0.0)
    put(W, HIGHEST + k, 0.0)
    put(W, MISSED + k, -np.inf)
    put(W, LOOKS + k, 0.0)
    put(W, START_LEVEL + k, 0.0)


@jit
def watch(W: Memory, lanes: int, X: int, states: int, bounds: Memory) -> None:
    """Lanes that have left every bound, or have a reason to, stop."""
    for k in range(lanes):
        put(W, OUT + k, 0.0)
    for i in range(states):
        bound = bounds[i]
        for k in range(lanes):
            out, size = get(W, OUT + k), abs(get(W, X + i * LANES + k))
            put(W, OUT + k, out if size < bound else ESCAPED)
    for k in range(lanes):
        code, going, out = get(W, CODE + k), get(W, GOING + k), get(W, OUT + k)
        none = UNDEFINED if get(W, WANTED + k) < VANISHED else 0.0
        out = none if out < none else out  # noqa: FURB136
        code = out if code < out else code  # noqa: FURB136
        put(W, CODE + k, code)
        put(W, GOING + k, 0.0 if code > 0.5 else going)


@jit
def pending(W: Memory, lanes: int) -> int:
    """How many lanes are under way."""
    count = 0
    for k in range(lanes):
        count += 1 if get(W, GOING + k) > 0.5 else 0
    return count


@jit
def give_up(W: Memory, lanes: int, stopped: Any) -> None:
    """Lanes still under way get the reason why they end here."""
    for k in range(lanes):
        if get(W, GOING + k) > 0.5:
            put(W, CODE + k, STOPPED if stopped != 0 else TOO_MANY)


@jit
def worst(W: Memory, lanes: int, checked: int) -> None:
    """Keep the largest error of a lane's steps in OUT, in units of what is allowed; not-a-number stays."""
    count = float(checked)
    for k in range(lanes):
        step, first, second = abs(get(W, STEP + k)), get(W, FIRST_SUM + k), get(W, SECOND_SUM + k)
        before = get(W, OUT + k)
        error = step * first / np.sqrt((first + 0.01 * second) * count + 1e-300)
        put(W, OUT + k, before if error <= before else error)  # noqa: FURB136


@jit
def unsettled(W: Memory, lanes: int) -> int:
    """Lanes that are to go one sample on with their own steps: those whose OUT exceeds what is allowed."""
    count = 0
    for k in range(lanes):
        allowed = get(W, OUT + k) <= 1.0
        going = 0.0 if allowed or get(W, CODE + k) > 0.5 else 1.0
        put(W, GOING + k, going)
        put(W, TIME + k, 0.0)
        put(W, TRIES + k, 0.0)
        count += 1 if going > 0.5 else 0
    return count


@jit
def overdue(W: Memory, lanes: int, limit: int) -> None:
    """Lanes that have tried too many steps for one sample get the reason."""
    for k in range(lanes):
        code, tries = get(W, CODE + k), get(W, TRIES + k)
        put(W, CODE + k, TOO_MANY if tries >= limit and code < 0.5 else code)
