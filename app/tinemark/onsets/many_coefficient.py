"""The normal-form coefficient of an onset of several states, enclosed.

With M the derivative of f^p at the first cycle point, M q = m q, and the left vector p with p M = m p and
p q = 1 (Kuznetsov, Elements of Applied Bifurcation Theory, 5.4; B and C the second and third derivatives
of f^p, q* the conjugate of q):

    fold            a = p B(q, q) / 2
    flip            c = p (C(q, q, q) + 3 B(q, (I - M)^-1 B(q, q))) / 6
    Neimark-Sacker  d = Re(conj(m) p g) / 2,
                    g = C(q, q, q*) + 2 B(q, (I - M)^-1 B(q, q*)) + B(q*, (m^2 - M)^-1 B(q, q))

The derivatives of f^p are never formed: second- and third-order shifts are carried along the cycle in the
frames of `many_shooting`, each by a linear recurrence driven by the derivatives of f (the coefficients of a
Taylor polynomial through a composition).
"""

from __future__ import annotations

from collections.abc import Callable, Generator, Sequence
from dataclasses import dataclass
from typing import Any

from flint import acb, acb_mat, arb_mat

from tinemark.onsets.ball_orbits import precision
from tinemark.onsets.many_jets import jets_along
from tinemark.onsets.many_map import ManyMap
from tinemark.onsets.many_shooting import Frames, Local, Place, entries, in_turn
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Kind, Step


@dataclass(frozen=True)
class ReturnMap:
    """Derivatives of f^p at the first point, enclosed: M, in r, and of M v for each vector v."""

    monodromy: Any
    slope: Any
    turns: list[Any]
    turns_r: list[Any]


def coefficient_of(
    many: ManyMap,
    kind: Kind,
    box: Place,
    frames: Frames,
    local: Local,
    back: ReturnMap,
    left: Any,
    multiplier: Any,
    bits: int,
    text: str,
) -> Generator[Step, None, Any]:
    """The raw normal-form coefficient, for the critical vector as it is."""
    jets, n, r = jets_along(many, box.period), many.size, box.r
    matrix = acb_mat if kind is Kind.NEIMARK_SACKER else arb_mat

    def second(at: int, v: Sequence[Any], w: Sequence[Any]) -> Any:
        return matrix(n, 1, list(jets[at].second(*box.points[at], r, *v, *w)))

    def step(at: int, now: Any, force: Any) -> Any:
        return matrix(local.turn[at]) * now + matrix(frames.inverses[at + 1]) * force

    def start(end: Any, factor: Any) -> Any:
        """First shift, in frames, of the one that returns to `factor` times itself."""
        closing = unit_matrix(n) * acb(factor) - acb_mat(back.monodromy)
        first = solved(closing, acb_mat(frames.bases[-1]) * acb_mat(end))
        if matrix is arb_mat:
            first = arb_mat(n, 1, [value.real for value in entries(first)])
        return matrix(frames.inverses[0]) * first

    def shown(at: int, shift: Any) -> list[Any]:
        return entries(matrix(frames.bases[at]) * shift)

    def projected(end: Any) -> Any:
        return (left * acb_mat(frames.bases[-1]) * acb_mat(end))[0, 0]

    with precision(bits):
        zero = matrix(n, 1)
    if kind is not Kind.NEIMARK_SACKER:

        def bends(at: int) -> tuple[Any, ...]:
            (v,) = box.vectors[at]
            return (second(at, v, v) / 2,)

        (bent,) = yield from _carried(box.period, [zero], lambda at, _: bends(at), step, bits, text)
        with precision(bits):
            if kind is Kind.FOLD:
                return projected(bent).real
            first = start(bent, 1)

        def thirds(at: int, now: Sequence[Any]) -> tuple[Any, ...]:
            (v,) = box.vectors[at]
            cubic = matrix(n, 1, list(jets[at].third(*box.points[at], r, *v, *v, *v)))
            return second(at, v, v) / 2, second(at, v, shown(at, now[0])) + cubic / 6

        _, end = yield from _carried(box.period, [first, zero], thirds, step, bits, text)
        with precision(bits):
            return projected(end).real

    def pair(at: int) -> tuple[list[Any], list[Any]]:
        q = entries(critical_vector(box, at))
        return q, [value.conjugate() for value in q]

    def squares(at: int) -> tuple[Any, Any]:
        q, conjugate = pair(at)
        return second(at, q, conjugate), second(at, q, q)

    steady, turning = yield from _carried(
        box.period, [zero, zero], lambda at, _: squares(at), step, bits, text
    )
    with precision(bits):
        steady, turning = start(steady, 1), start(turning, multiplier * multiplier)

    def cubes(at: int, now: Sequence[Any]) -> tuple[Any, ...]:
        q, conjugate = pair(at)
        cubic = matrix(n, 1, list(jets[at].third(*box.points[at], r, *q, *q, *conjugate)))
        mixed = second(at, q, shown(at, now[0])) * 2 + second(at, conjugate, shown(at, now[1]))
        return (*squares(at), cubic + mixed)

    _, _, end = yield from _carried(box.period, [steady, turning, zero], cubes, step, bits, text)
    with precision(bits):
        return (multiplier.conjugate() * projected(end)).real / 2


def _carried(
    period: int,
    start: Sequence[Any],
    force: Callable[[int, Sequence[Any]], Sequence[Any]],
    step: Callable[[int, Any, Any], Any],
    bits: int,
    text: str,
) -> Generator[Step, None, list[Any]]:
    """Carry driven shifts once round the cycle."""
    now = list(start)

    def advance(at: int) -> None:
        forces = force(at, now)
        now[:] = [step(at, part, given) for part, given in zip(now, forces, strict=True)]

    yield from in_turn(period, bits, text, advance)
    return now


def critical_vector(box: Place, at: int) -> Any:
    """The critical vector at a point, as a complex column."""
    vectors = box.vectors[at]
    if box.angle is None:
        return acb_mat(len(vectors[0]), 1, [acb(value) for value in vectors[0]])
    u, w = vectors
    return acb_mat(len(u), 1, [acb(a, b) for a, b in zip(u, w, strict=True)])


def solved(matrix: Any, right: Any) -> Any:
    """Enclosure of the solution of a linear system; `NotProved` where it may be singular."""
    try:
        return matrix.solve(right)
    except ZeroDivisionError as error:
        raise NotProved("another multiplier may meet a value that the normal form excludes") from error


def unit_matrix(n: int) -> Any:
    """The complex unit matrix."""
    return acb_mat(n, n, [int(i == j) for i in range(n) for j in range(n)])
