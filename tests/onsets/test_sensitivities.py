"""Derivatives of onsets in the other parameters: closed forms first, then differences of refined onsets."""

from __future__ import annotations

import dataclasses
from fractions import Fraction

import flint
import pytest
from running import click, climb, finish, system_of

from tinemark.onsets.engine import ladder
from tinemark.onsets.results import Criticality, Kind, LadderLevel, LadderRequest, Onset, Sensitivity, Status
from tinemark.onsets.sensitivities import Moves, derivative_text, sensitivities, with_sensitivities
from tinemark.resources_path import resource
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_file, read_system_text


def system(formulas: dict[str, str], values: dict[str, str], *, low: str = "0", high: str = "1") -> System:
    """A map swept along r, with other parameters, as a user would type it."""
    states = "".join(f'[states.{n}]\nstart = "0.3"\nrange = ["{low}", "{high}"]\n' for n in formulas)
    parameters = "".join(f'[parameters.{n}]\nvalue = "{v}"\n' for n, v in values.items())
    steps = "".join(f'{n} = "{formula}"\n' for n, formula in formulas.items())
    diagram = f'[diagram]\nparameter = "r"\nobserve = "{next(iter(formulas))}"\n'
    return read_system_text(f'title = "own map"\nkind = "map"\n{states}{parameters}[next]\n{steps}{diagram}')


def onset(kind: Kind, value: str, states: dict[str, str], *, status: Status = Status.ESTIMATED) -> Onset:
    """An onset of a steady state, known to nine digits or so."""
    half = Fraction(1, 10**9)
    return Onset(
        parameter="r",
        kind=kind,
        period_before=1,
        period_after=1,
        criticality=Criticality.NOT_APPLICABLE,
        value=value,
        lower=str(float(Fraction(value) - half)),
        upper=str(float(Fraction(value) + half)),
        digits=9,
        status=status,
        states=tuple(states.items()),
    )


def derivatives(found: Onset) -> dict[str, Fraction]:
    return {item.name: Fraction(item.derivative) for item in found.sensitivities}


def near(value: Fraction, exact: Fraction) -> bool:
    return abs(value - exact) <= abs(exact) * Fraction(1, 10**11)


# Closed forms


def test_a_scaled_parameter_scales_every_onset_of_the_ladder() -> None:
    # r*s is the logistic parameter, so every onset is r_k/s, and its derivative -r_k/s^2 = -onset/s.
    scaled = system({"x": "s*r*x*(1 - x)"}, {"r": "1.4", "s": "2"})
    levels = climb(scaled, "1.3", "1.8", levels=5).levels
    assert len(levels) == 5
    for level in levels:
        assert near(derivatives(level.onset)["s"], -level.onset.value_fraction / 2)
    assert levels[0].onset.sensitivities[0].derivative == "-0.750000000000"


@pytest.mark.parametrize("b", ["0.3", "-0.2", "0.5"])
def test_hénon_moves_with_its_memory(b: str) -> None:
    # Flips at 3(1-b)^2/4 and (1-b)^2 + (1+b)^2/4, fold at -(1-b)^2/4; differentiated by hand.
    henon, c = system_of("henon", (("b", b),)), Fraction(b)
    flips = {
        3 * (1 - c) ** 2 / 4: -6 * (1 - c) / 4,
        (1 - c) ** 2 + (1 + c) ** 2 / 4: -2 * (1 - c) + (1 + c) / 2,
    }
    for value, slope in flips.items():
        (found,) = [o for o in click(henon, value, "0.05").onsets if o.kind is Kind.FLIP]
        assert near(derivatives(found)["b"], slope)
    fold = -((1 - c) ** 2) / 4
    (found,) = [o for o in click(henon, fold, "0.1").onsets if o.kind is Kind.FOLD]
    assert near(derivatives(found)["b"], (1 - c) / 2)


def test_the_hatchery_in_closed_form() -> None:
    # feed = (r_k - ln(1 - harvest))/response: so -feed/response and 1/(response (1 - harvest)); the
    # capacity only scales the stock.
    tank = read_system_file(resource("demo", "hatchery.toml"))
    for level in climb(tank, "80", "165", levels=4).levels:
        found = derivatives(level.onset)
        assert near(found["response"], -level.onset.value_fraction / Fraction("0.02"))
        assert near(found["harvest"], 1 / (Fraction("0.02") * Fraction("0.9")))
        assert level.onset.sensitivities[-1].name == "capacity"
        assert level.onset.sensitivities[-1].derivative == "0"


def test_the_converter_s_degenerate_flip() -> None:
    # m2 = m1 + 2 mc, whatever the reference and the clock are.
    (found, *_) = click(system_of("peak_current"), "10", "3").onsets
    assert [item.derivative for item in found.sensitivities] == ["1.00000000000", "2.00000000000", "0", "0"]


def test_a_coupling_that_does_not_matter_has_the_derivative_zero() -> None:
    # Both patches alike, the exchange takes nothing away.
    (found, *_) = click(system_of("two_patch"), "3", "0.2").onsets
    assert [(item.name, item.derivative) for item in found.sensitivities] == [("e", "0")]


@pytest.mark.parametrize("d", ["4", "5"])
def test_neimark_sacker_point_of_a_predator_and_its_prey(d: str) -> None:
    # Steady state x = 1/d, y = (r (1 - 1/d) - 1)/b with determinant r (1 - 2/d): 1 at r = d/(d - 2).
    prey = {"x": "r*x*(1 - x) - b*x*y", "y": "d*x*y"}
    c = Fraction(d)
    value = c / (c - 2)
    pair = system(prey, {"r": "2", "b": "1", "d": d})
    states = {"x": f"{float(1 / c):.10f}", "y": f"{float(value * (1 - 1 / c) - 1):.10f}"}
    found = finish(sensitivities(pair, onset(Kind.NEIMARK_SACKER, f"{float(value):.10f}", states)))
    assert not found.missing
    b, d_item = found.found
    assert (b.name, b.derivative) == ("b", "0")
    assert near(Fraction(d_item.derivative), -2 / (c - 2) ** 2)


def test_crossing_branches() -> None:
    # The steady state 0 has the multiplier r s.
    for kind, formula in ((Kind.TRANSCRITICAL, "s*r*x - x**2"), (Kind.PITCHFORK, "s*r*x - x**3")):
        simple = system({"x": formula}, {"r": "1", "s": "2"})
        found = finish(sensitivities(simple, onset(kind, "0.5", {"x": "0"})))
        assert found == Moves((Sensitivity("s", "-0.250000000000"),))


def test_border_collision_of_a_steady_state() -> None:
    # r + a x = x at the border x = c: r = c(1 - a), whatever slope b holds beyond it.
    bent = system({"x": "r + a*x + (b - a)*max(0, x - c)"}, {"r": "0.3", "a": "0.4", "b": "-1.5", "c": "0.5"})
    found = finish(sensitivities(bent, onset(Kind.BORDER_COLLISION, "0.3", {"x": "0.5"})))
    assert [item.name for item in found.found] == ["a", "b", "c"]
    assert [item.derivative for item in found.found] == ["-0.500000000000", "0", "0.600000000000"]


def test_border_collision_of_a_cycle_where_the_formula_jumps() -> None:
    # The cycle of two: x1 = c, x2 = r + b c - 1, c = r + a x2, so r = (c (1 - a b) + a)/(1 + a).
    jump = system({"x": "r + a*x if x < c else r + b*x - 1"}, {"r": "1", "a": "0.4", "b": "-0.5", "c": "0.5"})
    a, b, c = Fraction("0.4"), Fraction("-0.5"), Fraction("0.5")
    value = (c * (1 - a * b) + a) / (1 + a)
    touching = onset(Kind.BORDER_COLLISION, f"{float(value):.12f}", {"x": "0.5"})
    found = finish(sensitivities(jump, dataclasses.replace(touching, period_before=2)))
    slopes = {item.name: Fraction(item.derivative) for item in found.found}
    assert near(slopes["c"], (1 - a * b) / (1 + a))
    assert near(slopes["b"], -a * c / (1 + a))
    assert near(slopes["a"], ((1 - b * c) - value) / (1 + a))


def test_a_point_off_every_surface_touches_none() -> None:
    bent = system({"x": "r + a*x + max(0, x - c)"}, {"r": "0.3", "a": "0.4", "c": "0.5"})
    found = finish(sensitivities(bent, onset(Kind.BORDER_COLLISION, "0.3", {"x": "0.4"})))
    assert found.found == ()
    assert {reason for _, reason in found.missing} == {"the cycle's point lies on no switching surface"}


def test_a_parameter_that_breaks_the_crossing_has_no_derivative() -> None:
    shifted = system({"x": "s*r*x - x**2 + c"}, {"r": "1", "s": "2", "c": "0"})
    found = finish(sensitivities(shifted, onset(Kind.TRANSCRITICAL, "0.5", {"x": "0"})))
    assert [item.name for item in found.found] == ["s"]
    assert found.missing == (("c", "the branches cross no longer where c changes"),)


# Against differences of refined onsets


def difference(name: str, parameter: str, value: str, place: str, width: str, period: int) -> Fraction:
    """Central difference of an onset, refined on either side."""
    step = Fraction(value) / 10**7
    ends = []
    for sign in (-1, 1):
        shifted = system_of(name, ((parameter, str(float(Fraction(value) + sign * step))),))
        found = [o for o in click(shifted, place, width, digits=24).onsets if o.period_before == period]
        ends.append(found[0].value_fraction)
    return (ends[1] - ends[0]) / (2 * step)


@pytest.mark.parametrize(
    ("name", "parameter", "value", "place", "width", "period"),
    [
        ("hassell", "b", "6", "37.18966", "1", 4),
        ("gaussian", "alpha", "6.2", "-0.7605545", "0.02", 2),
        ("henon", "b", "0.3", "1.0258554", "0.01", 4),
        ("two_patch", "e", "0.1", "3.25", "0.1", 1),
    ],
)
def test_differences_agree_to_six_digits(
    name: str, parameter: str, value: str, place: str, width: str, period: int
) -> None:
    found = [o for o in click(system_of(name), place, width).onsets if o.period_before == period]
    exact = derivatives(found[0])[parameter]
    estimate = difference(name, parameter, value, place, width, period)
    assert abs(estimate - exact) <= abs(exact) / 10**6


# Where there is none


def test_reasons_in_words() -> None:
    logistic = system({"x": "s*r*x*(1 - x)"}, {"r": "3", "s": "1"})
    flip = onset(Kind.FLIP, "3", {"x": "0.666666666667"})
    cases = {
        onset(Kind.FLIP, "3", {"x": "0.67"}, status=Status.READ_BY_EYE): "read by eye",
        onset(Kind.CRISIS, "4", {"x": "0.75"}): "crisis",
        onset(Kind.FLIP, "3", {}): "no point of the cycle",
        # An unstable steady state far from its flip: Newton's method leads away.
        onset(Kind.FLIP, "3.4", {"x": "0.7"}): "went to another onset",
    }
    for case, words in cases.items():
        found = finish(sensitivities(logistic, case))
        assert found.found == ()
        ((name, reason),) = found.missing
        assert name == "s"
        assert words in reason
        assert finish(with_sensitivities(logistic, case)) is case
    assert finish(sensitivities(logistic, flip)).found


def test_a_derivative_that_is_no_number_leaves_the_others_alone() -> None:
    # x is negative on part of the cycle: x**z holds at z = 2 alone, where s has its derivative all the same.
    quadratic = system({"x": "1 - s*r*x**z"}, {"r": "1.2", "s": "1", "z": "2"}, low="-1")
    (found, *_) = click(quadratic, "1.25", "0.02").onsets
    assert [item.name for item in found.sensitivities] == ["s"]
    assert near(derivatives(found)["s"], Fraction("-1.25"))
    assert finish(sensitivities(quadratic, found)).missing[0][0] == "z"


def test_without_other_parameters_there_is_nothing_to_say() -> None:
    (found, *_) = click(system_of("logistic"), "3", "0.1").onsets
    assert found.sensitivities == ()
    assert finish(sensitivities(system_of("logistic"), found)) == Moves(())


# The engine


def test_levels_carry_them_as_they_come_and_in_the_result() -> None:
    henon = system_of("henon")
    request = LadderRequest(henon, "a", Fraction("0.1"), Fraction("1.4"), levels=3)
    runs = []
    for _ in range(2):
        levels = []
        running = ladder(request)
        while True:
            try:
                item = next(running)
            except StopIteration as done:
                result = done.value
                break
            if isinstance(item, LadderLevel):
                levels.append(item)
        assert tuple(levels) == result.levels
        assert all(level.onset.sensitivities for level in levels)
        runs.append(result)
    assert runs[0] == runs[1]


def test_long_cycles_wait_until_they_are_asked_for() -> None:
    scaled = system({"x": "s*r*x*(1 - x)"}, {"r": "1.4", "s": "2"})
    bare = onset(Kind.FLIP, "1.5", {"x": "0.666666666667"})
    assert finish(with_sensitivities(scaled, bare, longest=0)) is bare
    assert finish(with_sensitivities(scaled, bare, longest=1)).sensitivities


def test_few_digits_are_enough() -> None:
    found = click(system_of("hassell"), "28.34", "1", digits=4).onsets[0]
    fine = click(system_of("hassell"), "28.34", "1", digits=40).onsets[0]
    assert found.sensitivities == fine.sensitivities != ()


def test_precision_is_left_as_it_was() -> None:
    before = flint.ctx.prec
    click(system_of("hassell"), "11.39", "1")
    assert flint.ctx.prec == before


def test_texts_have_twelve_digits() -> None:
    texts = {
        Fraction(0): "0",
        Fraction(-21, 20): "-1.05000000000",
        Fraction(1, 3): "0.333333333333",
        1 - Fraction(1, 10**20): "1.00000000000",
        Fraction(123456789012345): "123456789012000",
    }
    for value, text in texts.items():
        assert derivative_text(value) == text
