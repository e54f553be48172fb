"""Prints the kernel that moves each lane by one sample: a drive period, or on to the section.

Each lane has its own step and its own time; a lane whose step is refused, or that is done, keeps its
state while the others go on.
"""

from __future__ import annotations

from tinemark.equations.lane_memory import LANES
from tinemark.equations.lane_source import Slots, Stepper, at, function, head, indented
from tinemark.equations.motion import Motion
from tinemark.equations.tableau import Tableau
from tinemark.systems.emit import emit

RESTING_STEPS = 20.0
"""Steps in a row that move less than is allowed as an error: the orbit has come to rest."""

CLOSER_LOOKS = 60.0
"""Halvings after which a section met along its own direction counts as grazed."""


def sample_source(motion: Motion, table: Tableau) -> str:
    """A module with one function.

    ``sample(rows, swept, fixed, allowed, relative, bounds, near, limit, codes, counts, times, grazing,
    stop)`` moves `rows` (rows, orbits) in place; see `tinemark.equations.sampler`.
    """
    kernel = _Sample(motion, table)
    return "\n\n".join([head(kernel.operations()), kernel.source()])


class _Sample:
    def __init__(self, motion: Motion, table: Tableau) -> None:
        self.motion = motion
        slots = Slots()
        self.step = Stepper(motion, table, slots, clock=not motion.is_driven)
        self.go, self.code, self.accept, self.h, self.out = (slots.take() for _ in range(5))
        self.tries, self.refused, self.still = (slots.take() for _ in range(3))
        if motion.is_driven:
            self.end, self.last = slots.take(), slots.take()
        else:
            self.g0, self.d0, self.reach, self.last, self.armed, self.left = (slots.take() for _ in range(6))
            self.looks, self.steepest, self.highest, self.missed = (slots.take() for _ in range(4))
        self.size = slots.size

    def operations(self) -> dict[str, str]:
        step = self.step
        pairs = ((step.X, step.Y), (step.F, step.stage(step.table.count)))
        return step.operations() | {
            "nodes_of_stages": f"{(*step.table.nodes, 1.0)!r}",
            "first_stage": f"scaled_rows({step.rows}, {step.K}, {step.F}, {self.out})",
            "accepted": f"chosen_rows({step.rows}, {pairs!r}, {self.accept})",
        }

    def source(self) -> str:
        step, driven = self.step, self.motion.is_driven
        lines = [
            *step.hoisted(),
            "nodes = np.array(nodes_of_stages)",
            f"W = np.zeros({self.size})",
            "total = rows.shape[1]",
        ]
        body = ["lanes = min(LANES, total - first)".replace("LANES", str(LANES)), *self.load()]
        body += ["pending, tries = 1, 0", "while pending > 0 and tries < limit and stop[0] == 0:"]
        loop = ["tries += 1", *self.begin(), *step.stages()]
        if not driven:
            loop += step.level(step.Y)
        loop += ["errors(W, allowed, relative)", *(self.driven_control() if driven else self.flow_control())]
        loop.append("accepted(W)")
        loop += self.watch()
        body += [*indented(1, loop), *self.store()]
        lines += [f"for first in range(0, total, {LANES}):", *indented(1, body)]
        arguments = (
            "rows, swept, fixed, allowed, relative, bounds, near, limit, codes, counts, times, grazing, stop"
        )
        return function("sample", arguments, lines)

    def load(self) -> list[str]:
        step = self.step
        each = [f"{at(step.P)} = swept[first + l]", f"{at(self.go)} = 1.0", f"{at(step.T)} = 0.0"]
        zero = [self.code, self.tries, self.refused, self.still, step.HH]
        if self.motion.period is not None:
            each += emit(
                [("period", self.motion.period)], step.bind() | {self.motion.swept: "p"}, "native", "g"
            )
            each.insert(1, "p = swept[first + l]")
            each.append(f"{at(self.end)} = period")
        else:
            zero += [step.landing, self.armed, self.left, self.looks, self.steepest, self.highest]
            each.append(f"{at(self.missed)} = -np.inf")
            each.append(f"{at(self.reach)} = 1e300")
        each += [f"{at(slot)} = 0.0" for slot in zero]
        lines = ["for l in range(lanes):", *indented(1, each)]
        lines += [f"for i in range({step.rows}):", "    for l in range(lanes):"]
        lines.append(f"        W[{step.X} + i * {LANES} + l] = rows[i, first + l]")
        lines += step.rates(step.X, step.F, "0.0")
        if not self.motion.is_driven:
            lines += step.level(step.X)
            lines += ["for l in range(lanes):", f"    {at(self.g0)} = {at(step.G)}"]
            lines += [f"    {at(self.d0)} = {at(step.D)}"]
            # On or just before the section an orbit has to leave it before a passage counts.
            lines += [f"    {at(self.armed)} = 1.0 if {at(step.G)} < -near else 0.0"]
            lines += [f"    {at(self.left)} = 1.0 if {at(step.G)} >= 0.0 else 0.0"]
        # A first step that moves each state by a hundredth of its size (Hairer et al. 1993, II.4).
        lines += ["for l in range(lanes):", "    size, speed = 0.0, 0.0"]
        for i in range(self.motion.size):
            lines += [
                f"    unit = allowed[{i}] / relative + abs({at(step.X, i)})",
                f"    size += ({at(step.X, i)} / unit) ** 2",
                f"    speed += ({at(step.F, i)} / unit) ** 2",
            ]
        lines += ["    guess = 0.01 * np.sqrt((size + 1e-4) / speed) if speed > 1e-300 else 1e-3"]
        if self.motion.is_driven:
            lines += [f"    guess = min(guess, 0.125 * {at(self.end)})"]
        return [*lines, f"    {at(self.h)} = guess"]

    def begin(self) -> list[str]:
        """The step of each lane, and its first stage from the rates where it stands."""
        step = self.step
        if self.motion.is_driven:
            body = [
                f"rest, going = {at(self.end)} - {at(step.T)}, {at(self.go)}",
                # Even pieces, so that no splinter of a step is left at the end of the period.
                f"pieces = np.ceil(rest / {at(self.h)})",
                f"{at(self.last)} = 1.0 if pieces < 1.5 else 0.0",
                "piece = rest / pieces",
                f"{at(step.HH)} = piece if going > 0.5 else 0.0",
                "scale = 1.0",
            ]
        else:
            body = [
                f"g, reach, time = {at(self.g0)}, {at(self.reach)}, {at(self.h)}",
                f"landing, steepness = {at(step.landing)}, 1.0 / {at(self.d0)}",
                "away = -reach if g > 0.0 else reach",
                "across = -g if abs(g) < reach else away",
                f"{at(self.last)} = 1.0 if abs(g) < reach else 0.0",
                f"{at(step.HH)} = (across if landing > 0.5 else time) * {at(self.go)}",
                "scale = steepness if landing > 0.5 else 1.0",
            ]
        body.append(f"{at(self.out)} = scale")
        return [
            "for l in range(lanes):",
            *indented(1, body),
            "first_stage(W)",
        ]

    def common_control(self) -> list[str]:
        step = self.step
        return [
            f"h, going = {at(step.HH)}, {at(self.go)}",
            *step.judged(),
            "accept = going if error <= 1.0 else 0.0",
            f"{at(self.tries)} += going",
            f"{at(self.refused)} += going - accept",
        ]

    def driven_control(self) -> list[str]:
        step = self.step
        # Every load comes before the choices: a load inside a choice keeps a loop from becoming vector code.
        body = [
            f"before, end, last = {at(self.h)}, {at(self.end)}, {at(self.last)}",
            *self.common_control(),
            f"{at(self.accept)} = accept",
            "wanted = h * factor",
            "kept = wanted if wanted > before else before",
            "wanted = kept if factor >= 1.0 else wanted",
            f"{at(self.h)} = wanted if going > 0.5 else before",
            "done = accept * last",
            f"later = {at(step.T)} + h * accept",
            f"{at(step.T)} = end if done > 0.5 else later",
            f"{at(self.go)} = going - done",
        ]
        return ["for l in range(lanes):", *indented(1, body)]

    def flow_control(self) -> list[str]:
        step = self.step
        body = [
            *self.common_control(),
            f"{at(self.accept)} = 0.0",
            "if going < 0.5:",
            "    continue",
            "if accept < 0.5:",
            f"    if {at(step.landing)} > 0.5:",
            f"        {at(self.reach)} = abs(h) * factor",
            f"        {at(self.looks)} += 1.0",
            "    else:",
            f"        {at(self.h)} = h * factor",
            f"elif {at(step.landing)} > 0.5:",
            f"    {at(self.accept)} = 1.0",
            f"    {at(self.go)} = 1.0 - {at(self.last)}",
            "else:",
            *indented(1, self.passage()),
            f"if {at(self.looks)} > {CLOSER_LOOKS}:",
            f"    {at(self.code)} = 4.0",
            f"    {at(self.go)} = 0.0",
            f"if {at(self.still)} > {RESTING_STEPS}:",
            f"    {at(self.code)} = 5.0",
            f"    {at(self.go)} = 0.0",
            f"if {at(self.accept)} > 0.5:",
            f"    {at(self.g0)} = {at(step.G)}",
            f"    {at(self.d0)} = {at(step.D)}",
        ]
        return ["for l in range(lanes):", *indented(1, body)]

    def passage(self) -> list[str]:
        """What an allowed step in time means for the section."""
        step = self.step
        return [
            f"g0, g1, d0, d1 = {at(self.g0)}, {at(step.G)}, {at(self.d0)}, {at(step.D)}",
            f"armed = {at(self.armed)} > 0.5",
            "peak, place = -np.inf, 2.0",
            "if armed and g1 < 0.0 and d0 > 0.0 and d1 < 0.0:",
            # Highest point of the cubic through both ends and their slopes.
            "    two = 3.0 * (g1 - g0) - h * (2.0 * d0 + d1)",
            "    three = 2.0 * (g0 - g1) + h * (d0 + d1)",
            "    place = h * d0 / (np.sqrt(two * two - 3.0 * three * h * d0) - two)",
            "    peak = g0 + place * (h * d0 + place * (two + place * three))",
            "if armed and g1 >= 0.0 and d1 <= 0.0:",
            # Through the section and turned round within the step: look closer.
            f"    {at(self.h)} = 0.5 * h",
            f"    {at(self.looks)} += 1.0",
            "elif peak > 0.0 or (peak > -0.02 * (peak - g0) and 0.05 < place < 0.95):",
            f"    {at(self.h)} = h * place",
            f"    {at(self.looks)} += 1.0",
            "else:",
            f"    {at(self.accept)} = 1.0",
            f"    {at(self.looks)} = 0.0",
            f"    {at(self.missed)} = max({at(self.missed)}, peak)",
            f"    {at(self.steepest)} = max({at(self.steepest)}, abs(d1))",
            f"    {at(self.highest)} = max({at(self.highest)}, abs(g1))",
            f"    {at(self.still)} = {at(self.still)} + 1.0 if {at(step.moved)} < 1.0 else 0.0",
            f"    {at(self.h)} = h * factor",
            "    if armed and g1 >= 0.0:",
            f"        {at(step.landing)} = 1.0",
            "    elif g1 > 0.0:",
            f"        {at(self.left)} = 1.0",
            f"    elif {at(self.left)} > 0.5 or g1 < -near:",
            f"        {at(self.armed)} = 1.0",
        ]

    def watch(self) -> list[str]:
        """Lanes that have left every bound stop; `pending` counts the others."""
        step = self.step
        lines = ["for l in range(lanes):", f"    {at(self.out)} = 0.0"]
        lines += [
            f"for i in range({self.motion.size}):",
            "    bound = bounds[i]",
            "    for l in range(lanes):",
        ]
        place = f"W[{step.X} + i * {LANES} + l]"
        lines += [f"        out, size = {at(self.out)}, abs({place})"]
        lines += [f"        {at(self.out)} = out if size < bound else 1.0"]
        lines += ["pending = 0", "for l in range(lanes):"]
        body = [
            f"code, going, out = {at(self.code)}, {at(self.go)}, {at(self.out)}",
            f"{at(self.code)} = 1.0 if out > code else code",
            "going = 0.0 if out > 0.5 else going",
            f"{at(self.go)} = going",
            "pending += 1 if going > 0.5 else 0",
        ]
        return [*lines, *indented(1, body)]

    def store(self) -> list[str]:
        step = self.step
        lines = ["for l in range(lanes):"]
        lines += [f"    if {at(self.go)} > 0.5:", f"        {at(self.code)} = 3.0 if stop[0] != 0 else 2.0"]
        lines += [f"    codes[first + l] = np.uint8({at(self.code)})"]
        lines += [f"    counts[0, first + l] = np.int64({at(self.tries)})"]
        lines += [f"    counts[1, first + l] = np.int64({at(self.refused)})"]
        clock = at(step.T) if self.motion.is_driven else at(step.X, step.checked)
        lines += [f"    times[first + l] = {clock}"]
        if not self.motion.is_driven:
            lines += [f"    grazing[0, first + l] = {at(self.d0)} / {at(self.steepest)}"]
            lines += [f"    grazing[1, first + l] = {at(self.missed)} / {at(self.highest)}"]
        lines += [f"for i in range({step.rows}):", "    for l in range(lanes):"]
        lines.append(f"        rows[i, first + l] = W[{step.X} + i * {LANES} + l]")
        lines += ["        if codes[first + l] != 0:", "            rows[i, first + l] = np.nan"]
        return lines
