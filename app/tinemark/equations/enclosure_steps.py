"""One rigorous Taylor step: images and derivatives of a whole box of starts.

Polynomials are those of the exact middle; what is left out, and what other starts of the box change, is
bounded by Cauchy's estimates. The box is carried in a frame that a QR factorisation turns along with the flow
(Lohner 1987), in mean-value form, so it grows as the flow does and no faster.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from flint import arb, arb_mat

from tinemark.equations.enclosure_bound import Bound
from tinemark.equations.series import value_at, working
from tinemark.equations.taylor_arc import LOW_BITS, Arc, LowArc

LOW_ORDER = 26


@dataclass(frozen=True)
class Set:
    """A box of states in a frame: middle + basis * offset.

    Attributes
    ----------
    middle
        Exact balls.
    basis, offset
        Exact square matrix, and a column of balls around zero.
    """

    middle: list[Any]
    basis: Any
    offset: Any

    def spread(self) -> list[Any]:
        """Half-width of each state."""
        wide = self.basis * self.offset
        return [wide[i, 0].abs_upper() for i in range(len(self.middle))]

    def hull(self) -> list[Any]:
        """A ball for each state."""
        wide = self.basis * self.offset
        return [m + wide[i, 0] for i, m in enumerate(self.middle)]


@dataclass(frozen=True)
class Derivatives:
    """Derivatives of the flow so far at all starts of the box, carried in the frame of the set.

    Attributes
    ----------
    first
        (n, n + 1): in the start's states and in the parameter, in the frame.
    second
        (n, n + 1): derivative of the image of a direction, in the frame; None without one.
    """

    first: Any
    second: Any | None


def set_of(box: Sequence[Any]) -> Set:
    """A box of balls as a set."""
    n = len(box)
    return Set(
        [value.mid() for value in box],
        arb_mat(n, n, [int(i == j) for i in range(n) for j in range(n)]),
        arb_mat(n, 1, [arb(0, value.rad()) for value in box]),
    )


def turn_over(arc: Arc, bound: Bound, time: Any, order: int, spread: Sequence[Any], spread_r: Any) -> Any:
    """Derivative of the step in its start, for all starts of the box, at a ball of times."""
    n = arc.size
    rest = bound.rest(time, order)
    entries = []
    for i in range(n):
        for k in range(n):
            slack = bound.first(i, k) * rest + _moved(bound, i, (k,), spread, spread_r)
            entries.append(value_at(arc.turn[i][k], time) + arb(0, slack.abs_upper()))
    return arb_mat(n, n, entries)


def slope_over(
    low: LowArc, slope: Sequence[Any | None], bound: Bound, time: Any, spread: Sequence[Any], spread_r: Any
) -> Any:
    """Derivative of the step in the parameter, likewise."""
    n = low.arc.size
    rest = bound.rest(time, low.length)
    entries = []
    for i in range(n):
        slack = bound.first(i, n) * rest + _moved(bound, i, (n,), spread, spread_r)
        entries.append(_value(slope[i], time) + arb(0, slack.abs_upper()))
    return arb_mat(n, 1, entries)


def bend_over(
    low: LowArc,
    slope: Sequence[Any | None],
    vector: Sequence[Any],
    bound: Bound,
    time: Any,
    spread: Sequence[Any],
    spread_r: Any,
) -> Any:
    """Derivative of (derivative of the step along a vector) in start and parameter, (n, n + 1)."""
    n = low.arc.size
    columns = low.bent(vector, slope)
    rest = bound.rest(time, low.length)
    sizes = [value.abs_upper() for value in vector]
    entries = []
    for i in range(n):
        for k in range(n + 1):
            slack = arb(0)
            for at, size in enumerate(sizes):
                # A second derivative is at most 2 b / (c c'), a third 6 b / (c c' c'').
                slack += size * (
                    2 * bound.first(i, k) / bound.rooms[at] * rest
                    + _moved(bound, i, (k, at), spread, spread_r)
                )
            entries.append(_value(columns[k][i], time) + arb(0, slack.abs_upper()))
    return arb_mat(n, n + 1, entries)


def curve_over(
    low: LowArc,
    first: Sequence[Any],
    second: Sequence[Any],
    bound: Bound,
    time: Any,
    spread: Sequence[Any],
    spread_r: Any,
) -> tuple[Any, Any]:
    """What a curve of starts with these coefficients of e and e^2 adds to those of e^2 and e^3 in the step.

    See `LowArc.curved`; columns.
    """
    n = low.arc.size
    rest = bound.rest(time, low.length)
    # The curve stays within half of the room for |e| up to this; the other half is for the box.
    share = _share((first, second), bound)
    drift = sum((s / room for s, room in zip(spread, bound.room, strict=True)), spread_r / bound.room_r)
    after = []
    for power, series in enumerate(low.curved(first, second), start=2):
        slack = (rest + 2 * drift) / share**power
        row = [
            value_at(part.coeffs(), time) + arb(0, (b * slack).abs_upper())
            for part, b in zip(series, bound.reach, strict=True)
        ]
        after.append(arb_mat(n, 1, row))
    return after[0], after[1]


def _share(jets: Sequence[Sequence[Any]], bound: Bound) -> Any:
    """An exact size of e for which the curve stays within half of the room."""
    shares = []
    for power, jet in enumerate(jets, start=1):
        for value, room in zip(jet, bound.room, strict=True):
            size = float(value.abs_upper())
            if size > 0:
                shares.append((float(room) / 4.1 / size) ** (1 / power))
    share = arb(min(shares, default=1.0))
    for i, room in enumerate(bound.room):
        taken = sum((jet[i].abs_upper() * share**power for power, jet in enumerate(jets, start=1)), arb(0))
        if not taken <= room / 2:
            raise ArithmeticError("a variation of the flow is too large")
    return share


def _moved(bound: Bound, i: int, orders: tuple[int, ...], spread: Sequence[Any], spread_r: Any) -> Any:
    """How much a derivative of state i may differ between the middle and any point of the box."""
    factorial = 6 if len(orders) == 2 else 2
    size = bound.reach[i] * factorial
    for k in orders:
        size = size / bound.rooms[k]
    return size * sum((s / room for s, room in zip((*spread, spread_r), bound.rooms, strict=True)), arb(0))


def _value(series: Any | None, time: Any) -> Any:
    return arb(0) if series is None else value_at(series.coeffs(), time)


def image_over(arc: Arc, bound: Bound, time: Any, order: int) -> list[Any]:
    """The middle's image at a ball of times."""
    rest = bound.rest(time, order)
    return [
        value_at(row, time) + arb(0, (rest * b).abs_upper())
        for row, b in zip(arc.x, bound.reach, strict=True)
    ]


def moved_set(before: Set, image: Sequence[Any], turn: Any, slope: Any, spread_r: Any) -> tuple[Set, Any]:
    """The set after a step, in a frame turned along, and the inverse of that frame."""
    n = len(image)
    moved = turn * before.basis
    floats = np.array([[float(moved[i, j]) for j in range(n)] for i in range(n)])
    if not np.isfinite(floats).all():
        raise ArithmeticError("a derivative of the flow is not finite")
    basis = arb_mat(n, n, [float(value) for value in np.linalg.qr(floats)[0].ravel()])
    inverse = basis.inv()
    middle = [value.mid() for value in image]
    rounding = arb_mat(n, 1, [value - m for value, m in zip(image, middle, strict=True)])
    offset = (inverse * moved) * before.offset + inverse * rounding
    if spread_r > 0:
        offset = offset + (inverse * slope) * arb(0, spread_r)
    return Set(middle, basis, offset), inverse


def low_arc(arc: Arc) -> LowArc:
    """The variations of an arc to few bits."""
    with working(LOW_BITS, LOW_ORDER):
        return LowArc(arc, LOW_ORDER)
