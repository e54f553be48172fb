"""What an onset of an integrated return map is like: multipliers, and normal-form coefficients.

With M the derivative of f^p, M q = m q, and p M = m p, p q = 1 (Kuznetsov, Elements of Applied Bifurcation
Theory, 5.4; B and C the second and third derivatives of f^p):

    fold            p B(q, q) / 2
    flip            p (C(q, q, q) + 3 B(q, (1 - M)^-1 B(q, q))) / 6, soft where positive
    pitchfork       the same, (1 - M)^-1 on what M - 1 reaches, soft where negative
    Neimark-Sacker  Re(m* p (C(q, q, q*) + 2 B(q, (1 - M)^-1 B(q, q*)) + B(q*, (m^2 - M)^-1 B(q, q)))) / 2,
                    soft where negative

B and C are differences of M at neighbouring points, M itself comes from the variational equations.
"""

from __future__ import annotations

from collections.abc import Generator
from typing import Any

import numpy as np

from tinemark.onsets.cycle_map import Floats
from tinemark.onsets.flow_map import FlowMap
from tinemark.onsets.flow_polish import Solution, target_of
from tinemark.onsets.many_normal_form import Findings
from tinemark.onsets.results import Criticality, Kind, Step

STEPS = (4e-4, 2e-4)
"""Lengths of the differences, in scaled states over the period; their coefficients must agree."""
AGREEMENT = 0.1
FLAT = 1e-6
ON_THE_CIRCLE = 1e-6
DEFECTIVE = 1e-6
CHUNK = 16
"""Samples between two chances to cancel."""


def findings(
    flow: FlowMap, kind: Kind, found: Solution, scales: Floats, reach: float
) -> Generator[Step, None, Findings]:
    """Check an onset; `reach` is a length typical of the parameter."""
    mu = target_of(kind, found.angle)
    n = len(scales)
    matrix = found.monodromy * scales / scales[:, None]
    values = sorted((complex(v) for v in np.linalg.eigvals(matrix)), key=lambda v: abs(v - mu))
    critical, others = values[0], tuple(values[1:])
    if kind is Kind.NEIMARK_SACKER:
        others = tuple(sorted(others, key=lambda v: abs(v - mu.conjugate()))[1:])
    left, right = _critical(matrix, mu)
    cosine = abs(left @ right)
    doubled = cosine < DEFECTIVE or any(abs(value - mu) < 1e-3 for value in others)
    is_simple = not doubled and all(abs(abs(value) - 1) > ON_THE_CIRCLE for value in others)
    undecided = Criticality.NOT_APPLICABLE if kind in NO_SOFTNESS else Criticality.UNDECIDED
    if doubled:
        return Findings(critical, others, False, True, 0.0, None, undecided)
    left = left / (left @ right)
    small = STEPS if len(found.cycle.points) == 1 else tuple(s / len(found.cycle.points) for s in STEPS)
    coefficients = []
    for length in small:
        near = _Near(flow, found, scales, length)
        coefficients.append((yield from _coefficient(near, kind, matrix, left, right, mu, n)))
    value = coefficients[-1]
    if kind in NO_SOFTNESS:
        push = float(np.real(left @ (found.slope / scales)))
        flat = kind is Kind.FOLD and (abs(push) * reach < FLAT or abs(value) < FLAT)
        crossing = push if kind is Kind.FOLD else found.speed
        return Findings(critical, others, is_simple, False, crossing, value, undecided, flat)
    clear = np.isfinite(value) and abs(coefficients[0] - value) < AGREEMENT * abs(value)
    soft = undecided
    if clear and is_simple:
        positive_is_soft = kind is Kind.FLIP
        is_soft = (value > 0) == positive_is_soft
        soft = Criticality.SUPERCRITICAL if is_soft else Criticality.SUBCRITICAL
    return Findings(critical, others, is_simple, False, found.speed, value, soft)


NO_SOFTNESS = frozenset({Kind.FOLD, Kind.TRANSCRITICAL})
"""Kinds at which nothing is told by sub- or supercritical."""


def _critical(matrix: Floats, mu: complex) -> tuple[Any, Any]:
    left, _, right = np.linalg.svd(matrix - mu * np.eye(len(matrix)))
    # Left null vector as a row: u* (M - mu) = 0.
    return left[:, -1].conj(), right[-1].conj()


class _Near:
    """Monodromy matrices of f^p at points near a cycle point, in scaled states."""

    def __init__(self, flow: FlowMap, found: Solution, scales: Floats, length: float) -> None:
        self.flow, self.found, self.scales, self.length = flow, found, scales, length

    def matrices(self, shifts: Floats) -> Generator[Step, None, Floats]:
        """(k, n, n) at the first point moved by scaled shifts (k, n)."""
        cycle = self.found.cycle
        points = cycle.points[0] + shifts * self.scales
        total = np.broadcast_to(np.eye(len(self.scales)), (len(points), len(self.scales), len(self.scales)))
        for place in range(cycle.period):
            linear = self.flow.linearised(points, cycle.r)
            points, total = linear.image, linear.jacobian @ total
            if place % CHUNK == 0:
                yield Step("checking how the cycle splits")
        scaled: Floats = total * self.scales / self.scales[:, None]
        return scaled

    def second(self, v: Floats, w: Floats) -> Generator[Step, None, Floats]:
        """B(v, w), real vectors: M v differentiated along w."""
        size = float(np.linalg.norm(w))
        if size == 0:
            return np.zeros(len(v))
        step = self.length / size
        plus, minus = yield from self.matrices(np.array([step * w, -step * w]))
        bent: Floats = (plus - minus) @ v / (2 * step)
        return bent

    def third(self, v: Floats, w: Floats) -> Generator[Step, None, Floats]:
        """C(v, w, w), real vectors: M v differentiated twice along w."""
        size = float(np.linalg.norm(w))
        step = self.length / size
        plus, here, minus = yield from self.matrices(np.array([step * w, 0 * w, -step * w]))
        bent: Floats = (plus - 2 * here + minus) @ v / step**2
        return bent


def _coefficient(
    near: _Near, kind: Kind, matrix: Floats, p: Any, q: Any, mu: complex, n: int
) -> Generator[Step, None, float]:
    one = np.eye(n)
    if kind is Kind.NEIMARK_SACKER:
        return (yield from _rotating(near, matrix, p, q, mu))
    q, p = np.real(q), np.real(p)
    bent = yield from near.second(q, q)
    if kind in NO_SOFTNESS:
        return float(p @ bent) / 2
    drift: Any = np.linalg.lstsq(one - matrix, bent, rcond=1e-5)[0]
    cubic = yield from near.third(q, q)
    mixed = yield from near.second(q, drift)
    return float(p @ (cubic + 3 * mixed)) / 6


def _rotating(near: _Near, matrix: Floats, p: Any, q: Any, mu: complex) -> Generator[Step, None, float]:
    u, w = np.real(q), np.imag(q)
    uu = yield from near.second(u, u)
    ww = yield from near.second(w, w)
    uw = yield from near.second(u, w)
    one = np.eye(len(matrix))
    steady = np.linalg.solve(one - matrix, uu + ww)
    turning = np.linalg.solve(mu * mu * one - matrix, uu - ww + 2j * uw)

    def bilinear(a: Any, b: Any) -> Generator[Step, None, Any]:
        parts = []
        for x, y in ((a.real, b.real), (a.imag, b.imag), (a.real, b.imag), (a.imag, b.real)):
            parts.append((yield from near.second(x, y)))
        return parts[0] - parts[1] + 1j * (parts[2] + parts[3])

    # C(q, q, q*) = C(u,u,u) + C(u,w,w) + i (C(u,u,w) + C(w,w,w)).
    uuu = yield from near.third(u, u)
    uww = yield from near.third(u, w)
    uuw = yield from near.third(w, u)
    www = yield from near.third(w, w)
    cubic = uuu + uww + 1j * (uuw + www)
    first = yield from bilinear(q, steady + 0j)
    second = yield from bilinear(np.conj(q), turning)
    total = p @ (cubic + 2 * first + second)
    return float(np.real(np.conj(mu) * total)) / 2
