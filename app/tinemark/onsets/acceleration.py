"""Sequence acceleration: what a sequence tends to, from its first few terms.

All functions take and return `Decimal` lists aligned to the end of the input: the last entry uses the last
terms, the one before it is what the same formula gave one term earlier. They work at the precision of the
caller's decimal context. Where a formula divides by zero, its list ends there (it has no entry).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from decimal import Decimal
from itertools import pairwise

ZERO = Decimal(0)
ONE = Decimal(1)


def wynn_epsilon(terms: Sequence[Decimal]) -> list[list[Decimal]]:
    """Even columns of the epsilon table (Wynn 1956), from order 2 on.

    Column k (from 0) eliminates k + 1 geometric terms and uses 2k + 3 terms of the sequence; the
    first one is Aitken's process (Aitken 1926; Shanks 1955).
    """
    before: list[Decimal] = [ZERO] * (len(terms) + 1)
    now = list(terms)
    columns: list[list[Decimal]] = []
    order = 0
    while len(now) > 1:
        following: list[Decimal] = []
        for i in range(len(now) - 1):
            difference = now[i + 1] - now[i]
            if difference == 0:
                return columns
            following.append(before[i + 1] + ONE / difference)
        before, now = now, following
        order += 1
        if order % 2 == 0:
            columns.append(now)
    return columns


def levin_t(terms: Sequence[Decimal], order: int) -> list[Decimal]:
    """Levin's t transform (Levin 1973) of an order, with the next difference as remainder estimate.

    Uses order + 2 terms for each entry.
    """
    results: list[Decimal] = []
    for start in range(len(terms) - order - 1):
        above = below = ZERO
        for j in range(order + 1):
            remainder = terms[start + j + 1] - terms[start + j]
            if remainder == 0:
                return []
            weight = Decimal((-1) ** j * math.comb(order, j))
            weight *= (Decimal(start + j + 1) / Decimal(start + order + 1)) ** (order - 1)
            above += weight * terms[start + j] / remainder
            below += weight / remainder
        if below == 0:
            return []
        results.append(above / below)
    return results


def eliminate(terms: Sequence[Decimal], rate: Decimal) -> list[Decimal]:
    """Remove one geometric error of known rate per term (Richardson 1911): 0 < abs(rate) < 1."""
    return [(later - rate * earlier) / (ONE - rate) for earlier, later in pairwise(terms)]
