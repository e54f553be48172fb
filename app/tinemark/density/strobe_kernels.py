"""The drawing kernels of strobed and sampled systems, behind the same calls as those of maps."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property, lru_cache

import numpy as np
from numpy.typing import NDArray

from tinemark.density.kernels import BUFFER, Kernels
from tinemark.density.request import PictureRequest
from tinemark.density.strobe_runner import PILOTS, Runner, Tuned, goal_of_cells, tuned
from tinemark.equations.differences import may_jump
from tinemark.systems.formula import read_formula
from tinemark.systems.native import jit
from tinemark.systems.plain import plain_function
from tinemark.systems.system import System

Floats = NDArray[np.float64]
Cell = NDArray[np.uint8]


ROUNDING = 1e-12
"""Share of a state's size below which it counts as zero where periods are told."""


def strobe_kernels(request: PictureRequest) -> Kernels:
    """The kernels that draw a driven or free-running system, with steps tuned to the picture's cells.

    Raises
    ------
    SystemFileError, FormulaError
        The parameter or the observed quantity cannot be used.
    """
    system, parameter = request.system, request.parameter
    system.parameter(parameter)
    observed = read_formula(request.observe, system.names, key="diagram.observe")
    runner, setting = _tuned(system, parameter, *_sweep(request), _goal(request))
    names = (*system.state_names, parameter, *runner.motion.fixed)
    drawn = _Drawn(runner, setting, plain_function((observed,), names))
    return Kernels(drawn.advance, drawn.advance_counting, drawn.trace, drawn.carry, runner.motion.fixed)


def picture_error(request: PictureRequest) -> float:
    """Largest error of one sample in a picture, as a share of each state's size, as it was measured."""
    return _tuned(request.system, request.parameter, *_sweep(request), _goal(request))[1].error


def _sweep(request: PictureRequest) -> tuple[Fraction, Fraction]:
    """Where the pilots lie: the parameter's own range where the view is inside, so that pans share it."""
    view, own = request.view, request.system.parameter(request.parameter).range
    if own is not None and own[0].fraction <= view.left and view.right <= own[1].fraction:
        return own[0].fraction, own[1].fraction
    return view.left, view.right


def _goal(request: PictureRequest) -> float:
    low, high = _sweep(request)
    across = float(request.view.width / request.columns / (high - low))
    ranges = [state.range for state in request.system.states if state.range is not None]
    height = max((float(r[1].fraction - r[0].fraction) for r in ranges), default=float(request.view.height))
    up = float(request.view.height) / request.rows / height
    return min(goal_of_cells(max(min(across, up), 1e-300)), request.accuracy.error)


@lru_cache(maxsize=64)
def _runner(system: System, parameter: str) -> Runner:
    return Runner(system, parameter)


@lru_cache(maxsize=256)
def _tuned(
    system: System, parameter: str, low: Fraction, high: Fraction, goal: float
) -> tuple[Runner, Tuned]:
    runner = _runner(system, parameter)
    swept = np.linspace(float(low), float(high), PILOTS)
    return runner, tuned(runner, swept, goal, np.zeros(1, np.uint8))


@dataclass(frozen=True)
class _Drawn:
    """A system as a picture is drawn of it."""

    runner: Runner
    setting: Tuned
    observed: object

    def advance(self, *arguments: object) -> int:
        """Move columns on with a tangent; see `Kernels`."""
        return self._advance(True, *arguments)  # type: ignore[arg-type]

    def advance_counting(self, *arguments: object) -> int:
        """Move columns on; see `Kernels`."""
        return self._advance(False, *arguments)  # type: ignore[arg-type]

    def _advance(
        self,
        growing: bool,
        states: Floats,
        tangents: Floats,
        growth: Floats,
        swept: Floats,
        _fixed: Floats,
        counts: NDArray[np.uint32],
        first: int,
        columns: int,
        steps: int,
        counted: bool,
        measured: bool,
        scale: float,
        offset: float,
        stop: Cell,
    ) -> int:
        done = 0
        told = np.zeros((4, columns))
        while done < steps and stop[0] == 0:
            room = np.empty((columns, states.shape[0], min(BUFFER, steps - done)))
            block = (first, columns)
            if not self.runner.run(
                growing,
                states,
                tangents,
                growth,
                swept,
                block,
                room,
                measured,
                self.setting.steps,
                told,
                stop,
            ):
                break
            if measured and self._jumps:
                # A tangent does not see what a jump of the rates does to it: what it grew by is not known.
                growth[first : first + columns] = np.nan
            if counted:
                places = self._seen(room, swept[first : first + columns]) * scale + offset
                count_cells(counts, first, places)
            done += room.shape[2]
        return done

    @cached_property
    def _jumps(self) -> bool:
        return may_jump(self.runner.motion.rates)

    def _seen(self, noted: Floats, swept: Floats) -> Floats:
        values = [noted[:, i, :] for i in range(noted.shape[1])]
        constants = [np.float64(value) for value in self.runner.fixed]
        (seen,) = self.observed([*values, swept[:, None], *constants])  # type: ignore[operator]
        return np.ascontiguousarray(np.broadcast_to(np.asarray(seen, np.float64), values[0].shape))

    def trace(
        self, states: Floats, swept: Floats, _fixed: Floats, first: int, columns: int, noted: Floats
    ) -> None:
        """Note the states of the next samples without moving; see `Kernels`."""
        moved = states[:, first : first + columns].copy()
        own = np.ascontiguousarray(swept[first : first + columns])
        none, told, stop = np.zeros_like(moved), np.zeros((4, columns)), np.zeros(1, np.uint8)
        block = (0, columns)
        self.runner.run(
            False, moved, none, none[0], own, block, noted[:columns], False, self.setting.steps, told, stop
        )
        # On a section a state may be zero but for rounding, which repeats with no period.
        noise = ROUNDING * self.runner.scales[None, :, None]
        noted[:columns][np.abs(noted[:columns]) < noise] = 0.0

    def carry(
        self,
        states: Floats,
        swept: Floats,
        _fixed: Floats,
        start: Floats,
        bounds: Floats,
        nudge: Floats,
        first: int,
        direction: int,
        steps: int,
        stop: Cell,
    ) -> int:
        """Settle one column after another, each from where the last one ended; see `Kernels`."""
        n, total = states.shape
        column, done = first, 0
        none, told = np.zeros((n, 1)), np.zeros((4, 1))
        while 0 <= column < total and stop[0] == 0:
            before = column - direction
            state = start.copy()
            # Where nothing is carried yet, and after an escape, the orbit starts from the system's start.
            if 0 <= before < total and (np.abs(states[:, before]) < bounds).all():
                state = states[:, before] + nudge
            moved = np.ascontiguousarray(state[:, None])
            left = steps
            while left > 0:
                room = np.empty((1, n, min(BUFFER, left)))
                own = swept[column : column + 1]
                if not self.runner.run(
                    False, moved, none, none[0], own, (0, 1), room, False, self.setting.steps, told, stop
                ):
                    return done
                left -= room.shape[2]
            states[:, column] = moved[:, 0]
            column += direction
            done += 1
        return done


@jit
def count_cells(counts: NDArray[np.uint32], first: int, places: Floats) -> None:
    """Add each sample to its cell; what lies outside, or is undefined, goes to the bins at the ends."""
    outside = counts.shape[1] - 1
    for column in range(places.shape[0]):
        for sample in range(places.shape[1]):
            place = places[column, sample]
            cell = outside
            if place < outside:
                cell = int(place) if place > 0.0 else 0
            counts[first + column, cell] += np.uint32(1)
