"""Prints the kernel that moves columns of a strobed or sampled system on and notes their samples.

Driven systems take the same number of equal steps in every period, so that all lanes stand at the same
phase and what the drive contributes is worked out beforehand; a lane whose error estimate exceeds
what is allowed repeats the period with steps of its own. Free-running systems always step by themselves, each
lane counting its own passages. Either way a sample depends on nothing but the sample before it.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

from tinemark.density.tangent import tangent
from tinemark.equations import lane_control as place
from tinemark.equations.lane_memory import LANES
from tinemark.equations.lane_source import Stepper, at, function, head, indented
from tinemark.equations.motion import TIME, Motion, rate_name, row_name
from tinemark.equations.tableau import Tableau
from tinemark.systems.emit import emit
from tinemark.systems.expression import Call, Cond, Expr, Name, children, names_in, walk

ARGUMENTS = (
    "states, tangents, growth, swept, fixed, first, columns, noted, measured, allowed, relative, bounds, "
    "near, limit, start, pieces, drive, told, stop"
)
SETTLE_ARGUMENTS = "W, lanes, fixed, allowed, relative, bounds, near, limit, stop"


def with_tangent(plain: Motion) -> Motion:
    """The motion with a tangent vector as its rows."""
    direction = {name: Name(row_name(i)) for i, name in enumerate(plain.states)}
    return replace(plain, rows=tuple(tangent(rate, direction) for rate in plain.rates))


@dataclass(frozen=True)
class Drive:
    """What of the rates hangs on time and fixed parameters alone, and the motion with names in its place."""

    motion: Motion
    parts: tuple[Expr, ...]


def drive_of(motion: Motion) -> Drive:
    """Take the drive out of the rates; nothing is taken where the period varies from column to column."""
    assert motion.period is not None
    if motion.swept in names_in(motion.period):
        return Drive(motion, ())
    timely = frozenset({TIME, *motion.fixed})
    parts: dict[Expr, Expr] = {}
    names: dict[int, frozenset[str]] = {}
    done: dict[int, Expr] = {}

    def lifted(node: Expr) -> Expr:
        """What stands for an operand: a name where all of it is the drive's."""
        if TIME in names[id(node)] <= timely:
            return parts.setdefault(node, Name(f"drive {len(parts)}"))
        return done[id(node)]

    def rewritten(expr: Expr) -> Expr:
        for node in walk(expr):
            own = frozenset({node.name}) if isinstance(node, Name) else frozenset[str]()
            names[id(node)] = own.union(*(names[id(child)] for child in children(node)))
            done[id(node)] = node
            if names[id(node)] <= timely:
                continue
            copies = tuple(lifted(child) for child in children(node))
            if isinstance(node, Call):
                done[id(node)] = Call(node.fn, copies)
            elif isinstance(node, Cond):
                left, right, then, other = copies
                done[id(node)] = Cond(left, node.op, right, then, other)
        return lifted(expr)

    rates, rows = tuple(map(rewritten, motion.rates)), tuple(map(rewritten, motion.rows))
    return Drive(replace(motion, rates=rates, rows=rows), tuple(parts))


def strobe_source(motion: Motion, table: Tableau, has_tangent: bool) -> str:
    """A module with one function, ``run(...)``, of `ARGUMENTS`.

    It moves the columns `first` to `first + columns` of `states` (states, all columns) by as many samples as
    `noted` (columns, states, samples) has room for, and returns whether it came to the end; stopped
    before, it leaves everything as it was. With a tangent it also moves `tangents` and adds the logarithm
    of their growth to `growth` where `measured`. `told` (4, columns) receives the largest error of a step in
    equal steps, the steps tried, the step last wanted, and the reason of a lane that has no sample.
    """
    kernel = (_Driven if motion.is_driven else _Free)(motion, table, has_tangent)
    return kernel.source()


class _Kernel:
    """What driven and free-running kernels have in common."""

    def __init__(self, motion: Motion, table: Tableau, has_tangent: bool) -> None:
        self.motion, self.has_tangent = motion, has_tangent
        self.n = motion.size
        self.step = Stepper(motion, table, unchecked=self.n if has_tangent else 0)

    def integration(self) -> list[str]:
        """One step of every lane under way, up to where its error is judged."""
        kind = "driven" if self.motion.is_driven else "flow"
        return [
            f"control.begin_{kind}(W, lanes)",
            "first_stage(W, lanes)",
            *self.step.stages(),
            "errors(W, lanes, allowed, relative)",
            f"control.judge(W, lanes, {self.step.checked}, {self.step.table.order})",
        ]

    def watched(self) -> list[str]:
        """Which lanes go on."""
        return [
            f"control.watch(W, lanes, {self.step.X}, {self.n}, bounds)",
            "control.overdue(W, lanes, limit)",
            "pending = control.pending(W, lanes)",
        ]

    def load(self) -> list[str]:
        """Lanes from columns; a column that has been lost before stays lost."""
        step, n = self.step, self.n
        body = [f"{at(place.SWEPT)} = swept[first + l]", "alive = True"]
        for i in range(n):
            body += [f"x{i} = states[{i}, first + l]", f"{at(step.X, i)} = x{i}"]
            body.append(f"alive = alive and abs(x{i}) < bounds[{i}]")
        if self.has_tangent:
            body += [f"{at(step.X, n + i)} = tangents[{i}, first + l]" for i in range(n)]
        body.append(f"{at(place.CODE)} = 0.0 if alive else 1.0")
        if self.motion.period is not None:
            code = emit([("period", self.motion.period)], step.bind(), "native", "g")
            body += ["p = swept[first + l]", *code, f"{at(place.PERIOD)} = period"]
        lines = [*step.hoisted(), f"W = np.zeros({self.size})", "lanes = columns", "samples = noted.shape[2]"]
        lines += ["grown = np.zeros(lanes)", "for l in range(lanes):", *indented(1, body)]
        return lines

    @property
    def size(self) -> int:
        """Numbers of working memory."""
        return self.step.size

    def noted(self, sample: str) -> list[str]:
        """Lines for one lane: its states at a sample."""
        return [f"noted[l, {i}, {sample}] = {at(self.step.X, i)}" for i in range(self.n)]

    def renormalised(self) -> list[str]:
        """Lines for one lane: growth of its tangent `v` since the last sample; it goes on with length one."""
        n, step = self.n, self.step
        square = " + ".join(f"v{i} * v{i}" for i in range(n))
        lines = [f"length = lane_sqrt({square})", "back = 1.0 / (length if length > 0.0 else 1.0)"]
        # A tangent that has vanished starts anew: its growth is -inf and stays so.
        lines.append("v0 = v0 * back if length > 0.0 else 1.0")
        lines += [f"v{i} = v{i} * back" for i in range(1, n)]
        lines += [f"{at(step.X, n + i)} = v{i}" for i in range(n)]
        return [*lines, "grown[l] += lane_log(length)"]

    def store(self) -> list[str]:
        """Columns from lanes."""
        step, n = self.step, self.n
        body = [f"lost = {at(place.CODE)} > 0.5", f"told[3, l] = {at(place.CODE)}"]
        body += [f"states[{i}, first + l] = np.nan if lost else {at(step.X, i)}" for i in range(n)]
        if self.has_tangent:
            body += [f"tangents[{i}, first + l] = {at(step.X, n + i)}" for i in range(n)]
            body += ["if measured:", "    growth[first + l] += grown[l]"]
        return ["for l in range(lanes):", *indented(1, body), "return True"]


class _Free(_Kernel):
    """A free-running system."""

    def source(self) -> str:
        step = self.step
        loop = [
            *self.integration(),
            *step.level(step.Y),
            "control.end_flow(W, lanes, near)",
            "accepted(W, lanes)",
            "for l in range(lanes):",
            f"    if {at(place.LANDED)} > 0.5:",
            *indented(2, self.landed()),
            *self.watched(),
        ]
        lines = [*self.load(), "node_of = np.array(nodes)", *step.rates(step.X, step.F, "0.0")]
        lines += [*step.level(step.X), "control.depart(W, lanes, near)", "taken = np.zeros(lanes, np.int64)"]
        lines += ["for l in range(lanes):", f"    {at(place.WANTED)} = start"]
        lines += ["    told[0, l] = 0.0", "    told[1, l] = 0.0"]
        lines.append(f"control.watch(W, lanes, {step.X}, {self.n}, bounds)")
        lines += ["pending = control.pending(W, lanes)", "while pending > 0 and stop[0] == 0:"]
        lines += [*indented(1, loop), "if stop[0] != 0:", "    return False"]
        lines += ["for l in range(lanes):", "    for s in range(taken[l], samples):"]
        lines += [*(f"        noted[l, {i}, s] = np.nan" for i in range(self.n)), *self.store()]
        return "\n\n".join([head(step.operations()), function("run", ARGUMENTS, lines)])

    def landed(self) -> list[str]:
        """Lines for one lane that stands on the section."""
        lines = [*self.noted("taken[l]"), "taken[l] += 1", f"told[1, l] += {at(place.TRIES)}"]
        lines += [f"told[2, l] = {at(place.WANTED)}", "control.rearm(W, l)", f"{at(place.WANTED)} = start"]
        lines.append(f"{at(place.TRIES)} = 0.0")
        if self.has_tangent:
            lines += self.projected()
        return [*lines, "if taken[l] == samples:", f"    {at(place.GOING)} = 0.0"]

    def projected(self) -> list[str]:
        """The tangent less its part along the flow, which does not grow (Parker and Chua 1989)."""
        n, step = self.n, self.step
        assert self.motion.section_slope is not None
        lines = [f"x{i} = {at(step.X, i)}" for i in range(n)] + [f"p = {at(place.SWEPT)}"]
        lines += [f"v{i} = {at(step.X, n + i)}" for i in range(n)]
        bind = step.bind() | {rate_name(i): f"v{i}" for i in range(n)}
        lines += emit([("risen", self.motion.section_slope)], bind, "native", "g")
        lines.append(f"risen = risen / {at(place.START_SLOPE)}")
        lines += [f"v{i} = v{i} - risen * {at(step.F, i)}" for i in range(n)]
        lines += self.renormalised()
        bind = step.bind() | {row_name(i): f"v{i}" for i in range(n)}
        targets = [(f"w{i}", row) for i, row in enumerate(self.motion.rows)]
        lines += emit(targets, bind, "native", "h")
        return lines + [f"{at(step.F, n + i)} = w{i}" for i in range(n)]


class _Driven(_Kernel):
    """A driven system."""

    def __init__(self, motion: Motion, table: Tableau, has_tangent: bool) -> None:
        super().__init__(motion, table, has_tangent)
        self.drive = drive_of(motion)
        self.even = Stepper(self.drive.motion, table, unchecked=self.n if has_tangent else 0)
        self.back = self.step.size

    @property
    def size(self) -> int:
        """Numbers of working memory: the step's, and where each lane stood at the last sample."""
        return self.back + self.step.rows * LANES

    def source(self) -> str:
        step = self.step
        operations = step.operations() | {
            "kept": f"copied_rows({step.rows}, {self.back}, {step.X})",
            "begun": f"copied_rows({step.rows}, {step.Y}, {step.X})",
            "taken": f"copied_rows({step.rows}, {step.X}, {step.Y})",
            "restored": f"chosen_rows({step.rows}, (({step.X}, {self.back}),), {place.GOING})",
        }
        parts = [head(operations), function("settle", SETTLE_ARGUMENTS, self.settle())]
        return "\n\n".join([*parts, function("run", ARGUMENTS, self.run())])

    def settle(self) -> list[str]:
        """Lanes under way go one sample on with steps of their own."""
        step = self.step
        loop = [
            *self.integration(),
            "control.end_driven(W, lanes)",
            "accepted(W, lanes)",
            "for l in range(lanes):",
            f"    {at(place.GOING)} = {at(place.GOING)} - {at(place.LANDED)}",
            *self.watched(),
        ]
        return [
            *step.hoisted(),
            "node_of = np.array(nodes)",
            *step.rates(step.X, step.F, "0.0"),
            "pending = control.pending(W, lanes)",
            "while pending > 0 and stop[0] == 0:",
            *indented(1, loop),
        ]

    def run(self) -> list[str]:
        step = self.step
        sample = [
            "kept(W, lanes)",
            "for l in range(lanes):",
            f"    {at(place.STEP)} = {at(place.PERIOD)} / pieces if pieces > 0 else 0.0",
            # With no equal steps every lane counts as one that has to step by itself.
            f"    {at(place.OUT)} = 0.0 if pieces > 0 else np.inf",
            f"    {at(place.WANTED)} = {at(place.PERIOD)} * start",
            f"    {at(place.TIME)} = 0.0",
            "begun(W, lanes)",
            "for j in range(pieces):",
            *indented(1, self.even_step()),
            "for l in range(lanes):",
            f"    told[0, l] = max(told[0, l], {at(place.OUT)})",
            "if control.unsettled(W, lanes) > 0:",
            "    restored(W, lanes)",
            "    settle(W, lanes, fixed, allowed, relative, bounds, near, limit, stop)",
            "    for l in range(lanes):",
            f"        told[1, l] += {at(place.TRIES)}",
            f"        told[2, l] = {at(place.WANTED)}",
            f"control.watch(W, lanes, {step.X}, {self.n}, bounds)",
            "if stop[0] != 0:",
            "    return False",
            "for l in range(lanes):",
            *indented(1, self.noted("sample")),
            f"    if {at(place.CODE)} > 0.5:",
            *(f"        noted[l, {i}, sample] = np.nan" for i in range(self.n)),
        ]
        if self.has_tangent:
            sample += ["for l in range(lanes):"]
            sample += [f"    v{i} = {at(step.X, self.n + i)}" for i in range(self.n)]
            sample += indented(1, self.renormalised())
        lines = [*self.load(), "node_of = np.array(nodes)", "for l in range(lanes):"]
        lines += ["    told[0, l] = 0.0", "    told[1, l] = 0.0"]
        return [*lines, "for sample in range(samples):", *indented(1, sample), *self.store()]

    def even_step(self) -> list[str]:
        """Step number j of a period's equal ones."""
        even = self.even
        count = even.table.count
        drives = {f"drive {i}": f"d{i}" for i in range(len(self.drive.parts))}
        stage = [f"d{i} = drive[j, s, {i}]" for i in range(len(drives))]
        stage += [f"k = {even.K} + s * {even.rows * LANES}"]
        stage += even.rates(even.Y, "k", "(j + node_of[s])", more=drives)
        stage.append("points(W, lanes, s + 1)")
        return [
            f"for s in range({count}):",
            *indented(1, stage),
            "errors(W, lanes, allowed, relative)",
            f"control.worst(W, lanes, {even.checked})",
            "taken(W, lanes)",
        ]
