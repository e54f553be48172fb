"""What proofs for several states claim, against exact values, and that damaged claims are refused."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import flint
import pytest
from flint import arb
from mpmath import mp, mpf, workdps
from running import finish, system_of
from test_many_exact import assert_is, click, own_system

from tinemark.onsets.ball_orbits import precision
from tinemark.onsets.certificates import digest_of
from tinemark.onsets.decimals import fixed_text
from tinemark.onsets.many_engine import refine_many
from tinemark.onsets.many_map import float_many_map, many_map
from tinemark.onsets.many_polish import Polished, polish
from tinemark.onsets.many_proof import ManyProof, enclose, prove_many
from tinemark.onsets.many_shooting import Place
from tinemark.onsets.many_verification import verify_onset_many
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Criticality, Kind, Onset, RefineRequest, Status
from tinemark.systems.errors import NoOnsetFound
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text

ROTATION = {
    "x": "r*(4*x - 3*y)/5 + (SIGN)*x*(x**2 + y**2)",
    "y": "r*(3*x + 4*y)/5 + (SIGN)*y*(x**2 + y**2)",
}


def turning(sign: int, **more: str) -> System:
    """z -> r exp(i t) z + sign z abs(z)^2 with cos t = 4/5, and states that listen."""
    formulas = {name: text.replace("SIGN", str(sign)) for name, text in ROTATION.items()}
    return own_system(formulas | more, start="0.01")


def at_origin(system: System) -> Onset:
    (onset,) = click(system, "0.98", "0.3", observed="0", height="1")
    return onset


@pytest.mark.parametrize(
    ("sign", "criticality"), [(-1, Criticality.SUPERCRITICAL), (1, Criticality.SUBCRITICAL)]
)
def test_rotation_with_known_coefficient(sign: int, criticality: Criticality) -> None:
    """d = sign * cos t times the square of the amplitude that the critical vector stands for, 8 here."""
    onset = at_origin(turning(sign))
    assert_is(onset, Fraction(1), Kind.NEIMARK_SACKER, 1, 1)
    assert onset.criticality is criticality
    d = float(dict(onset.evidence)["Neimark-Sacker coefficient"].split()[0])
    assert d == pytest.approx(sign * 6.4, rel=1e-5)
    assert ("jump" in onset.consequence) is (sign > 0)


def test_rotation_among_states_that_only_remember() -> None:
    """Six states, four of them with multiplier zero that cannot be told apart."""
    onset = at_origin(turning(-1, u="x", v="u", w="v", s="w"))
    assert_is(onset, Fraction(1), Kind.NEIMARK_SACKER, 1, 1)
    assert len(onset.states) == 6


def test_rotation_beside_an_unstable_state() -> None:
    """The pair crosses whether or not another multiplier lies outside the circle."""
    onset = at_origin(turning(-1, u="3*u/2 + x**2"))
    assert_is(onset, Fraction(1), Kind.NEIMARK_SACKER, 1, 1)
    assert "1.5" in dict(onset.evidence)["no other multiplier on the unit circle"]


def test_another_multiplier_on_the_circle_is_not_proved() -> None:
    (onset,) = click(turning(-1, u="-u + u**3"), "0.98", "0.3", observed="0", height="1")
    assert onset.kind is Kind.NEIMARK_SACKER
    assert onset.status is Status.ESTIMATED
    assert "another multiplier may lie on the unit circle" in onset.reason


@pytest.mark.parametrize(("cosine", "sine", "name"), [("0", "1", "1:4"), ("-1/2", "sqrt(3)/2", "1:3")])
def test_strong_resonances_are_named_and_not_judged(cosine: str, sine: str, name: str) -> None:
    system = own_system(
        {
            "x": f"r*(({cosine})*x - {sine}*y) - x*(x**2 + y**2)",
            "y": f"r*({sine}*x + ({cosine})*y) - y*(x**2 + y**2)",
        },
        start="0.01",
    )
    onset = at_origin(system)
    assert_is(onset, Fraction(1), Kind.NEIMARK_SACKER, 1, 1, status=Status.ESTIMATED)
    assert f"the strong resonance {name}" in onset.reason
    assert onset.criticality is Criticality.UNDECIDED


def test_a_cycle_of_two_begins_to_rotate() -> None:
    """Beside the 2-cycle z = ±1 the others turn by t a step and grow by r: monodromy r^2 exp(2 i t)."""
    system = own_system(
        {
            "x": "r*(4*x - 3*y)/5 - x*(x**2 + y**2)",
            "y": "r*(3*x + 4*y)/5 - y*(x**2 + y**2)",
            "z": "-z + 2*z*(z**2 - 1)/5",
        },
        "-2",
        "2",
    ).with_diagram("r", "z")
    (onset,) = click(system, "0.98", "0.3", observed="1", height="0.5")
    assert onset.kind is Kind.NEIMARK_SACKER
    assert (onset.period_before, onset.period_after) == (2, 2)
    assert_is(onset, Fraction(1), Kind.NEIMARK_SACKER, 2, 2)


def test_the_kinds_asked_for_are_kept_to() -> None:
    def asked(near: str, kinds: frozenset[Kind]) -> tuple[Onset, ...]:
        request = RefineRequest(
            system_of("henon"), "a", Fraction(near), Fraction("1.2"), digits=15, kinds=kinds
        )
        return finish(refine_many(request)).onsets

    assert all(onset.kind is Kind.FOLD for onset in asked("0.1", frozenset({Kind.FOLD})))
    assert all(onset.kind is Kind.FLIP for onset in asked("0.1", frozenset({Kind.FLIP})))
    with pytest.raises(NoOnsetFound, match="no Neimark-Sacker"):
        asked("0.1", frozenset({Kind.NEIMARK_SACKER}))
    with pytest.raises(NoOnsetFound, match="no border collision"):
        asked("0.1", frozenset({Kind.BORDER_COLLISION}))
    with pytest.raises(NoOnsetFound, match=r"asked for \(crisis\)"):
        asked("0.1", frozenset({Kind.CRISIS}))


def test_a_surface_under_the_cycle_is_not_proved_over() -> None:
    """Logistic growth's steady state at r = 3, x = 2/3 (exact), lies on the surface of the abs beside it."""
    system = own_system({"x": "r*x*(1 - x)", "y": "y/2 + abs(3*x - 2)**3"}, "0", "1")
    (onset,) = click(system, "3.004", "0.02")
    assert_is(onset, Fraction(3), Kind.FLIP, 1, 2, status=Status.ESTIMATED)
    assert "switching surface" in onset.reason
    (beside,) = click(
        own_system({"x": "r*x*(1 - x)", "y": "y/2 + abs(3*x - 1)**3"}, "0", "1"), "3.004", "0.02"
    )
    assert_is(beside, Fraction(3), Kind.FLIP, 1, 2)


HENON_FLIP = ("henon", Kind.FLIP, "1.02586", "0.02", None, None)
HENON_FOLD = ("henon", Kind.FOLD, "-0.12", "0.1", "2.8", "3")
ROTATING = ("delayed_logistic", Kind.NEIMARK_SACKER, "2.02", "0.3", "0.5", "1")


@pytest.fixture(scope="module", params=[HENON_FLIP, HENON_FOLD, ROTATING], ids=lambda case: case[1].value)
def printed(request: pytest.FixtureRequest) -> tuple[System, Onset]:
    name, kind, near, width, observed, height = request.param
    system = system_of(name)
    (onset,) = click(system, near, width, observed=observed, height=height)
    assert onset.kind is kind
    return system, onset


def moved(onset: Onset, distance: Fraction) -> Onset:
    """The onset with value and interval moved."""

    value, lower, upper = (nudged(text, distance) for text in (onset.value, onset.lower, onset.upper))
    return replace(onset, value=value, lower=lower, upper=upper)


def nudged(text: str, distance: Fraction) -> str:
    """A decimal moved, to as many places."""
    places = len(text.partition(".")[2])
    return fixed_text(round((Fraction(text) + distance) * 10**places), places)


def test_what_is_printed_can_be_proved_again(printed: tuple[System, Onset]) -> None:
    system, onset = printed
    proof = finish(verify_onset_many(system, onset))
    assert Fraction(onset.lower) <= proof.parameter[0] <= proof.parameter[1] <= Fraction(onset.upper)


def test_damaged_claims_are_refused(printed: tuple[System, Onset]) -> None:
    system, onset = printed
    damaged = [moved(onset, sign * Fraction(1, 10**power)) for sign in (1, -1) for power in (15, 18, 6, 2)]
    damaged += [replace(onset, value=moved(onset, Fraction(1, 10**15)).value)]
    for kind in Kind:
        if kind is not onset.kind:
            damaged.append(replace(onset, kind=kind))
            for period in {onset.period_before, onset.period_after} - {0}:
                damaged.append(replace(onset, kind=kind, period_before=period, period_after=2 * period))
                damaged.append(replace(onset, kind=kind, period_before=0, period_after=period))
                damaged.append(replace(onset, kind=kind, period_before=period, period_after=period))
    for factor in (2, 3, 5):
        before, after = factor * onset.period_before, factor * onset.period_after
        damaged.append(replace(onset, period_before=before, period_after=after))
    if onset.period_before > 1:
        damaged.append(replace(onset, period_before=2, period_after=4))
    damaged += [replace(onset, criticality=word) for word in Criticality if word is not onset.criticality]
    (name, text), *others = onset.states
    damaged.append(replace(onset, states=((name, nudged(text, Fraction(1, 10**15))), *others)))
    damaged.append(replace(onset, states=((name, text),)))
    for claim in damaged:
        with pytest.raises(NotProved):
            finish(verify_onset_many(system, claim))


def test_a_proof_leaves_a_certificate(printed: tuple[System, Onset]) -> None:
    """Its box holds what is printed, and names the system with the values that held."""
    _, onset = printed
    certificate = onset.certificate
    assert certificate is not None
    assert certificate.digest == digest_of(certificate, onset)
    assert certificate.kind == onset.kind.value
    middle, half = (Fraction(text) for text in certificate.parameter_box)
    assert abs(onset.value_fraction - middle) <= half + Fraction(1, 10**18)
    assert [name for name, _, _ in certificate.state_boxes] == [name for name, _ in onset.states]


def test_a_certificate_names_its_own_system() -> None:
    """Maps that are equal once their values are put in share evaluators, but not their certificates."""

    def made(first: str, second: str) -> System:
        return read_system_text(
            'title = "o"\nkind = "map"\n[states.x]\nstart = "0.1"\n[states.y]\nstart = "0.1"\n'
            f'[parameters.r]\nvalue = "1"\n[parameters.b]\nvalue = "{first}"\n'
            f'[parameters.c]\nvalue = "{second}"\n'
            '[next]\nx = "1 - r*x**2 + y"\ny = "b*c*x"\n[diagram]\nparameter = "r"\nobserve = "x"\n'
        )

    for values in (("0.5", "0.6"), ("0.6", "0.5")):
        (onset,) = click(made(*values), "0.915", "0.1")
        assert onset.certificate is not None
        held = read_system_text(onset.certificate.system_text)
        assert tuple(held.parameter(name).value.text for name in "bc") == values


def solved(period: int) -> tuple[System, Polished]:
    """A flip of Hénon's ladder as the engine solves it."""
    from tinemark.onsets.many_cycles import Cycle, newton
    from tinemark.onsets.many_onset import rough_start

    system = system_of("henon")
    near, width = {2: ("0.92", "0.1"), 4: ("1.0260", "0.02")}[period]
    (onset,) = click(system, near, width)
    float_map = float_many_map(many_map(system, "a"))
    scales = float_map.scales(1.0)
    state, r = [float(text) for _, text in onset.states], float(onset.value)
    points = [state]
    for _ in range(period - 1):
        x, y = points[-1]
        points.append([1 - r * x * x + y, 0.3 * x])
    import numpy as np

    cycle = newton(float_map, Cycle(np.array(points), r), scales)
    assert cycle is not None
    start = rough_start(float_map, Kind.FLIP, cycle)
    return system, finish(polish(float_map.many, Kind.FLIP, start, 180, scales, 1e-3))


def test_the_prover_refuses_a_damaged_solution_or_still_encloses_the_onset() -> None:
    """A middle moved by 1e-15 makes the box wider; what comes out must hold the exact 0.9125 all the same."""
    system, solution = solved(2)
    many = many_map(system, "a")
    scales = float_many_map(many).scales(0.9)
    place, bits = solution.place, solution.bits
    for shift in (0.0, 1e-15, -1e-12):
        with precision(bits):
            middle = replace(place, r=(place.r + arb(shift)).mid())
        proof: ManyProof = finish(prove_many(many, Kind.FLIP, middle, scales, bits))
        assert proof.parameter[0] <= Fraction("0.9125") <= proof.parameter[1]
    for kind in (Kind.FOLD,):
        with pytest.raises(NotProved):
            finish(prove_many(many, kind, place, scales, bits))
    twice = Place(place.points * 2, place.vectors * 2, place.r, None)
    with pytest.raises(NotProved):
        finish(prove_many(many, Kind.FLIP, twice, scales, bits))
    thrice_vectors = [[[sign * value for value in part] for part in vectors]
        for sign in (1, -1, 1) for vectors in place.vectors]  # fmt: skip
    thrice = Place(place.points * 3, thrice_vectors, place.r, None)
    with pytest.raises(NotProved, match="least period is not 6"):
        finish(prove_many(many, Kind.FLIP, thrice, scales, bits))


def test_the_box_holds_the_solution_at_higher_precision() -> None:
    """All unknowns, polished to twice the digits, lie inside the box of the interval Newton test."""
    system, solution = solved(4)
    many = many_map(system, "a")
    scales = float_many_map(many).scales(1.0)
    found = finish(enclose(many, Kind.FLIP, solution.place, scales, solution.bits))
    fine = finish(polish(many, Kind.FLIP, solution.place, 3 * solution.bits, scales, 1e-6)).place
    with precision(3 * solution.bits):
        assert found.box.r.contains(fine.r)
        assert found.r.contains(fine.r)
        for ball, exact in zip(found.first, fine.points[0], strict=True):
            assert ball.contains(exact)
        for balls, exacts in zip(found.box.points, fine.points, strict=True):
            assert all(ball.contains(exact) for ball, exact in zip(balls, exacts, strict=True))
    assert flint.ctx.prec == 53


def test_a_cycle_out_of_step_begins_to_rotate() -> None:
    """The two patches' cycle of period 4, out of step: mpmath's secant method, determinant exactly 1."""

    def patches(u: mpf, v: mpf, r: mpf) -> tuple[mpf, mpf]:
        e = mpf(1) / 10
        f, g = r * u * (1 - u), r * v * (1 - v)
        return (1 - e) * f + e * g, (1 - e) * g + e * f

    def residual(x: mpf, y: mpf, r: mpf) -> tuple[mpf, ...]:
        e, u, v, matrix = mpf(1) / 10, x, y, mp.eye(2)
        for _ in range(4):
            a, b = r * (1 - 2 * u), r * (1 - 2 * v)
            matrix = mp.matrix([[(1 - e) * a, e * b], [e * a, (1 - e) * b]]) * matrix
            u, v = patches(u, v, r)
        return u - x, v - y, mp.det(matrix) - 1

    (onset,) = click(system_of("two_patch"), "3.7013", "0.01", digits=30)
    assert (onset.kind, onset.period_before) == (Kind.NEIMARK_SACKER, 4)
    assert onset.status is Status.PROVED
    rough = dict(onset.states)
    with workdps(40):
        found = mp.findroot(residual, (mpf(rough["x"][:9]), mpf(rough["y"][:9]), mpf(onset.value[:8])))
        text = mp.nstr(found[2], 36)
    assert Fraction(onset.lower) <= Fraction(text) <= Fraction(onset.upper)
