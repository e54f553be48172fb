"""A first look at a picture, within a few milliseconds, on whatever thread asks for it.

Orbits go on from where those of the last picture ended, in its nearest column: they are settled already,
so that a few hundred steps show where they are. What a look takes is known beforehand, from the system's
pace; one that would take too long is made of fewer cells, or not at all.
"""

from __future__ import annotations

import math
import time
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tinemark.density.kernels import LANES, Kernels
from tinemark.density.renderer import Drawing
from tinemark.density.request import PictureRequest, SweepRule
from tinemark.density.sampling import escape_bounds, row_scaling, scattered_starts
from tinemark.density.stopping import StopFlag
from tinemark.density.tone import colour_columns, shares_of

SETTLING_STEPS, COUNTED_STEPS = 64, 192
"""Steps from the nearest old column's orbit to this one's, and steps counted."""

LONGEST_S = 0.004
"""What a look may take; a frame of a screen lasts four times as long."""

THINNINGS = (1, 2, 4)
"""Every cell, or one in place of so many in each direction."""

REHEARSALS = 4
_SLOWING = 1.2

_FINEST = 8.0
"""Columns or rows closer than so many spacings of doubles are left to the picture itself."""


@dataclass(frozen=True)
class Ends:
    """Where the orbits of a picture have got to.

    Attributes
    ----------
    states
        float64, shape (starts, states, columns); never written to.
    escaped
        bool, shape (columns,): some orbit of the column has left every bound or become undefined.
    """

    request: PictureRequest
    kernels: Kernels
    fixed: NDArray[np.float64]
    swept: NDArray[np.float64]
    states: NDArray[np.float64]
    escaped: NDArray[np.bool_]


def ends_of(drawing: Drawing) -> Ends | None:
    """The ends of a drawing's orbits, copied; None while some have not settled."""
    if not isinstance(drawing, Drawing) or (drawing.drawn <= 0).any():
        return None
    states = drawing.states.copy()
    bounds = escape_bounds(drawing.request.system)[:, None]
    escaped = np.logical_not((np.abs(states) < bounds).all(axis=(0, 1)))
    return Ends(drawing.request, drawing.kernels, drawing.fixed, drawing.swept, states, escaped)


@dataclass(frozen=True)
class Pace:
    """Seconds that a look takes: for each step of a column, and for each cell."""

    step_s: float
    cell_s: float

    def expected_s(self, steps: int, cells: int) -> float:
        """Seconds for a look of so many steps, all columns and starts together, and so many cells."""
        return self.step_s * steps + self.cell_s * cells

    def after(self, now: Pace) -> Pace:
        """The pace with another measurement: a slower one may have been held up by others of the machine."""
        return Pace(min(now.step_s, self.step_s * _SLOWING), min(now.cell_s, self.cell_s * _SLOWING))


@dataclass(frozen=True)
class _Memory:
    """What looks of one size are made in; kept, since fresh memory costs as much as the orbits."""

    counts: NDArray[np.uint32]
    shares: NDArray[np.uint32]
    pixels: NDArray[np.uint32]
    next_pixels: NDArray[np.uint32]

    @staticmethod
    def of(request: PictureRequest) -> _Memory:
        columns, rows = drawn_columns(request), request.rows
        one, other = (np.zeros((rows, 2 * columns), np.uint32) for _ in range(2))
        return _Memory(np.zeros((columns, rows + 2), np.uint32), shares_of(columns, rows), one, other)

    def fits(self, request: PictureRequest) -> bool:
        return self.pixels.shape == (request.rows, 2 * drawn_columns(request))

    def turned(self) -> _Memory:
        """The same memory for the next look, which leaves the pixels of this one alone."""
        return replace(self, pixels=self.next_pixels, next_pixels=self.pixels)


class Glimpses:
    """Makes first looks at views of the system that was drawn last.

    `learn` and `rehearse` belong to the thread that draws; `look` to the one that shows.
    """

    def __init__(self) -> None:
        self._ends: Ends | None = None
        self._pace: Pace | None = None
        # Touched by the thread that shows alone.
        self._memory: _Memory | None = None

    def learn(self, drawing: Drawing) -> None:
        """Take over where the orbits of a drawing have got to."""
        ends = ends_of(drawing)
        if ends is None:
            return
        old = self._ends
        if old is None or _system(old.request) != _system(ends.request):
            self._pace = None
        self._ends = ends

    def rehearse(self) -> None:
        """Compile what a look needs and measure how long one takes, where that is not known."""
        ends = self._ends
        if self._pace is not None or ends is None or not is_compiled(ends.kernels.advance_counting):
            return
        memory = _Memory.of(ends.request)
        colours = np.zeros(256, np.uint32)
        # The first one compiles or loads.
        _look(ends, ends.request, "log", colours, memory)
        pace = _look(ends, ends.request, "log", colours, memory)
        for _ in range(REHEARSALS - 2):
            pace = pace.after(_look(ends, ends.request, "log", colours, memory))
        self._pace = pace

    def look(
        self, request: PictureRequest, tone: str, colours: NDArray[np.uint32]
    ) -> NDArray[np.uint32] | None:
        """Colours of a first look at a picture, or None where there is none.

        Parameters
        ----------
        tone
            One of `tone.TONES`.
        colours
            uint32, shape (256,): a colour table, entry 0 the ground.

        Returns
        -------
        uint32, shape (rows, columns), row 0 at the top, in memory order; overwritten by the look after the
        next. Rows and columns are those of the request, or a half or a quarter of them; where the columns are
        odd there is one more, beyond the right end of the view.
        """
        ends, pace = self._ends, self._pace
        if ends is None or pace is None or _system(ends.request) != _system(request):
            return None
        thin = next((n for n in THINNINGS if _expected_s(ends, thinned(request, n), pace) <= LONGEST_S), 0)
        if not thin:
            # It may have been the machine that was slow: it is measured again with the next picture.
            self._pace = None
            return None
        cells = thinned(request, thin)
        if not _cells_distinct(cells):
            return None
        kept = self._memory
        memory = kept.turned() if kept is not None and kept.fits(cells) else _Memory.of(cells)
        self._memory = memory
        self._pace = pace.after(_look(ends, cells, tone, colours, memory))
        return memory.pixels


def _look(
    ends: Ends, request: PictureRequest, tone: str, colours: NDArray[np.uint32], memory: _Memory
) -> Pace:
    """Make a look in `memory`, and say how fast that went."""
    before = time.perf_counter()
    memory.counts.fill(0)
    steps = _draw(ends, request, memory.counts)
    between = time.perf_counter()
    colour_columns(memory.counts, tone, colours, memory.shares, memory.pixels)
    after = time.perf_counter()
    return Pace((between - before) / steps, (after - between) / memory.pixels.size)


def thinned(request: PictureRequest, thin: int) -> PictureRequest:
    """The same view in cells `thin` times as wide and as high."""
    if thin == 1:
        return request
    return replace(request, columns=-(-request.columns // thin), rows=-(-request.rows // thin))


def drawn_columns(request: PictureRequest) -> int:
    """Columns that a look at a picture draws: every second one, two pixels wide."""
    return -(-request.columns // 2)


def _draw(ends: Ends, request: PictureRequest, counts: NDArray[np.uint32]) -> int:
    """Count the orbits of every column; returns the steps taken in all."""
    columns = drawn_columns(request)
    # To the last digit is not needed here, and rounding each from its exact value takes long.
    middles = (2 * np.arange(columns) + 1) / request.columns
    swept = float(request.view.left) + float(request.view.width) * middles
    states, fresh = _begun(ends, request, swept)
    scale, offset = row_scaling(request)
    never = StopFlag().cell
    none = np.zeros(columns)
    tangents = np.zeros((states.shape[1], columns))
    advance = ends.kernels.advance_counting
    taken = 0
    for first in range(0, columns, LANES):
        end = min(first + LANES, columns)
        settling = _settling(request, bool(fresh[first:end].any()))
        for start in range(states.shape[0]):
            for steps, counted in ((settling, False), (COUNTED_STEPS, True)):
                place = (states[start], tangents, none, swept, ends.fixed, counts, first, end - first)
                advance(*place, steps, counted, False, scale, offset, never)
        taken += (end - first) * states.shape[0] * (settling + COUNTED_STEPS)
    return taken


def _begun(
    ends: Ends, request: PictureRequest, swept: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.bool_]]:
    """Where the orbits begin, shape (starts, states, columns), and which columns begin anew.

    A column begins at the end of the nearest old column's orbit. Outside the old view, or where that orbit
    has escaped, it begins as in any picture, which for a carried sweep is beside the last column known.
    """
    left, right = ends.swept[0], ends.swept[-1]
    pitch = (right - left) / max(len(ends.swept) - 1, 1) or 1.0
    place = np.rint((swept - left) / pitch)
    nearest = np.clip(place, 0, len(ends.swept) - 1).astype(np.intp)
    states = np.ascontiguousarray(ends.states[:, :, nearest])
    lost = ends.escaped[nearest]
    outside = place != nearest
    anew = lost if request.rule in (SweepRule.FORWARD, SweepRule.BACKWARD) else lost | outside
    if anew.any():
        states[:, :, anew] = scattered_starts(request)[:, :, None]
    return states, lost | outside


def _settling(request: PictureRequest, fresh: bool) -> int:
    return max(SETTLING_STEPS, request.transient_steps) if fresh else SETTLING_STEPS


def _expected_s(ends: Ends, request: PictureRequest, pace: Pace) -> float:
    old, view = ends.request.view, request.view
    fresh = view.left < old.left or old.right < view.right or bool(ends.escaped.any())
    steps = (_settling(request, fresh) + COUNTED_STEPS) * ends.states.shape[0] * drawn_columns(request)
    return pace.expected_s(steps, request.rows * request.columns)


def _cells_distinct(request: PictureRequest) -> bool:
    view = request.view
    try:
        across = max(abs(float(view.left)), abs(float(view.right)))
        up = max(abs(float(view.bottom)), abs(float(view.top)))
        width, height = float(view.width), float(view.height)
    except OverflowError:
        return False
    finest = max(math.ulp(across) * request.columns / width, math.ulp(up) * request.rows / height)
    return finest * _FINEST <= 1


def _system(request: PictureRequest) -> tuple[object, ...]:
    return (
        request.system,
        request.parameter,
        request.observe,
        request.rule,
        request.transient_steps,
        request.starts,
        request.seed,
    )


def is_compiled(kernel: object) -> bool:
    """Whether a kernel has been compiled or loaded; it never is where compiling is switched off."""
    return bool(getattr(kernel, "signatures", ()))
