"""2,000 random clicks near known splits of all kinds, maps of several states included, and damaged results.

The clicks are judged by tests/onsets/known_splits.py and, where the engine found a split that is not listed
there, by solving for it apart with mpmath: nothing of the engine takes part in the judging. Then every
distinct proved result is damaged (its value moved by 1e-15 of itself, a wrong period, a swapped kind) and
given back to the prover, which must refuse each, and prove the undamaged one again.
"""

from __future__ import annotations

import contextlib
import math
import random
import statistics
import sys
import time
from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path
from typing import Any

from benches.measuring import Figure, at_least, at_most, reading

sys.path.insert(0, str(Path(__file__).resolve().parents[2] / "tests" / "onsets"))

CLICKS = 2000
SEED = 20261201
SHARES = {"one state": 0.6, "other kinds": 0.2, "many states": 0.2}
COLUMNS, ROWS = 1280, 800
CLICK_PIXELS = 12.0
MOST_SECONDS, LEAST_RIGHT = 0.5, 0.97
ABOUT = 1e-15
"""How closely a result and a known value agree, relative to the value or 1."""


def figures() -> Iterator[Figure]:
    """Share right, time and wrong proofs of the clicks; then what the prover says of damaged results."""
    clicks = tuple(random_clicks(CLICKS, SEED, SHARES))
    yield from click_figures(clicks, "all kinds, one state and more", MOST_SECONDS)
    yield from _figures_by_kind(clicks)
    yield from _damage_figures(clicks)


@dataclass(frozen=True)
class Click:
    """What one click aimed at, what it found, and how that was judged."""

    split: Any
    onsets: tuple[Any, ...]
    seconds: float
    right: bool
    first: bool
    wrong_proved: int


def random_clicks(count: int, seed: int, shares: dict[str, float]) -> Iterator[Click]:
    """Random clicks near known splits, each refined and judged.

    Parameters
    ----------
    shares
        Groups of splits, and how often one of each is aimed at.
    """
    from known_splits import all_splits

    from tinemark.onsets.engine import refine
    from tinemark.onsets.results import Status
    from tinemark.systems.errors import NoOnsetFound

    splits = [split for split in all_splits() if split.group in shares]
    chance = random.Random(seed)
    for system in {_key(split.system): split.system for split in splits}.values():
        # The refinement process stays warm: what it compiles once is not part of a click.
        _warm(system)
    groups = {name: [split for split in splits if split.group == name] for name in shares}
    for _ in range(count):
        (group,) = chance.choices(list(shares), list(shares.values()))
        split = chance.choice(groups[group])
        request = _random_click(chance, split)
        before = time.perf_counter()
        try:
            onsets = _finish(refine(request)).onsets
        except NoOnsetFound:
            onsets = ()
        seconds = time.perf_counter() - before
        same = [other for other in splits if _key(other.system) == _key(split.system)]
        proved = [onset for onset in onsets if onset.status is Status.PROVED]
        yield Click(
            split=split,
            onsets=tuple(onsets),
            seconds=seconds,
            right=_is_right(onsets, split, same, request),
            first=bool(onsets) and _matches(onsets[0], split),
            wrong_proved=sum(_is_wrong(onset, same) for onset in proved),
        )


def _finish(job: Any) -> Any:
    while True:
        try:
            next(job)
        except StopIteration as done:
            return done.value


def _key(system: Any) -> tuple[str, ...]:
    """What two systems share that are the same map with the same values."""
    return (system.key, *(parameter.value.text for parameter in system.parameters))


def _warm(system: Any) -> None:
    from tinemark.onsets.engine import refine
    from tinemark.onsets.results import RefineRequest
    from tinemark.systems.errors import NoOnsetFound

    value = system.parameter(system.diagram_parameter).value.fraction
    with contextlib.suppress(NoOnsetFound):
        _finish(
            refine(RefineRequest(system, system.diagram_parameter, value, abs(value) / 10 or Fraction(1)))
        )


def _random_click(chance: random.Random, split: Any) -> Any:
    """A view in which the split can be told from its neighbours, and a click within 12 pixels of it."""
    from tinemark.onsets.results import RefineRequest

    # The next split of the same cascade is at least 24 pixels away; one view in five is much deeper.
    width = abs(split.size) * 10 ** chance.uniform(0.0, math.log10(COLUMNS / 24))
    if chance.random() < 0.2:
        width *= 10 ** -chance.uniform(1, 6)
    height = (split.high - split.low) * 10 ** chance.uniform(-1.5, 0)
    point = chance.choice(split.points) if split.points else None
    radius, angle = CLICK_PIXELS * math.sqrt(chance.random()), chance.uniform(0, 2 * math.pi)
    near = split.value + Fraction(width * radius * math.cos(angle) / COLUMNS)
    if point is None:
        return RefineRequest(split.system, split.parameter, near, Fraction(width))
    observed = Fraction(point + height * radius * math.sin(angle) / ROWS)
    return RefineRequest(split.system, split.parameter, near, Fraction(width), observed, Fraction(height))


def _distance(split: Any, request: Any) -> float:
    across = float((split.value - request.near) / request.width) * COLUMNS
    if request.observed is None or not split.points:
        return abs(across)
    up = min(abs(point - float(request.observed)) for point in split.points)
    return math.hypot(across, up / float(request.height) * ROWS)


def _period(onset: Any) -> int:
    """Period of the cycle that splits, or that appears where none was before."""
    return int(onset.period_before or onset.period_after)


def _matches(onset: Any, split: Any) -> bool:
    if onset.kind.value != split.kind or _period(onset) != split.period:
        return False
    return bool(abs(onset.value_fraction - split.value) < ABOUT * max(1, abs(split.value)))


def _is_right(onsets: Any, split: Any, same: list[Any], request: Any) -> bool:
    """The split aimed at comes first, or is the second of two close ones, or another known one is nearer."""
    if any(_matches(onset, split) for onset in onsets):
        return True
    aimed = _distance(split, request)
    return any(
        _matches(onset, other) and _distance(other, request) < aimed for onset in onsets[:1] for other in same
    )


def _is_wrong(onset: Any, same: list[Any]) -> bool:
    """Whether a proved onset is contradicted by the known value of its kind, or by a calculation apart."""
    for split in same:
        if _matches(onset, split):
            slack = Fraction(1, 10**17) * max(Fraction(1), abs(split.value))
            return not Fraction(onset.lower) - slack <= split.value <= Fraction(onset.upper) + slack
    return not _solves(onset, same[0])


def _solves(onset: Any, split: Any) -> bool:
    """Whether mpmath finds the cycle closed and its critical multiplier right at the printed decimals."""
    import mpmath
    from known_splits import MULTIPLIERS

    names = [state.name for state in split.system.states]
    printed, period = dict(onset.states), _period(onset)
    with mpmath.workdps(60):
        r = mpmath.mpf(onset.value)
        state = tuple(mpmath.mpf(printed[name]) for name in names)

        def after(start: tuple[Any, ...]) -> tuple[Any, ...]:
            for _ in range(period):
                start = split.formula(start, r, mpmath)
            return start

        if max(abs(a - b) for a, b in zip(after(state), state, strict=True)) > 1e-14:
            return False
        if onset.kind.value == "border collision":
            return split.surface is not None and _touches(split, state, r, period)
        step = mpmath.mpf(10) ** -22
        columns = []
        for place in range(len(names)):
            ahead = after(tuple(x + step * (i == place) for i, x in enumerate(state)))
            behind = after(tuple(x - step * (i == place) for i, x in enumerate(state)))
            columns.append([(a - b) / (2 * step) for a, b in zip(ahead, behind, strict=True)])
        matrix = mpmath.matrix(columns)
        multipliers = mpmath.eig(matrix)[0] if len(names) > 1 else [matrix[0]]
        if onset.kind.value == "Neimark-Sacker":
            return any(abs(abs(m) - 1) < 1e-6 and abs(mpmath.im(m)) > 1e-3 for m in multipliers)
        return any(abs(m - MULTIPLIERS[onset.kind.value]) < 1e-6 for m in multipliers)


def _touches(split: Any, state: tuple[Any, ...], r: Any, period: int) -> bool:
    import mpmath

    for _ in range(period):
        if abs(split.surface(state, r)) < 1e-14:
            return True
        state = split.formula(state, r, mpmath)
    return False


def click_figures(clicks: tuple[Click, ...], words: str, most_seconds: float) -> Iterator[Figure]:
    """Share right, median time and wrong proofs of some clicks."""
    head = f"{len(clicks)} random clicks, {words}"
    seconds = [click.seconds for click in clicks]
    yield at_least(f"{head}: share right", _share(clicks), LEAST_RIGHT)
    yield at_most(f"{head}: median seconds", statistics.median(seconds), most_seconds)
    yield at_most(f"{head}: wrong values marked proved", sum(c.wrong_proved for c in clicks), 0)
    yield reading(f"{head}: slowest seconds", max(seconds))
    yield reading(f"{head}: without an answer", sum(not click.onsets for click in clicks))
    yield reading(f"{head}: share with the split aimed at first", sum(c.first for c in clicks) / len(clicks))


def _figures_by_kind(clicks: tuple[Click, ...]) -> Iterator[Figure]:
    for group in dict.fromkeys(click.split.group for click in clicks):
        own = [click for click in clicks if click.split.group == group]
        kinds = Counter(click.split.kind for click in own)
        for kind in sorted(kinds):
            some = [click for click in own if click.split.kind == kind]
            yield reading(f"{group}, {kind}, {len(some)} clicks: share right", _share(some))
        median = statistics.median(click.seconds for click in own)
        yield reading(f"{group}, {len(own)} clicks: median seconds", median)


def _share(clicks: Sequence[Click]) -> float:
    return sum(click.right for click in clicks) / len(clicks)


def _damage_figures(clicks: tuple[Click, ...]) -> Iterator[Figure]:
    from tinemark.onsets.results import Status

    results: dict[tuple[Any, ...], tuple[Any, Any]] = {}
    for click in clicks:
        for onset in click.onsets:
            if onset.status is Status.PROVED:
                key = (_key(click.split.system), onset.kind.value, _period(onset), onset.value)
                results.setdefault(key, (click.split.system, onset))
    again = accepted = tried = 0
    for system, onset in results.values():
        again += _is_proved(system, onset)
        for damaged in _damaged(onset):
            tried += 1
            accepted += _is_proved(system, damaged)
    # A result close to an end of its printed interval leaves the test no room there, and is true still.
    name = f"{len(results)} distinct proved results: share proved again as printed"
    yield at_least(name, again / len(results), 0.97)
    yield at_most(
        f"{tried} damaged results (value by 1e-15, period, kind): accepted by the prover", accepted, 0
    )


def _damaged(onset: Any) -> Iterator[Any]:
    from tinemark.onsets.results import Kind

    size = abs(onset.value_fraction) or Fraction(1)
    for sign in (1, -1):
        yield _moved(onset, sign * size / 10**15)
    before, after = onset.period_before, onset.period_after
    for factor in (2, 3):
        yield replace(onset, period_before=factor * before, period_after=factor * after)
    if before != after:
        yield replace(onset, period_before=after, period_after=before)
    yield replace(onset, period_before=before + 1, period_after=after + 1)
    if _period(onset) % 2 == 0:
        yield replace(onset, period_before=before // 2, period_after=after // 2)
    period = _period(onset)
    claims = {
        Kind.FLIP: (period, 2 * period),
        Kind.FOLD: (0, period),
        Kind.NEIMARK_SACKER: (period, period),
        Kind.TRANSCRITICAL: (period, period),
        Kind.PITCHFORK: (period, period),
    }
    for kind, (first, second) in claims.items():
        if kind is not onset.kind:
            yield replace(onset, kind=kind, period_before=first, period_after=second)


def _moved(onset: Any, shift: Fraction) -> Any:
    """The printed value and both ends moved alike, without rounding."""
    texts = {}
    for name in ("value", "lower", "upper"):
        places = 40 + len(getattr(onset, name).partition(".")[2])
        number = round((Fraction(getattr(onset, name)) + shift) * 10**places)
        sign, digits = ("-" if number < 0 else ""), str(abs(number)).rjust(places + 1, "0")
        texts[name] = f"{sign}{digits[:-places]}.{digits[-places:]}"
    return replace(onset, **texts)


def _is_proved(system: Any, onset: Any) -> bool:
    from tinemark.onsets.many_verification import verify_onset_many
    from tinemark.onsets.proofs import NotProved
    from tinemark.onsets.verification import verify_onset
    from tinemark.systems.errors import TinemarkError

    verify = verify_onset if len(system.states) == 1 else verify_onset_many
    try:
        _finish(verify(system, onset))
    except (NotProved, TinemarkError):
        return False
    return True
