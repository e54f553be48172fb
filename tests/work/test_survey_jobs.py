"""Surveys and branches in the refinement process: finds as they come, progress, cancel."""

from __future__ import annotations

import multiprocessing
import queue
from fractions import Fraction

import pytest

from tinemark.onsets.results import (
    BranchRequest,
    BranchResult,
    Kind,
    SurveyRequest,
    SurveyResult,
)
from tinemark.work.batch import solve
from tinemark.work.jobs import ENDS, Cancelled, Event, Failed, Finished, OnsetFound, Progressed, Started
from tinemark.work.refinery import Refinery

PATIENCE = 60
"""Seconds after which a test gives up; nothing here waits for time to pass."""


def survey(system, most: int, start: str = "2.8") -> SurveyRequest:
    return SurveyRequest(system, "r", Fraction(start), Fraction(4), most)


def branches(system, most: int = 4) -> BranchRequest:
    return BranchRequest(system, "r", "x", Fraction("2.8"), Fraction(4), Fraction(0), Fraction(1), most)


@pytest.fixture(scope="module")
def events():
    return queue.Queue()


@pytest.fixture(scope="module")
def refinery(events):
    with Refinery(events.put) as refinery:
        yield refinery
    assert multiprocessing.active_children() == []


def until_end(events, id_: int) -> list[Event]:
    heard = []
    while True:
        event = events.get(timeout=PATIENCE)
        if event.id == id_:
            heard.append(event)
            if isinstance(event, ENDS):
                return heard


def test_a_survey_tells_its_finds_and_its_share(refinery, events, logistic) -> None:
    request = survey(logistic, 3)
    id_ = refinery.survey(request)
    started, *between, finished = until_end(events, id_)
    assert started == Started(id_)
    assert isinstance(finished, Finished)
    assert isinstance(finished.result, SurveyResult)
    found = [event.onset for event in between if isinstance(event, OnsetFound)]
    assert sorted(found, key=lambda onset: onset.value_fraction) == list(finished.result.onsets)
    splits = [onset for onset in finished.result.onsets if onset.kind is not Kind.CRISIS]
    assert [(onset.kind, onset.period_after) for onset in splits] == [
        (Kind.FLIP, 2),
        (Kind.FLIP, 4),
        (Kind.FOLD, 3),
        (Kind.FLIP, 6),
    ]
    assert any(event.share is not None for event in between if isinstance(event, Progressed))
    assert solve(request) == finished.result


def test_branches_come_whole(refinery, events, logistic) -> None:
    *_, finished = until_end(events, refinery.branches(branches(logistic)))
    assert isinstance(finished, Finished)
    assert isinstance(finished.result, BranchResult)
    assert {piece.period for piece in finished.result.pieces} == {1, 2, 3, 4}


def test_a_running_survey_is_cancelled(refinery, events, logistic) -> None:
    request = survey(logistic, 40)
    id_ = refinery.survey(request)
    while not isinstance(event := events.get(timeout=PATIENCE), Progressed):
        assert event.id == id_
    refinery.cancel(id_)
    assert until_end(events, id_)[-1] == Cancelled(id_, request)


def test_an_error_of_a_survey_crosses_in_words(refinery, events, logistic) -> None:
    *_, failed = until_end(events, refinery.survey(survey(logistic, 3, start="4")))
    assert isinstance(failed, Failed)
    assert "range is empty" in str(failed.error)
