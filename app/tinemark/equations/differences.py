"""Derivatives of a return map by differences, for rates that jump.

Variational equations carry a derivative through smooth rates and across kinks, but not across a jump of
the rates, where it changes at once (Aizerman and Gantmakher 1958). The map itself stays smooth, so its
differences give the derivative, with fewer digits.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable

import numpy as np
from numpy.typing import NDArray

from tinemark.systems.expression import Call, Cond, Expr, walk

Floats = NDArray[np.float64]

SHARE = 3e-4
"""Difference as a share of a state's size; errors of the map show a few thousand times larger."""

_PLACES = np.array([-2.0, -1.0, 1.0, 2.0])
_WEIGHTS = np.array([1.0, -8.0, 8.0, -1.0]) / 12.0


def may_jump(rates: Iterable[Expr]) -> bool:
    """Whether rates hold what can jump: a condition, a floor or an angle."""
    return any(
        isinstance(node, Cond) or (isinstance(node, Call) and node.fn in ("floor", "atan2"))
        for rate in rates
        for node in walk(rate)
    )


def slopes(
    function: Callable[[Floats, Floats], Floats], points: Floats, swept: Floats, scales: Floats, across: float
) -> tuple[Floats, Floats]:
    """Derivatives by central differences of fourth order.

    Parameters
    ----------
    function
        f(points (m, n), swept (m,)) -> (m, k).
    points, swept
        (p, n) and (p,).
    scales, across
        Sizes of the states, (n,), and of the parameter.

    Returns
    -------
    (p, k, n) and (p, k): the derivatives in the states, and in the parameter.
    """
    count, n = points.shape
    lengths = SHARE * np.array([*scales, across])
    moves = np.zeros((4 * (n + 1), n + 1))
    for axis in range(n + 1):
        moves[4 * axis : 4 * axis + 4, axis] = _PLACES * lengths[axis]
    # One call: all points, each moved every way.
    whole = np.hstack([points, swept[:, None]])[:, None, :] + moves
    flat = whole.reshape(-1, n + 1)
    found = function(np.ascontiguousarray(flat[:, :n]), np.ascontiguousarray(flat[:, n]))
    table = found.reshape(count, n + 1, 4, -1)
    derivatives = np.einsum("pask,s->pak", table, _WEIGHTS) / lengths[None, :, None]
    return derivatives[:, :n].transpose(0, 2, 1).copy(), derivatives[:, n].copy()
