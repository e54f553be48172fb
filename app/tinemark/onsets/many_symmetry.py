"""Involutions that a map of several states commutes with: sign changes and exchanges of states, exactly.

Such a symmetry x -> S x + c makes cycles that are their own mirror images, and these lose it in pitchforks,
where no enclosure could show that branches meet (Golubitsky, Stewart & Schaeffer, Singularities and Groups in
Bifurcation Theory II, 1988). S permutes states in pairs and changes signs; c is made of short constants.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Any

import numpy as np

from tinemark.onsets.exact_identities import nearby_constant, replaced, vanishes
from tinemark.onsets.formula_words import formula_words
from tinemark.onsets.many_cycles import condensed
from tinemark.onsets.many_map import FloatManyMap, Floats, ManyMap
from tinemark.systems.balls import ball_function
from tinemark.systems.expression import ZERO, Call, Expr, Name

TRIED_AT = 3
"""Places at which a symmetry is tried in doubles before algebra is asked."""
ROUGHLY = 1e-6
SEED = 19880307


def constant_ball(constant: Expr) -> Any:
    """A constant as a ball, at the precision in force."""
    return ball_function((constant,), ())()[0]


@dataclass(frozen=True)
class Involution:
    """x -> S x + c with S S = 1 and S c = -c.

    Attributes
    ----------
    order, signs
        Component i of the image is signs[i] * x[order[i]] + shift[i].
    shift
        Constants.
    """

    order: tuple[int, ...]
    signs: tuple[int, ...]
    shift: tuple[Expr, ...]

    @property
    def matrix(self) -> Floats:
        """S in doubles."""
        n = len(self.order)
        matrix = np.zeros((n, n))
        matrix[range(n), self.order] = self.signs
        return matrix

    def turned(self, vector: Sequence[Any]) -> list[Any]:
        """S v, exact."""
        return [sign * vector[at] for at, sign in zip(self.order, self.signs, strict=True)]

    def image(self, point: Sequence[Any]) -> list[Any]:
        """The mirror image of a point of balls, at the precision in force."""
        shifts = [constant_ball(part) for part in self.shift]
        return [part + shift for part, shift in zip(self.turned(point), shifts, strict=True)]

    def formulas(self, parts: Sequence[Expr]) -> list[Expr]:
        """The mirror image of a point given by formulas."""
        found = []
        for at, sign, shift in zip(self.order, self.signs, self.shift, strict=True):
            part = parts[at] if sign > 0 else Call("neg", (parts[at],))
            found.append(part if shift == ZERO else Call("add", (part, shift)))
        return found

    def words(self, states: Sequence[str]) -> str:
        """The symmetry in the states that it changes, such as (x, y) -> (y, x)."""
        images = self.formulas([Name(state) for state in states])
        changed = [at for at, state in enumerate(states) if images[at] != Name(state)]
        left, right = [states[at] for at in changed], [formula_words(images[at]) for at in changed]
        if len(changed) == 1:
            return f"{left[0]} -> {right[0]}"
        return f"({', '.join(left)}) -> ({', '.join(right)})"


@dataclass(frozen=True)
class Mirrored:
    """A cycle that is its own mirror image, and whose critical direction is turned round by the mirror.

    Attributes
    ----------
    steps
        After so many steps the cycle comes to the mirror image of where it began.
    pointwise
        Whether each point is its own image, and `steps` the whole period; else `steps` is half of it.
    """

    involution: Involution
    steps: int
    pointwise: bool


def symmetry_of(float_map: FloatManyMap, points: Floats, r: float, scales: Floats) -> Mirrored | None:
    """The exact symmetry that a cycle with multiplier 1 has and loses; None where none is found."""
    many, period = float_map.many, len(points)
    centre = points.mean(axis=0)
    directions = [(period, _critical(float_map, points, r, period))]
    if period % 2 == 0:
        directions.append((period // 2, _critical(float_map, points, r, period // 2)))
    for order, signs in _signed_exchanges(many.size):
        bare = Involution(order, signs, (ZERO,) * many.size)
        matrix = bare.matrix
        shift = centre - matrix @ centre
        images = points @ matrix.T + shift
        for steps, (vector, carried) in directions:
            if not _near(images, np.roll(points, -(steps % period), axis=0), scales):
                continue
            turned = matrix @ carried
            # Half-way round, the critical vector comes to a mirror image of its opposite.
            if float(np.max(np.abs(turned + vector) / scales)) > ROUGHLY * float(
                np.max(np.abs(vector) / scales)
            ):
                continue
            parts = [
                nearby_constant(float(value), float(scale))
                for value, scale in zip(shift, scales, strict=True)
            ]
            known = tuple(part for part in parts if part is not None)
            if len(known) < many.size:
                continue
            involution = replace(bare, shift=known)
            if _commutes_roughly(float_map, matrix, shift, r, centre, scales) and commutes(many, involution):
                return Mirrored(involution, steps, steps == period)
    return None


def _critical(float_map: FloatManyMap, points: Floats, r: float, steps: int) -> tuple[Floats, Floats]:
    """The critical vector at the first point, and what it has become after some steps."""
    parts = condensed(float_map, points, r)
    n = points.shape[1]
    vector = np.linalg.svd(parts.monodromy - np.eye(n))[2][-1]
    carried = vector if steps == len(points) else parts.blocks[steps][:, :n] @ vector
    return vector, carried


def _near(a: Floats, b: Floats, scales: Floats) -> bool:
    return bool(np.all(np.abs(a - b) < ROUGHLY * scales))


def _signed_exchanges(n: int) -> Iterator[tuple[tuple[int, ...], tuple[int, ...]]]:
    """All S with S S = 1 but the identity, those that change few states first."""
    found = [((), ())] if n == 0 else list(_extended(n, (), ()))
    identity = (tuple(range(n)), (1,) * n)

    def moved(item: tuple[tuple[int, ...], tuple[int, ...]]) -> int:
        return sum(at != place or sign < 0 for place, (at, sign) in enumerate(zip(*item, strict=True)))

    yield from sorted((item for item in found if item != identity), key=moved)


def _extended(
    n: int, order: tuple[int, ...], signs: tuple[int, ...]
) -> Iterator[tuple[tuple[int, ...], tuple[int, ...]]]:
    place = len(order)
    if place == n:
        yield order, signs
        return
    for at in range(n):
        if at < place and order[at] != place:
            continue  # a pair is exchanged both ways
        if at in order:
            continue
        if place in order[:place] and order.index(place) != at:
            continue
        for sign in (1, -1):
            if at < place and signs[at] != sign:
                continue
            yield from _extended(n, (*order, at), (*signs, sign))


def _commutes_roughly(
    float_map: FloatManyMap, matrix: Floats, shift: Floats, r: float, centre: Floats, scales: Floats
) -> bool:
    random = np.random.default_rng(SEED)
    states = centre[:, None] + scales[:, None] * random.uniform(-0.4, 0.4, (len(centre), TRIED_AT))
    rs = r + np.array([0.0, 0.01, -0.01]) * (abs(r) or 1.0)
    with np.errstate(all="ignore"):
        mirrored = float_map.step(matrix @ states + shift[:, None], rs)
        images = matrix @ float_map.step(states, rs) + shift[:, None]
        size = np.abs(images) + scales[:, None]
        return bool(np.all((np.abs(mirrored - images) < ROUGHLY * size) | ~np.isfinite(images)))


@lru_cache(maxsize=128)
def commutes(many: ManyMap, involution: Involution) -> bool:
    """Whether the map commutes with the involution, for every state and parameter value."""
    mirrored = involution.formulas([Name(state) for state in many.states])
    values = dict(zip(many.states, mirrored, strict=True))
    images = involution.formulas(many.formulas)
    return all(
        vanishes(Call("sub", (replaced(formula, values), image)))
        for formula, image in zip(many.formulas, images, strict=True)
    )


def mirrored_map(many: ManyMap, mirrored: Mirrored) -> ManyMap:
    """The map whose return is f^steps seen in the mirror: the involution put after the last step."""
    last = replace(many, formulas=tuple(mirrored.involution.formulas(many.formulas)))
    return replace(many, steps=(*([many] * (mirrored.steps - 1)), last))
