"""The return map of a driven or free-running system, enclosed: images and derivatives of boxes of states.

Everything is a ball that holds the true value for every start in the box and every parameter in its ball.
Derivatives in the start that a Newton test multiplies with tiny boxes are carried with few bits.
"""

from __future__ import annotations

from collections.abc import Generator, Sequence
from dataclasses import dataclass
from typing import Any

from flint import arb, arb_mat

from tinemark.equations.enclosure_passing import passing
from tinemark.equations.enclosure_run import Run, strobe_step
from tinemark.equations.enclosure_section import projected, projected_curve
from tinemark.equations.enclosure_steps import LOW_ORDER, bend_over, curve_over, low_arc
from tinemark.equations.series import working
from tinemark.equations.taylor_arc import LOW_BITS
from tinemark.equations.taylor_rates import Rates


@dataclass(frozen=True)
class Carried:
    """A box after one return.

    Attributes
    ----------
    image
        n balls.
    jacobian, slope
        Derivative in the start (n, n) and in the parameter (n, 1).
    bend, bend_r
        Derivative of (jacobian times the vector) in the start (n, n) and in the parameter (n, 1); None
        without a vector.
    time
        How long it took: 1 for a strobe, otherwise a ball.
    steps
        Taylor steps taken.
    sizes
        Largest size of each state between steps.
    """

    image: list[Any]
    jacobian: Any
    slope: Any
    bend: Any | None
    bend_r: Any | None
    time: Any
    steps: int
    sizes: list[float]


def carry(
    rates: Rates, box: Sequence[Any], r: Any, bits: int, vector: Sequence[Any] | None = None
) -> Generator[float, None, Carried]:
    """Carry a box of states once round, with its derivatives.

    Parameters
    ----------
    box, r
        Balls of the states and of the parameter.
    bits
        Accuracy wanted of image and first derivative where box and r are exact.
    vector
        Direction for the second derivative: n balls.

    Yields
    ------
    float
        Time integrated so far (periods of a driven system), between steps.

    Raises
    ------
    NotEnclosed, Grazes, ArithmeticError, Unbounded, SwitchingTouched
        Why there is no enclosure.
    """
    run = Run(rates, box, r, bits)
    n = run.n
    second: Any = None
    with working(run.bits):
        direction = None if vector is None else arb_mat(n, 1, list(vector))
        if direction is not None:
            second = arb_mat(n, n + 1)
    moment: Any | None = None
    while moment is None and run.clock < 1.0:
        arc, bound, length, spread = run.begin()
        time: Any
        if run.section is None:
            length = strobe_step(run, length)
            time = arb(length)
        else:
            length, moment = passing(run, arc, bound, spread, length)
            time = arb(length) if moment is None else moment
        low = low_arc(arc)
        with working(LOW_BITS, LOW_ORDER):
            slope = low.slope()
            forced = None
            if direction is not None:
                plain = run.plain()
                moved = _square(plain) * direction
                bend = bend_over(
                    low, slope, [moved[i, 0] for i in range(n)], bound, time, spread, run.spread_r
                )
                forced = bend * _bordered(plain)
        link, inverse = run.end(arc, bound, time, spread, low, slope)
        if forced is not None:
            with working(run.bits):
                second = link * second + inverse * forced
        if moment is None:
            run.elapsed += length
        if run.section is None:
            run.clock += length
        yield run.elapsed
    with working(run.bits):
        image, first = run.set.hull(), run.plain()
        after = None if direction is None else run.set.basis * second
        if run.section is not None:
            vector_after = None if direction is None else _square(first) * direction
            stopped = projected(run.section, image, run.r, first, vector_after, after)
            first, after = stopped.first, stopped.second
        jacobian, push = _parts(first)
        bend, bend_r = (None, None) if after is None else _parts(after)
        taken = arb(1) if moment is None else moment + run.elapsed
        return Carried(image, jacobian, push, bend, bend_r, taken, run.steps, run.sizes)


def carry_curve(
    rates: Rates, box: Sequence[Any], r: Any, jets: Sequence[Sequence[Any]]
) -> Generator[float, None, list[list[Any]]]:
    """Coefficients of e, e^2 and e^3 after one return, of a curve of starts with these coefficients.

    For all starts in the box and all parameters in the ball r, to few bits. Yields and raises as `carry`.
    """
    run = Run(rates, box, r, LOW_BITS)
    n = run.n
    with working(run.bits):
        # In the frame of the set, which at first is that of the states.
        y1, y2, y3 = (arb_mat(n, 1, list(jet)) for jet in jets)
    moment: Any | None = None
    while moment is None and run.clock < 1.0:
        arc, bound, length, spread = run.begin()
        time: Any
        if run.section is None:
            length = strobe_step(run, length)
            time = arb(length)
        else:
            length, moment = passing(run, arc, bound, spread, length)
            time = arb(length) if moment is None else moment
        low = low_arc(arc)
        with working(LOW_BITS, LOW_ORDER):
            slope = low.slope()
            firsts, seconds = run.set.basis * y1, run.set.basis * y2
            forced, turned = curve_over(
                low,
                [firsts[i, 0] for i in range(n)],
                [seconds[i, 0] for i in range(n)],
                bound,
                time,
                spread,
                run.spread_r,
            )
        link, inverse = run.end(arc, bound, time, spread, low, slope)
        with working(run.bits):
            y1, y2, y3 = link * y1, link * y2 + inverse * forced, link * y3 + inverse * turned
        run.elapsed += length
        if run.section is None:
            run.clock += length
        yield run.elapsed
    with working(run.bits):
        after = [run.set.basis * part for part in (y1, y2, y3)]
        if run.section is not None:
            after = projected_curve(run.section, run.set.hull(), run.r, after)
        return [[part[i, 0] for i in range(n)] for part in after]


def _square(block: Any) -> Any:
    n = block.nrows()
    return arb_mat(n, n, [block[i, j] for i in range(n) for j in range(n)])


def _bordered(block: Any) -> Any:
    """(n + 1, n + 1): derivative of states and parameter in starts and parameter."""
    n = block.nrows()
    values = [block[i, j] for i in range(n) for j in range(n + 1)]
    return arb_mat(n + 1, n + 1, [*values, *([0] * n), 1])


def _parts(block: Any) -> tuple[Any, Any]:
    n = block.nrows()
    return _square(block), arb_mat(n, 1, [block[i, n] for i in range(n)])
