"""Pitchforks of maps that are symmetric in pieces, about moving centres, or only as sets; ladders past them.

Where f = -g with g odd, a cycle of g of odd period q is a symmetric cycle of f of period 2 q, and where that
of g flips, that of f loses its symmetry. The flips of g are known: the logistic map's, on one half line.
"""

from __future__ import annotations

from fractions import Fraction

import pytest
from running import click, climb, finish, own_map

from tinemark.onsets.engine import refine
from tinemark.onsets.one_map import one_map
from tinemark.onsets.results import Kind, Onset, RefineRequest, Status
from tinemark.onsets.symmetry import centres
from tinemark.onsets.verification import verify_onset
from tinemark.systems.errors import NoOnsetFound
from tinemark.systems.system import System

# The flip of the period-3 window of the logistic map, as in known_onsets.WINDOWS.
WINDOW = "3.8414990075435078"
# The flips of 6-cycles and 4-cycles below were solved for with mpmath: f^q(x) = -x and (f^q)' = 1.
CUBIC_SIX, CUBIC_FOUR = "2.46082867387857956", "2.83766509265533937"


@pytest.mark.parametrize(
    ("formula", "near", "width", "period", "value"),
    [
        # Pieces: a parabola and its mirror image, written in three ways.
        ("-r*x*(1 - abs(x))", "3.02", "0.5", 2, "3"),
        ("-r*x*(1 - x) if x > 0 else -r*x*(1 + x)", "3.02", "2.5", 2, "3"),
        ("-r*x*(1 - abs(x))", "3.8416", "0.005", 6, WINDOW),
        ("max(-2, min(2, x**3 - r*x))", "1.99", "0.3", 2, "2"),
        ("x**3 - r*x if abs(x) < 3 else 0", "2.4609", "0.005", 6, CUBIC_SIX),
        # A centre that moves: r/5, log(r), and r/(1 + r) in a formula that does not show it.
        ("r/5 + r*(x - r/5) - (x - r/5)**3", "1.01", "0.2", 1, "1"),
        ("r/5 - r*(x - r/5) + (x - r/5)**3", "2.02", "0.4", 2, "2"),
        ("log(r) - r*(x - log(r))*(1 - abs(x - log(r)))", "3.02", "0.5", 2, "3"),
        (
            "(r - (1 + r)*x)**3/(1 + r)**3*(-1) - r*x + r",
            "1.99",
            "0.3",
            2,
            "2",
        ),
        # Cycles that are symmetric only as sets.
        ("x**3 - r*x", "2.8377", "0.005", 4, CUBIC_FOUR),
        ("x**3 - r*x", "2.4609", "0.005", 6, CUBIC_SIX),
        # exp(1): x exp(-x^2) has its first flip where r = e.
        ("-r*x*exp(-x**2)", "2.73", "10", 2, "2.71828182845904523536"),
    ],
)
def test_symmetry_is_seen_in_pieces_and_about_moving_centres(
    formula: str, near: str, width: str, period: int, value: str
) -> None:
    """The reflection is told by algebra of the pieces the cycle visits, so that the pitchfork is proved."""
    system = own_map(formula, low="-2", high="2")
    onset = click(system, near, width).onsets[0]
    assert (onset.kind, onset.status) == (Kind.PITCHFORK, Status.PROVED)
    assert (onset.period_before, onset.period_after) == (period, period)
    assert abs(onset.value_fraction - Fraction(value)) < Fraction(1, 10**15)
    assert Fraction(onset.upper) - Fraction(onset.lower) < Fraction(1, 10**18)
    assert "symmetry x -> " in onset.consequence
    finish(verify_onset(system, onset))


@pytest.mark.parametrize(
    ("formula", "value", "period", "low", "high"),
    [
        ("x**3 - r*x", 2, 2, "-1.5", "1.5"),
        ("r*x*(1 - x**2)", 1, 1, "-1", "1"),
        ("r*x - x**3", 1, 1, "-2", "2"),
        # Subcritical: no orbit comes near the centre from beyond.
        ("r*x + x**3 - x**5", 1, 1, "-1.3", "1.3"),
    ],
)
@pytest.mark.parametrize(("width", "aside"), [("0.5", "0.003"), ("3e-6", "0.003"), ("2e-8", "-0.006")])
def test_pitchfork_is_found_in_views_of_any_width(
    formula: str, value: int, period: int, low: str, high: str, width: str, aside: str
) -> None:
    """Beside a pitchfork orbits settle ever more slowly, so the search solves for it directly."""
    near, size = value + Fraction(aside) * Fraction(width), Fraction(width)
    at = Fraction(1) if period == 2 else Fraction(0)
    request = RefineRequest(
        own_map(formula, low=low, high=high), "r", near, size, at + Fraction(aside), Fraction("1.5")
    )
    onset = finish(refine(request)).onsets[0]
    assert (onset.kind, onset.period_before, onset.value_fraction) == (Kind.PITCHFORK, period, value)
    assert onset.status is Status.PROVED


def test_no_symmetry_is_made_up() -> None:
    """A map that misses a symmetry by a small term has a centre to no one, and no pitchfork is proved."""
    system = own_map("x**3 - r*x + x**2/10**7", low="-1.5", high="1.5")
    assert centres(one_map(system, "r"), 1.9) == ()
    request = RefineRequest(
        system, "r", Fraction("2.001"), Fraction("0.05"), kinds=frozenset({Kind.PITCHFORK})
    )
    try:
        found = finish(refine(request)).onsets
    except NoOnsetFound:
        return
    assert all(onset.status is not Status.PROVED for onset in found)


@pytest.mark.parametrize(
    ("formula", "centre"),
    [
        ("r/5 + r*(x - r/5) - (x - r/5)**3", "r/5"),
        # The inflection of x^3 - 3 r x^2 + …, which the formula does not show.
        ("x**3 - 3*r*x**2 + 3*r**2*x - r**3 + r - r*(x - r)", "r"),
    ],
)
def test_centres_are_formulas_of_the_parameter(formula: str, centre: str) -> None:
    """They come from the formula's parts, or from a fit that algebra then confirms."""
    from tinemark.onsets.formula_words import formula_words

    found = centres(one_map(own_map(formula, low="-2", high="3"), "r"), 1.2)
    assert [curve.plain(1.7)[0] for curve in found] == pytest.approx([1.7 / (5 if centre == "r/5" else 1)])
    assert all("r" in formula_words(curve.expr) for curve in found)


def _moved(onset: Onset, shift: Fraction) -> Onset:
    from dataclasses import replace

    def text(value: Fraction) -> str:
        return f"{value.numerator * 10**40 // value.denominator}e-40"

    ends = {end: text(Fraction(getattr(onset, end)) + shift) for end in ("value", "lower", "upper")}
    return replace(onset, **ends)


@pytest.mark.parametrize(
    ("system", "near", "width"),
    [
        (own_map("-r*x*(1 - abs(x))", low="-1.2", high="1.2"), "3.02", "0.5"),
        (own_map("r/5 - r*(x - r/5) + (x - r/5)**3", low="-1", high="2"), "2.02", "0.3"),
        (own_map("r/5 + r*(x - r/5) - (x - r/5)**3", low="-1", high="2"), "1.01", "0.3"),
    ],
)
def test_damaged_claims_about_moving_and_pieced_symmetries_are_refused(
    system: System, near: str, width: str
) -> None:
    """Values moved by 1e-15 either way, another period or kind are not proved."""
    from dataclasses import replace

    from tinemark.onsets.proofs import NotProved

    onset = click(system, near, width).onsets[0]
    assert onset.status is Status.PROVED
    period = onset.period_before
    claims = [
        _moved(onset, Fraction(1, 10**15)),
        _moved(onset, -Fraction(1, 10**15)),
        replace(onset, period_before=2 * period, period_after=2 * period),
        replace(onset, kind=Kind.TRANSCRITICAL),
        replace(onset, kind=Kind.FOLD, period_before=0),
        replace(onset, states=(("x", "0.123456789012345678901"),)),
    ]
    for claim in claims:
        with pytest.raises(NotProved):
            finish(verify_onset(system, claim))


@pytest.mark.parametrize(
    ("formula", "passed", "second"),
    [
        # f = -g, g = r x - x^3: the 2-cycle +-sqrt(r - 1) breaks at 2 and what is left flips at sqrt(5).
        ("-r*x + x**3", 2, "2.23606797749978969640917366873127623544"),
        # The logistic map's 3 and 1 + sqrt(6), in pieces.
        ("-r*x*(1 - abs(x))", 3, "3.44948974278317809819728407470589139196594748065667"),
    ],
)
def test_ladder_of_an_odd_map_names_the_pitchfork_it_passes(formula: str, passed: int, second: str) -> None:
    """A symmetric cycle cannot flip: the ladder goes on along a broken branch and says so."""
    result = climb(own_map(formula, low="-1.5", high="1.5", start="0.3"), "0.5", "3.9", levels=4)
    (pitchfork,) = result.besides
    assert (pitchfork.kind, pitchfork.status) == (Kind.PITCHFORK, Status.PROVED)
    assert (pitchfork.period_before, pitchfork.value_fraction) == (2, passed)
    assert f"the pitchfork of period 2 at r = {passed}" in result.message
    assert [level.onset.period_before for level in result.levels] == [1, 2, 4, 8]
    assert (
        Fraction(result.levels[1].onset.lower) <= Fraction(second) <= Fraction(result.levels[1].onset.upper)
    )
    assert "passed the pitchfork" in result.levels[1].onset.consequence
    assert not any(level.onset.consequence for level in (result.levels[0], *result.levels[2:]))


def test_ladder_that_starts_before_a_pitchfork_of_its_base_cycle_names_it() -> None:
    """r x - x^3: the origin gives way to a pair at r = 1, and the pair flips at r = 2."""
    result = climb(own_map("r*x - x**3", low="-2", high="2", start="0.3"), "0.5", "2.9", levels=3)
    (pitchfork,) = result.besides
    assert (pitchfork.kind, pitchfork.period_before, pitchfork.value_fraction) == (Kind.PITCHFORK, 1, 1)
    later = climb(own_map("r*x - x**3", low="-2", high="2", start="0.3"), "1.5", "2.9", levels=2)
    assert later.besides == ()
    assert later.message == ""


def test_subcritical_level_of_a_ladder_says_how_it_jumps() -> None:
    """-r x - x^3 + x^5 flips at r = 1 with a jump; the 2-cycle it meets turns back at the fold r = 3/4."""
    result = climb(own_map("-r*x - x**3 + x**5", low="-1.2", high="1.2"), "0.5", "1.4", levels=2)
    first = result.levels[0].onset
    assert "the change is a jump" in first.consequence
    assert "turns back at the fold r = 0.75" in first.consequence
    (fold,) = result.besides
    assert (fold.kind, fold.status, fold.period_after) == (Kind.FOLD, Status.PROVED, 2)
    assert Fraction(fold.lower) <= Fraction(3, 4) <= Fraction(fold.upper)
    assert "the fold of period 2 at r = 0.75" in result.message
