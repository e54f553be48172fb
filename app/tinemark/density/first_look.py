"""A first look at a picture with nothing compiled: NumPy steps all columns at once.

A hundred times slower than a kernel, and there while the compiler is still being loaded or at work.
"""

from __future__ import annotations

import time

import numpy as np

from tinemark.density.field import Field
from tinemark.density.request import PictureRequest, SweepRule
from tinemark.density.sampling import column_parameters, escape_bounds, row_scaling, scattered_starts
from tinemark.density.stopping import StopFlag
from tinemark.systems.formula import read_formula
from tinemark.systems.plain import plain_function

COUNTED_STEPS = 192
LONGEST_S = 1.0
MOST_ORBITS = 20_000
_LOOK_EVERY = 32


def first_look(request: PictureRequest, stop: StopFlag) -> Field | None:
    """A picture of a few steps a column; exponents and periods are left unknown.

    Returns
    -------
    Field, or None: once `stop` is set; for a carried sweep, whose columns come one after the other; for
    systems that are no maps; and where it would take longer than `LONGEST_S`.

    Raises
    ------
    SystemFileError, FormulaError
        The parameter or the observed quantity cannot be used.
    """
    system, columns, rows = request.system, request.columns, request.rows
    if not system.is_map or request.rule in (SweepRule.FORWARD, SweepRule.BACKWARD):
        return None
    system.parameter(request.parameter)
    step = plain_function(system.expressions, system.names)
    observed = read_formula(request.observe, system.names, key="diagram.observe")
    observe = plain_function([observed], system.names)
    starts = scattered_starts(request)
    shape = (len(starts), columns)
    if shape[0] * shape[1] > MOST_ORBITS:
        return None
    swept = column_parameters(request)
    parameters = [
        swept if name == request.parameter else np.float64(float(system.parameter(name).value))
        for name in system.parameter_names
    ]
    states = [np.repeat(start[:, None], columns, axis=1) for start in starts.T]
    seen = np.empty((COUNTED_STEPS, *shape))
    deadline = time.perf_counter() + LONGEST_S
    for number in range(request.transient_steps + COUNTED_STEPS):
        if number % _LOOK_EVERY == 0 and (stop.is_set() or time.perf_counter() > deadline):
            return None
        # A formula without a state or the swept parameter gives one number for all.
        states = [np.broadcast_to(state, shape) for state in step([*states, *parameters])]
        if number >= request.transient_steps:
            seen[number - request.transient_steps] = observe([*states, *parameters])[0]
    scale, offset = row_scaling(request)
    with np.errstate(all="ignore"):
        cells = np.floor(seen * scale + offset)
    # What is no number has escaped; it is counted beyond the view.
    cells = np.clip(np.nan_to_num(cells, nan=rows + 1.0), 0, rows + 1).astype(np.int64)
    places = cells + np.arange(columns) * (rows + 2)
    counts = np.bincount(places.reshape(-1), minlength=columns * (rows + 2)).reshape(columns, rows + 2)
    bounds = escape_bounds(system)
    with np.errstate(invalid="ignore"):
        inside = [np.abs(state) < bound for state, bound in zip(states, bounds, strict=True)]
    return Field(
        counts=np.ascontiguousarray(counts[:, 1:-1].T.astype(np.uint32)),
        lyapunov=np.full(columns, np.nan),
        period=np.zeros(columns, np.int32),
        escaped=np.logical_not(np.logical_and.reduce(inside).any(axis=0)),
        steps=COUNTED_STEPS * shape[0] * shape[1],
    )
