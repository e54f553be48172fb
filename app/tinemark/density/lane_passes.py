"""What the drawing kernels of all systems share around `lane_block`: compiled once, whatever the formulas.

Lanes are the rows of one array, `LANES` doubles each: the states, the swept parameter, then for growth
one row of factors (one state) or the tangent's components (more). All functions run without the
interpreter lock, within a kernel.
"""

import numpy as np
from numpy.typing import NDArray

from tinemark.density.lane_block import BUFFER, GROUP, LANES, TILE
from tinemark.systems.lane_math import lane_log, lane_sqrt
from tinemark.systems.native import jit

Floats = NDArray[np.float64]

_LINE = 64  # bytes of a line of the cache: a vector that crosses one costs two accesses


@jit
def opened(states: Floats, swept: Floats, first: int, columns: int) -> Floats:
    """Lanes of a block of columns; missing columns repeat the last one. Rows of growth are ones."""
    n = states.shape[0]
    rows = 2 * n + 1
    room = np.empty(rows * LANES + _LINE // 8)
    skipped = (_LINE - np.int64(room.ctypes.data) % _LINE) % _LINE // 8
    lanes = room[skipped : skipped + rows * LANES].reshape((rows, LANES))
    for lane in range(LANES):
        column = first + (lane if lane < columns else columns - 1)
        for i in range(n):
            lanes[i, lane] = states[i, column]
            lanes[n + 1 + i, lane] = 1.0
        lanes[n, lane] = swept[column]
    return lanes


@jit
def closed(states: Floats, lanes: Floats, first: int, columns: int) -> None:
    """Write the states back to their columns."""
    for i in range(states.shape[0]):
        for lane in range(columns):
            states[i, first + lane] = lanes[i, lane]


@jit
def tangents_opened(lanes: Floats, tangents: Floats, first: int, columns: int) -> None:
    """Fill the rows of the tangent, of several states."""
    n = tangents.shape[0]
    for lane in range(columns):
        for i in range(n):
            lanes[n + 1 + i, lane] = tangents[i, first + lane]


@jit
def tangents_closed(tangents: Floats, lanes: Floats, first: int, columns: int) -> None:
    """Write the tangents back to their columns."""
    n = tangents.shape[0]
    for i in range(n):
        for lane in range(columns):
            tangents[i, first + lane] = lanes[n + 1 + i, lane]


@jit
def sums_opened(growth: Floats, first: int, columns: int) -> Floats:
    """Growth so far: added to where it stands, a sum does not depend on how passes were divided."""
    sums = np.empty(LANES)
    for lane in range(LANES):
        sums[lane] = growth[first + lane] if lane < columns else 0.0
    return sums


@jit
def sums_closed(growth: Floats, sums: Floats, first: int, columns: int) -> None:
    """Write the growth back to its columns."""
    for lane in range(columns):
        growth[first + lane] = sums[lane]


@jit
def buffers() -> NDArray[np.uint16]:
    """Two buffers of noted cells, shape (2, LANES/TILE, BUFFER, TILE)."""
    size = 2 * BUFFER * LANES
    space = np.empty(size + _LINE // 2, np.uint16)
    skipped = (_LINE - np.int64(space.ctypes.data) % _LINE) % _LINE // 2
    return space[skipped : skipped + size].reshape((2, LANES // TILE, BUFFER, TILE))


@jit
def tally(
    counts: NDArray[np.uint32], first: int, columns: int, noted: NDArray[np.uint16], which: int, steps: int
) -> None:
    """Count the first steps of a buffer, a few columns at a time."""
    grouped = columns - columns % GROUP
    for lane in range(0, grouped, GROUP):
        tile, within = lane // TILE, lane % TILE
        for step in range(steps):
            for j in range(GROUP):
                counts[first + lane + j, np.uint32(noted[which, tile, step, within + j])] += np.uint32(1)
    for lane in range(grouped, columns):
        for step in range(steps):
            counts[first + lane, np.uint32(noted[which, lane // TILE, step, lane % TILE])] += np.uint32(1)


@jit
def factors_taken(lanes: Floats, sums: Floats, measured: bool) -> None:
    """Of one state: add the logarithm of what the derivatives have multiplied to, and begin anew with one."""
    for lane in range(LANES):
        length = abs(lanes[2, lane])
        lanes[2, lane] = 1.0
        sums[lane] += lane_log(length) if measured else 0.0


@jit
def tangents_taken(lanes: Floats, sums: Floats, measured: bool) -> None:
    """Of several states: add the logarithm of the tangent's length, and go on with length one."""
    states = (lanes.shape[0] - 1) // 2
    square = np.empty(LANES)
    for lane in range(LANES):
        square[lane] = 0.0
    for i in range(states + 1, 2 * states + 1):
        for lane in range(LANES):
            square[lane] += lanes[i, lane] * lanes[i, lane]
    for lane in range(LANES):
        length = lane_sqrt(square[lane])
        sums[lane] += lane_log(length) if measured else 0.0
        square[lane] = length
    for i in range(states + 1, 2 * states + 1):
        # A tangent that has vanished starts anew: its growth is -inf and stays so.
        anew = 1.0 if i == states + 1 else 0.0
        for lane in range(LANES):
            length = square[lane]
            lanes[i, lane] = (
                lanes[i, lane] * (1.0 / (length if length > 0.0 else 1.0)) if length > 0.0 else anew
            )
