"""Runs the kernel of a strobed or sampled system, and finds the steps that suit it.

What a picture needs of accuracy follows from its cells. The tolerance that gives it is measured, not
believed: orbits of the system itself are taken one sample on twice, the second time with far smaller steps.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tinemark.density.strobe_compiling import Compiling
from tinemark.density.strobe_source import drive_of, strobe_source, with_tangent
from tinemark.density.tangent import tangent
from tinemark.equations.accuracy import tuned_tolerance
from tinemark.equations.lane_memory import LANES
from tinemark.equations.motion import TIME, motion
from tinemark.equations.sampler import STEP_LIMIT
from tinemark.equations.scales import escape_bounds, state_scales
from tinemark.equations.tableau import Method, tableau
from tinemark.systems.expression import ONE
from tinemark.systems.plain import plain_function
from tinemark.systems.system import System

Floats = NDArray[np.float64]
Cell = NDArray[np.uint8]

NEAR_SHARE = 0.02
"""Share of the section formula's size within which a start below it counts as on it."""


@dataclass(frozen=True)
class Steps:
    """How samples are integrated.

    Attributes
    ----------
    relative
        Error allowed in a step, as a share of each state's size.
    start
        First step after a sample: a share of the period, or a time where there is none.
    pieces
        Equal steps of a period; 0 where each column steps by itself.
    drive
        (pieces, stages, parts): what the drive contributes at each stage.
    """

    relative: float
    start: float
    pieces: int
    drive: Floats


class Runner:
    """The compiled motion of one system along one parameter.

    Attributes
    ----------
    scales
        (states,): lengths by which errors are measured.
    """

    def __init__(self, system: System, parameter: str) -> None:
        self.system = system
        self.motion = motion(system, parameter, tangent)
        value = float(system.parameter(parameter).value)
        self.fixed = np.array([float(system.parameter(name).value) for name in self.motion.fixed])
        self.scales = state_scales(system, parameter, value)
        self.bounds = escape_bounds(system, self.scales)
        self.near = self._near(value)

    def run(
        self,
        has_tangent: bool,
        states: Floats,
        tangents: Floats,
        growth: Floats,
        swept: Floats,
        columns: tuple[int, int],
        noted: Floats,
        measured: bool,
        steps: Steps,
        told: Floats,
        stop: Cell,
    ) -> bool:
        """Move columns on in place by the samples `noted` has room for; see `strobe_source`."""
        n = self.motion.size
        floors = np.zeros(2 * n)
        floors[:n] = steps.relative * self.scales
        compiling = self._with_tangent if has_tangent else self._plain
        module = compiling.module(stop)
        if module is None:
            return False
        first, count = columns
        done: bool = module.run(
            states, tangents, growth, swept, self.fixed, first, count, noted, measured, floors,
            steps.relative, self.bounds, self.near, STEP_LIMIT, steps.start, steps.pieces, steps.drive,
            told, stop,
        )  # fmt: skip
        return done

    def samples(
        self, states: Floats, swept: Floats, count: int, steps: Steps, stop: Cell
    ) -> tuple[Floats, Floats] | None:
        """Samples of orbits that are not moved.

        Returns
        -------
        (orbits, states, count) and the kernel's (4, orbits) of what it found out; None when stopped.
        """
        n, orbits = states.shape
        noted, told = np.empty((orbits, n, count)), np.zeros((4, orbits))
        moved, none = np.ascontiguousarray(states).copy(), np.zeros((n, orbits))
        for first in range(0, orbits, LANES):
            block = (first, min(LANES, orbits - first))
            rows = slice(first, first + block[1])
            part = np.zeros((4, block[1]))
            # The kernel that the first picture is drawn with is the one at hand.
            if not self.run(True, moved, none, none[0], swept, block, noted[rows], False, steps, part, stop):
                return None
            told[:, rows] = part
        return noted, told

    def drive(self, pieces: int) -> Floats:
        """The drive at every stage of a period's equal steps."""
        nodes = np.array(tableau(Method.EIGHT).nodes)
        parts = self._drive_parts if self.motion.is_driven else ()
        if not parts:
            return np.zeros((max(pieces, 1), len(nodes), 1))
        assert self.motion.period is not None  # only a driven system has a drive
        (period,) = plain_function((self.motion.period,), self.motion.fixed)([*self.fixed])
        times = (np.arange(pieces)[:, None] + nodes) * (float(np.asarray(period)) / pieces)
        values = plain_function(parts, (TIME, *self.motion.fixed))([times, *self.fixed])
        return np.ascontiguousarray(
            np.stack([np.broadcast_to(value, times.shape) for value in values], axis=-1)
        )

    @cached_property
    def _drive_parts(self) -> tuple[Any, ...]:
        return drive_of(with_tangent(self.motion)).parts

    @cached_property
    def _with_tangent(self) -> Compiling:
        source = strobe_source(with_tangent(self.motion), tableau(Method.EIGHT), True)
        return Compiling(source, self.motion)

    @cached_property
    def _plain(self) -> Compiling:
        return Compiling(strobe_source(self.motion, tableau(Method.EIGHT), False), self.motion)

    def _near(self, value: float) -> float:
        if self.motion.section is None:
            return 0.0
        slopes = [tangent(self.motion.section, {name: ONE}) for name in self.motion.states]
        start = [float(state.start) for state in self.system.states]
        names = (*self.motion.states, self.motion.swept, *self.motion.fixed)
        gradient = np.array(
            [float(np.asarray(s)) for s in plain_function(slopes, names)([*start, value, *self.fixed])]
        )
        size = float(np.abs(np.where(np.isfinite(gradient), gradient, 0.0)) @ self.scales)
        return NEAR_SHARE * (size if size > 0.0 else 1.0)


PILOTS = 32
"""Orbits across the sweep that the steps are tuned on."""

_SETTLING, _KEPT, _ROUNDS = 24, 4, 5
_TIGHTER, _TIGHTEST = 1e-3, 2e-14
_SPREAD = 1.3
"""The largest error seen on the pilots, taken so many times larger for the orbits that were not seen."""

_MOST_EQUAL = 1.7
"""Equal steps may be so many times more than free ones and still be quicker."""


@dataclass(frozen=True)
class Tuned:
    """Steps that suit a system.

    Attributes
    ----------
    steps
        How samples are to be integrated.
    error
        Largest error of one sample seen on the pilots, as a share of each state's size; nan where no
        pilot had a sample.
    """

    steps: Steps
    error: float


def tuned(runner: Runner, swept: Floats, goal: float, stop: Cell) -> Tuned:
    """Find the steps that keep a sample's error below a goal.

    Parameters
    ----------
    swept
        (pilots,): parameter values to look at.
    goal
        Error of one sample as a share of each state's size.
    """
    start = np.array([float(state.start) for state in runner.system.states])
    driven = runner.motion.is_driven
    steps = Steps(goal / 30.0, 0.02 if driven else _first_time(runner, swept), 0, runner.drive(1))
    settled = runner.samples(np.repeat(start[:, None], len(swept), axis=1), swept, _SETTLING, steps, stop)
    if settled is None:
        return Tuned(steps, np.nan)
    noted, told = settled
    alive = told[3] == 0.0
    if not alive.any():
        return Tuned(steps, np.nan)
    steps = replace(steps, start=_usual_start(runner, swept[alive], told[2, alive]))
    # Several samples of each orbit, as so many orbits of one sample.
    states = np.ascontiguousarray(np.concatenate([noted[alive, :, -k] for k in range(1, _KEPT + 1)]).T)
    at = np.tile(swept[alive], _KEPT)
    measure = _Measure(runner, states, at, stop)

    def error(relative: float) -> float:
        return measure.error(replace(steps, relative=relative))

    relative, seen = tuned_tolerance(error, goal, steps.relative, _TIGHTEST)
    steps = replace(steps, relative=relative)
    best = Tuned(steps, seen)
    if driven:
        # Equal steps are as short as the hardest part of the period asks for, and err less elsewhere: by so
        # much coarser the tolerance may be.
        for _ in range(2):
            equal = measure.equal(steps)
            if equal.pieces == 0:
                break
            seen = measure.error(equal)
            if seen <= goal and (best.steps.pieces == 0 or equal.pieces < best.steps.pieces):
                best = Tuned(equal, seen)
            steps = replace(
                steps, relative=steps.relative * min(max(0.6 * goal / max(seen, 1e-300), 0.1), 30.0)
            )
    return best


class _Measure:
    """Takes the pilots one sample on, with given steps and with far smaller ones."""

    def __init__(self, runner: Runner, states: Floats, swept: Floats, stop: Cell) -> None:
        self.runner, self.states, self.swept, self.stop = runner, states, swept, stop
        self.tries = np.inf

    def ends(self, steps: Steps) -> tuple[Floats, Floats]:
        """Where the pilots are one sample on, and what the kernel found out."""
        found = self.runner.samples(self.states, self.swept, 1, steps, self.stop)
        if found is None:
            return np.full(self.states.shape, np.nan), np.zeros((4, self.states.shape[1]))
        return found[0][:, :, 0].T, found[1]

    def error(self, steps: Steps) -> float:
        """Largest error of a sample, as a share of each state's size; nan where there is none."""
        there, told = self.ends(steps)
        tight = max(steps.relative * _TIGHTER, _TIGHTEST)
        best, _ = self.ends(Steps(tight, steps.start, 0, self.runner.drive(1)))
        if steps.pieces == 0:
            self.tries = float(np.mean(told[1]))
        errors = np.abs(there - best) / self.runner.scales[:, None]
        errors = errors[np.isfinite(errors)]
        return float(errors.max()) if errors.size else np.nan

    def equal(self, steps: Steps) -> Steps:
        """The same accuracy in equal steps; unchanged where free ones are quicker."""
        pieces = max(4, int(self.tries))
        for _ in range(_ROUNDS):
            tried = replace(steps, pieces=pieces, drive=self.runner.drive(pieces))
            _, told = self.ends(tried)
            worst = float(told[0].max())
            if 0.6 < _SPREAD * worst <= 1.0:
                return tried
            order = tableau(Method.EIGHT).order
            grown = (_SPREAD * worst) ** (1.0 / order) if np.isfinite(worst) and worst > 0.0 else 2.0
            wanted = int(np.ceil(pieces * min(max(grown, 0.5), 2.0)))
            if wanted == pieces:
                return tried
            pieces = wanted
            if pieces > _MOST_EQUAL * self.tries:
                return steps
        return tried if _SPREAD * worst <= 1.0 else steps


def _first_time(runner: Runner, swept: Floats) -> float:
    """A time in which no state moves more than a fiftieth of its size, at the start."""
    what = runner.motion
    start = [float(state.start) for state in runner.system.states]
    names = (*what.states, what.swept, *what.fixed)
    rates = plain_function(what.rates, names)([*start, np.float64(swept[len(swept) // 2]), *runner.fixed])
    speed = max(
        abs(float(np.asarray(rate))) / scale for rate, scale in zip(rates, runner.scales, strict=True)
    )
    return 0.02 / speed if np.isfinite(speed) and speed > 0.0 else 0.02


def _usual_start(runner: Runner, swept: Floats, wanted: Floats) -> float:
    """A first step after a sample: somewhat less than what the pilots wanted at its end."""
    what = runner.motion
    times = wanted
    if what.period is not None:
        values = plain_function((what.period,), (what.swept, *what.fixed))([swept, *runner.fixed])
        times = wanted / np.broadcast_to(values[0], swept.shape)
    times = times[np.isfinite(times) & (times > 0.0)]
    return float(0.8 * np.median(times)) if times.size else 0.02


def goal_of_cells(cell: float) -> float:
    """Error of a sample that a picture's cells ask for, in powers of ten, so that views nearby share it.

    Parameters
    ----------
    cell
        Extent of a cell as a share of what it shows, the smaller of both ways.
    """
    asked = 0.05 * cell
    return float(10.0 ** np.clip(np.floor(np.log10(asked)), -12.0, -6.0))
