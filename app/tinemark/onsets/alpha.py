"""How a ladder's cycles shrink from level to level: alpha, from its superstable cycles.

At the superstable parameter of level k the cycle passes through the map's turning point x_c, and its nearest
other point lies d_k = f^(p/2)(x_c) - x_c away. The ratios d_k / d_(k+1) tend to -alpha (Feigenbaum 1978), and
what is given here is their magnitude. No class of map is assumed; the corrections that all cascades share
are taken off where the ladder itself tells them:

- Lengths are measured in the map's own terms: near x_c the map is f(x_c) - A*s^z in a smooth coordinate s,
  so distances s follow from the distances one step later, to the power 1/z. In s the map is even, and
  corrections of the rate 1/alpha vanish. The order z is read off the distances.
- Corrections of the rates 1/delta (the parameter is not measured in natural terms) and alpha^-z (nor is s)
  are removed with delta and alpha as the ladder gives them.
- What is left is accelerated by the epsilon algorithm, judged as the limits in `extrapolation` are.
"""

from __future__ import annotations

from collections.abc import Generator, Sequence
from dataclasses import dataclass
from decimal import Context, Decimal, localcontext
from fractions import Fraction
from itertools import pairwise

from tinemark.onsets.acceleration import ONE, eliminate, wynn_epsilon
from tinemark.onsets.extrapolation import most_settled
from tinemark.onsets.ladder_points import Estimate, decimal
from tinemark.onsets.results import Kind, LadderLevel, Status, Step
from tinemark.onsets.scaling import points_of, scaling
from tinemark.systems.system import System

LEAST_LEVELS = 5
"""Superstable cycles, and so ladder levels, below which there is no alpha."""
LONGEST_CYCLE = 2**17
"""Longer superstable cycles are left out: those up to here tell twenty digits of alpha."""
WORKING_DIGITS = 50
HIGHEST_ORDER = 40
ORDER_IS_WHOLE = Decimal("0.05")
"""A measured order further than this from a whole number is not used."""


@dataclass(frozen=True)
class AlphaResult:
    """Alpha of a ladder.

    Attributes
    ----------
    estimate, reason
        Magnitude with an interval of at least 95 % coverage; None, and then why.
    order
        Order of the map's turning point as the cycles show it; None where they do not.
    superstable
        (period, parameter value) of the superstable cycles, level by level.
    """

    estimate: Estimate | None
    reason: str
    order: int | None = None
    superstable: tuple[tuple[int, Fraction], ...] = ()


def alpha_of_ladder(
    system: System, parameter: str, levels: Sequence[LadderLevel]
) -> Generator[Step, None, AlphaResult]:
    """Alpha from the superstable cycles of a ladder.

    Parameters
    ----------
    levels
        Flips of one ladder; its first levels without a gap are used.

    Yields
    ------
    Step
        At safe points, some milliseconds apart; the generator may be dropped at any of them.

    Returns
    -------
    AlphaResult
        As the generator's value. Some six orbits of each level's period are worked out for it.
    """
    if len(system.states) != 1:
        return AlphaResult(None, "alpha is worked out for maps of one state")
    run = _first_levels(levels)
    if len(run) < LEAST_LEVELS:
        need = f"alpha needs at least {LEAST_LEVELS} successive proved levels, the first among them"
        return AlphaResult(None, need)
    # Ball arithmetic only where it is used: the window imports what is above.
    from tinemark.onsets.one_map import one_map
    from tinemark.onsets.superstable import NoSuperstable, Superstable, superstable_cycles

    found: list[Superstable] = []
    flips = [item.onset.value_fraction for item in run]
    reason = ""
    try:
        for item in superstable_cycles(one_map(system, parameter), run[0].onset.period_before, flips):
            if isinstance(item, Superstable):
                found.append(item)
            else:
                share = sum(cycle.period for cycle in found) / (
                    run[0].onset.period_before * 2 ** (len(run) + 1)
                )
                yield Step(f"alpha: superstable cycle {len(found) + 1} of {len(run)}", share)
    except NoSuperstable as error:
        reason = str(error)
    if len(found) < LEAST_LEVELS:
        return AlphaResult(None, reason)
    delta = scaling(points_of(run)).delta
    order, estimate, reason = alpha_of_distances(
        [abs(cycle.distance) for cycle in found], [abs(cycle.folded) for cycle in found], delta
    )
    places = tuple((cycle.period, cycle.parameter) for cycle in found)
    return AlphaResult(estimate, reason, order, places)


def _first_levels(levels: Sequence[LadderLevel]) -> list[LadderLevel]:
    run: list[LadderLevel] = []
    for item in sorted(levels, key=lambda item: item.level):
        sound = item.onset.kind is Kind.FLIP and item.onset.status is Status.PROVED
        if item.level != len(run) + 1 or not sound:
            break
        if item.onset.period_after > LONGEST_CYCLE:
            break
        run.append(item)
    return run


def alpha_of_distances(
    distances: Sequence[Fraction], folded: Sequence[Fraction], delta: Estimate | None
) -> tuple[int | None, Estimate | None, str]:
    """Alpha from the distances of successive superstable cycles.

    Parameters
    ----------
    distances, folded
        Magnitudes of d_k, and of the distances one step of the map later.
    delta
        Where the ladder's ratios tend, if that is known.

    Returns
    -------
    order, estimate, reason
        Order of the turning point, None where it is not told; alpha; None where there is none, and why.
    """
    with localcontext(Context(prec=WORKING_DIGITS)):
        near, later = ([decimal(value) for value in values] for values in (distances, folded))
        if min(near) <= 0 or min(later) <= 0:
            return None, None, "two points of a superstable cycle are not told apart"
        ratios = [a / b for a, b in pairwise(near)]
        if ratios[-1] <= 1:
            return None, None, "the cycles do not shrink from level to level"
        order = _order(ratios[-1], later[-2] / later[-1])
        if order is not None and order < 2:
            return order, None, "the map has no smooth turning point on the cycles"
        table = {"ratio": ratios} | _columns("ratio", ratios)
        if order is not None:
            smooth = [(a / b) ** (ONE / order) for a, b in pairwise(later)]
            table |= _corrected(smooth, order, delta)
        # One move alone can be small by luck; sequences with two are preferred wherever there are some.
        estimate = most_settled({name: terms for name, terms in table.items() if len(terms) > 2} or table)
        if estimate is None or estimate.lower <= 1:
            return order, None, "too few cycles are known to say where the ratios of their sizes tend"
        return order, estimate, ""


def _order(ratio: Decimal, folded_ratio: Decimal) -> int | None:
    measured = folded_ratio.ln() / ratio.ln()
    order = int(measured.to_integral_value())
    # Both ratios still converge, so a wide miss is as telling as a close one.
    return order if abs(measured - order) <= ORDER_IS_WHOLE * order and order <= HIGHEST_ORDER else None


def _corrected(smooth: list[Decimal], order: int, delta: Estimate | None) -> dict[str, list[Decimal]]:
    table = {"even": smooth} | _columns("even", smooth)
    if delta is None or delta.value_fraction <= 1:
        return table
    rate = ONE / Decimal(delta.value)
    first = eliminate(smooth, rate)
    second = eliminate(first, smooth[-1] ** -order)
    for name, terms in (("even, delta", first), ("even, delta, alpha", second)):
        table |= {name: terms} | _columns(name, terms)
    return table


def _columns(name: str, terms: Sequence[Decimal]) -> dict[str, list[Decimal]]:
    return {f"{name}, epsilon {2 * k}": column for k, column in enumerate(wynn_epsilon(terms), 1)}
