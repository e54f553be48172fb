"""Orbit densities, drawn a pass at a time: create, append, combine, snapshot.

The picture improves pass by pass; orbits go on from where they were. Every column is computed alone, in
whole buffers of steps, so that a picture depends neither on the number of threads nor on how its
steps were divided into passes, and a panned picture equals a fresh one.
"""

from __future__ import annotations

import os
import time
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from tinemark.density.field import Field
from tinemark.density.kernels import BUFFER, LANES, MAX_ROWS, Kernels, kernels_for
from tinemark.density.periods import TRACE_STEPS, find_periods
from tinemark.density.request import PictureRequest, SweepRule
from tinemark.density.sampling import (
    carry_nudges,
    column_parameters,
    columns_distinct,
    escape_bounds,
    row_scaling,
    scattered_starts,
)
from tinemark.density.stopping import StopFlag
from tinemark.density.strobe_kernels import strobe_kernels
from tinemark.density.strobe_preview import Periods, coarse_request, spread
from tinemark.density.team import Team
from tinemark.systems.errors import TinemarkError

__all__ = [
    "Drawing",
    "StopFlag",
    "Team",
    "append",
    "columns_distinct",
    "combine",
    "create",
    "progressive",
    "shifted",
    "snapshot",
]

FIRST_STEPS = 2 * BUFFER
"""Steps a column in the first picture."""

EXPONENT_CYCLE, EXPONENT_STEPS, ALIGNING_STEPS = 4096, 1024, 64
"""Out of each 4096 steps the Lyapunov exponent is taken over the first 1024, less 64 in which the tangent
turns into the direction of growth: a tangent costs up to as much as the orbit itself. 960 has many
divisors, so that most cycles are met whole."""

SECONDS_BETWEEN_FIELDS = 0.4

_UNSTABLE_GROWTH = 20.0
"""A disturbance that grew by exp(20) while the orbit repeats: the orbit sits on an unstable cycle."""


@dataclass
class Drawing:
    """A picture being drawn. Belongs to one thread at a time.

    Attributes
    ----------
    states, tangents
        float64, shape (starts, states, columns).
    growth
        float64, shape (starts, columns): logarithm by which the tangent has grown.
    grown, drawn
        int64, shape (starts, columns): steps that growth was taken over; steps counted. Negative
        while the transient is not over.
    counts
        uint32, shape (columns, rows + 2): a bin below and one above the view.
    """

    request: PictureRequest
    kernels: Kernels
    swept: NDArray[np.float64]
    fixed: NDArray[np.float64]
    states: NDArray[np.float64]
    tangents: NDArray[np.float64]
    growth: NDArray[np.float64]
    grown: NDArray[np.int64]
    drawn: NDArray[np.int64]
    counts: NDArray[np.uint32]
    scale: float
    offset: float

    @property
    def level(self) -> int:
        """Steps a column and start that the furthest column has."""
        return max(0, int(self.drawn.max()))


def create(request: PictureRequest) -> Drawing:
    """An empty picture, its kernels compiled.

    Raises
    ------
    TinemarkError
        The picture has no cells or too many, or its view is empty.
    SystemFileError, FormulaError
        The parameter or the observed quantity cannot be used.
    """
    if not (1 <= request.rows <= MAX_ROWS and 1 <= request.columns <= 65536):
        raise TinemarkError(
            f"a picture of {request.columns} x {request.rows} cells cannot be drawn",
            what_to_do=f"stay between 1 and {MAX_ROWS} cells each way",
        )
    if request.view.width <= 0 or request.view.height <= 0:
        raise TinemarkError(
            "the view has no extent",
            what_to_do="give a left end below the right one and a bottom below the top",
        )
    if request.transient_steps < 0 or request.starts < 1:
        raise TinemarkError(
            "the settings of the sweep are out of range",
            what_to_do="give at least 0 transient steps and 1 start",
        )
    is_map = request.system.is_map
    kernels = (
        kernels_for(request.system, request.parameter, request.observe) if is_map else strobe_kernels(request)
    )
    starts = scattered_starts(request)
    count, n = starts.shape
    columns = request.columns
    scale, offset = row_scaling(request)
    return Drawing(
        request=request,
        kernels=kernels,
        swept=column_parameters(request),
        fixed=np.array([float(request.system.parameter(name).value) for name in kernels.fixed], np.float64),
        states=np.repeat(starts[:, :, None], columns, axis=2),
        tangents=np.full((count, n, columns), 1.0 / np.sqrt(n)),
        growth=np.zeros((count, columns)),
        grown=np.zeros((count, columns), np.int64),
        drawn=np.full((count, columns), -request.transient_steps, np.int64),
        counts=np.zeros((columns, request.rows + 2), np.uint32),
        scale=scale,
        offset=offset,
    )


def append(drawing: Drawing, steps: int, stop: StopFlag | None = None, team: Team | None = None) -> None:
    """Draw every column on to `steps` beyond the furthest one, rounded up to whole buffers.

    Columns that lag behind, after a stop or a pan, are drawn level with the others. Returns early
    once `stop` is set, within about a buffer's time; what has been drawn by then is kept. Holds no
    interpreter lock while drawing.
    """
    stop = stop or StopFlag()
    target = drawing.level + -(-steps // BUFFER) * BUFFER
    if target >= 2**32:
        raise TinemarkError("a cell could overflow", what_to_do="draw fewer steps")
    if drawing.request.rule in (SweepRule.FORWARD, SweepRule.BACKWARD):
        _carry(drawing, stop)
    blocks = [
        (first, min(first + LANES, drawing.request.columns))
        for first in range(0, drawing.request.columns, LANES)
    ]
    # Blocks share no column, so threads share no memory that they write.
    (team or Team(1)).work_off(blocks, lambda block: _draw_block(drawing, block, target, stop))


def combine(parts: Sequence[Field]) -> Field:
    """The picture of several pictures of the same cells: counts added, what the parts agree on kept.

    The exponent is that of the least stable part; a column has escaped when it has in every part.
    """
    escaped = np.logical_and.reduce([part.escaped for part in parts])
    exponents = np.stack([part.lyapunov for part in parts])
    known = ~np.isnan(exponents)
    largest = np.where(known, exponents, -np.inf).max(axis=0)
    periods = np.stack([np.where(part.escaped, -1, part.period) for part in parts])
    largest_period = periods.max(axis=0)
    agreed = ((periods == largest_period) | (periods == -1)).all(axis=0)
    counts = np.zeros_like(parts[0].counts)
    for part in parts:
        counts += part.counts
    return Field(
        counts=counts,
        lyapunov=np.where(known.any(axis=0), largest, np.nan),
        period=np.where(agreed, np.maximum(largest_period, 0), 0).astype(np.int32),
        escaped=escaped,
        steps=sum(part.steps for part in parts),
    )


def snapshot(drawing: Drawing, periods: bool = True, stop: StopFlag | None = None) -> Field:
    """The picture as it stands, a copy; without `periods` they are left unknown, which is faster.

    Once `stop` is set, the periods of the columns not yet looked at are left unknown.
    """
    counts = np.ascontiguousarray(drawing.counts[:, 1:-1].T)
    empty = np.zeros((0, 0), np.uint32)
    bounds = escape_bounds(drawing.request.system)[:, None]
    parts = []
    for start in range(drawing.states.shape[0]):
        drawn = np.maximum(drawing.drawn[start], 0)
        inside = (np.abs(drawing.states[start]) < bounds).all(axis=0)
        grown = drawing.grown[start]
        with np.errstate(invalid="ignore", divide="ignore"):
            exponent = drawing.growth[start] / grown
        exponent[~inside | (grown == 0)] = np.nan
        period = _periods(drawing, start, stop or StopFlag()) if periods else np.zeros(inside.size, np.int32)
        period[~inside | (drawing.growth[start] > _UNSTABLE_GROWTH) | (drawn == 0)] = 0
        parts.append(Field(empty, exponent, period, ~inside, int(drawn.sum())))
    whole = combine(parts)
    return Field(counts, whole.lyapunov, whole.period, whole.escaped, whole.steps)


def progressive(
    what: PictureRequest | Drawing,
    budget_steps: int,
    stop: StopFlag | None = None,
    threads: int | None = None,
) -> Iterator[Field]:
    """Pictures that improve until every column has `budget_steps` steps (from each start).

    The first comes after a few hundred steps a column, the next after twice as many, and so on, and
    no later than about half a second after the one before. Before the first one of a system of equations
    comes a coarse one.

    Parameters
    ----------
    what
        A request, or a drawing to go on with.
    stop
        Ends the run early, without another picture.
    threads
        Number of drawing threads; None for as many as the process may use.
    """
    stop = stop or StopFlag()
    drawing = create(what) if isinstance(what, PictureRequest) else what
    with Team(threads or usable_threads()) as team:
        rate = 0.0
        # The first picture of a new system does not wait for the trace to be compiled as well.
        told = bool(getattr(drawing.kernels.trace, "signatures", True))
        is_map = drawing.request.system.is_map
        coarse = None if is_map or drawing.level else coarse_request(drawing.request)
        if coarse is not None:
            preview = create(coarse)
            append(preview, BUFFER, stop, team)
            if not stop.is_set():
                yield spread(snapshot(preview, False), drawing.request.columns)
        periods = Periods()
        while not stop.is_set():
            level = drawing.level
            lagging = bool((drawing.drawn < level).any())
            steps = 0 if lagging and level else min(max(level, FIRST_STEPS), budget_steps - level)
            if rate:
                steps = min(steps, max(FIRST_STEPS, int(rate * SECONDS_BETWEEN_FIELDS)))
            if steps <= 0 and not lagging:
                return
            before = time.perf_counter()
            append(drawing, steps, stop, team)
            if stop.is_set():
                return
            rate = max(steps, 1) / max(time.perf_counter() - before, 1e-6)
            ends = drawing.level >= budget_steps
            due = told or ends if is_map else ends or periods.are_due(drawing.level)
            field = snapshot(drawing, due, stop)
            if stop.is_set():
                return
            yield field if is_map else periods.kept(field, drawing.level, due)
            told = True


def shifted(drawing: Drawing, request: PictureRequest) -> Drawing | None:
    """The drawing moved to a view that lies whole columns away, with the columns both have in common.

    The new columns are drawn level by the next `append`. None where nothing can be kept: another
    system, scale or rule, a shift by a part of a column, or a carried sweep, whose columns depend on
    all before them.
    """
    old = drawing.request
    if request.rule not in (SweepRule.FRESH, SweepRule.SEVERAL):
        return None
    moved = (request.view.left - old.view.left) * old.columns / old.view.width
    same_view = request.view.width == old.view.width and (request.view.bottom, request.view.top) == (
        old.view.bottom,
        old.view.top,
    )
    if not same_view or moved.denominator != 1 or _besides_view(request) != _besides_view(old):
        return None
    by = int(moved)
    kept = old.columns - abs(by)
    if kept <= 0:
        return None
    fresh = create(request)
    source, target = (slice(by, None), slice(0, kept)) if by >= 0 else (slice(0, kept), slice(-by, None))
    for name in ("states", "tangents", "growth", "grown", "drawn"):
        getattr(fresh, name)[..., target] = getattr(drawing, name)[..., source]
    fresh.counts[target] = drawing.counts[source]
    return fresh


def usable_threads() -> int:
    """Processors that this process may use."""
    affinity = getattr(os, "sched_getaffinity", None)
    return len(affinity(0)) if affinity is not None else os.cpu_count() or 1


def _besides_view(request: PictureRequest) -> tuple[object, ...]:
    return (
        request.system,
        request.parameter,
        request.observe,
        request.columns,
        request.rows,
        request.rule,
        request.transient_steps,
        request.starts,
        request.seed,
        request.accuracy,
    )


def _draw_block(drawing: Drawing, block: tuple[int, int], target: int, stop: StopFlag) -> None:
    """Draw the columns of a block level with `target`. Runs on any thread."""
    for start in range(drawing.states.shape[0]):
        drawn = drawing.drawn[start]
        for first, end in _runs_of_equals(drawn, block):
            while drawn[first] < target and not stop.is_set():
                _draw_run(drawing, start, first, end, target, stop)


def _draw_run(drawing: Drawing, start: int, first: int, end: int, target: int, stop: StopFlag) -> None:
    """Draw columns that stand equal on to the next change of what is done, or to `target`."""
    drawn = int(drawing.drawn[start, first])
    counted = drawn >= 0
    place = drawn % EXPONENT_CYCLE
    growing = not counted or place < EXPONENT_STEPS
    measured = counted and ALIGNING_STEPS <= place < EXPONENT_STEPS
    change = next(edge for edge in (ALIGNING_STEPS, EXPONENT_STEPS, EXPONENT_CYCLE) if place < edge)
    kernels = drawing.kernels
    done = (kernels.advance if growing else kernels.advance_counting)(
        drawing.states[start],
        drawing.tangents[start],
        drawing.growth[start],
        drawing.swept,
        drawing.fixed,
        drawing.counts,
        first,
        end - first,
        min(target - drawn, change - place) if counted else -drawn,
        counted,
        measured,
        drawing.scale,
        drawing.offset,
        stop.cell,
    )
    drawing.drawn[start, first:end] += done
    if measured:
        drawing.grown[start, first:end] += done


def _runs_of_equals(drawn: NDArray[np.int64], block: tuple[int, int]) -> list[tuple[int, int]]:
    first, end = block
    edges = [first, *(int(i) + first + 1 for i in np.flatnonzero(np.diff(drawn[first:end]))), end]
    return list(pairwise(edges))


def _carry(drawing: Drawing, stop: StopFlag) -> None:
    """Settle columns one after another, each from where the last one ended. Sequential by its nature."""
    waiting = np.flatnonzero(drawing.drawn[0] < 0)
    if not waiting.size:
        return
    forward = drawing.request.rule is SweepRule.FORWARD
    first = int(waiting[0] if forward else waiting[-1])
    system = drawing.request.system
    start = np.array([float(state.start) for state in system.states])
    done = drawing.kernels.carry(
        drawing.states[0],
        drawing.swept,
        drawing.fixed,
        start,
        escape_bounds(system),
        carry_nudges(system),
        first,
        1 if forward else -1,
        drawing.request.transient_steps,
        stop.cell,
    )
    settled = slice(first, first + done) if forward else slice(first - done + 1, first + 1)
    drawing.drawn[0, settled] = 0


def _periods(drawing: Drawing, start: int, stop: StopFlag) -> NDArray[np.int32]:
    columns = drawing.request.columns
    period = np.zeros(columns, np.int32)
    noted = np.empty((LANES, drawing.states.shape[1], TRACE_STEPS))
    for first in range(0, columns, LANES):
        if stop.is_set():
            break
        count = min(LANES, columns - first)
        drawing.kernels.trace(drawing.states[start], drawing.swept, drawing.fixed, first, count, noted)
        find_periods(noted[:count], period[first : first + count])
    return period
