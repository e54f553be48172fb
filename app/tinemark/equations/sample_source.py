"""Prints the kernel that moves each lane by one sample: a drive period, or on to the section."""

from __future__ import annotations

from tinemark.equations import lane_control as place
from tinemark.equations.lane_memory import LANES
from tinemark.equations.lane_source import Stepper, at, function, head, indented
from tinemark.equations.motion import Motion
from tinemark.equations.tableau import Tableau
from tinemark.systems.emit import emit


def sample_source(motion: Motion, table: Tableau) -> str:
    """A module with one function.

    ``sample(rows, swept, fixed, allowed, relative, bounds, near, limit, codes, counts, times, grazing,
    stop)`` moves `rows` (rows, orbits) in place; see `tinemark.equations.sampler`.
    """
    step = Stepper(motion, table, clock=not motion.is_driven)
    driven = motion.is_driven
    loop = [
        "tries += 1",
        f"control.begin_{'driven' if driven else 'flow'}(W, lanes)",
        "first_stage(W, lanes)",
        *step.stages(),
        "errors(W, lanes, allowed, relative)",
        f"control.judge(W, lanes, {step.checked}, {table.order})",
    ]
    loop += (
        ["control.end_driven(W, lanes)"]
        if driven
        else [*step.level(step.Y), "control.end_flow(W, lanes, near)"]
    )
    loop += [
        "accepted(W, lanes)",
        "for l in range(lanes):",
        f"    {at(place.GOING)} = {at(place.GOING)} - {at(place.LANDED)}",
        f"control.watch(W, lanes, {step.X}, {motion.size}, bounds)",
        "pending = control.pending(W, lanes)",
    ]
    body = [
        f"lanes = min({LANES}, total - first)",
        *departure(step),
        "pending, tries = lanes, 0",
        "while pending > 0 and tries < limit and stop[0] == 0:",
        *indented(1, loop),
        "control.give_up(W, lanes, stop[0])",
        *_store(step),
    ]
    lines = [
        *step.hoisted(),
        "node_of = np.array(nodes)",
        f"W = np.zeros({step.size})",
        "total = rows.shape[1]",
    ]
    lines += [f"for first in range(0, total, {LANES}):", *indented(1, body)]
    arguments = (
        "rows, swept, fixed, allowed, relative, bounds, near, limit, codes, counts, times, grazing, stop"
    )
    return "\n\n".join([head(step.operations()), function("sample", arguments, lines)])


def departure(step: Stepper) -> list[str]:
    """Lines that load `lanes` orbits from number `first` on and let them set out."""
    motion = step.motion
    lines = ["control.clear(W)", "for l in range(lanes):", f"    {at(place.SWEPT)} = swept[first + l]"]
    if motion.period is not None:
        code = emit([("period", motion.period)], step.bind(), "native", "g")
        lines += indented(1, ["p = swept[first + l]", *code, f"{at(place.PERIOD)} = period"])
    lines += [
        f"for i in range({step.rows}):",
        "    for l in range(lanes):",
        f"        W[{step.X} + i * {LANES} + l] = rows[i, first + l]",
        *step.rates(step.X, step.F, "0.0"),
    ]
    if motion.period is None:
        lines += step.level(step.X)
    longest = f"0.125 * abs(W[{place.PERIOD}])" if motion.is_driven else "np.inf"
    lines.append("control.depart(W, lanes, near)")
    lines.append(
        f"control.first_steps(W, lanes, {step.X}, {step.F}, {motion.size}, allowed, relative, {longest})"
    )
    return lines


def _store(step: Stepper) -> list[str]:
    """Lines that hand back where the orbits stand and what was met on the way."""
    clock = at(place.TIME) if step.motion.is_driven else at(step.X, step.moved)
    body = [
        f"codes[first + l] = np.uint8({at(place.CODE)})",
        f"counts[0, first + l] = np.int64({at(place.TRIES)})",
        f"counts[1, first + l] = np.int64({at(place.REFUSED)})",
        f"times[first + l] = {clock}",
    ]
    if not step.motion.is_driven:
        body += [
            f"grazing[0, first + l] = {at(place.START_SLOPE)} / {at(place.STEEPEST)}",
            f"grazing[1, first + l] = {at(place.MISSED)} / {at(place.HIGHEST)}",
        ]
    body += [
        f"for i in range({step.rows}):",
        f"    state = W[{step.X} + i * {LANES} + l]",
        "    rows[i, first + l] = np.nan if codes[first + l] != 0 else state",
    ]
    return ["for l in range(lanes):", *indented(1, body)]
