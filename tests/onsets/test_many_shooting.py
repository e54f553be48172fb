"""The condensed equations against the whole matrix, written out and solved at once."""

from __future__ import annotations

import numpy as np
import pytest
from flint import arb, arb_mat
from running import finish
from test_many_exact import own_system

from tinemark.onsets.many_jets import jet_evaluators
from tinemark.onsets.many_map import ManyMap, many_map
from tinemark.onsets.many_shooting import (
    Condensed,
    Frames,
    Local,
    Place,
    Right,
    entries,
    frames_along,
    local_at,
    norm_rows,
)
from tinemark.onsets.results import Kind

BITS, POINTS, STATES = 120, 5, 3
WAVES = {"x": "1 - r*x**2 + sin(y)*z", "y": "0.3*x + r*z**2", "z": "cos(x) - y*z/2 + r"}


def place_of(kind: Kind) -> Place:
    """Any place at all: the linear algebra does not ask for a cycle."""
    random = np.random.default_rng(11)
    width = 2 if kind is Kind.NEIMARK_SACKER else 1
    points = [[arb(value) for value in row] for row in random.uniform(-1, 1, (POINTS, STATES))]
    vectors = [
        [[arb(value) for value in row] for row in rows]
        for rows in random.uniform(-1, 1, (POINTS, width, STATES))
    ]
    angle = (arb(0.6), arb(0.7)) if width == 2 else None
    return Place(points, vectors, arb(0.8), angle)


def many() -> ManyMap:
    return many_map(own_system(WAVES), "r")


def array(matrix: arb_mat) -> np.ndarray:
    rows, columns = matrix.nrows(), matrix.ncols()
    return np.array([[float(matrix[i, j]) for j in range(columns)] for i in range(rows)])


def whole_matrix(kind: Kind, place: Place, frames: Frames, local: Local) -> np.ndarray:
    """Derivative of all equations by all unknowns: points, vectors, parameter, angle."""
    n, p, q = STATES, POINTS, place.width
    extra = 0 if place.angle is None else 2
    size = (1 + q) * n * p + 1 + extra
    full = np.zeros((size, size))
    at_r = (1 + q) * n * p

    def at(which: int, point: int) -> slice:
        start = (which * p + point) * n
        return slice(start, start + n)

    link = array(frames.inverses[-1] * frames.bases[0])
    first = [array(frames.inverses[-1] * arb_mat(n, 1, list(v)))[:, 0] for v in place.vectors[0]]
    c, s = (float(value) for value in place.angle) if place.angle else (0.0, 0.0)
    mix = {Kind.FLIP: [[-1.0]], Kind.FOLD: [[1.0]]}.get(kind, [[c, -s], [s, c]])
    for i in range(p):
        turn = array(local.turn[i])
        full[at(0, i), at(0, i)] += turn
        full[at(0, i), at(0, (i + 1) % p)] -= link if i == p - 1 else np.eye(n)
        full[at(0, i), at_r] = array(local.slope[i])[:, 0]
        for which in range(q):
            row = at(1 + which, i)
            full[row, at(1 + which, i)] += turn
            full[row, at(0, i)] += array(local.bend[i][which])
            full[row, at_r] = array(local.bend_r[i][which])[:, 0]
            if i < p - 1:
                full[row, at(1 + which, i + 1)] -= np.eye(n)
            else:
                for other in range(q):
                    full[row, at(1 + other, 0)] -= mix[which][other] * link
                if place.angle:
                    u, w = first
                    full[row, at_r + 1] = -(u, w)[which]
                    full[row, at_r + 2] = -(-w, u)[which]
    for number, norm in enumerate(norm_rows(place)):
        for which, part in enumerate(norm):
            row = np.array([float(value) for value in part])
            full[at_r + number, at(1 + which, 0)] = row @ array(frames.bases[0])
    if place.angle:
        full[size - 1, at_r + 1], full[size - 1, at_r + 2] = 2 * c, 2 * s
    return full


@pytest.mark.parametrize("kind", [Kind.FLIP, Kind.FOLD, Kind.NEIMARK_SACKER])
def test_condensed_solutions_solve_the_whole_system(kind: Kind) -> None:
    place, scales = place_of(kind), np.array([2.0, 1.0, 0.5])
    frames = finish(frames_along(many(), place, scales, BITS, "testing"))
    local = finish(local_at(many(), kind, place, frames, BITS, "testing"))
    condensed = Condensed(kind, place, frames, local)
    finish(condensed.condense(BITS, "testing"))
    right = Right(local.gaps, local.gaps_v, arb(0.25))
    shift = finish(condensed.solve(right, BITS, "testing"))
    given = [float(value) for part in right.points for value in entries(part)]
    found = [float(value) for part in shift.points for value in entries(part)]
    for which in range(place.width):
        given += [float(value) for parts in right.vectors for value in entries(parts[which])]
        found += [float(value) for parts in shift.vectors for value in entries(parts[which])]
    given += [0.0] * (1 if place.angle is None else 3)
    if place.angle is not None:
        given[-1] = 0.25
    found += [float(shift.r), *(float(value) for value in shift.angle)]
    expected = np.linalg.solve(whole_matrix(kind, place, frames, local), -np.array(given))
    assert np.allclose(found, expected, rtol=1e-7, atol=1e-9 * np.max(np.abs(expected)))
    assert all(float(ball.rad()) < 1e-20 for part in shift.points for ball in entries(part))


def test_steps_are_upper_triangular_in_their_frames() -> None:
    """What keeps balls from wrapping: entries below the diagonal are rounding alone."""
    place = place_of(Kind.FLIP)
    frames = finish(frames_along(many(), place, np.ones(STATES), BITS, "testing"))
    local = finish(local_at(many(), Kind.FLIP, place, frames, BITS, "testing"))
    for turn in local.turn:
        assert np.max(np.abs(np.tril(array(turn), -1))) < 1e-13


def test_derivatives_along_directions() -> None:
    """Second and third derivatives against differences of the map along lines."""
    jets = jet_evaluators(many())
    random = np.random.default_rng(5)
    x, u, v, w = random.uniform(-1, 1, (4, STATES))
    r, h = 0.8, 1e-3

    def image(at: np.ndarray) -> np.ndarray:
        a, b, c = at
        return np.array([1 - r * a**2 + np.sin(b) * c, 0.3 * a + r * c**2, np.cos(a) - b * c / 2 + r])

    def along(at: np.ndarray, *directions: np.ndarray) -> np.ndarray:
        if not directions:
            return image(at)
        first, *rest = directions
        return (along(at + h * first, *rest) - along(at - h * first, *rest)) / (2 * h)

    balls = [[arb(value) for value in row] for row in (x, u, v, w)]
    second = jets.second(*balls[0], arb(r), *balls[1], *balls[2])
    third = jets.third(*balls[0], arb(r), *balls[1], *balls[2], *balls[3])
    assert np.allclose([float(value) for value in second], along(x, u, v), atol=1e-5)
    assert np.allclose([float(value) for value in third], along(x, u, v, w), atol=1e-5)
