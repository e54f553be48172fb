"""The derivatives of a map of several states worked out one by one, with a chance to cancel between them.

Dense formulas of five or six states take seconds of algebra when they are first looked at. `derivative` keeps
what it has worked out, so whoever asks for the same derivatives afterwards has them at once.
"""

from __future__ import annotations

from collections.abc import Generator, Iterator
from functools import lru_cache

from tinemark.onsets.many_map import ManyMap
from tinemark.onsets.results import Step
from tinemark.systems.expression import ZERO, Expr

WORDS = {1: "first", 2: "second", 3: "third"}


def worked_out(many: ManyMap, order: int) -> Generator[Step, None, None]:
    """Work out all partial derivatives of a map up to an order (at most 3) that are not known yet.

    Yields
    ------
    Step
        After each derivative, with the share that is done.
    """
    done = _orders(many)
    for each in range(1, order + 1):
        if each in done or many.own_evaluators() is not None:
            continue
        total = max(1, _count(many.size, each) * many.size)
        for number, _ in enumerate(_derivatives(many, each)):
            share = min(1.0, (number + 1) / total)
            yield Step(f"working out the {WORDS[each]} derivatives of the formulas", share)
        done.add(each)


@lru_cache(maxsize=64)
def _orders(_many: ManyMap) -> set[int]:
    """Orders that are worked out: filled in as they are."""
    return set()


def _count(size: int, order: int) -> int:
    """Partial derivatives of one formula that are asked for at an order."""
    states = {1: size, 2: size * (size + 1) // 2, 3: size * (size + 1) * (size + 2) // 6}
    return states[order] + {1: 1, 2: size, 3: 0}[order]


def _derivatives(many: ManyMap, order: int) -> Iterator[Expr]:
    """The derivatives of an order, by the same steps as whoever uses them takes."""
    from tinemark.systems.derivatives import derivative

    for formula in many.formulas:
        firsts = [derivative(formula, state) for state in many.states] if order > 1 else []
        if order == 1:
            for name in many.names:
                yield derivative(formula, name)
            continue
        for i, first in enumerate(firsts):
            for j in range(i, many.size):
                second = derivative(first, many.states[j])
                if order == 2:
                    yield second
                elif second != ZERO:
                    for k in range(j, many.size):
                        yield derivative(second, many.states[k])
            if order == 2:
                yield derivative(first, many.parameter)
