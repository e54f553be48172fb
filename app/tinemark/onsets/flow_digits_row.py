"""An onset of equations that was found in doubles, sharpened on request: its printed state is the start."""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import replace
from fractions import Fraction

import numpy as np
from flint import arb

from tinemark.onsets.ball_orbits import ball_of, fraction_of, precision
from tinemark.onsets.decimals import GUARD_DIGITS, decimal_places
from tinemark.onsets.flow_digits import LEAST_SIZE, SAFETY, MoreDigits, more_digits
from tinemark.onsets.flow_proofs_map import IntegratedMap, integrated_map
from tinemark.onsets.many_map import Floats
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.many_texts import estimated_texts, proved_onset, with_certificate
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Kind, Onset, Step
from tinemark.systems.errors import SwitchingTouched, Unbounded
from tinemark.systems.system import System

ROUGH_BITS = 64
KINDS = (Kind.FLIP, Kind.FOLD, Kind.NEIMARK_SACKER)
"""Kinds that can be sharpened."""
REACH = 1e-6
"""How far from the printed parameter, in parts of it, the onset may come out."""
HALF_WIDTHS = 30
"""… and in half-widths of its printed interval, whichever is more."""
REAL = 1e-9
MOST_DIGITS = 60
"""The time that digits take grows with their cube."""
ERROR_LINE = "error estimate"


def sharpened(system: System, onset: Onset, digits: int) -> Generator[Step, None, Onset]:
    """The same onset to more digits: proved where the proof closes, otherwise estimated with the reason.

    Parameters
    ----------
    system
        The driven or free-running system, with the values that held.
    onset
        A flip, fold or Neimark-Sacker onset, to ten digits or so, with its cycle point.
    digits
        Significant digits wanted of the parameter.

    Yields
    ------
    Step
        Progress, between steps of integration.

    Raises
    ------
    NotFound
        Why the digits could not be had: the onset stands as it is.
    """
    if digits > MOST_DIGITS:
        raise NotFound(f"equations are integrated to {MOST_DIGITS} digits at most")
    if onset.kind not in KINDS:
        raise NotFound(f"a {onset.kind.value} of equations is not solved for to many digits")
    integrated = integrated_map(system, onset.parameter)
    period = onset.period_after if onset.kind is Kind.FOLD else onset.period_before
    try:
        points, jacobians, sizes = yield from _cycle(integrated, onset, period)
    except (NotProved, SwitchingTouched, Unbounded) as error:
        raise NotFound(error.reason if isinstance(error, NotProved) else error.message) from error
    vectors, angle = _critical(jacobians, onset.kind)
    scales = _scales(integrated, sizes)
    value = onset.value_fraction
    reach = max(REACH * max(abs(float(value)), 1e-3), HALF_WIDTHS * float(onset.half_width))
    found = yield from more_digits(
        system, onset.parameter, onset.kind, points, vectors, float(value), digits, scales, reach, angle
    )
    return _onset(integrated, onset, found, period, digits)


def _cycle(
    integrated: IntegratedMap, onset: Onset, period: int
) -> Generator[Step, None, tuple[Floats, Floats, Floats]]:
    """The printed point carried round in little more than double precision, and what is met there."""
    printed = dict(onset.states)
    if set(printed) != set(integrated.states):
        raise NotFound("the onset names no cycle point")
    with precision(ROUGH_BITS):
        now = [ball_of(Fraction(printed[name])).mid() for name in integrated.states]
        r = ball_of(onset.value_fraction).mid()
        still = [arb(0)] * integrated.size
    points, jacobians, sizes = [], [], []
    for _ in range(period):
        work = integrated.memory.carried(now, r, still, ROUGH_BITS)
        while True:
            try:
                next(work)
            except StopIteration as done:
                carried = done.value
                break
            yield Step("carrying the cycle once round")
        sizes.append(carried.sizes)
        points.append([float(value) for value in now])
        n = integrated.size
        jacobians.append([[float(carried.jacobian[i, j]) for j in range(n)] for i in range(n)])
        now = [value.mid() for value in carried.image]
    return np.array(points), np.array(jacobians), np.max(sizes, axis=0)


def _critical(jacobians: Floats, kind: Kind) -> tuple[Floats, float | None]:
    """The critical vector at each point, and the angle of a pair."""
    monodromy = np.linalg.multi_dot([*jacobians[::-1], np.eye(jacobians.shape[1])])
    angle: float | None = None
    if kind is Kind.NEIMARK_SACKER:
        values, directions = np.linalg.eig(monodromy)
        pairs = [place for place, value in enumerate(values) if value.imag > REAL]
        if not pairs:
            raise NotFound("the cycle has no complex pair of multipliers there")
        critical = min(pairs, key=lambda place: abs(abs(values[place]) - 1))
        angle, first = float(np.angle(values[critical])), directions[:, critical]
    else:
        target = -1.0 if kind is Kind.FLIP else 1.0
        first = np.linalg.svd(monodromy - target * np.eye(len(monodromy)))[2][-1]
    vectors = [first]
    for jacobian in jacobians[:-1]:
        vectors.append(jacobian @ vectors[-1])
    return np.array(vectors), angle


def _scales(integrated: IntegratedMap, sizes: Floats) -> Floats:
    """A length typical of each state: its shown range, or the size of the orbit."""
    ranges = [float(ends[1] - ends[0]) if ends else 0.0 for ends in integrated.extents]
    largest = float(np.max(sizes)) or 1.0
    found: Floats = np.where(np.array(ranges) > 0, ranges, np.maximum(sizes, 1e-9 * largest))
    return found


def _onset(integrated: IntegratedMap, onset: Onset, found: MoreDigits, period: int, digits: int) -> Onset:
    places = decimal_places(max(abs(found.value), LEAST_SIZE), digits + GUARD_DIGITS)
    if found.proof is not None:
        proved = proved_onset(integrated, onset.kind, found.proof, period, digits, places)
        words = proved.consequence or onset.consequence
        proved = replace(proved, consequence=words, sensitivities=onset.sensitivities)
        return with_certificate(integrated, proved, found.proof, found.bits[0])
    low, high = found.bits
    finding = f"{float(found.half):.1e}: {SAFETY} times the last Newton step and the difference between "
    finding += f"Taylor series at {low} and {high} bits, which differ in order and steps"
    kept = tuple(line for line in onset.evidence if line[0] != ERROR_LINE)
    bare = replace(
        onset, digits=digits, reason=found.reason, evidence=(*kept, (ERROR_LINE, finding)), certificate=None
    )
    states = [fraction_of(value) for value in found.place.points[0]]
    return estimated_texts(integrated, bare, found.value, found.half, states, places)
