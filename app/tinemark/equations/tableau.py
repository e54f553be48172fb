"""Coefficients of the embedded Runge-Kutta pairs, taken from SciPy, which holds them as data.

The pair 8(5,3) of Dormand and Prince in the form of Hairer, Norsett and Wanner (1993, section II.5; Prince
and Dormand 1981, J. Comput. Appl. Math. 7:67), whose error is estimated from two embedded solutions, and
the pair 5(4) of Dormand and Prince (1980, J. Comput. Appl. Math. 6:19), which serves as a second opinion.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum
from functools import cache

Row = tuple[tuple[int, float], ...]
"""Terms of a combination of stages: (stage, weight), those of weight zero left out."""


class Method(Enum):
    """A pair of Runge-Kutta formulas; the value is its name."""

    EIGHT = "Dormand-Prince 8(5,3)"
    FIVE = "Dormand-Prince 5(4)"


@dataclass(frozen=True)
class Tableau:
    """An explicit pair.

    Attributes
    ----------
    nodes
        Where each stage lies in the step, from 0 to 1.
    stages
        Terms that lead to each stage; the first has none.
    weights
        Terms of the step itself.
    errors
        Terms of the error estimates: the fifth- and the third-order one for 8(5,3), one for 5(4). Stage
        number `len(stages)` is the rate at the new point.
    order
        Order of the error estimate in the step, by which step control acts.
    """

    nodes: tuple[float, ...]
    stages: tuple[Row, ...]
    weights: Row
    errors: tuple[Row, ...]
    order: int

    @property
    def count(self) -> int:
        """Number of stages."""
        return len(self.stages)


@cache
def tableau(method: Method) -> Tableau:
    """The coefficients of a method."""
    from scipy.integrate import DOP853, RK45

    if method is Method.EIGHT:
        return _tableau(DOP853.A, DOP853.B, DOP853.C, (DOP853.E5, DOP853.E3), 8)
    return _tableau(RK45.A, RK45.B, RK45.C, (RK45.E,), 5)


def _tableau(a: object, b: object, c: object, errors: tuple[object, ...], order: int) -> Tableau:
    import numpy as np

    def row(values: object) -> Row:
        numbers = np.asarray(values, dtype=float)
        return tuple((int(place), float(numbers[place])) for place in np.flatnonzero(numbers))

    table = np.asarray(a, dtype=float)
    count = len(np.asarray(b))
    return Tableau(
        nodes=tuple(float(value) for value in np.asarray(c, dtype=float)[:count]),
        stages=tuple(row(table[place, :place]) for place in range(count)),
        weights=row(b),
        errors=tuple(row(values) for values in errors),
        order=order,
    )
