"""Onsets as plain text: every digit printed holds, and columns line up."""

from __future__ import annotations

from fractions import Fraction

import pytest

from tinemark.document.text_table import onsets_table, scaling_lines, text_table
from tinemark.onsets.results import Criticality, Kind, LadderLevel, Onset, Status
from tinemark.onsets.scaling import points_of, scaling

# Onsets of the logistic map, cut after 24 decimals (check_values.md, section 4.1, R 55).
LEVELS = ["3", "3.449489742783178098197284", "3.544090359551922853615965", "3.564407266095432597773557"]


def onset(value: str, half_width: str, status: Status = Status.PROVED, kind: Kind = Kind.FLIP) -> Onset:
    low, high = Fraction(value) - Fraction(half_width), Fraction(value) + Fraction(half_width)
    criticality = Criticality.SUPERCRITICAL if kind is Kind.FLIP else Criticality.NOT_APPLICABLE
    before, after = (1, 2) if kind is Kind.FLIP else (0, 3)
    return Onset(
        "r", kind, before, after, criticality, value, str(_decimal(low)), str(_decimal(high)), 20, status
    )


def _decimal(value: Fraction) -> str:
    from tinemark.systems.exact import fraction_text

    return fraction_text(value)


def test_a_ladder() -> None:
    found = [(level, onset(value, "1e-22")) for level, value in enumerate(LEVELS, 1)]
    scaled = scaling(points_of([LadderLevel(level, each) for level, each in found]))
    lines = onsets_table(found, scaled).splitlines()
    assert len(lines) == 5
    # Digits of the published values; gaps and ratios are differences and quotients of these.
    assert "3.449489742783178098197" in lines[2]
    assert lines[1].split()[-2:] == ["0.449489742", "4.75144621"]
    assert lines[3].split()[-2:] == ["0.0203169065", "-"]
    assert lines[4].split()[-2:] == ["-", "-"]
    assert len({line.split("proved")[0].rindex(".") for line in lines[1:]}) == 1


def test_a_fold_and_an_estimate_outside_a_ladder() -> None:
    found = [
        (None, onset("3.8284271247", "0.0000000002", Status.ESTIMATED, Kind.FOLD)),
        (None, onset("3.5", "0.01", Status.READ_BY_EYE)),
    ]
    lines = onsets_table(found).splitlines()
    assert lines[0].split() == ["level", "kind", "period", "value", "status"]
    assert lines[1].split() == ["-", "fold", "new", "3", "3.82842712470(10)", "estimated"]
    assert "read by eye" in lines[2]


def test_what_is_not_known_is_said_with_its_reason() -> None:
    scaled = scaling(points_of([LadderLevel(1, onset("3", "1e-22"))]))
    limit, delta, verdict = scaling_lines(scaled, "r")
    assert limit.startswith("limit   not known: ")
    assert delta.startswith("delta   not known: ")
    assert "undecided" in verdict


@pytest.mark.parametrize(
    ("cells", "expected"),
    [
        (["1.5", "-10.25", "-"], ["  1.5 ", "-10.25", "-"]),
        (["word", "other"], ["word", "other"]),
    ],
)
def test_numbers_meet_at_the_decimal_sign(cells, expected) -> None:
    lines = text_table(["v", "w"], [(cell, "x") for cell in cells], frozenset()).splitlines()[1:]
    assert [line[: len(line) - 1].rstrip() for line in lines] == [cell.rstrip() for cell in expected]
