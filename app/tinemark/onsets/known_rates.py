"""Delta from ratios whose errors shrink at the rates of a known class.

Ratio n of a cascade differs from delta by a sum of geometric terms. Their rates are 1/delta, the further
eigenvalues of the doubling operator at its fixed point that no change of coordinates makes (Feigenbaum
1978; Derrida, Gervois and Pomeau 1979), and all products of these. Once the class is told, each known rate
costs one ratio to remove (Richardson 1911), where the epsilon algorithm, which has to find it, needs two.
What is removed rests on the class; what comes out does not: the ratios of another cascade would not settle,
and how they settle is all that the uncertainty is made of.
"""

from __future__ import annotations

from collections.abc import Sequence
from decimal import Decimal
from functools import lru_cache

from tinemark.onsets.acceleration import ONE, eliminate
from tinemark.onsets.class_values import CascadeClass

MOST_FACTORS = 5
"""Rates are products of at most so many."""
LEAST_RATE = Decimal("1e-4")
MOST_REMOVED = 9
LEAST_LEFT = 3
"""Terms that are left of a sequence that is judged: two moves, so that the last can be compared."""


def known_rate_table(ratios: Sequence[Decimal], known: CascadeClass) -> dict[str, list[Decimal]]:
    """The ratios with one known rate after the other removed, by name."""
    table: dict[str, list[Decimal]] = {}
    for order, rates in _orders(known).items():
        terms = list(ratios)
        for count, rate in enumerate(rates[:MOST_REMOVED], 1):
            terms = eliminate(terms, rate)
            if len(terms) < LEAST_LEFT:
                break
            table[f"{order}, {count}"] = terms
    return table


@lru_cache(maxsize=32)
def _orders(known: CascadeClass) -> dict[str, tuple[Decimal, ...]]:
    """Rates in the orders in which they are removed: by size, or those of the parameter's curve first."""
    first = ONE / Decimal(known.delta)
    base = [first, *map(Decimal, known.rates)]
    products = {Decimal(1)}
    for _ in range(MOST_FACTORS):
        products |= {product * rate for product in products for rate in base}
    by_size = sorted(
        (rate for rate in products if LEAST_RATE < abs(rate) < 1), key=lambda rate: (-abs(rate), rate)
    )
    powers = [first, first**2, first**3]
    return {
        "known rates": tuple(by_size),
        "known rates, powers first": (*powers, *(rate for rate in by_size if rate not in powers)),
    }
