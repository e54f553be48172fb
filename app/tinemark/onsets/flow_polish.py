"""Onsets of an integrated return map in doubles: Newton's method on what defines them.

Unknowns are all points of the cycle, the parameter and, for a Neimark-Sacker point, the angle of its
multiplier; the equations are those of multiple shooting and g = 0, where g is the bordering function of the
monodromy matrix M,

    [M - mu  b] [q]   [0]
    [c*      0] [g] = [1],

zero exactly where mu is a multiplier (Govaerts 2000, chapter 4). Its derivatives need those of (Jacobian
times vector) alone. mu is -1 at a flip, 1 at a fold, exp(i angle) at a Neimark-Sacker point. Where branches
cross these equations are singular: see `flow_crossing`.
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Generator
from dataclasses import dataclass, replace

import numpy as np

from tinemark.onsets.cycle_map import Floats
from tinemark.onsets.flow_map import FlowMap, Values
from tinemark.onsets.many_cycles import Condensed, Cycle, condense
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.results import Kind, Step

MOST_STEPS = 16
SETTLED = 3e-14
"""A Newton step that moves the parameter by less than this share of it, or of its reach, is the last."""
FARTHEST = 0.02
"""Scaled step that is too long for an onset that was known already."""
STALLED = 1e-6
"""A step below this share that does not halve the one before is as good as rounding allows."""
REAL = 1e-9


@dataclass(frozen=True)
class Border:
    """Column and row that g is defined by, in states of which `scales` counts as 1."""

    column: Values
    row: Values
    scales: Floats


@dataclass(frozen=True)
class Solution:
    """An onset as it was solved for at one level.

    Attributes
    ----------
    cycle
        Points and parameter.
    vectors
        (p, n): the critical vector at each point, complex at a Neimark-Sacker point.
    angle
        Of the critical multiplier.
    monodromy, slope
        Derivatives of f^p at the first point, (n, n) and (n,).
    speed
        Derivative of the critical multiplier in the parameter, along the branch: of its modulus at a
        Neimark-Sacker point, without meaning where the branch turns.
    last_step
        Last Newton step in the parameter.
    matrix
        Jacobian of the defining equations f^p(x) - x = 0 and g = 0 in (first point, parameter[, angle]);
        None where branches cross.
    border
        What g is defined by; None where branches cross.
    """

    cycle: Cycle
    vectors: Values
    angle: float
    monodromy: Floats
    slope: Floats
    speed: float
    last_step: float
    matrix: Floats | None
    border: Border | None


@dataclass(frozen=True)
class Bordered:
    """Solution of the bordered equations: g, and the right and left vectors in the states' own units."""

    g: complex
    right: Values
    left: Values


def target_of(kind: Kind, angle: float) -> complex:
    """The critical multiplier."""
    if kind is Kind.NEIMARK_SACKER:
        return cmath.exp(1j * angle)
    return -1.0 if kind is Kind.FLIP else 1.0


def border_at(monodromy: Floats, mu: complex, scales: Floats) -> Border:
    """Borders that make the bordered matrix regular: the null vectors of M - mu in scaled states."""
    scaled = monodromy * scales / scales[:, None]
    left, _, right = np.linalg.svd(scaled - mu * np.eye(len(scales)))
    return Border(left[:, -1], right[-1].conj(), scales)


def bordered(monodromy: Floats, mu: complex, border: Border) -> Bordered:
    """Solve the bordered equations from both sides."""
    n, scales = len(monodromy), border.scales
    scaled = monodromy * scales / scales[:, None]
    matrix = np.zeros((n + 1, n + 1), dtype=np.result_type(scaled, border.column, type(mu)))
    matrix[:n, :n] = scaled - mu * np.eye(n)
    matrix[:n, n] = border.column
    matrix[n, :n] = border.row.conj()
    unit = np.zeros(n + 1)
    unit[n] = 1.0
    right = np.linalg.solve(matrix, unit)
    left = np.linalg.solve(matrix.T, unit)
    return Bordered(complex(right[n]), right[:n] * scales, left[:n] / scales)


def solve_onset(
    flow: FlowMap, kind: Kind, start: Cycle, scales: Floats, reach: float
) -> Generator[Step, None, Solution]:
    """Newton's method from a rough cycle.

    Parameters
    ----------
    reach
        How far the parameter may lie from the rough one.

    Raises
    ------
    NotFound
        No convergence, or the parameter left its reach.
    """
    points, r, angle = start.points.copy(), start.r, 0.0
    text = f"solving for a {kind.value} of period {start.period}"
    last = math.inf
    border: Border | None = None
    for _ in range(MOST_STEPS):
        yield Step(text)
        linear, parts = _linearised(flow, points, r)
        if kind is Kind.NEIMARK_SACKER and border is None:
            angle = _critical_angle(parts.monodromy)
        mu = target_of(kind, angle)
        border = border or border_at(parts.monodromy, mu, scales)
        equations = yield from _equations(flow, points, r, linear, parts, mu, border, text)
        system, right = _system(equations, parts, mu, kind)
        try:
            shift = np.linalg.solve(system, right)
        except np.linalg.LinAlgError as error:
            raise NotFound("the defining equations are singular here") from error
        n = len(scales)
        moves = parts.blocks @ np.array([*shift[: n + 1], 1.0])
        size = max(float(np.max(np.abs(moves) / scales)), abs(float(shift[n])) / max(abs(r), reach))
        if not math.isfinite(size):
            raise NotFound("the orbit is lost")
        if size > 1.0:
            raise NotFound("Newton's method left the neighbourhood")
        points, r = points + moves, r + float(shift[n])
        angle += float(shift[n + 1]) if kind is Kind.NEIMARK_SACKER else 0.0
        if abs(r - start.r) > reach:
            raise NotFound("Newton's method left the neighbourhood")
        if size < SETTLED or (size < STALLED and size > last / 2):
            return _solution(equations, parts, Cycle(points, r), angle, abs(float(shift[n])), system, border)
        last = size
    raise NotFound("Newton's method did not converge")


@dataclass(frozen=True)
class _Equations:
    """g, its derivatives in the first point, the parameter and mu, and what closing the gaps adds to it."""

    vectors: Values
    g: complex
    g_x: Values
    g_r: complex
    g_rest: complex
    g_mu: complex


def _linearised(flow: FlowMap, points: Floats, r: float) -> tuple[Floats, Condensed]:
    linear = flow.linearised(points, r)
    with np.errstate(over="ignore", invalid="ignore"):
        parts = condense(linear, points)
    if not np.isfinite(parts.closing).all():
        raise NotFound(flow.why() or "the orbit is lost")
    return linear.jacobian, parts


def _equations(
    flow: FlowMap,
    points: Floats,
    r: float,
    jacobians: Floats,
    parts: Condensed,
    mu: complex,
    border: Border,
    text: str,
) -> Generator[Step, None, _Equations]:
    try:
        solved = bordered(parts.monodromy, mu, border)
    except np.linalg.LinAlgError as error:
        raise NotFound("the defining equations are singular here") from error
    rights = [solved.right]
    for jacobian in jacobians[:-1]:
        rights.append(jacobian @ rights[-1])
    lefts = [solved.left]
    for jacobian in jacobians[:0:-1]:
        lefts.append(lefts[-1] @ jacobian)
    vectors, left = np.array(rights), np.array(lefts[::-1])
    yield Step(text)
    turns, turns_r = flow.curvature(points, r, vectors)
    # Rows of w M q: its derivative at each point, then by the points' own shifts.
    rows = -np.einsum("pi,pij->pj", left, turns)
    total = np.einsum("pj,pjk->k", rows, parts.blocks)
    n = len(border.scales)
    g_r = total[n] - np.sum(left * turns_r)
    return _Equations(
        vectors,
        solved.g,
        total[:n],
        complex(g_r),
        complex(total[n + 1]),
        complex(solved.left @ solved.right),
    )


def _system(eq: _Equations, parts: Condensed, mu: complex, kind: Kind) -> tuple[Floats, Floats]:
    n = len(parts.closing)
    pair = kind is Kind.NEIMARK_SACKER
    size = n + 2 if pair else n + 1
    system, right = np.zeros((size, size)), np.zeros(size)
    system[:n, : n + 1] = parts.closing[:, : n + 1]
    system[:n, :n] -= np.eye(n)
    right[:n] = -parts.closing[:, n + 1]
    row = np.array([*eq.g_x, eq.g_r])
    rest = eq.g + eq.g_rest
    system[n, : n + 1], right[n] = row.real, -rest.real
    if pair:
        turning = 1j * mu * eq.g_mu
        system[n, n + 1] = turning.real
        system[n + 1, : n + 1], system[n + 1, n + 1], right[n + 1] = row.imag, turning.imag, -rest.imag
    return system, right


def _solution(
    eq: _Equations,
    parts: Condensed,
    cycle: Cycle,
    angle: float,
    last_step: float,
    system: Floats,
    border: Border,
) -> Solution:
    n = len(parts.closing)
    slope = parts.closing[:, n]
    drift = np.linalg.lstsq(np.eye(n) - parts.monodromy, slope, rcond=None)[0]
    # g is -(multiplier - mu) times w q to first order.
    change = -(eq.g_x @ drift + eq.g_r) / eq.g_mu if eq.g_mu != 0 else math.nan
    speed = float(np.real(change))
    if np.iscomplexobj(eq.vectors):
        # Of a pair: how fast its modulus changes.
        speed = float(np.real(change * cmath.exp(-1j * angle)))
    return Solution(cycle, eq.vectors, angle, parts.monodromy, slope, speed, last_step, system, border)


def solve_again(flow: FlowMap, kind: Kind, found: Solution, reach: float) -> Generator[Step, None, Solution]:
    """The same onset at another level: Newton's method with the matrix that is known.

    Raises
    ------
    NotFound
        It is not there.
    """
    assert found.matrix is not None and found.border is not None
    points, r, angle = found.cycle.points.copy(), found.cycle.r, found.angle
    scales, n, last = found.border.scales, len(found.border.scales), math.inf
    for _ in range(MOST_STEPS):
        yield Step(f"solving once more for a {kind.value} of period {len(points)}")
        _, parts = _linearised(flow, points, r)
        g = bordered(parts.monodromy, target_of(kind, angle), found.border).g
        right = [*parts.closing[:, n + 1], g.real, g.imag][: len(found.matrix)]
        shift = np.linalg.solve(found.matrix, -np.array(right))
        moves = parts.blocks @ np.array([*shift[: n + 1], 1.0])
        size = max(float(np.max(np.abs(moves) / scales)), abs(float(shift[n])) / max(abs(r), reach))
        if not size < FARTHEST:
            raise NotFound("the onset is not found at another accuracy")
        points, r = points + moves, r + float(shift[n])
        angle += float(shift[n + 1]) if kind is Kind.NEIMARK_SACKER else 0.0
        if size < SETTLED or (size < STALLED and size > last / 2):
            return replace(found, cycle=Cycle(points, r), angle=angle, last_step=abs(float(shift[n])))
        last = size
    raise NotFound("the onset is not found at another accuracy")


def _critical_angle(monodromy: Floats) -> float:
    values = [value for value in np.linalg.eigvals(monodromy) if value.imag > REAL]
    if not values:
        raise NotFound("the cycle has no complex pair of multipliers there")
    return cmath.phase(min(values, key=lambda value: abs(abs(value) - 1)))
