"""The batch socket with an executor of threads' shape and with real processes."""

from __future__ import annotations

from concurrent.futures import Executor, Future
from fractions import Fraction

from tinemark.onsets.results import LadderRequest, LadderResult, RefineRequest, RefineResult, Status
from tinemark.systems.errors import NoOnsetFound
from tinemark.work.batch import local_executor, solve, solve_all


class AtOnce(Executor):
    """Runs what is submitted on the spot: the least that the interface asks for."""

    def submit(self, function, /, *arguments, **named):
        future: Future = Future()
        try:
            future.set_result(function(*arguments, **named))
        except Exception as error:
            future.set_exception(error)
        return future


def click(system, near: str, width: str) -> RefineRequest:
    return RefineRequest(system, "r", Fraction(near), Fraction(width))


def test_requests_of_both_kinds_and_a_miss(logistic) -> None:
    requests = [
        click(logistic, "3.01", "0.2"),
        click(logistic, "3.2", "0.05"),
        LadderRequest(logistic, "r", Fraction("2.9"), Fraction("3.6"), levels=2),
    ]
    answers = dict(solve_all(requests, AtOnce()))
    assert sorted(answers) == [0, 1, 2]
    first, missed, ladder = (answers[place] for place in range(3))
    assert isinstance(first, RefineResult)
    assert first.onsets[0].status is Status.PROVED
    assert Fraction(first.onsets[0].lower) <= 3 <= Fraction(first.onsets[0].upper)
    assert isinstance(missed, NoOnsetFound)
    assert isinstance(ladder, LadderResult)
    assert [level.level for level in ladder.levels] == [1, 2]


def test_processes_of_this_machine(logistic) -> None:
    request = click(logistic, "3.01", "0.2")
    with local_executor(1) as pool:
        ((place, answer),) = solve_all([request], pool)
    assert place == 0
    assert isinstance(answer, RefineResult)
    assert answer.onsets == solve(request).onsets
