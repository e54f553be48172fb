"""Drawn pictures against slow ones, against exact laws, and against themselves."""

from __future__ import annotations

import dataclasses
import os
import subprocess
import sys
from concurrent.futures import ThreadPoolExecutor
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from naive_density import around, counts, drawn, logistic, picture, view

from tinemark.density.field import Field
from tinemark.density.kernels import BUFFER
from tinemark.density.renderer import Drawing, StopFlag, Team, append, create, progressive, shifted, snapshot
from tinemark.density.request import PictureRequest, SweepRule
from tinemark.systems.errors import TinemarkError


def equal(one: Field, other: Field) -> bool:
    return (
        np.array_equal(one.counts, other.counts)
        and np.array_equal(one.lyapunov, other.lyapunov, equal_nan=True)
        and np.array_equal(one.period, other.period)
        and np.array_equal(one.escaped, other.escaped)
        and one.steps == other.steps
    )


def test_counts_are_those_of_the_slow_version_where_orbits_settle() -> None:
    # Columns beside a split settle slowly and end in another rounding; 3.0 and 3.45 are kept out.
    for where in (view("2.8", "2.95"), view("3.1", "3.4"), view("3.47", "3.53")):
        request = picture("logistic", where, columns=70, rows=97)
        field = drawn(request, 2 * BUFFER)
        slow = counts(request, logistic, 2 * BUFFER)
        assert field.counts.dtype == np.uint32
        assert field.counts.shape == (97, 70)
        assert np.array_equal(field.counts, slow)
        assert field.steps == 70 * 2 * BUFFER


def test_first_steps_are_those_of_the_slow_version_in_chaos_too() -> None:
    request = picture("logistic", view("3.6", "4"), columns=65, rows=10, transient=0)
    # Rounding grows by two a step at most: 25 steps stay far inside a row, but for a visit at its edge.
    drawing = create(request)
    noted = np.empty((65, 1, 25))
    for first in (0, 64):
        drawing.kernels.trace(
            drawing.states[0],
            drawing.swept,
            drawing.fixed,
            first,
            min(64, 65 - first),
            noted[first : first + 64],
        )
    for j in (0, 40, 64):
        state = (0.4,)
        for n in range(25):
            state = logistic(state, float(drawing.swept[j]))
            if n == 0:
                assert float(request.system.states[0].start) == 0.4
            assert noted[j, 0, n] == pytest.approx(state[0], abs=1e-7)


def test_density_at_four_follows_the_arcsine_law() -> None:
    # Ulam and von Neumann 1947 (attribution from memory): density 1/(pi sqrt(x(1-x))) at r = 4.
    field = drawn(picture("logistic", around("3.9999999999", "1e-12"), columns=64, rows=40), 200 * BUFFER)
    seen = field.counts.sum(axis=1) / field.counts.sum()
    edges = np.linspace(0, 1, 41)
    law = np.diff(2 / np.pi * np.arcsin(np.sqrt(edges)))
    assert seen == pytest.approx(law, rel=0.02)


def test_every_counted_step_is_in_the_picture_or_beside_it() -> None:
    drawing = create(picture("logistic", view("2.8", "4.2", "0.4", "0.6"), columns=100, rows=33))
    append(drawing, 1)
    append(drawing, 3 * BUFFER)
    assert (drawing.counts.sum(axis=1) == 4 * BUFFER).all()


@pytest.mark.parametrize("rule", list(SweepRule))
def test_threads_and_passes_do_not_change_a_picture(rule: SweepRule) -> None:
    request = picture("logistic", view("3.4", "4.02"), columns=300, rule=rule, starts=3, transient=333)
    whole = create(request)
    append(whole, 5000)
    parts = create(request)
    with Team(3) as team:
        for steps in (1, 1000, 4000 - 2 * BUFFER, 1):
            append(parts, steps, team=team)
    append(parts, whole.level - parts.level)
    assert equal(snapshot(whole), snapshot(parts))
    assert np.array_equal(whole.states, parts.states, equal_nan=True)


def test_a_team_does_each_item_once_and_tells_of_an_error() -> None:
    done: list[int] = []
    with Team(4) as team:
        team.work_off(range(500), done.append)
        assert sorted(done) == list(range(500))
        with pytest.raises(ZeroDivisionError):
            team.work_off([1, 0, 2], lambda item: done.append(1 // item))


def test_progressive_pictures_grow_to_the_budget() -> None:
    request = picture("logistic", view("2.8", "4"))
    fields = list(progressive(request, 4000, threads=2))
    steps = [field.steps // request.columns for field in fields]
    assert steps[0] <= 512
    assert steps == sorted(set(steps))
    assert 4000 <= steps[-1] < 4000 + BUFFER
    assert equal(fields[-1], drawn(request, 4000))


@pytest.mark.parametrize("by", [17, -17, 64, -95])
@pytest.mark.parametrize("rule", [SweepRule.FRESH, SweepRule.SEVERAL])
def test_panned_picture_equals_a_fresh_one(by: int, rule: SweepRule) -> None:
    first = picture("logistic", view("3.4", "4"), rule=rule, starts=2)
    move = first.view.width * by / first.columns
    moved = dataclasses.replace(
        first,
        view=dataclasses.replace(first.view, left=first.view.left + move, right=first.view.right + move),
    )
    old = create(first)
    append(old, 5 * BUFFER)
    kept = shifted(old, moved)
    assert kept is not None
    assert (kept.drawn == 5 * BUFFER).sum() == kept.drawn.shape[0] * (96 - abs(by))
    append(kept, 0)
    assert equal(snapshot(kept), drawn(moved, 5 * BUFFER))
    # The old drawing is untouched and can go on.
    append(old, BUFFER)
    assert equal(snapshot(old), drawn(first, 6 * BUFFER))


def test_nothing_is_kept_where_columns_do_not_match() -> None:
    first = picture("logistic", view("3.4", "4"))
    old = create(first)
    for other in (
        picture("logistic", view("3.4003", "4.0003")),
        picture("logistic", view("3.4", "3.9")),
        picture("logistic", view("3.4", "4", "0", "0.5")),
        picture("logistic", view("4.6", "5.2")),
        picture("logistic", view("3.4", "4"), transient=501),
        picture("logistic", view("3.4", "4"), rule=SweepRule.FORWARD),
        picture("quadratic", view("3.4", "4")),
    ):
        assert shifted(old, other) is None


def test_a_stopped_run_shows_nothing_and_can_go_on() -> None:
    request = picture("logistic", view("3.4", "4"), columns=400)
    drawing = create(request)
    stop = StopFlag()
    fields = progressive(drawing, 10**9, stop, threads=2)
    next(fields)
    with ThreadPoolExecutor(1) as pool:
        rest = pool.submit(list, fields)
        stop.set()
        # Ends by itself although the budget is hours away.
        rest.result(timeout=60)
    level = drawing.level
    append(drawing, 0)
    assert (drawing.drawn == drawing.level).all()
    assert drawing.level in (level, -(-level // BUFFER) * BUFFER)
    again = create(request)
    append(again, drawing.level)
    assert np.array_equal(snapshot(again).counts, snapshot(drawing).counts)
    stopped = StopFlag()
    stopped.set()
    assert list(progressive(request, 1000, stopped)) == []


def test_stopping_inside_a_transient_or_a_carried_sweep_loses_nothing() -> None:
    for rule in (SweepRule.FRESH, SweepRule.FORWARD, SweepRule.BACKWARD):
        request = picture("logistic", view("3.4", "4"), columns=130, rule=rule, transient=1000)
        stop = StopFlag()
        stop.set()
        drawing = create(request)
        append(drawing, 1000, stop)
        assert (drawing.drawn == -1000).all()
        half_way(drawing, rule)
        append(drawing, 1000)
        assert equal(snapshot(drawing), drawn(request, 1000))


def half_way(drawing: Drawing, rule: SweepRule) -> None:
    """Leave a carried sweep as a stop would: the first forty columns settled."""
    if rule is SweepRule.FRESH:
        return
    whole = create(drawing.request)
    append(whole, 0)
    done = slice(0, 40) if rule is SweepRule.FORWARD else slice(90, 130)
    # After `append(0)` the states are the settled ones: nothing has been counted yet.
    drawing.states[..., done] = whole.states[..., done]
    drawing.drawn[..., done] = 0


def test_compiled_and_interpreted_pictures_agree(tmp_path: Path) -> None:
    script = (
        "import sys, numpy as np\n"
        f"sys.path.insert(0, {str(Path(__file__).parent)!r})\n"
        "from naive_density import drawn, picture, view\n"
        "where = view('0.1', '1.0', '-1.5', '1.5')\n"
        "field = drawn(picture('henon', where, columns=3, rows=20, transient=300), 256)\n"
        "np.savez(sys.argv[1], counts=field.counts, lyapunov=field.lyapunov, period=field.period)\n"
    )
    results = []
    for switch in ("0", "1"):
        file = tmp_path / f"{switch}.npz"
        environment = os.environ | {"NUMBA_DISABLE_JIT": switch}
        subprocess.run([sys.executable, "-c", script, str(file)], env=environment, check=True)
        results.append(np.load(file))
    compiled, interpreted = results
    assert np.array_equal(compiled["counts"], interpreted["counts"])
    assert np.array_equal(compiled["period"], interpreted["period"])
    assert compiled["lyapunov"] == pytest.approx(interpreted["lyapunov"], abs=1e-9)


@pytest.mark.parametrize(
    "change",
    [
        {"columns": 0},
        {"rows": 0},
        {"rows": 100_000},
        {"transient_steps": -1},
        {"starts": 0},
        {"parameter": "nobody"},
        {"observe": "x +"},
        {"observe": "nobody"},
        {"view": view("4", "3")},
        {"view": view("3", "4", "1", "1")},
    ],
)
def test_impossible_requests_are_refused_in_words(change: dict[str, object]) -> None:
    request: PictureRequest = dataclasses.replace(picture("logistic", view("3", "4")), **change)  # type: ignore[arg-type]
    with pytest.raises(TinemarkError):
        create(request)


def test_view_exact_beyond_doubles_still_finds_its_columns() -> None:
    third = Fraction(1, 3)
    request = picture(
        "logistic", dataclasses.replace(view("3", "4"), left=3 + third, right=3 + 2 * third), columns=7
    )
    drawing = create(request)
    wanted = [float(3 + third + third * (2 * j + 1) / 14) for j in range(7)]
    assert drawing.swept.tolist() == wanted


def test_a_second_opening_compiles_nothing(tmp_path: Path) -> None:
    script = (
        "import sys\n"
        f"sys.path.insert(0, {str(Path(__file__).parent)!r})\n"
        "from naive_density import drawn, map_of, picture, view\n"
        "from tinemark.density.kernels import kernels_for\n"
        "request = picture(map_of('x*x - r'), view('0', '1'), columns=3)\n"
        "drawn(request, 2048)\n"
        "kernels = kernels_for(request.system, request.parameter, request.observe)\n"
        "made = (kernels.advance, kernels.advance_counting, kernels.trace)\n"
        "print(sum(sum(kernel.stats.cache_misses.values()) for kernel in made))\n"
    )
    environment = os.environ | {"TINEMARK_CACHE_DIR": str(tmp_path), "NUMBA_DISABLE_JIT": "0"}
    compiled = [
        int(
            subprocess.run(
                [sys.executable, "-c", script], env=environment, check=True, capture_output=True, text=True
            ).stdout
        )
        for _ in range(2)
    ]
    assert compiled == [3, 0]
