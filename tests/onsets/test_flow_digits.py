"""More digits of an onset of equations, asked of the engine as the window and the command line do."""

from __future__ import annotations

import pickle
from dataclasses import replace
from fractions import Fraction

import pytest
from running import finish, system_of
from test_flow_proofs import estimate, system

from tinemark.onsets import engine
from tinemark.onsets.results import Kind, Sensitivity, SharpenRequest, Status
from tinemark.systems.errors import NoOnsetFound, TinemarkError
from tinemark.work.worker import engine_steps

FOLDING = system({"x": "r - 0.3 - (x - 0.5)**2"}, every="1")
ROUGH = estimate(Kind.FOLD, "0.3000000003", x="0.50000001")


def test_a_row_keeps_what_else_was_known_of_it() -> None:
    known = replace(ROUGH, sensitivities=(Sensitivity("w", "0.5"),))
    result = finish(engine.sharpen(SharpenRequest(FOLDING, known, 30)))
    (onset,) = result.onsets
    assert onset.status is Status.PROVED and onset.sensitivities == known.sensitivities
    assert Fraction(onset.lower) <= Fraction(3, 10) <= Fraction(onset.upper)
    assert onset.half_width < Fraction(1, 10**30) and onset.digits == 30
    assert "proved" in result.message
    assert pickle.loads(pickle.dumps(onset)) == onset


def test_what_is_not_proved_keeps_its_evidence_and_says_why() -> None:
    drifting = system({"x": "r - x*x + 0.1*cos(t)"}, every="1")
    rough = estimate(Kind.FOLD, "-0.084143770", x="-0.00389609")
    (onset,) = finish(engine.sharpen(SharpenRequest(drifting, rough, 18))).onsets
    assert onset.status is Status.ESTIMATED and "repeat" in onset.reason
    assert Fraction(onset.lower) <= Fraction(onset.value) <= Fraction(onset.upper)
    assert onset.half_width < Fraction(1, 10**17)
    lines = dict(onset.evidence)
    assert lines["least period"] == "1" and "bits" in lines["error estimate"]


def test_the_worker_answers_such_requests() -> None:
    result = finish(engine_steps(SharpenRequest(FOLDING, ROUGH, 12)))
    assert result.onsets[0].status is Status.PROVED


def test_questions_without_an_answer_are_refused_in_words() -> None:
    with pytest.raises(NoOnsetFound, match="maps"):
        finish(engine.sharpen(SharpenRequest(system_of("logistic"), ROUGH, 12)))
    with pytest.raises(NoOnsetFound, match="as it was"):
        finish(engine.sharpen(SharpenRequest(FOLDING, estimate(Kind.FOLD, "0.4", x="0.5"), 12)))
    with pytest.raises(NoOnsetFound, match="at most"):
        finish(engine.sharpen(SharpenRequest(FOLDING, ROUGH, 100)))
    with pytest.raises(TinemarkError):
        finish(engine.sharpen(SharpenRequest(FOLDING, ROUGH, 0)))
