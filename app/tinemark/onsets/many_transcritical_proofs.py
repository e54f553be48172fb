"""Proofs of transcritical points: a cycle on an invariant plane that another branch crosses at an angle.

That the cycle has multiplier 1 across the plane at one parameter value, crossed with speed, is a regular
flip of the map beside the plane (`many_invariant`). The cycle on the plane can be divided out of f^p - x,
and another branch passes through; the two meet at an angle where p B(q, q) is not zero, with q and p the
critical vectors of f^p itself (Kuznetsov, Elements of Applied Bifurcation Theory, 2004, section 7.4).
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import replace
from typing import Any

from flint import acb, acb_mat, arb, arb_mat

from tinemark.onsets.ball_orbits import precision
from tinemark.onsets.many_claims import claims_of, left_vector, number_words
from tinemark.onsets.many_invariant import Plane, map_beside
from tinemark.onsets.many_jets import jet_evaluators
from tinemark.onsets.many_map import Floats, ManyMap, ball_evaluators
from tinemark.onsets.many_proof import ManyProof, enclose, interval_of, least_period_words, newton_words
from tinemark.onsets.many_shooting import Place, column, entries, in_turn
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Criticality, Kind, Step


def prove_transcritical(
    many: ManyMap, plane: Plane, middle: Place, scales: Floats, bits: int
) -> Generator[Step, None, ManyProof]:
    """Prove that a box around a middle holds exactly one transcritical point of a cycle on a plane.

    Parameters
    ----------
    middle
        Exact balls near the solution of the flip of the map beside the plane.

    Raises
    ------
    NotProved
        A test failed or stayed undecided.
    SwitchingTouched
        The box of a cycle point touches a switching surface or an edge of the domain.
    """
    beside = map_beside(many, plane)
    found = yield from enclose(beside, Kind.FLIP, middle, scales, bits)
    with precision(bits):
        points = [plane.put(place, point) for place, point in enumerate(found.box.points)]
        evidence = [("one onset in the box", newton_words(found.half_r, len(points)))]
        evidence += least_period_words(points, scales)
        across = [found.box.vectors[0][0][at] for at in plane.fixed]
        if all(value.contains(0) for value in across):
            raise NotProved("the multiplier 1 may lie along the plane, not across it")
    claims = yield from claims_of(beside, Kind.FLIP, found.box, found.frames, found.local, scales, bits)
    size = float(
        sum((float(value) / scale) ** 2 for value, scale in zip(across, _at(plane, scales), strict=True))
    )
    bend = yield from _bend(many, points, found.box.r, found.box.vectors[0][0], plane, bits)
    with precision(bits):
        bend = bend / arb(size).sqrt().mid()
        if not bend.abs_lower() > 0:
            raise NotProved("the branches may touch instead of crossing")
        first = plane.put(0, found.first)
        named = dict(claims.evidence)
        others = "no other multiplier on the unit circle"
        evidence += [
            ("stays for every value of the parameter", f"the cycle at {plane.words(many)}, by algebra"),
            ("multiplier exactly +1", "by the equations solved"),
            (others, named[others]),
            ("crosses +1 with speed", f"{number_words(-claims.speed)} per unit of {many.parameter}"),
            ("the branches cross at an angle: curvature", f"{number_words(bend)} in scaled states"),
        ]
        shown = replace(
            claims,
            critical=complex(1),
            speed=-claims.speed,
            coefficient=bend,
            criticality=Criticality.NOT_APPLICABLE,
            degenerate="",
            consequence="",
            evidence=(),
        )
        return ManyProof(
            interval_of(found.r),
            tuple(interval_of(value) for value in first),
            tuple(interval_of(value) for value in (found.box.r, *points[0])),
            shown,
            tuple(evidence),
        )


def _at(plane: Plane, scales: Floats) -> list[float]:
    return [float(scales[at]) for at in plane.fixed]


def _bend(
    many: ManyMap, points: list[list[Any]], r: Any, across: list[Any], plane: Plane, bits: int
) -> Generator[Step, None, Any]:
    """P B(q, q) / 2 of f^p, q with the part across the plane that the critical vector beside it has.

    Enclosed for the one solution in the box, at which f^p_x - 1 is exactly singular.
    """
    n, evaluators, jets = many.size, ball_evaluators(many), jet_evaluators(many)
    with precision(bits):
        zeros, turns = [0] * n, []
        product = arb_mat(n, n, [int(i == j) for i in range(n) for j in range(n)])

    def advance(at: int) -> None:
        nonlocal product
        jets.check_sides(points[at], r)
        values = evaluators.critical(*points[at], r, *zeros)
        turns.append(arb_mat(n, n, list(values[n : n + n * n])))
        product = turns[-1] * product

    yield from in_turn(len(points), bits, "checking how the branches cross", advance)
    with precision(bits):
        q = _along(product, across, plane)
        left = left_vector(product, acb(1), acb_mat(column(q)))
        p = arb_mat(1, n, [value.real for value in entries(left.transpose())])
        now, bent = column(q), arb_mat(n, 1)

    def bend(at: int) -> None:
        nonlocal now, bent
        vector = entries(now)
        second = column(list(jets.second(*points[at], r, *vector, *vector)))
        bent, now = turns[at] * bent + second / 2, turns[at] * now

    yield from in_turn(len(points), bits, "checking how the branches cross", bend)
    with precision(bits):
        return (p * bent)[0, 0]


def _along(product: Any, across: list[Any], plane: Plane) -> list[Any]:
    """The critical vector of f^p: its part across the plane is known, the rest follows it.

    With f^p_x in blocks, M_uu q_u + M_uw q_w = q_u.
    """
    n = product.nrows()
    free = [at for at in range(n) if at not in plane.fixed]
    q = [across[at] for at in range(n)]
    if free:
        rows = [int(i == j) - product[i, j] for i in free for j in free]
        right = [sum((product[i, j] * across[j] for j in plane.fixed), arb(0)) for i in free]
        try:
            part = entries(arb_mat(len(free), len(free), rows).solve(column(right)))
        except ZeroDivisionError as error:
            raise NotProved("the cycle may have a second multiplier 1, along the plane") from error
        for at, value in zip(free, part, strict=True):
            q[at] = value
    return q


def transcritical_words(many: ManyMap, plane: Plane, period: int, proof: ManyProof) -> str:
    """Which cycles cross, and which of them is stable on which side."""
    claims = proof.claims
    words = f"two cycles of period {period} cross: the one at {plane.words(many)}"
    if any(abs(value) > 1 for value in claims.others):
        return f"{words} and another; both are unstable on either side of the onset"
    before, after = ("below", "above") if float(claims.speed) > 0 else ("above", "below")
    return (
        f"two cycles of period {period} cross and exchange stability: the one at {plane.words(many)} is "
        f"stable {before} the onset and unstable {after} it, the other one the other way round"
    )
