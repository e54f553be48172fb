"""From an exact view to doubles: column parameters, bins, starts, and where doubles give out."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from tinemark.density.request import PictureRequest, SweepRule
from tinemark.systems.system import State, System


def column_parameters(request: PictureRequest) -> NDArray[np.float64]:
    """Swept parameter at the middle of each column, each rounded once from its exact value.

    Returns
    -------
    float64, shape (columns,).

    Raises
    ------
    OverflowError
        The view lies beyond the range of doubles.
    """
    view, columns = request.view, request.columns
    common = math.lcm(view.left.denominator, view.width.denominator)
    left = view.left.numerator * (common // view.left.denominator) * 2 * columns
    width = view.width.numerator * (common // view.width.denominator)
    denominator = common * 2 * columns
    # Whole numbers divide exactly rounded in Python, and much faster than fractions are reduced.
    return np.array([(left + width * (2 * j + 1)) / denominator for j in range(columns)])


def columns_distinct(request: PictureRequest) -> bool:
    """Whether doubles can tell adjacent columns, and adjacent rows, apart.

    Where they cannot, a picture would show rounding, not the system; onsets can still be refined
    there, in higher precision.
    """
    try:
        parameters = column_parameters(request)
        float(request.view.bottom), float(request.view.top)
    except OverflowError:
        return False
    if not (np.isfinite(parameters).all() and (np.diff(parameters) > 0).all()):
        return False
    view = request.view
    largest = max(abs(float(view.bottom)), abs(float(view.top)))
    return float(view.height) / request.rows >= math.ulp(largest)


def row_scaling(request: PictureRequest) -> tuple[float, float]:
    """Scale and offset that take an observed value to its bin; bin 1 is the bottom row."""
    view = request.view
    per_unit = Fraction(request.rows) / view.height
    return float(per_unit), float(1 - view.bottom * per_unit)


def scattered_starts(request: PictureRequest) -> NDArray[np.float64]:
    """Where the orbits of a column start: the system's own start, then scattered ones.

    The scattered starts fill the states' ranges evenly at random, the same ones in every column. A
    state without a range is scattered around its start.

    Returns
    -------
    float64, shape (starts, states).
    """
    states = request.system.states
    own = [float(state.start) for state in states]
    if request.rule is not SweepRule.SEVERAL:
        return np.array([own])
    share = np.random.default_rng(request.seed).random((max(request.starts, 1) - 1, len(states)))
    low, high = np.array([scatter_range(state) for state in states]).T
    return np.vstack([own, low + share * (high - low)])


def scatter_range(state: State) -> tuple[float, float]:
    """The range of a state, or a stretch around its start where it has none."""
    if state.range is not None:
        return float(state.range[0]), float(state.range[1])
    start = float(state.start)
    reach = abs(start) or 1.0
    return start - reach, start + reach


ESCAPE_FACTOR = 1e15


def escape_bounds(system: System) -> NDArray[np.float64]:
    """Size beyond which a state counts as escaped, shape (states,): far beyond its start and range."""
    bounds = []
    for state in system.states:
        low, high = scatter_range(state)
        bounds.append(ESCAPE_FACTOR * max(1.0, abs(low), abs(high), abs(float(state.start))))
    return np.array(bounds)


def carry_nudges(system: System) -> NDArray[np.float64]:
    """A disturbance far below what is seen, shape (states,).

    A real sweep is never free of noise. Without it a carried orbit could sit on an unstable cycle for
    ever because rounding happens to keep it there exactly.
    """
    return np.array([1e-9 * (high - low) for low, high in map(scatter_range, system.states)])
