"""Proofs of pitchforks of symmetric maps of several states: a flip of the return map seen in the mirror.

With S the symmetry, a cycle that comes to its mirror image after q steps is a fixed point of g = S f^q,
and where g has multiplier -1 the cycle loses its symmetry: the doubled cycle of g is a pair of cycles of
f that are each other's images, of the same period as before (Swift & Wiesenfeld, Phys. Rev. Lett. 52:705,
1984). A flip of g is regular, and has all of a flip's proof. Where each point of the cycle is its own
image (q the whole period), two things more are shown: that the point is one of S, since x -> f^q is one
to one around it, and that S turns the critical vector round.
"""

from __future__ import annotations

from collections.abc import Generator, Sequence
from dataclasses import replace
from typing import Any

from flint import arb_mat

from tinemark.onsets.ball_orbits import precision
from tinemark.onsets.many_claims import Claims, claims_of
from tinemark.onsets.many_conservative import conservative_claims, preserves_areas
from tinemark.onsets.many_jets import jets_along
from tinemark.onsets.many_map import Floats, ManyMap, evaluators_along
from tinemark.onsets.many_proof import ManyProof, enclose, interval_of, least_period_words, newton_words
from tinemark.onsets.many_shooting import Place, in_turn
from tinemark.onsets.many_symmetry import Mirrored, mirrored_map
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Criticality, Kind, Step

_NAMES = {
    "multiplier exactly -1": "multiplier exactly +1",
    "both multipliers exactly -1": "both multipliers exactly +1",
    "crosses -1 with speed": "the multiplier seen in the mirror crosses -1 with speed",
    "the trace crosses -2 with speed": "the trace seen in the mirror crosses -2 with speed",
    "flip coefficient": "pitchfork coefficient",
    "conservative flip coefficient": "conservative pitchfork coefficient",
    "in a Jordan block": "in a Jordan block",
}
"""Claims on the flip seen in the mirror, and what they are called of the pitchfork."""


def prove_pitchfork(
    many: ManyMap, mirrored: Mirrored, middle: Place, scales: Floats, bits: int
) -> Generator[Step, None, ManyProof]:
    """Prove that a box around a middle holds exactly one cycle that loses its symmetry there.

    Parameters
    ----------
    middle
        Exact balls near the solution: the first `mirrored.steps` cycle points, with critical vectors.

    Raises
    ------
    NotProved
        A test failed or stayed undecided.
    SwitchingTouched
        The box of a cycle point touches a switching surface or an edge of the domain.
    """
    seen, involution = mirrored_map(many, mirrored), mirrored.involution
    found = yield from enclose(seen, Kind.FLIP, middle, scales, bits)
    points, whole = found.box.points, mirrored.pointwise
    with precision(bits):
        evidence = [("one onset in the box", newton_words(found.half_r, len(points)))]
        images = [] if whole else [involution.image(point) for point in points]
        evidence += least_period_words([*points, *images], scales)
    if whole:
        yield from _show_fixed(many, mirrored, found.box, bits)
    parts = found.box, found.frames, found.local, scales, bits
    conservative = preserves_areas(seen, len(points))
    claims = (
        yield from conservative_claims(seen, Kind.FLIP, *parts)
        if conservative
        else claims_of(seen, Kind.FLIP, *parts)
    )
    with precision(bits):
        return ManyProof(
            interval_of(found.r),
            tuple(interval_of(value) for value in found.first),
            tuple(interval_of(value) for value in (found.box.r, *points[0])),
            replace(claims, consequence="", degenerate=claims.degenerate.replace("flip", "pitchfork")),
            (
                *evidence,
                ("commutes with the symmetry", f"{involution.words(many.states)}, by algebra"),
                *((_NAMES.get(claim, claim), finding) for claim, finding in claims.evidence),
            ),
            conservative,
        )


def _show_fixed(many: ManyMap, mirrored: Mirrored, box: Place, bits: int) -> Generator[Step, None, None]:
    """Show that each point of the cycle is its own mirror image, and the critical vector turned round.

    The image of a solution is one too, with the same parameter. On a box that holds both, f^q - x is one to
    one where the derivative, taken over the whole box, is regular: so the two are the same.
    """
    n, involution = many.size, mirrored.involution
    seen = mirrored_map(many, mirrored)
    along, jets = evaluators_along(seen, box.period), jets_along(seen, box.period)
    with precision(bits):
        product = arb_mat(n, n, [int(i == j) for i in range(n) for j in range(n)])
        zeros = [0] * n

    def advance(at: int) -> None:
        nonlocal product
        images = involution.image(box.points[at])
        hull = [value.union(image) for value, image in zip(box.points[at], images, strict=True)]
        jets[at].check_sides(hull, box.r)
        values = along[at].critical(*hull, box.r, *zeros)
        product = arb_mat(n, n, list(values[n : n + n * n])) * product

    yield from in_turn(box.period, bits, "checking the symmetry", advance)
    with precision(bits):
        unit = arb_mat(n, n, [int(i == j) for i in range(n) for j in range(n)])
        if not _excludes_zero([(unit - product).det()]):
            raise NotProved("it was not shown that the cycle's points are their own mirror images")
        vector = box.vectors[0][0]
        turned = involution.turned(vector)
        if not _excludes_zero([a - b for a, b in zip(turned, vector, strict=True)]):
            raise NotProved("it was not shown that the symmetry turns the critical vector round")
        if _excludes_zero([a + b for a, b in zip(turned, vector, strict=True)]):
            raise NotProved("the symmetry does not turn the critical vector round", refuted=True)


def _excludes_zero(values: Sequence[Any]) -> bool:
    return any(value.is_finite() and not value.contains(0) for value in values)


def pitchfork_words(
    many: ManyMap, mirrored: Mirrored, period: int, claims: Claims, conservative: bool
) -> str:
    """Which symmetry breaks, and what follows."""
    words = (
        f"the symmetry {mirrored.involution.words(many.states)} breaks: the cycle of period {period} that is "
        "its own mirror image"
    )
    pair = "a pair of cycles of the same period that are each other's mirror images"
    soft = claims.criticality is Criticality.SUPERCRITICAL
    if claims.criticality is Criticality.UNDECIDED:
        return f"{words} meets {pair}"
    if conservative:
        which = (
            "stable, and the symmetric one is not" if soft else "unstable, beside the stable symmetric one"
        )
        return (
            f"{words} meets {pair}: that pair is {which}; the map preserves areas, so orbits settle on none"
        )
    if any(abs(value) > 1 for value in claims.others):
        return f"{words} is unstable on both sides, and so is {pair} that meets it there"
    if soft:
        return f"{words} loses its stability to {pair}"
    return f"{words} loses its stability, and {pair} that meets it there is unstable: the change is a jump"
