"""Where a ladder is going: its limit, the limit of its ratios and its next onsets, with uncertainties.

Method. Onset n of a doubling cascade is limit + A*delta**-n + smaller geometric terms (Feigenbaum 1978), so
the ratios tend to delta with errors that first shrink by about delta a level. Several accelerated sequences
of the same levels are formed, no class of map assumed. Each is judged by its own last move (it must have
settled), the one that moved least gives the value, and the uncertainty is `SAFETY` times the larger of its
move and its distance from the runner-up, plus what the onsets' own uncertainties do to the chosen formula.
The safety factors were set on 54 ladders of 28 maps, superstable ones included, so that every interval from
level 4 to level 12 holds the true number with room to spare; tests repeat that on the smooth built-in maps.
The intervals hold if the cascade goes on as it has begun. A map that nearly preserves areas begins in one
class and ends in another, so its first four levels can mislead any method that sees only them.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from contextlib import AbstractContextManager
from dataclasses import dataclass, replace
from decimal import Context, Decimal, DivisionByZero, InvalidOperation, Overflow, localcontext
from fractions import Fraction
from itertools import pairwise

from tinemark.onsets.acceleration import ONE, ZERO, eliminate, levin_t, wynn_epsilon
from tinemark.onsets.class_values import CLASSES, CascadeClass
from tinemark.onsets.known_rates import known_rate_table
from tinemark.onsets.ladder_points import COVERAGE, Estimate, LadderPoint, decimal, estimate

SAFETY = Decimal(6)
"""Factor between a sequence's last move and the uncertainty, from five levels on."""
SAFETY_FOUR_LEVELS = Decimal(5)
"""The same for the limit from four levels, where two formulas exist and neither has a history."""
SAFETY_TWO_RATIOS = Decimal("2.5")
"""Factor between the difference of two ratios and the uncertainty of where they tend."""
MOVE_MEMORY = Decimal(20)
"""A last move counts as at least one part in this of the move before: one lucky agreement proves nothing."""
LEAST_CONTRACTION = Decimal("0.15")
"""Moves of a limit are taken to go on shrinking as they did, by no more than this factor a level. The
ratios of maps with a high order converge unevenly, so for delta no shrinking is counted on."""
PREDICTED_LEVELS = 3
LEAST_LEVELS_FOR_RATES = 7
"""Levels from which on the known rates of a class are removed, where the ratios tell one."""
LEVELS_FOR_CONTRACTION, HIGHEST_STEADY_ORDER = 10, 4
"""Where what is left of ratios without their known rates is counted on to go on shrinking as it did."""
GAPS_DO_NOT_SHRINK = "the last gaps do not shrink, so no limit is in sight"

_Table = Mapping[str, Sequence[Decimal]]


@dataclass(frozen=True)
class Extrapolation:
    """What a run of levels says of its continuation; None where nothing can be said, with reasons.

    Attributes
    ----------
    predictions
        (level, estimate) of the next onsets, nearest first.
    """

    limit: Estimate | None
    limit_reason: str
    delta: Estimate | None
    delta_reason: str
    predictions: tuple[tuple[int, Estimate], ...]


def usable_run(points: Sequence[LadderPoint], told_apart: Sequence[bool]) -> tuple[LadderPoint, ...]:
    """The last stretch of successive levels whose gaps are told apart from zero.

    Parameters
    ----------
    points
        Sorted by level.
    told_apart
        For each pair of neighbours in `points`, whether their levels follow each other and their gap is
        known.
    """
    runs: list[list[LadderPoint]] = [[]]
    for place, point in enumerate(points):
        if place and not told_apart[place - 1]:
            runs.append([])
        runs[-1].append(point)
    # The highest stretch that says anything: below three levels there is no ratio.
    useful = [run for run in runs if len(run) >= 3]
    return tuple(useful[-1] if useful else runs[-1])


def extrapolate(run: Sequence[LadderPoint]) -> Extrapolation:
    """Limit, delta and next onsets from successive levels (all gaps told apart from zero)."""
    if len(run) < 3:
        known = "no level is" if not run else "one level is" if len(run) == 1 else "two successive levels are"
        reason = f"{known} known; a limit needs at least three in succession"
        return Extrapolation(None, reason, None, reason, ())
    with _working(run):
        values = [decimal(point.value) for point in run]
        last = _ratios(values)[-1]
        if last <= 1:
            reason = GAPS_DO_NOT_SHRINK
            return Extrapolation(None, reason, None, reason, ())
        if not _shrinks_for_certain(run, last):
            reason = "the uncertainties of the onsets leave open whether the gaps shrink"
            return Extrapolation(None, reason, None, reason, ())
        if len(run) == 3:
            return _from_one_ratio(run, values, last)
        if _ratios(values)[-2] <= 1:
            reason = "the gaps have only begun to shrink, so a limit would be a guess"
            return Extrapolation(None, reason, None, reason, ())
        return _from_ratios(run, values)


def limit_of_class(run: Sequence[LadderPoint], known: CascadeClass) -> Estimate | None:
    """The limit when the class is taken for granted: its delta is used as the known first rate.

    Tighter than the limit of `extrapolate` where few levels are known, and worth what the assumption is
    worth. None below four levels.
    """
    if len(run) < 4:
        return None
    with _working(run):
        values = [decimal(point.value) for point in run]
        rate = ONE / Decimal(known.delta)

        def candidates(terms: Sequence[Decimal]) -> _Table:
            first = eliminate(terms, rate)
            table = {"rate": first, "rate, squared rate": eliminate(first, rate * rate)}
            return _with_epsilon(table, "rate", first)

        chosen = _choose(values, run, candidates, LEAST_CONTRACTION)
        if chosen is None:
            return None
        off = abs(values[-1] - values[-2]) * Decimal(known.delta_uncertainty)
        return replace(chosen, truncation=chosen.truncation + off).result()


def most_settled(table: _Table) -> Estimate | None:
    """Where the sequences of a table tend, judged as in this module; None where none has a history.

    Runs in the caller's decimal context, for terms whose own errors do not count.
    """
    chosen = _choose((), (), lambda _: table, ONE)
    return None if chosen is None else chosen.result()


@dataclass(frozen=True)
class _Choice:
    name: str
    value: Decimal
    truncation: Decimal
    noise: Decimal

    @property
    def uncertainty(self) -> Decimal:
        return self.truncation + self.noise

    def result(self) -> Estimate:
        return estimate(Fraction(self.value), Fraction(self.uncertainty), COVERAGE)


def _from_one_ratio(run: Sequence[LadderPoint], values: Sequence[Decimal], ratio: Decimal) -> Extrapolation:
    # One ratio has nothing to be compared with: all that is taken from it is the size of what is left.
    gap = values[-1] - values[-2]
    rest = gap / (ratio - 1)
    following = gap / ratio
    noise = _noise(run, values, lambda terms: terms[-1] + _rest(terms))
    next_noise = _noise(run, values, lambda terms: terms[-1] + (terms[-1] - terms[-2]) / _ratios(terms)[-1])
    limit = estimate(Fraction(values[-1] + rest), Fraction(abs(rest) + noise), COVERAGE)
    prediction = estimate(Fraction(values[-1] + following), Fraction(abs(following) + next_noise), COVERAGE)
    reason = "one ratio is known; where the ratios tend needs at least two"
    return Extrapolation(limit, "", None, reason, ((run[-1].level + 1, prediction),))


def _from_ratios(run: Sequence[LadderPoint], values: Sequence[Decimal]) -> Extrapolation:
    if len(run) == 4:
        delta = _delta_of_two_ratios(run, values)
        limit = _limit_of_four_levels(run, values)
    else:
        chosen = _choose(values, run, _delta_table, ONE)
        chosen_limit = _choose(values, run, _limit_table, LEAST_CONTRACTION)
        if chosen is None or chosen_limit is None:
            reason = "the onsets agree to all their digits, so nothing is left to extrapolate"
            return Extrapolation(None, reason, None, reason, ())
        delta, limit = chosen, chosen_limit
    if delta.value <= 1:
        reason = "the ratios differ too much to say where they tend"
        return Extrapolation(limit.result(), "", None, reason, ())
    # How ratios go on from here is modelled roughly, and a rough delta says how roughly.
    predictions = _predictions(run, values, delta)
    return Extrapolation(limit.result(), "", _of_known_class(values, run, delta).result(), "", predictions)


def _of_known_class(values: Sequence[Decimal], run: Sequence[LadderPoint], delta: _Choice) -> _Choice:
    """Delta again, with the rates of the one class that it tells; as it was where that does not help."""
    low, high = Fraction(delta.value - delta.uncertainty), Fraction(delta.value + delta.uncertainty)
    told = [item for item in CLASSES if item.lies_within(low, high)]
    if len(run) < LEAST_LEVELS_FOR_RATES or len(told) != 1 or not told[0].rates:
        return delta

    def table_of(terms: Sequence[Decimal]) -> _Table:
        return known_rate_table(_ratios(terms), told[0])

    steady = len(run) >= LEVELS_FOR_CONTRACTION and told[0].order <= HIGHEST_STEADY_ORDER
    finer = _choose(values, run, table_of, LEAST_CONTRACTION if steady else ONE)
    if finer is None or finer.uncertainty >= delta.uncertainty:
        return delta
    # Both intervals hold the true number, so they meet; where they do not, neither is to be trusted much.
    return finer if abs(finer.value - delta.value) <= finer.uncertainty + delta.uncertainty else delta


def _delta_of_two_ratios(run: Sequence[LadderPoint], values: Sequence[Decimal]) -> _Choice:
    def value_of(terms: Sequence[Decimal]) -> Decimal:
        return _self_consistent(_ratios(terms))[-1]

    ratios = _ratios(values)
    spread = SAFETY_TWO_RATIOS * abs(ratios[-1] - ratios[-2])
    # Two ratios that happen to agree say less than that: the next may still move by a tenth, as where a map
    # that nearly preserves areas passes from one class to another.
    truncation = max(spread, ratios[-1] / 10)
    return _Choice("two ratios", value_of(values), truncation, _noise(run, values, value_of))


def _limit_of_four_levels(run: Sequence[LadderPoint], values: Sequence[Decimal]) -> _Choice:
    columns = wynn_epsilon(values)
    modelled = _modelled_limit(values)
    aitken = columns[0] if columns else [modelled]
    truncation = SAFETY_FOUR_LEVELS * abs(modelled - aitken[-1])
    truncation = max(truncation, abs(aitken[-1] - aitken[0]) / 20, abs(_rest(values)) / 5)
    return _Choice("ratio model", modelled, truncation, _noise(run, values, _modelled_limit))


def _choose(
    values: Sequence[Decimal],
    run: Sequence[LadderPoint],
    table_of: Callable[[Sequence[Decimal]], _Table],
    least_contraction: Decimal,
) -> _Choice | None:
    """The candidate with the least uncertainty: its settled move and what the onsets' noise does to it."""
    table = table_of(values)
    moved = [(point, [table_of(terms) for terms in both]) for point, both in _moved(run, values)]
    noises: dict[str, Decimal] = {}
    for name, sequence in table.items():
        if len(sequence) < 2 or any(not tables.get(name) for _, both in moved for tables in both):
            continue  # no history, or a moved onset leaves the formula undefined
        noises[name] = _combined(
            (point, max(abs(tables[name][-1] - sequence[-1]) for tables in both)) for point, both in moved
        )
    ranked = sorted(
        (_last_move(table[name], least_contraction) * SAFETY + noise, name) for name, noise in noises.items()
    )
    if not ranked:
        return None
    name = ranked[0][1]
    value = table[name][-1]
    truncation = _last_move(table[name], least_contraction)
    if len(ranked) > 1:
        truncation = max(truncation, abs(value - table[ranked[1][1]][-1]))
    return _Choice(name, value, SAFETY * truncation, noises[name])


def _last_move(sequence: Sequence[Decimal], least_contraction: Decimal) -> Decimal:
    """How far a sequence may still be off: its last move, times how its moves shrink where that counts."""
    move = abs(sequence[-1] - sequence[-2])
    if len(sequence) < 3:
        return move
    before = abs(sequence[-2] - sequence[-3])
    if before == 0:
        return move
    contraction = min(max(move / before, least_contraction), ONE)
    return max(move, before / MOVE_MEMORY) * contraction


def _delta_table(values: Sequence[Decimal]) -> dict[str, list[Decimal]]:
    ratios = _ratios(values)
    first = _self_consistent(ratios)
    table = {"ratio": ratios, "rate": first}
    table = _with_epsilon(table, "ratio", ratios)
    return _with_epsilon(table, "rate", first)


def _limit_table(values: Sequence[Decimal]) -> dict[str, list[Decimal]]:
    modelled = [_modelled_limit(values[:count]) for count in range(4, len(values) + 1)]
    table = {"ratio model": modelled}
    table = _with_epsilon(table, "onsets", values)
    table = _with_epsilon(table, "ratio model", modelled)
    for order in (2, 3):
        levin = levin_t(values, order)
        if levin:
            table[f"onsets, Levin {order}"] = levin
    return table


def _with_epsilon(
    table: dict[str, list[Decimal]], name: str, terms: Sequence[Decimal]
) -> dict[str, list[Decimal]]:
    columns = {f"{name}, epsilon {2 * k}": column for k, column in enumerate(wynn_epsilon(terms), 1)}
    return {**table, **columns}


def _ratios(values: Sequence[Decimal]) -> list[Decimal]:
    gaps = [b - a for a, b in pairwise(values)]
    return [a / b for a, b in pairwise(gaps)]


def _rest(values: Sequence[Decimal]) -> Decimal:
    """What is left to the limit if the last ratio stays (Aitken's remainder)."""
    return (values[-1] - values[-2]) / (_ratios(values)[-1] - 1)


def _self_consistent(ratios: Sequence[Decimal]) -> list[Decimal]:
    """Ratios with their leading error removed; its rate is 1/delta, with the ratio itself for delta."""
    return [
        later + (later - earlier) / (later - 1) if later > 1 else later for earlier, later in pairwise(ratios)
    ]


def _modelled_limit(values: Sequence[Decimal]) -> Decimal:
    """Sum of the gaps to come, with ratios that go to their self-consistent limit by the factor 1/delta."""
    ratios = _ratios(values)
    delta = _self_consistent(ratios)[-1]
    if delta <= 1:
        delta = max(ratios[-1], Decimal("1.01"))
    off = ratios[-1] - delta
    gap, total = values[-1] - values[-2], values[-1]
    smallest = abs(gap).scaleb(-WORKING_PLACES)
    for _ in range(MOST_FOLLOWED):
        if abs(gap * off) <= smallest * delta:
            break
        off /= delta
        gap /= max(delta + off, Decimal("1.001"))
        total += gap
    return total + gap / (delta - 1)


MOST_FOLLOWED = 60
"""Modelled ratios are followed one by one at most so far; then they count as settled."""
WORKING_PLACES = 30
"""Decimal places, relative to the last gap, to which modelled ratios are followed."""


def _predictions(
    run: Sequence[LadderPoint], values: Sequence[Decimal], delta: _Choice
) -> tuple[tuple[int, Estimate], ...]:
    """Next onsets from ratios that go on towards delta."""
    spread = _ratio_spread(values, delta)
    results = []
    for ahead in range(1, PREDICTED_LEVELS + 1):

        def onset(terms: Sequence[Decimal], shift: Decimal = ZERO, ahead: int = ahead) -> Decimal:
            return _ahead(terms, delta.value, shift, ahead)

        value = onset(values)
        truncation = max(abs(onset(values, spread) - value), abs(onset(values, -spread) - value))
        total = truncation + _noise(run, values, onset)
        results.append((run[-1].level + ahead, estimate(Fraction(value), Fraction(total), COVERAGE)))
    return tuple(results)


def _ratio_spread(values: Sequence[Decimal], delta: _Choice) -> Decimal:
    """How far the next ratios may lie from the model: delta's uncertainty and the rate's."""
    ratios = _ratios(values)
    off, before = ratios[-1] - delta.value, ratios[-2] - delta.value
    seen = max(min(off / before, Decimal("0.7")), Decimal("-0.7")) if before else ZERO
    return delta.uncertainty + SAFETY * abs(off * (seen - ONE / delta.value)) + abs(off) / 50


def _ahead(values: Sequence[Decimal], delta: Decimal, shift: Decimal, ahead: int) -> Decimal:
    off = _ratios(values)[-1] - delta
    gap, total = values[-1] - values[-2], values[-1]
    for _ in range(ahead):
        off /= delta
        gap /= max(delta + off + shift, ONE)
        total += gap
    return total


def _shrinks_for_certain(run: Sequence[LadderPoint], ratio: Decimal) -> bool:
    a, b, c = run[-3:]
    after = abs(decimal(c.value - b.value))
    widths = [decimal(2 * point.standard_uncertainty) for point in (a, b, c)]
    off = (widths[0] ** 2 + (widths[1] * (1 + ratio)) ** 2 + (widths[2] * ratio) ** 2).sqrt() / after
    return ratio - off > 1


def _noise(
    run: Sequence[LadderPoint], values: Sequence[Decimal], value_of: Callable[[Sequence[Decimal]], Decimal]
) -> Decimal:
    """What the onsets' uncertainties do to a formula, at 95 % coverage or more."""
    middle = value_of(values)
    return _combined(
        (point, max(abs(value_of(terms) - middle) for terms in both)) for point, both in _moved(run, values)
    )


def _moved(
    run: Sequence[LadderPoint], values: Sequence[Decimal]
) -> Iterator[tuple[LadderPoint, tuple[list[Decimal], list[Decimal]]]]:
    """The values with one onset moved both ways by its whole uncertainty, so that curvature counts."""
    for place, point in enumerate(run):
        step = decimal(point.half_width if point.is_proved else 2 * point.standard_uncertainty)
        if step:
            head, tail = values[:place], values[place + 1 :]
            yield point, ([*head, values[place] + step, *tail], [*head, values[place] - step, *tail])


def _combined(moves: Iterable[tuple[LadderPoint, Decimal]]) -> Decimal:
    """Enclosures add in magnitude, standard uncertainties (here doubled) in quadrature (JCGM 100, 5.1)."""
    enclosed, squares = ZERO, ZERO
    for point, move in moves:
        if point.is_proved:
            enclosed += move
        else:
            squares += move**2
    return enclosed + squares.sqrt()


def _working(run: Sequence[LadderPoint]) -> AbstractContextManager[Context]:
    """A decimal context of this block alone, wide enough for the digits of the onsets."""
    digits = max((len(str(point.value.denominator)) for point in run), default=0)
    context = Context(prec=max(70, min(digits, 250) + 40), traps=[DivisionByZero, InvalidOperation, Overflow])
    return localcontext(context)
