"""The strobe map of a switched linear system in doubles, with its derivatives: exact between switchings."""

from __future__ import annotations

import numpy as np

from tinemark.equations.reasons import Reason, words
from tinemark.equations.return_map import Floats, Linearised
from tinemark.equations.scales import escape_bounds, state_scales
from tinemark.equations.switched import SwitchedMotion
from tinemark.equations.switched_kernels import LEAST_STEPS, MOST_SWITCHINGS, switched_kernel
from tinemark.systems.plain import plain_function
from tinemark.systems.system import TIME, System


class SwitchedReturnMap:
    """The strobe map of a switched linear system along one parameter, the others at their values.

    It is asked as `tinemark.equations.return_map.FloatReturnMap` is.

    Parameters
    ----------
    least_steps
        Steps of a period at least. There is no error to be traded for them, only rounding: two maps with
        different numbers show how much of it there is.
    """

    is_driven = True

    def __init__(
        self, system: System, parameter: str, motion: SwitchedMotion, least_steps: int = LEAST_STEPS
    ) -> None:
        self.system, self.parameter, self.least_steps = system, parameter, least_steps
        self.size = motion.size
        self._kernel = switched_kernel(motion)
        self._fixed = np.array([float(system.parameter(name).value) for name in motion.fixed])
        names = (*system.state_names, parameter, *motion.fixed, TIME)
        self._observe = plain_function((system.observe_expression,), names)
        self._codes = np.zeros(0, np.int64)
        self._scales: Floats | None = None
        self._bounds: Floats | None = None

    def step(self, states: Floats, r: Floats | float) -> Floats:
        """States a period later; shape (n, lanes), nan where the orbit could not be followed."""
        return self._travel(states, r, False)[0]

    def linearised(self, points: Floats, r: Floats | float) -> Linearised:
        """The map and its first derivatives at points of shape (p, n)."""
        image, jacobian, slope, times = self._travel(np.ascontiguousarray(points.T), r, True)
        return Linearised(np.ascontiguousarray(image.T), jacobian, slope, times)

    def observed(self, points: Floats, r: Floats | float) -> Floats:
        """Observed quantity at points of shape (p, n)."""
        swept = np.broadcast_to(np.asarray(r, dtype=np.float64), (len(points),))
        constants = [np.float64(value) for value in self._fixed]
        result = np.empty(len(points))
        result[:] = self._observe([*points.T, swept, *constants, np.zeros_like(swept)])[0]
        return result

    def scales(self, r: float) -> Floats:
        """A length typical of each state, shape (n,)."""
        if self._scales is None:
            self._scales = state_scales(self.system, self.parameter, r)
        return self._scales

    def reasons(self) -> tuple[str, ...]:
        """Why the orbits of the latest call have no sample, in words; empty where they have one."""
        return tuple(_words(Reason(int(code))) for code in self._codes)

    def _travel(
        self, states: Floats, r: Floats | float, varied: bool
    ) -> tuple[Floats, Floats, Floats, Floats]:
        n, lanes = states.shape
        swept = np.array(np.broadcast_to(np.asarray(r, dtype=np.float64), (lanes,)))
        if self._bounds is None:
            self._bounds = escape_bounds(self.system, self.scales(float(swept[0])))
        kept = lanes if varied else 1
        image, times = np.empty((n, lanes)), np.empty(lanes)
        jacobian, slope = np.empty((kept, n, n)), np.empty((kept, n))
        self._codes = np.zeros(lanes, np.int64)
        self._kernel.travel(
            np.ascontiguousarray(states, dtype=np.float64),
            swept,
            self._fixed,
            self.least_steps,
            varied,
            self._bounds,
            np.zeros(1, np.uint8),
            image,
            jacobian,
            slope,
            times,
            self._codes,
        )
        return image, jacobian, slope, times


def _words(reason: Reason) -> str:
    if reason is Reason.TOO_MANY_STEPS:
        return (
            f"the system switches more than {MOST_SWITCHINGS} times a period, slides along a switching "
            "surface, or is stiff between switchings; try another start, or more hysteresis in the model"
        )
    if reason is Reason.GRAZES:
        return "the orbit touches a switching surface without passing through it; no derivative exists there"
    return words(reason, MOST_SWITCHINGS, True)
