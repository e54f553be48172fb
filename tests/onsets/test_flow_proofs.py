"""Onsets of driven and free-running systems to many digits: exact ones, published ones, damaged claims.

A rotation by half a turn a period makes a flip out of any pitchfork of a free equation, so exact values are
to be had: u' = (r - 0.3) u - u**3, w' = -w in the rotating frame, strobed each half turn, flips at r = 0.3.
"""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from flint import arb
from running import finish

from tinemark.onsets.ball_orbits import precision
from tinemark.onsets.flow_digits import more_digits, start_place
from tinemark.onsets.flow_digits_row import sharpened
from tinemark.onsets.flow_proofs import NOT_REPEATING, prove
from tinemark.onsets.flow_proofs_map import integrated_map
from tinemark.onsets.flow_proofs_period import repeats
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Criticality, Kind, Onset, Status
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text


def system(states: dict[str, str], value: str = "1", **sample: str) -> System:
    """A system of equations in the parameter r."""
    lines = ['title = "test"', f'kind = "{"driven" if "every" in sample else "flow"}"']
    for name in states:
        lines += [f"[states.{name}]", 'start = "0"']
    lines += ["[parameters.r]", f'value = "{value}"', "[rate]"]
    lines += [f'{name} = "{text}"' for name, text in states.items()]
    lines += ["[sample]", *(f'{key} = "{text}"' for key, text in sample.items())]
    lines += ["[diagram]", 'parameter = "r"', f'observe = "{next(iter(states))}"']
    return read_system_text("\n".join(lines))


def estimate(kind: Kind, value: str, period: int = 1, **states: str) -> Onset:
    """An onset as it is found in doubles."""
    before, after = {Kind.FLIP: (period, 2 * period), Kind.FOLD: (0, period)}.get(kind, (period, period))
    return Onset(
        parameter="r",
        kind=kind,
        period_before=before,
        period_after=after,
        criticality=Criticality.UNDECIDED,
        value=value,
        lower=f"{float(value) - 1e-8:.10f}",
        upper=f"{float(value) + 1e-8:.10f}",
        digits=9,
        status=Status.ESTIMATED,
        reason="estimated",
        states=tuple(states.items()),
        evidence=(("least period", str(period)), ("error estimate", "1e-8")),
    )


U = "(cos(pi*t)*x + sin(pi*t)*y)"
W = "(cos(pi*t)*y - sin(pi*t)*x)"


def half_turns(sign: str = "-") -> System:
    """The rotating pitchfork: a flip at r = 0.3, softly for the sign - of its cubic term."""
    u, w = f"((r - 0.3)*{U} {sign} {U}**3)", f"(-{W})"
    return system(
        {
            "x": f"-pi*y + cos(pi*t)*{u} - sin(pi*t)*{w}",
            "y": f"pi*x + sin(pi*t)*{u} + cos(pi*t)*{w}",
        },
        every="1",
    )


DUFFING = system({"x": "v", "v": "-0.3*v + x - x**3 + r*cos(1.2*t)"}, every="2*pi/1.2")
ROESSLER = system({"x": "-y - z", "y": "x + 0.2*y", "z": "0.2 + z*(x - r)"}, crosses="y", direction="rising")


@pytest.mark.parametrize(
    ("sign", "criticality"), [("-", Criticality.SUPERCRITICAL), ("+", Criticality.SUBCRITICAL)]
)
def test_an_exact_flip_is_proved(sign: str, criticality: Criticality) -> None:
    found = finish(sharpened(half_turns(sign), estimate(Kind.FLIP, "0.3000000003", x="0", y="0"), 10))
    assert found.status is Status.PROVED and found.reason == ""
    assert Fraction(found.lower) <= Fraction(3, 10) <= Fraction(found.upper)
    assert found.half_width < Fraction(1, 10**11)
    assert found.criticality is criticality
    assert dict(found.evidence)["crosses -1 with speed"].startswith("-1.0000")
    assert (found.period_before, found.period_after) == (1, 2)


def test_an_exact_fold_is_proved() -> None:
    # x' = r - 0.3 - (x - 0.5)**2: two steady states meet at r = 0.3.
    folding = system({"x": "r - 0.3 - (x - 0.5)**2 + y*y", "y": "-y*(1 + x)"}, every="1")
    found = finish(sharpened(folding, estimate(Kind.FOLD, "0.3000000003", x="0.50000001", y="0"), 20))
    assert found.status is Status.PROVED
    assert Fraction(found.lower) <= Fraction(3, 10) <= Fraction(found.upper)
    assert (found.period_before, found.period_after) == (0, 1)


def test_an_exact_neimark_sacker_onset_is_proved() -> None:
    radius = "(r - 0.2 - x*x - y*y)"
    turning = system({"x": f"x*{radius} - y", "y": f"y*{radius} + x"}, every="1")
    found = finish(sharpened(turning, estimate(Kind.NEIMARK_SACKER, "0.2000000003", x="1e-10", y="0"), 20))
    assert found.status is Status.PROVED and found.criticality is Criticality.SUPERCRITICAL
    assert Fraction(found.lower) <= Fraction(1, 5) <= Fraction(found.upper)
    # Multipliers exp(i): one radian a strobe.
    assert f"{1 / (2 * np.pi):.7f}" in dict(found.evidence)["pair of multipliers exactly on the unit circle"]
    assert "the cycle" in found.consequence


def test_the_first_flip_of_a_driven_oscillator_is_proved() -> None:
    # In-well branch of the two-well oscillator; 0.265581786056 by variational equations in doubles.
    found = finish(sharpened(DUFFING, estimate(Kind.FLIP, "0.26558179", x="0.4075755", v="0.3226140"), 20))
    assert found.status is Status.PROVED and found.criticality is Criticality.SUPERCRITICAL
    assert abs(Fraction(found.value) - Fraction("0.265581786056")) < Fraction(1, 10**12)
    # The same at 40 digits, in another run with other orders and steps.
    assert found.value.startswith("0.26558178605562729346")
    assert (
        Fraction(found.lower)
        < Fraction("0.265581786055627293462873952500282507003049")
        < Fraction(found.upper)
    )
    assert found.half_width < Fraction(1, 10**21)


def test_the_first_flip_of_a_free_running_system_is_proved() -> None:
    # Roessler's equations at a = b = 0.2: c = 2.832445027862 by variational equations in doubles.
    rough = estimate(Kind.FLIP, "2.8324450278625", x="5.1081491751523568", y="0", z="1.6384006889458855")
    found = finish(sharpened(ROESSLER, rough, 8))
    assert found.status is Status.PROVED and found.criticality is Criticality.SUPERCRITICAL
    assert Fraction(found.lower) < Fraction("2.832445027862538913673846135653502") < Fraction(found.upper)
    assert dict(found.states)["y"].strip("0.") == ""
    assert "the very next in the same direction" in dict(found.evidence)["equations enclosed"]


def test_a_period_that_is_not_the_least_is_refused() -> None:
    # The fold of steady states solves the equations for two strobes as well.
    folding = system({"x": "r - 0.3 - (x - 0.5)**2"}, every="1")
    with pytest.raises(NotFound, match="least period"):
        finish(sharpened(folding, estimate(Kind.FOLD, "0.3000000003", period=2, x="0.50000001"), 12))


def test_no_onset_where_there_is_none() -> None:
    for damaged in (
        estimate(Kind.FLIP, "0.35", x="0", y="0"),  # Newton would have to leave its reach
        estimate(Kind.FOLD, "0.3000000003", x="0", y="0"),
        estimate(Kind.NEIMARK_SACKER, "0.3000000003", x="0", y="0"),
        estimate(Kind.PITCHFORK, "0.3000000003", x="0", y="0"),
        replace(estimate(Kind.FLIP, "0.3000000003", x="0", y="0"), states=()),
    ):
        with pytest.raises(NotFound):
            finish(sharpened(half_turns(), damaged, 6))


def test_a_damaged_solution_is_refused_or_still_enclosed() -> None:
    integrated = integrated_map(half_turns(), "r")
    bits, scales = 70, np.array([1.0, 1.0])
    for off in (1e-3, 1e-9):
        with precision(bits):
            place = start_place(np.zeros((1, 2)), np.array([[1.0, 0.0]]), 0.3 + off, None, bits)
        try:
            proof = finish(prove(integrated, Kind.FLIP, place, scales, bits))
        except NotProved:
            continue
        assert proof.parameter[0] <= Fraction(3, 10) <= proof.parameter[1]


def test_rates_that_do_not_repeat_prove_nothing() -> None:
    # Strobed at a time that is not the drive's: an estimate may be had (by scipy's integrator and solver:
    # x = -0.00389609, r = -0.08414377), a proof may not.
    drifting = system({"x": "r - x*x + 0.1*cos(t)"}, every="1")
    assert not repeats(integrated_map(drifting, "r").rates)
    arguments = (Kind.FOLD, np.array([[-0.0039]]), np.array([[1.0]]), -0.08414, 15, np.array([1.0]), 1e-3)
    found = finish(more_digits(drifting, "r", *arguments))
    assert found.proof is None and found.reason == NOT_REPEATING
    assert abs(float(found.value) + 0.08414377) < 1e-8 and found.half < Fraction(1, 10**16)


@pytest.mark.parametrize(
    ("rate", "every", "expected"),
    [
        ("r*cos(1.2*t)*x", "2*pi/1.2", True),
        ("r*cos(1.2*t)*x", "pi/1.2", False),
        ("cos(r*t)**2 - x", "pi/r", True),
        ("exp(sin(2*pi*t/r)) - x*cos(4*pi*t/r + x)", "r", True),
        ("exp(sin(2*pi*t)) - t", "1", False),
        ("x*t - x*t - x", "1", True),
        ("sin(6.28318530717958*t)", "1", False),
        ("sin(2*pi*t**2)", "1", False),
        ("-x", "r", True),
    ],
)
def test_repeating_is_shown_by_algebra_alone(rate: str, every: str, expected: bool) -> None:
    assert repeats(integrated_map(system({"x": rate}, every=every), "r").rates) is expected


def test_an_onset_whose_flow_touches_a_switch_is_left_alone() -> None:
    kinked = system({"x": "v", "v": "-0.3*v - abs(x) + r*cos(1.2*t)"}, every="2*pi/1.2")
    with pytest.raises(NotFound, match="switching surface"):
        finish(sharpened(kinked, estimate(Kind.FLIP, "0.5", x="0.1", v="0.2"), 12))


def test_too_much_work_is_given_up(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("tinemark.onsets.flow_proofs_map.MOST_WORK", 20)
    with pytest.raises(NotFound, match="too long"):
        finish(sharpened(DUFFING, estimate(Kind.FLIP, "0.26558179", x="0.4075755", v="0.3226140"), 20))


def test_equal_maps_have_equal_mathematics() -> None:
    one, other = integrated_map(DUFFING, "r"), integrated_map(DUFFING, "r")
    assert one == other and one.memory is not other.memory
    assert one != integrated_map(system({"x": "v", "v": "-0.3*v + x - x**3 + r*cos(1.2*t)"}, every="1"), "r")
    assert not one.formulas
    with precision(64):
        assert one.own_evaluators().step(arb(0), arb(0), arb("0.25"))[0].is_finite()
