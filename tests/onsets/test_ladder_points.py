"""Gaps and ratios with the uncertainty their onsets hand on."""

from __future__ import annotations

import random
from fractions import Fraction

import pytest

from tinemark.onsets.acceleration import eliminate, levin_t, wynn_epsilon
from tinemark.onsets.ladder_points import ENCLOSURE, STANDARD, LadderPoint, gap, points_of, ratio
from tinemark.onsets.results import Criticality, Kind, LadderLevel, Onset, Status


def point(level: int, value: str | Fraction, half: str, status: Status) -> LadderPoint:
    middle, width = Fraction(value), Fraction(half)
    return LadderPoint(level, middle, middle - width, middle + width, status)


def three(half: str, status: Status) -> tuple[LadderPoint, LadderPoint, LadderPoint]:
    return point(1, "3", half, status), point(2, "3.4495", half, status), point(3, "3.5441", half, status)


def test_standard_uncertainty_of_a_ratio_takes_the_shared_onset_once() -> None:
    """JCGM 100:2008, eq. 13: u = (u(a)/gap) sqrt(1 + (1 + d)^2 + d^2), the gap being the later one."""
    found, _ = ratio(*three("0.0002", Status.ESTIMATED))  # 95 % half-width, so u(a) = 0.0001
    assert found is not None
    later, d = 3.5441 - 3.4495, (3.4495 - 3) / (3.5441 - 3.4495)
    expected = 0.0001 / later * (1 + (1 + d) ** 2 + d**2) ** 0.5
    assert found.basis == STANDARD
    assert float(found.uncertainty) == pytest.approx(expected, rel=0.02)
    assert float(found.uncertainty) >= expected
    independent = d * 0.0001 * 2**0.5 * ((1 / 0.4495) ** 2 + (1 / later) ** 2) ** 0.5
    assert float(found.uncertainty) > 1.1 * independent


def test_the_worked_factor() -> None:
    """At delta = 4.6692 the factor is 7.41224 (recomputed)."""
    d = 4.66920160910299
    values = ("0", str(Fraction(d).limit_denominator(10**12)), str(Fraction(d).limit_denominator(10**12) + 1))
    a, b, c = (point(n, Fraction(v), "0.00002", Status.MEASURED) for n, v in enumerate(values, 1))
    found, _ = ratio(a, b, c)
    assert found is not None
    assert float(found.uncertainty) == pytest.approx(7.41224 * 0.00001, rel=0.03)


def test_a_ratio_of_proved_onsets_encloses() -> None:
    points = three("0.001", Status.PROVED)
    found, _ = ratio(*points)
    assert found is not None
    assert found.basis == ENCLOSURE
    chance = random.Random(7)
    for _ in range(300):
        a, b, c = (
            p.lower + (p.upper - p.lower) * Fraction(chance.choice([0.0, 1.0, chance.random()]))
            for p in points
        )
        assert found.lower <= (b - a) / (c - b) <= found.upper
    corner = (points[1].upper - points[0].lower) / (points[2].lower - points[1].upper)
    assert found.upper - corner < corner / 50


def test_gaps() -> None:
    a, b, _ = three("0.001", Status.PROVED)
    assert gap(a, b).value == "0.4495"
    assert gap(a, b).uncertainty == "0.0020"
    assert gap(a, b).basis == ENCLOSURE
    a, b, _ = three("0.002", Status.MEASURED)
    assert gap(a, b).basis == STANDARD
    assert gap(a, b).uncertainty == "0.0015"  # sqrt(2) * 0.001, rounded up


def test_readings_are_rectangular_and_a_mixture_is_not_an_enclosure() -> None:
    read = point(1, "3", "0.003", Status.READ_BY_EYE)
    assert float(read.standard_uncertainty) == pytest.approx(0.003 / 3**0.5, rel=1e-4)
    proved = point(2, "3.4495", "0.000001", Status.PROVED)
    third = point(3, "3.5441", "0.000001", Status.PROVED)
    found, _ = ratio(read, proved, third)
    assert found is not None
    assert found.basis == STANDARD
    assert float(found.uncertainty) == pytest.approx(0.003 / 3**0.5 / 0.0946, rel=0.06)


def test_no_ratio_of_gaps_smaller_than_their_uncertainty() -> None:
    found, reason = ratio(*three("0.2", Status.PROVED))
    assert found is None
    assert reason == "gap 2 is not larger than its own uncertainty"
    found, reason = ratio(*three("0.3", Status.PROVED))
    assert found is None
    assert reason == "gap 1 is not larger than its own uncertainty"


def test_points_of_a_ladder() -> None:
    onset = Onset("r", Kind.FLIP, 1, 2, Criticality.SUPERCRITICAL, "3.00", "2.999", "3.001", 3, Status.PROVED)
    (found,) = points_of([LadderLevel(1, onset)])
    assert found == point(1, "3", "0.001", Status.PROVED)
    assert found.is_proved


def test_epsilon_removes_geometric_terms_exactly() -> None:
    """Wynn 1956: column k is exact on a constant plus k geometric terms."""
    from decimal import Decimal, localcontext

    with localcontext() as context:
        context.prec = 50
        terms = [
            Decimal(7) + Decimal(3) * Decimal("0.4") ** n - Decimal(2) * Decimal("-0.3") ** n
            for n in range(7)
        ]
        columns = wynn_epsilon(terms)
        assert abs(columns[1][0] - 7) < Decimal("1e-40")
        assert abs(columns[0][-1] - 7) > Decimal("1e-8")
        simple = [Decimal(1) - Decimal("0.5") ** n for n in range(4)]
        assert all(abs(value - 1) < Decimal("1e-40") for value in wynn_epsilon(simple)[0])
        assert all(abs(value - 1) < Decimal("1e-40") for value in eliminate(simple, Decimal("0.5")))


def test_levin_sums_a_slow_series() -> None:
    """ln 2 = 1 - 1/2 + 1/3 - ... (Levin 1973 treats this series)."""
    from decimal import Decimal, localcontext

    with localcontext() as context:
        context.prec = 50
        total, terms = Decimal(0), []
        for n in range(1, 12):
            total += Decimal((-1) ** (n + 1)) / n
            terms.append(total)
        assert abs(levin_t(terms, 9)[-1] - Decimal(2).ln()) < Decimal("1e-8")
        assert levin_t([Decimal(1)] * 5, 2) == []
