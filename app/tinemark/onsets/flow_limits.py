"""What stands in the way of finding onsets of equations, recognised by numbers and said in words.

Every check is bounded: a handful of evaluations of the rates, or one short orbit.
"""

from __future__ import annotations

from collections.abc import Generator

import numpy as np

from tinemark.onsets.cycle_map import Floats
from tinemark.onsets.flow_map import FlowMap
from tinemark.onsets.flow_search import LONGEST_PERIOD, drifts, starts
from tinemark.onsets.flow_symmetry import Rates, true_period
from tinemark.onsets.results import Step
from tinemark.systems.errors import NoOnsetFound
from tinemark.systems.system import System

SHORT_ORBIT = 40
LOOKED_AT = (0.0, -0.03, 0.03, -0.15, 0.15, -0.5, 0.5)
"""Where a view is looked at for orbits that go on, in widths from its middle."""
TANGENT_SAMPLES = 400
NEUTRAL = 3e-3
"""A largest exponent a sample below this is no sign of chaos."""


def check_rates(system: System, parameter: str, value: float) -> None:
    """Refuse rates that do not repeat in the strobe period, and a strobe period that is none.

    Raises
    ------
    NoOnsetFound
        Says what the rates do instead.
    """
    if system.kind != "driven":
        return
    rates = Rates(system, parameter, value)
    where = f"at {parameter} = {value:.10g}"
    if not (np.isfinite(rates.period) and rates.period > 0):
        raise NoOnsetFound(
            f"the strobe period is {rates.period:.6g}",
            where=where,
            what_to_do="give sample.every a formula that is above zero over the whole range",
        )
    share = true_period(rates)
    if share is None:
        raise NoOnsetFound(
            f"the rates do not repeat after the strobe period of {rates.period:.6g}, so samples of one "
            "orbit follow no map",
            where=where,
            what_to_do="make sample.every the period of what drives the system; two drives need a common one",
        )
    if share != 1 and share.denominator == 1:
        raise NoOnsetFound(
            f"the rates repeat only after {share.numerator} strobe periods",
            where=where,
            what_to_do=f'write every = "{share.numerator}*({_every(system)})"',
        )
    if share.numerator > 1:
        raise NoOnsetFound(
            f"the rates repeat after {share.numerator}/{share.denominator} strobe periods, not after one",
            where=where,
            what_to_do=f'write every = "{share.numerator}*({_every(system)})/{share.denominator}"',
        )


def shorter_repeat(system: System, parameter: str, value: float) -> str:
    """A sentence where the rates repeat already in a part of the strobe period; empty where they do not."""
    if system.kind != "driven":
        return ""
    share = true_period(Rates(system, parameter, value))
    if share is None or share.numerator != 1 or share.denominator == 1:
        return ""
    return (
        f"the rates repeat {share.denominator} times in a strobe period, so what is called period 1 here may "
        f'be a longer cycle of the drive itself; every = "({_every(system)})/{share.denominator}" shows it'
    )


def _every(system: System) -> str:
    assert system.sample is not None
    return system.sample.every


def check_equations(system: System, parameter: str, value: float) -> Generator[Step, None, FlowMap]:
    """The return map of a system, refused where it has none: see `check_rates` and `first_samples`."""
    yield Step("reading the equations")
    check_rates(system, parameter, value)
    flow = FlowMap(system, parameter)
    yield from first_samples(flow, value)
    return flow


def first_samples(flow: FlowMap, value: float, width: float = 0.0) -> Generator[Step, None, None]:
    """Refuse a system whose orbits have no samples.

    Parameters
    ----------
    value
        Of the swept parameter.
    width
        Of the range around it that is searched: beside a fold there may be orbits on one side only.

    Raises
    ------
    NoOnsetFound
        All starts escape, are too stiff to integrate, or never cross the section; says which.
    """
    yield Step("integrating the equations")
    begun, places = starts(flow, 3), value + width * np.array(LOOKED_AT if width else (0.0,))
    states, values = np.tile(begun, len(places)), np.repeat(places, begun.shape[1])
    why = ""
    for place in range(SHORT_ORBIT):
        states = flow.step(states, values)
        why = flow.why() or why
        alive = np.isfinite(states).all(axis=0)
        states, values = states[:, alive], values[alive]
        if not alive.any():
            after = f"after {place} samples" if place else "before its first sample"
            reason, _, advice = why.partition("; ")
            raise NoOnsetFound(
                f"no orbit goes on: {reason} ({after})",
                where=f"at {flow.many.parameter} = {value:.10g}",
                what_to_do=advice,
            )
        if place % 8 == 0:
            yield Step("integrating the equations")


def why_no_cycle(flow: FlowMap, history: Floats, value: float, scales: Floats) -> Generator[Step, None, str]:
    """What orbits do instead of settling on a cycle, in words."""
    names = flow.many.states
    for state, step in drifts(history, scales):
        return (
            f"{names[state]} grows by {step:.6g} with every sample while the other states may repeat: a "
            "solution that turns on and on is no cycle of these states; write an angle as its sine and cosine"
        )
    if not history.size:
        return "all orbits around the click end: " + (flow.why() or "they leave every bound")
    exponent = yield from _largest_exponent(flow, history[-1, :, 0], value)
    if abs(exponent) < NEUTRAL:
        return (
            f"orbits settle on no cycle of up to {LONGEST_PERIOD} samples and neighbours neither part nor "
            "close in: a quasi-periodic response, in step with no multiple of the sample's period"
        )
    if exponent > 0:
        return (
            f"orbits settle on no cycle of up to {LONGEST_PERIOD} samples, and neighbours part by a factor "
            f"{np.exp(exponent):.3g} a sample: chaos; cycles there are unstable and none was met"
        )
    return f"orbits settle, but on no cycle of up to {LONGEST_PERIOD} samples that could be solved for"


def _largest_exponent(flow: FlowMap, state: Floats, value: float) -> Generator[Step, None, float]:
    direction, total, counted = np.ones(flow.size), 0.0, 0
    for place in range(TANGENT_SAMPLES):
        linear = flow.linearised(state[None, :], value)
        direction = linear.jacobian[0] @ direction
        length = float(np.linalg.norm(direction))
        if not np.isfinite(length) or length == 0:
            break
        state, direction = linear.image[0], direction / length
        if place >= TANGENT_SAMPLES // 4:
            total, counted = total + np.log(length), counted + 1
        if place % 32 == 0:
            yield Step("seeing what orbits do instead")
    return total / counted if counted else 0.0
