"""Certificates of driven and free-running systems: flips and folds, and damage to them."""

from __future__ import annotations

import dataclasses
from functools import lru_cache
from typing import Any

import pytest
from claim_samples import claim_of, damaged, moved, seal, shifted, with_formula

from tinemark.onsets.flow_digits_row import sharpened
from tinemark.onsets.results import Criticality, Kind, Onset, Status
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text
from tinemark.verify.check import check
from tinemark.verify.claims import Claim, Outcome, Paper, Part
from tinemark.verify.watching import Watch


def text_of(rates: dict[str, str], value: str = "1", **sample: str) -> str:
    lines = ['title = "test"', f'kind = "{"driven" if "every" in sample else "flow"}"']
    for name in rates:
        lines += [f"[states.{name}]", 'start = "0"']
    lines += ["[parameters.r]", f'value = "{value}"', "[rate]"]
    lines += [f'{name} = "{rate}"' for name, rate in rates.items()]
    lines += ["[sample]", *(f'{key} = "{text}"' for key, text in sample.items())]
    lines += ["[diagram]", 'parameter = "r"', f'observe = "{next(iter(rates))}"']
    return "\n".join(lines)


def system(rates: dict[str, str], **sample: str) -> System:
    return read_system_text(text_of(rates, **sample))


def proved(system: System, kind: Kind, value: str, **states: str) -> Onset:
    """The first implementation's proof from an onset as it is found in doubles."""
    rough = Onset(
        parameter="r",
        kind=kind,
        period_before=0 if kind is Kind.FOLD else 1,
        period_after=1 if kind is Kind.FOLD else 2,
        criticality=Criticality.UNDECIDED,
        value=value,
        lower=moved(value, "-1e-8"),
        upper=moved(value, "1e-8"),
        digits=9,
        status=Status.ESTIMATED,
        states=tuple(states.items()),
    )
    work = sharpened(system, rough, 20)
    while True:
        try:
            next(work)
        except StopIteration as done:
            found: Onset = done.value
            return found


@lru_cache(maxsize=1)
def fold() -> Onset:
    # Two steady states meet at r = 0.3; the strobe period moves with the parameter.
    folding = system({"x": "r - 0.3 - (x - 0.5)**2"}, every="2*r")
    return proved(folding, Kind.FOLD, "0.3000000003", x="0.50000001")


def test_an_exact_fold_is_confirmed() -> None:
    assert fold().certificate is not None
    assert check(claim_of(fold())).words == "confirmed"


DAMAGE: dict[str, tuple[Any, Part]] = {
    "value": (lambda c: shifted(c, "1e-15"), Part.VALUE),
    "value alone": (lambda c: dataclasses.replace(c, value=moved(c.value, "1e-21")), Part.VALUE),
    "value and box": (lambda c: with_box(shifted(c, "1e-15"), "1e-15"), Part.FORMULA),
    "box": (lambda c: with_box(c, "1e-15"), Part.BOX),
    "state": (lambda c: dataclasses.replace(c, states=(("x", moved("0.5", "1e-15")),)), Part.STATE),
    "rate": (lambda c: with_formula(c, "0.3", "0.3000000000000001"), Part.FORMULA),
    "kind": (lambda c: as_flip(c), Part.KIND),
    "period": (lambda c: with_period(c, 2), Part.PERIOD),
    "criticality": (lambda c: with_side(c, "supercritical"), Part.CRITICALITY),
    "status": (lambda c: dataclasses.replace(c, status="estimated"), Part.STATUS),
    "no certificate": (lambda c: dataclasses.replace(c, paper=None), Part.STATUS),
    "sample of the row": (
        lambda c: dataclasses.replace(c, sample=("driven", "1", "", "rising")),
        Part.SYSTEM,
    ),
    "kind of system": (lambda c: dataclasses.replace(c, sample=("map", "", "", "rising")), Part.SYSTEM),
    "no sample": (lambda c: with_formula(c, "every", "each"), Part.SYSTEM),
}


def paper(claim: Claim, **changes: Any) -> Claim:
    assert claim.paper is not None
    return dataclasses.replace(claim, paper=dataclasses.replace(claim.paper, **changes))


def with_box(claim: Claim, by: str) -> Claim:
    assert claim.paper is not None
    middle, half = claim.paper.parameter_box
    return paper(claim, parameter_box=(moved(middle, by), half))


def as_flip(claim: Claim) -> Claim:
    changed = dataclasses.replace(
        claim, kind="flip", period_before=1, period_after=2, criticality="supercritical"
    )
    return paper(changed, kind="flip", criticality="supercritical")


def with_period(claim: Claim, period: int) -> Claim:
    return paper(dataclasses.replace(claim, period_after=period), period=period)


def with_side(claim: Claim, words: str) -> Claim:
    return paper(dataclasses.replace(claim, criticality=words), criticality=words)


@pytest.mark.parametrize("name", DAMAGE)
def test_damage_with_a_seal_that_fits_is_refused_by_name(name: str) -> None:
    damage, part = DAMAGE[name]
    claim = damage(claim_of(fold()))
    verdict = check(claim if claim.paper is None else seal(claim))
    assert (verdict.outcome, verdict.part) == (Outcome.REFUSED, part), verdict.words


def test_the_seal_is_looked_at() -> None:
    verdict = check(damaged(claim_of(fold()), precision=1))
    assert (verdict.outcome, verdict.part) == (Outcome.REFUSED, Part.DIGEST)


def written(text: str, kind: str, value: str, side: str, **states: str) -> Claim:
    """A claim to eleven digits with a box of our own around numbers from elsewhere."""
    box = tuple((name, number, "1e-12") for name, number in states.items())
    paper = Paper(text, kind, 1, "r", side, 64, (value, "1e-12"), box, "")
    ends = moved(value, "-1e-11"), moved(value, "1e-11")
    periods = (0, 1) if kind == "fold" else (1, 2)
    claim = Claim("a row", "proved", False, kind, *periods, side, "r", value[:15], *ends, (), paper)
    return seal(claim)


# Printed by the first implementation at 20 and more digits; by variational equations in doubles the
# parameters are 0.265581786056 and 2.832445027862.
DUFFING = {"x": "v", "v": "-0.3*v + x - x**3 + r*cos(1.2*t)"}
ROESSLER = {"x": "-y - z", "y": "x + 0.2*y", "z": "0.2 + z*(x - r)"}
WELL = ("0.26558178605562729", {"x": "0.40757546616656048", "v": "0.32261400495386392"})
SPIRAL = ("2.83244502786253891", {"x": "-4.10213927593902240", "y": "0", "z": "0.029638978004593215"})


def test_a_driven_oscillators_flip_is_confirmed_and_its_side_is_told() -> None:
    value, states = WELL
    text = text_of(DUFFING, every="2*pi/1.2")
    assert check(written(text, "flip", value, "supercritical", **states)).words == "confirmed"
    wrong = check(written(text, "flip", value, "subcritical", **states))
    assert (wrong.outcome, wrong.part) == (Outcome.REFUSED, Part.CRITICALITY)


def test_a_free_running_flip_is_confirmed_and_its_section_matters() -> None:
    value, states = SPIRAL
    falling, rising = (text_of(ROESSLER, crosses="y", direction=way) for way in ("falling", "rising"))
    good = written(falling, "flip", value, "supercritical", **states)
    assert check(good).words == "confirmed"
    verdict = check(written(rising, "flip", value, "supercritical", **states))
    assert (verdict.outcome, verdict.part) == (Outcome.REFUSED, Part.FORMULA)


def test_a_strobe_that_algebra_does_not_know_is_not_checkable() -> None:
    value, states = WELL
    for every in ("5.2359877559829887", "2.4*pi/1.2"):
        verdict = check(written(text_of(DUFFING, every=every), "flip", value, "supercritical", **states))
        assert verdict.outcome is Outcome.NOT_CHECKABLE and "repeat" in verdict.reason


def test_equations_that_switch_are_not_checkable() -> None:
    text = text_of({"x": "r - abs(x)"}, every="1")
    verdict = check(written(text, "fold", "0", "", x="0"))
    assert verdict.outcome is Outcome.NOT_CHECKABLE and '"abs"' in verdict.reason


def test_a_check_of_equations_tells_of_its_progress_and_can_be_stopped_or_bounded() -> None:
    class Stopped(Exception):
        pass

    def stop(share: float) -> None:
        assert 0 < share < 1
        raise Stopped

    value, states = WELL
    claim = written(text_of(DUFFING, every="2*pi/1.2"), "flip", value, "supercritical", **states)
    with pytest.raises(Stopped):
        check(claim, Watch(stop))
    verdict = check(claim, Watch(minutes=0.05))
    assert verdict.outcome is Outcome.NOT_CHECKABLE and "longer than" in verdict.reason
