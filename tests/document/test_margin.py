"""The margin from the operating point to an onset: numbers by hand, and sentences for people."""

from __future__ import annotations

import dataclasses
import math
from fractions import Fraction

import pytest
import tolerance_samples as tank

from tinemark.document import session as ses
from tinemark.document.margin import (
    OperatingPoint,
    margin_sentence,
    margin_to,
    nearest_margin,
    operating_point,
)
from tinemark.document.rounding import plain
from tinemark.onsets.results import Status
from tinemark.systems.library import builtin_text
from tinemark.systems.system_file import read_system_text


def words(value: str, *, text: str = tank.TEXT, probe: bool = False, slopes: bool = True) -> str:
    point = OperatingPoint(Fraction(value), is_probe=probe)
    onset = tank.onset(tank.FIRST, 1, slopes=slopes)
    return plain(margin_sentence(margin_to(onset, read_system_text(text), point)))


def test_numbers_by_hand() -> None:
    margin = nearest_margin(tank.session())
    assert margin is not None
    assert margin.row_id == "r1"
    assert margin.distance == Fraction(tank.FIRST) - 100
    assert margin.percent == margin.distance
    # What the tolerances do to the onset, 2.1774, and the setting's own 1.5.
    standard = math.hypot(2.177426204534, 1.5)
    assert margin.standard is not None
    assert float(margin.standard) == pytest.approx(standard, rel=1e-9)
    assert margin.multiples is not None
    assert float(margin.multiples) == pytest.approx(5.268025782891 / standard, rel=1e-9)
    assert margin.expanded == 2 * margin.standard


def test_the_nearest_onset_is_looked_for_from_the_operating_point() -> None:
    session = tank.session()
    for value, row in (("118.4", "r1"), ("118.5", "r2"), ("150", "r2")):
        margin = nearest_margin(ses.with_probe(session, Fraction(value)))
        assert margin is not None
        assert margin.row_id == row
        assert margin.point == OperatingPoint(Fraction(value), is_probe=True)
    assert operating_point(session) == OperatingPoint(Fraction(100))


def test_onsets_of_other_values_of_the_other_parameters_do_not_count() -> None:
    session = tank.session()
    edited = ses.with_system(session, tank.changed_text(('value = "0.1"', 'value = "0.2"')))
    assert nearest_margin(edited) is None
    assert nearest_margin(ses.new_session(tank.TEXT)) is None


def test_the_plain_sentence() -> None:
    assert words("100") == (
        "The onset at 105.27 lies 5.27 kg/day (5.3 %) above the operating point, 2.0 standard uncertainties; "
        "with k = 2 the margin is 5.3 ± 5.3 kg/day, which reaches past the onset."
    )
    assert words("95") == (
        "The onset at 105.3 lies 10.3 kg/day (11 %) above the operating point, 3.9 standard uncertainties; "
        "with k = 2 the margin is 10.3 ± 5.3 kg/day."
    )
    assert words("120", probe=True).startswith(
        "The onset at 105.3 lies 14.7 kg/day (12 %) below the probe at 120 kg/day, 5.6 standard"
    )


def test_on_the_onset_itself() -> None:
    assert words(tank.FIRST).startswith("The operating point stands on the onset at 105.268")


def test_a_setting_of_zero_has_no_percentage() -> None:
    assert "%" not in words("0")


def test_what_the_uncertainty_does_not_hold_is_said() -> None:
    bare = tank.without_tolerances()
    assert words("100", text=bare) == (
        "The onset at 105.27 lies 5.27 kg/day (5.3 %) above the operating point. No tolerances are given, so "
        "how sure this is cannot be said; enter them in the system card."
    )
    exact = tank.changed_text(('tolerance = "1.5"\n', ""))
    assert words("100", text=exact).endswith(" feed itself is taken as exact: it has no tolerance.")
    assert "with k = 2 the margin is 5.3 ± 4.4 kg/day." in words("100", text=exact)
    assert words("100", slopes=False).endswith(
        "The tolerances of response, harvest and capacity are not counted: "
        "how this onset moves with the other parameters is not known yet; refine the row."
    )
    # The setting's own tolerance counts all the same: k = 2 makes 3.0 of 1.5.
    assert "5.3 ± 3.0 kg/day" in words("100", slopes=False)


def test_the_setting_alone() -> None:
    logistic = read_system_text(builtin_text("logistic"))
    onset = dataclasses.replace(tank.onset("3", 1, slopes=False), parameter="r")
    margin = margin_to(onset, logistic, OperatingPoint(Fraction("2.9")))
    assert plain(margin_sentence(margin)) == (
        "The onset at 3.000 lies 0.100 (3.4 %) above the operating point, 10 standard uncertainties; "
        "with k = 2 the margin is 0.100 ± 0.020."
    )


def test_a_value_read_by_eye_is_not_shown_finer_than_it_is() -> None:
    eye = dataclasses.replace(
        tank.onset(tank.FIRST, 1, slopes=False), status=Status.READ_BY_EYE, lower="104.5", upper="106.1"
    )
    margin = margin_to(eye, tank.tank(), OperatingPoint(Fraction(100)))
    assert margin_sentence(margin).startswith("The onset at 105.3 lies 5.3 kg/day (5.3 %) above")
    assert margin.standard is not None
    assert float(margin.standard) == pytest.approx(
        math.hypot(1.5, float(eye.half_width) / math.sqrt(3)), rel=1e-4
    )


def test_far_away_is_not_counted_out() -> None:
    logistic = read_system_text(builtin_text("logistic"))
    onset = dataclasses.replace(tank.onset("3", 1, slopes=False), parameter="r")
    margin = margin_to(onset, logistic, OperatingPoint(Fraction(-100)))
    assert "more than 1000 standard uncertainties" in margin_sentence(margin)
