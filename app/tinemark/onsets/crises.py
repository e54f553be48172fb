"""Crises: an attractor meets an unstable cycle, and is lost, grown or merged with another at once.

A window of n bands ends where the critical orbit lands on the unstable cycle that bounds the bands: with
c a turning point, f^(2n)(c) is a point b with f^n(b) = b and (f^n)'(b) > 1 (Grebogi, Ott & Yorke, 1982). For
the last window, n = 1, orbits then leave for good or join another attractor; inside a window of period n
the cycle is the one born at the window's fold; where n bands merge to n/2 it has period n/2.

Both conditions hold for other parameter values too, so the bands are checked: f^n must map the interval
from b to its mirror image about c into itself with no other turning point on the way.
"""

from __future__ import annotations

import math
from collections.abc import Generator
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
import numpy.typing as npt
from flint import arb

from tinemark.onsets.ball_orbits import BallLoops, ball_loops, ball_of, fraction_of, in_chunks, precision
from tinemark.onsets.branches import Crossing, find_cycle, least_period
from tinemark.onsets.decimals import GUARD_DIGITS, decimal_places
from tinemark.onsets.float_map import FloatMap, float_map
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.onset_values import Naming, estimated_onset
from tinemark.onsets.polish import LEAST_SIZE, Lost, Rough, Settled, first_bits
from tinemark.onsets.results import Kind, Step

MOST_BANDS = 24
LANDS_WITHIN = 1e-7
"""Share of the state's scale within which two points that must be one are told as one."""
COLUMNS = (0.0, -1 / 40, 1 / 40, -1 / 10, 1 / 10, -1 / 4, 1 / 4, -1 / 2, 1 / 2)
"""Where in the view the critical orbit is compared with unstable cycles, as shares of its width."""
REASON = (
    "a crisis changes a whole attractor: that the critical orbit lands on the unstable cycle was solved for "
    "and the bands around it were checked in doubles, which is no proof"
)


@dataclass(frozen=True)
class Landing:
    """A critical orbit that lands on an unstable cycle, in doubles.

    Attributes
    ----------
    bands
        n: the landing takes 2n steps, and f^n holds the point landed on.
    turning, x, r
        The turning point, the point landed on, the parameter.
    extent
        Size in the parameter of the window that ends there.
    """

    bands: int
    turning: float
    x: float
    r: float
    extent: float


def crises_in_view(cycles: FloatMap, near: float, width: float, most: int = MOST_BANDS) -> list[Landing]:
    """Landings in a view at which up to `most` bands end, merge or are lost."""
    found: list[Landing] = []
    for share in COLUMNS:
        r = near + share * width
        turnings = [x for x in cycles.critical_points(r)[:4] if math.isfinite(x)]
        for turning in turnings:
            for bands in range(1, most + 1):
                landing = _landing(cycles, turning, r, bands, near, width)
                if landing is None or abs(landing.r - near) > width * (0.5 + 1e-9):
                    continue
                # The same value is found with any multiple of its bands; the least one tells.
                if all(abs(landing.r - other.r) > 1e-9 * width for other in found):
                    found.append(landing)
    return found


def landing_near(cycles: FloatMap, turning: float, r: float, bands: int, reach: float) -> Landing | None:
    """The landing of a turning point's orbit that Newton's method reaches from a parameter value."""
    found = _turned(cycles, turning, r)
    return None if found is None else _landing(cycles, found, r, bands, r, reach)


def _landing(
    cycles: FloatMap, turning: float, r: float, bands: int, near: float, width: float
) -> Landing | None:
    """Newton's method in (b, r) on f^n(b) = b and f^(2n)(c) = b, c carried along."""
    orbit = cycles.points(turning, r, 2 * bands + 1)
    x = float(orbit[-1])
    if not math.isfinite(x) or abs(x) > 1e6 * cycles.scale:
        return None
    cycle = find_cycle(cycles, x, r, bands)
    if cycle is None or abs(float(cycle.x) - x) > 0.2 * cycles.scale:
        return None
    x = float(cycle.x)
    for _ in range(30):
        found = _turned(cycles, turning, r)
        if found is None:
            return None
        turning = found
        u, v, _, _ = cycles.slopes(x, r, bands)
        _, v_landing, _, _ = cycles.slopes(turning, r, 2 * bands)
        gap = float(cycles.points(x, r, bands + 1)[bands]) - x
        miss = float(cycles.points(turning, r, 2 * bands + 1)[2 * bands]) - x
        determinant = (u - 1) * v_landing + v
        if determinant == 0 or not math.isfinite(determinant) or not math.isfinite(miss):
            return None
        shift_x = -(v_landing * gap - v * miss) / determinant
        shift_r = -((u - 1) * miss + gap) / determinant
        x, r = x + shift_x, r + shift_r
        if abs(r - near) > width or not math.isfinite(x):
            return None
        if abs(shift_x) < 1e-12 * cycles.scale + 1e-15 * abs(x) and abs(shift_r) < 1e-12 * max(abs(r), width):
            break
    else:
        return None
    return _checked(cycles, turning, x, r, bands)


def _turned(cycles: FloatMap, x: float, r: float) -> float | None:
    """The turning point near a state, at another parameter value."""
    for _ in range(12):
        u, _, w, _ = cycles.slopes(x, r, 1)
        if abs(u) <= 1e-15:
            return x
        if w == 0 or not math.isfinite(w):
            return None
        shift = -u / w
        x += shift
        if abs(shift) < 1e-14 * (abs(x) + cycles.scale):
            return x
        if abs(shift) > cycles.scale:
            return None
    return x


def bands_at(cycles: FloatMap, turning: float, x: float, r: float, bands: int) -> list[tuple[float, float]]:
    """The bands of an attractor about to meet a cycle: between its points and the critical orbit's."""
    cycle = cycles.points(x, r, bands + 1)
    critical = cycles.points(turning, r, bands + 1)
    return [(float(min(a, b)), float(max(a, b))) for a, b in zip(cycle[1:], critical[1:], strict=True)]


def _checked(cycles: FloatMap, turning: float, x: float, r: float, bands: int) -> Landing | None:
    """A landing whose bands hold together; None for any other solution of its equations."""
    multiplier, v, _, _ = cycles.slopes(x, r, bands)
    if not multiplier > 1 + 1e-9 or least_period(cycles, x, r, bands) not in (bands, bands / 2):
        return None
    around = bands_at(cycles, turning, x, r, bands)
    # A turning point within a band on the way would fold it once more.
    others = [_within(turning, band) for band in around[:-1]]
    more = [
        _within(other, band)
        for other in cycles.critical_points(r)
        if abs(other - turning) > 1e-9 * cycles.scale
        for band in around[:-1]
    ]
    if any(others) or any(more) or not _within(turning, around[-1]):
        return None
    # In the last band f^n has one fold, at c: so the other point that it takes to b is b's mirror image.
    beyond = float(cycles.points(turning, r, bands + 2)[-1])
    if abs(beyond - float(cycles.points(x, r, 2)[1])) > LANDS_WITHIN * cycles.scale:
        return None
    if any(_overlap(one, other) for place, one in enumerate(around) for other in around[:place]):
        return None
    # The last band reaches from b past c to f^n(c), the point that lands on b in one more round.
    low, high = around[-1]
    drift = v / (1 - multiplier)
    _, v_landing, _, _ = cycles.slopes(turning, r, 2 * bands)
    speed = abs(v_landing - drift)
    return Landing(bands, turning, x, r, (high - low) / speed) if speed > 0 else None


def _within(x: float, band: tuple[float, float]) -> bool:
    low, high = band
    room = 1e-9 * (high - low)
    return low + room < x < high - room


def _overlap(one: tuple[float, float], other: tuple[float, float]) -> bool:
    room = 1e-7 * min(one[1] - one[0], other[1] - other[0])
    return min(one[1], other[1]) - max(one[0], other[0]) > room


def crossing_of(landing: Landing) -> Crossing:
    """A landing as a candidate of a click."""
    return Crossing(Kind.CRISIS, landing.bands, landing.x, landing.r, landing.extent)


def band_offsets(
    cycles: FloatMap, crossing: Crossing, origin: Fraction, count: int = 33
) -> npt.NDArray[np.float64]:
    """Observed quantity at places all over the bands, less an exact value: a crisis fills them at once."""
    x, r = float(crossing.x), float(crossing.r)
    turning = _turning_point_of(cycles, x, r, crossing.period)
    if turning is None:
        points = cycles.points(x, r, crossing.period)
    else:
        around = bands_at(cycles, turning, x, r, crossing.period)
        points = np.concatenate([np.linspace(low, high, count) for low, high in around])
    return cycles.observed_offsets(points, r, origin)


def _turning_point_of(cycles: FloatMap, x: float, r: float, bands: int) -> float | None:
    """The turning point whose orbit lands on a point, 2n steps on."""
    best: tuple[float, float] | None = None
    for turning in cycles.critical_points(r)[:4]:
        miss = abs(float(cycles.points(turning, r, 2 * bands + 1)[-1]) - x)
        if best is None or miss < best[0]:
            best = (miss, turning)
    return best[1] if best is not None and best[0] < 1e-2 * cycles.scale else None


def settle_crisis(
    one: OneMap, rough: Rough, digits: int, *, reach: Fraction | None = None
) -> Generator[Step, None, Settled]:
    """Polish a crisis from the point landed on; always estimated.

    `rough.period` is the number of bands, and `rough.x` the point of the unstable cycle. Parameters and
    errors are those of `polish.settle_onset`.
    """
    cycles = float_map(one)
    x, r, bands = float(rough.x), float(rough.r), rough.period
    turning = _turning_point_of(cycles, x, r, bands)
    if turning is None:
        raise Lost("no critical orbit lands on that cycle")
    checked = _checked(cycles, turning, x, r, bands)
    if checked is None:
        raise Lost("the bands there do not end")
    places = decimal_places(max(abs(rough.r), LEAST_SIZE), digits + GUARD_DIGITS)
    bits = first_bits(rough, max(places, digits)) + 8 * bands
    landed = yield from _polished(ball_loops(one), turning, rough, bits)
    if reach is not None and not abs(landed.r - rough.r) < reach:
        raise Lost("Newton's method left the neighbourhood")
    half = max(
        Fraction(landed.last_step) * 4,
        Fraction(1, 10) ** (places + 1),
    )
    least = least_period(cycles, x, r, bands)
    words = _words(cycles, checked, least)
    evidence = (
        (f"critical orbit lands on the cycle after {2 * bands} steps", "solved for"),
        (f"unstable cycle of period {least}", f"multiplier {cycles.slopes(x, r, least)[0]:.6g}"),
        ("bands that map into each other", f"{bands}, checked in doubles"),
    )
    onset = estimated_onset(
        one,
        Naming(Kind.CRISIS, least, 0, words),
        (landed.x, landed.r),
        digits,
        half,
        REASON,
        evidence=evidence,
    )
    return Settled(onset, landed.x, landed.r)


@dataclass(frozen=True)
class _Landed:
    x: Fraction
    r: Fraction
    last_step: float


def _polished(loops: BallLoops, turning: float, rough: Rough, bits: int) -> Generator[Step, None, _Landed]:
    """Newton's method in high precision for turning point, landing point and parameter."""
    bands = rough.period
    with precision(bits):
        c, x, r = (ball_of(value).mid() for value in (Fraction(turning), rough.x, rough.r))
    last = math.inf
    for _ in range(12 + bits.bit_length()):
        _, slope, _, bend, slope_r = yield from _along(loops, c, r, 1, bits)
        end, u, v, _, _ = yield from _along(loops, x, r, bands, bits)
        landing, u_c, v_c, _, _ = yield from _along(loops, c, r, 2 * bands, bits)
        with precision(bits):
            # The turning point moves so that its slope stays zero; what that changes of the landing is u_c.
            shift_c = (-slope / bend).mid()
            turn = -slope_r / bend
            gap, miss = (end - x).mid(), (landing + u_c * shift_c - x).mid()
            slide = v_c + u_c * turn
            determinant = (u - 1) * slide + v
            shift_x = (-(slide * gap - v * miss) / determinant).mid()
            shift_r = (-((u - 1) * miss + gap) / determinant).mid()
            size = abs(float(shift_r)) + abs(float(shift_x))
            if not math.isfinite(size):
                raise Lost("Newton's method did not converge")
            c = (c + shift_c + turn * shift_r).mid()
            x, r = (x + shift_x).mid(), (r + shift_r).mid()
            step = abs(float(shift_r))
        if size < 2.0 ** (-0.85 * bits) or (size < 2.0 ** (-0.4 * bits) and size >= last / 4):
            return _Landed(fraction_of(x), fraction_of(r), step)
        last = size
    raise Lost("Newton's method did not converge")


def _along(loops: BallLoops, start: Any, r: Any, steps: int, bits: int) -> Generator[Step, None, Any]:
    """An orbit's end and its first derivatives, in high precision."""

    def advance(now: Any, count: int) -> Any:
        return loops.newton(now[0], r, *now[1:], count)

    with precision(bits):
        state = (start, arb(1), arb(0), arb(0), arb(0))
    return (yield from in_chunks(advance, state, steps, bits, "solving for the crisis"))


def _words(cycles: FloatMap, landing: Landing, least: int) -> str:
    """What the crisis does, by what orbits are seen to do on both sides of it."""
    bands = landing.bands
    if least < bands:
        return (
            f"band merging: {bands} chaotic bands meet on the unstable cycle of period {least} between them "
            f"and become {least}"
        )
    cycle = f"the unstable cycle of period {least}" if least > 1 else "an unstable fixed point"
    # A crisis is crossed one way or the other; on the far side orbits get past the cycle.
    if any(_escapes(cycles, landing, sign) for sign in (1, -1)):
        return (
            f"boundary crisis: the attractor meets {cycle} on the edge of its basin and is destroyed; past "
            "it orbits escape"
        )
    if bands > 1:
        return (
            f"interior crisis: the window of period {bands} ends, its {bands} bands meet {cycle} born at the "
            "window's fold and the attractor widens at once"
        )
    return (
        f"crisis: the attractor meets {cycle} on its edge, past which orbits reach places they did not before"
    )


def _escapes(cycles: FloatMap, landing: Landing, sign: int) -> bool:
    r = landing.r + sign * 1e-3 * landing.extent
    ends, returns = cycles.settle([landing.turning + 1e-3 * cycles.scale], [r], 20_000, 1)
    return bool(returns[0][0] < 0 or not abs(float(ends[0]) - landing.turning) < 1e3 * cycles.scale)
