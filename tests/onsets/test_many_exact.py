"""Clicks on maps of several states, against onsets that can be written down."""

from __future__ import annotations

from fractions import Fraction

import flint
import pytest
from mpmath import mp, mpf, workdps
from running import finish, system_of

from tinemark.onsets.many_engine import refine_many
from tinemark.onsets.results import Criticality, Kind, Onset, RefineRequest, Status
from tinemark.systems.errors import NoOnsetFound
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text

HENON_B = ("0.3", "0.1", "-0.3", "0.5")


def click(
    system: System,
    near: str,
    width: str,
    *,
    observed: str | None = None,
    height: str | None = None,
    digits: int = 20,
) -> tuple[Onset, ...]:
    request = RefineRequest(
        system,
        system.diagram_parameter,
        Fraction(near),
        Fraction(width),
        None if observed is None else Fraction(observed),
        None if height is None else Fraction(height),
        digits,
    )
    return finish(refine_many(request)).onsets


def own_system(formulas: dict[str, str], low: str = "-1", high: str = "1", start: str = "0.1") -> System:
    """A map of several states along r, as a user would type it."""
    states = "\n".join(
        f'[states.{name}]\nstart = "{start}"\nrange = ["{low}", "{high}"]\n' for name in formulas
    )
    steps = "\n".join(f'{name} = "{formula}"' for name, formula in formulas.items())
    first = next(iter(formulas))
    return read_system_text(
        f'title = "own map"\nkind = "map"\n{states}\n[parameters.r]\nvalue = "1"\nrange = ["0", "2"]\n'
        f'[next]\n{steps}\n[diagram]\nparameter = "r"\nobserve = "{first}"\n'
    )


def assert_is(
    onset: Onset,
    value: Fraction,
    kind: Kind,
    before: int,
    after: int,
    digits: int = 20,
    status: Status = Status.PROVED,
) -> None:
    assert (onset.kind, onset.period_before, onset.period_after) == (kind, before, after)
    assert Fraction(onset.lower) <= value <= Fraction(onset.upper)
    assert onset.half_width <= abs(value) / 10 ** (digits - 1)
    assert onset.status is status
    assert bool(onset.reason) is (status is Status.ESTIMATED)
    assert onset.digits == digits


@pytest.mark.parametrize("b", HENON_B)
def test_henon_first_flip(b: str) -> None:
    """3 (1 - b)^2 / 4 (Hénon 1976, from memory)."""
    exact = 3 * (1 - Fraction(b)) ** 2 / 4
    (onset,) = click(system_of("henon", (("b", b),)), str(float(exact) * 1.01), "0.3")
    assert_is(onset, exact, Kind.FLIP, 1, 2)
    assert onset.criticality is Criticality.SUPERCRITICAL


@pytest.mark.parametrize("b", HENON_B)
def test_henon_second_flip(b: str) -> None:
    """(1 - b)^2 + (1 + b)^2 / 4 (from the trace of the 2-cycle)."""
    exact = (1 - Fraction(b)) ** 2 + (1 + Fraction(b)) ** 2 / 4
    (onset,) = click(system_of("henon", (("b", b),)), str(float(exact) * 0.999), "0.2")
    assert_is(onset, exact, Kind.FLIP, 2, 4)


@pytest.mark.parametrize("b", HENON_B)
def test_henon_fold(b: str) -> None:
    """-(1 - b)^2 / 4, where x = 2 / (1 - b); it has no period before (Hénon 1976, from memory)."""
    exact = -((1 - Fraction(b)) ** 2) / 4
    x = str(float(2 / (1 - Fraction(b))))
    (onset,) = click(system_of("henon", (("b", b),)), str(float(exact) * 0.99), "0.1", observed=x, height="3")
    assert_is(onset, exact, Kind.FOLD, 0, 1)
    assert onset.criticality is Criticality.NOT_APPLICABLE
    states = dict(onset.states)
    assert abs(Fraction(states["x"]) - 2 / (1 - Fraction(b))) < Fraction(1, 10**18)


@pytest.mark.parametrize("digits", [6, 15, 40, 80])
def test_as_many_digits_as_asked(digits: int) -> None:
    (onset,) = click(system_of("henon"), "0.915", "0.1", digits=digits)
    assert_is(onset, Fraction("0.9125"), Kind.FLIP, 2, 4, digits)
    assert len(onset.value.replace(".", "").lstrip("0")) >= digits


@pytest.mark.parametrize(("near", "period"), [("3.004", 1), ("3.4502", 2), ("3.5442", 4)])
def test_two_patches_in_step_split_as_logistic_growth_does(near: str, period: int) -> None:
    """The synchronous state flips at the logistic onsets 3, 1 + sqrt 6, ... (Fujisaka and Yamada 1983)."""
    exact = {1: "3", 2: "3.44948974278317809819728407470589", 4: "3.54409035955192285361596598660480"}
    (onset,) = click(system_of("two_patch"), near, "0.02")
    assert_is(onset, Fraction(exact[period]), Kind.FLIP, period, 2 * period)
    states = dict(onset.states)
    assert states["x"] == states["y"]


def test_two_patches_open_the_window_of_period_three() -> None:
    """The fold at 1 + sqrt 8 of the logistic map, in step; 1 + 2 sqrt 2 exactly."""
    (onset,) = click(system_of("two_patch"), "3.829", "0.02", observed="0.51", height="0.3")
    assert (onset.kind, onset.period_before, onset.period_after) == (Kind.FOLD, 0, 3)
    low, high = Fraction(onset.lower) - 1, Fraction(onset.upper) - 1
    assert low**2 <= 8 <= high**2
    assert onset.half_width < Fraction(1, 10**19)


def test_the_flip_coefficient_of_the_synchronous_state() -> None:
    """9 for the logistic map at r = 3 (exact); 9/2 for a critical vector of length 1 across both patches."""
    (onset,) = click(system_of("two_patch"), "3.004", "0.02")
    evidence = dict(onset.evidence)
    assert evidence["flip coefficient"].startswith("4.50000 ")
    assert evidence["crosses -1 with speed"].startswith("-1.00000 ")


@pytest.mark.parametrize(
    ("cubic", "coupling", "expected"),
    [(-1, 1, Criticality.SUPERCRITICAL), (1, -1, Criticality.SUBCRITICAL), (1, 1, Criticality.SUPERCRITICAL)],
)
def test_criticality_sees_the_other_state(cubic: int, coupling: int, expected: Criticality) -> None:
    """On the centre manifold y = 2 x^2, so the coefficient is cubic + 2 * coupling, whatever `cubic` says."""
    system = own_system({"x": f"-r*x + ({coupling})*x*y + ({cubic})*x**3", "y": "y/2 + x**2"}, start="0.01")
    (onset,) = click(system, "0.98", "0.3", observed="0", height="1")
    assert_is(onset, Fraction(1), Kind.FLIP, 1, 2)
    assert onset.criticality is expected
    coefficient = float(dict(onset.evidence)["flip coefficient"].split()[0])
    # The critical vector has length 1 in units of the states' ranges, 2 wide here.
    assert coefficient == pytest.approx(4 * (cubic + 2 * coupling), rel=1e-6)


def test_a_subcritical_flip_is_a_jump_back_to_its_fold() -> None:
    """The 2-cycle ±x has r = 1 - x^2 + x^4, so it turns at r = 3/4 exactly."""
    system = own_system({"x": "-r*x - x**3 + x**5", "y": "y/2 + x/10"}, start="0.01")
    (onset,) = click(system, "0.98", "0.3", observed="0", height="1")
    assert_is(onset, Fraction(1), Kind.FLIP, 1, 2)
    assert onset.criticality is Criticality.SUBCRITICAL
    assert "the change is a jump: above r = 1 " in onset.consequence
    assert "turns back at the fold r = 0.75 (proved)" in onset.consequence
    (fold,) = click(system, "0.76", "0.1", observed="0.71", height="0.5")
    assert_is(fold, Fraction(3, 4), Kind.FOLD, 0, 2)


def test_an_onset_at_zero() -> None:
    system = own_system({"x": "-(1 + r)*x - x*y + 3*x**3", "y": "y/2 + x**2"}, start="0.01")
    (onset,) = click(system, "0.02", "0.3")
    assert onset.kind is Kind.FLIP
    assert Fraction(onset.lower) <= 0 <= Fraction(onset.upper)
    assert onset.half_width < Fraction(1, 10**19)


@pytest.mark.parametrize("extra", [1, 4])
def test_more_states(extra: int) -> None:
    """States that only listen do not move the onset: Hénon's 0.9125 at b = 0.3 in 3 and in 6 states."""
    formulas = {"x": "1 - r*x**2 + y", "y": "0.3*x"}
    formulas |= {f"z{n}": f"0.{n + 3}*z{n} + {'x' if n == 1 else f'z{n - 1}'}" for n in range(1, extra + 1)}
    (onset,) = click(own_system(formulas, "-3", "3"), "0.92", "0.1")
    assert_is(onset, Fraction("0.9125"), Kind.FLIP, 2, 4)
    assert len(onset.states) == 2 + extra


def test_a_neimark_sacker_onset() -> None:
    """r = 2 with multipliers exp(±i pi/3) (exact; Maynard Smith 1968, from memory).

    d = -2 for q = (exp(i pi/3), 1) of squared length 2, so -1 for a critical vector of length 1.
    """
    for digits in (12, 20, 45):
        (onset,) = click(
            system_of("delayed_logistic"), "2.02", "0.3", observed="0.5", height="1", digits=digits
        )
        assert_is(onset, Fraction(2), Kind.NEIMARK_SACKER, 1, 1, digits)
        assert onset.criticality is Criticality.SUPERCRITICAL
        evidence = dict(onset.evidence)
        assert evidence["Neimark-Sacker coefficient"].startswith("-1.00000 ")
        assert "0.16666667 of a turn" in evidence["pair of multipliers exactly on the unit circle"]
        assert "closed curve grows softly" in onset.consequence


@pytest.mark.parametrize("width", ["0.05", "0.2", "0.5"])
def test_a_click_exactly_on_an_onset(width: str) -> None:
    """Predator and prey with b = 1, d = 4: the fixed point x = 1/4 has trace 2 - r/4 and determinant r/2,
    so its pair meets the unit circle at r = 2, where a search started at the click stands on a zero."""
    system = own_system({"x": "r*x*(1 - x) - x*y", "y": "4*x*y"}, low="0", start="0.3")
    (onset,) = click(system, "2", width)
    assert_is(onset, Fraction(2), Kind.NEIMARK_SACKER, 1, 1)
    assert onset.status is Status.PROVED


def test_nothing_there() -> None:
    with pytest.raises(NoOnsetFound, match="lies within reach"):
        click(own_system({"x": "0.5*x + r/10", "y": "0.2*y + x"}), "1", "0.5")
    with pytest.raises(NoOnsetFound, match="settles on a cycle"):
        click(own_system({"x": "x + 1 + r**2", "y": "2*y + 1 + x**2"}), "1", "0.5")


def test_a_view_too_narrow_for_doubles() -> None:
    (onset,) = click(system_of("henon"), "0.91250000000000000001", "1e-18")
    assert onset.period_before == 2
    assert Fraction(onset.lower) <= Fraction("0.9125") <= Fraction(onset.upper)
    assert onset.half_width < Fraction(1, 10**36)
    with pytest.raises(NoOnsetFound, match="100 widths of this view away"):
        click(system_of("henon"), "0.9125000000000001", "1e-18")


def test_two_multipliers_that_nearly_meet_are_told_apart() -> None:
    """With next to no exchange the patches' two flips, 3 and 2 + 1/(1 - 2 e) (both exact), all but meet."""
    e = Fraction(1, 10**9)
    found = click(system_of("two_patch", (("e", "0.000000001"),)), "3.004", "0.02")
    # Nearest is the pitchfork of the alternating cycle, 3 e beyond 3.
    assert [round(float(each.value_fraction - 3) / float(e)) for each in found] == [3, 2]
    onset = next(each for each in found if each.kind is Kind.FLIP)
    low, high = Fraction(onset.lower), Fraction(onset.upper)
    assert (low <= 3 <= high) is not (low <= 2 + 1 / (1 - 2 * e) <= high)
    assert onset.status is Status.PROVED


def test_a_map_made_of_pieces() -> None:
    """On x > 0 the map 1 - r x abs(x) is 1 - r x^2, whose steady state flips at 3/4 (exact)."""
    system = own_system({"x": "1 - r*x*abs(x)", "y": "0.2*y + 0.1*x"}, "-1.5", "1.5", "0.3")
    (onset,) = click(system, "0.76", "0.2")
    assert_is(onset, Fraction(3, 4), Kind.FLIP, 1, 2)


def test_of_two_mirror_onsets_the_clicked_one_is_given() -> None:
    """The odd cubic's steady states ±sqrt(1 - 1/r) flip together at r = 2 (exact)."""
    system = own_system({"x": "r*x*(1 - x**2)", "y": "0.2*y + 0.1*x"}, "-1.2", "1.2")
    for side in (1, -1):
        onset = click(system, "2.005", "0.2", observed=str(0.7 * side), height="2")[0]
        assert_is(onset, Fraction(2), Kind.FLIP, 1, 2)
        assert Fraction(dict(onset.states)["x"]) * side > Fraction("0.7")


def test_an_independent_solver_agrees() -> None:
    """Third flip of Hénon's map at b = -0.5: mpmath's secant method on single shooting, 40 digits."""

    def residual(x: mpf, y: mpf, a: mpf) -> tuple[mpf, ...]:
        b, start = mpf(-1) / 2, (x, y)
        matrix = mp.eye(2)
        for _ in range(4):
            matrix = mp.matrix([[-2 * a * x, 1], [b, 0]]) * matrix
            x, y = 1 - a * x**2 + y, b * x
        trace = matrix[0, 0] + matrix[1, 1]
        return x - start[0], y - start[1], 1 + trace + b**4

    (onset,) = click(system_of("henon", (("b", "-0.5"),)), "2.4138", "0.01", digits=30)
    rough = dict(onset.states)
    with workdps(40):
        found = mp.findroot(residual, (mpf(rough["x"][:8]), mpf(rough["y"][:8]), mpf(onset.value[:7])))
        text = mp.nstr(found[2], 36)
    assert Fraction(onset.lower) <= Fraction(text) <= Fraction(onset.upper)
    assert onset.period_before == 4


def test_ball_precision_is_left_alone_between_steps() -> None:
    before = flint.ctx.prec
    request = RefineRequest(system_of("henon"), "a", Fraction("0.915"), Fraction("0.1"))
    for step in refine_many(request):
        assert step.text
        assert flint.ctx.prec == before
    assert flint.ctx.prec == before
