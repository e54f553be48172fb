"""The inner loop for wide registers against the plain one, and against orbits of whole numbers."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

import numpy as np
import pytest
from naive_density import counts, drawn, map_of, picture, view

from tinemark.density import kernels, renderer
from tinemark.density.field import Field
from tinemark.density.kernels import BUFFER, LANES, kernels_for
from tinemark.density.renderer import append, create, snapshot
from tinemark.density.request import PictureRequest
from tinemark.systems.lane_wide import wide_registers
from tinemark.systems.system_file import read_system_text

# Whole numbers below 97 under x -> 5x + r modulo 97: exact in doubles, and never at rest.
WHOLE = "5*x + floor(r) - 97*floor((5*x + floor(r))/97)"


@pytest.fixture
def plain_form(monkeypatch: pytest.MonkeyPatch) -> Iterator[None]:
    """Kernels as they are on processors without wide registers."""
    kernels._kernels.cache_clear()
    monkeypatch.setattr(kernels, "wide_registers", lambda: False)
    yield
    kernels._kernels.cache_clear()


def whole(state: tuple[float, ...], r: float) -> tuple[float, ...]:
    step = 5 * state[0] + np.floor(r)
    return (step - 97 * np.floor(step / 97),)


def whole_picture(columns: int) -> PictureRequest:
    return picture(map_of(WHOLE, "3"), view("1", "60", "-0.5", "96.5"), columns=columns, rows=97, transient=0)


@pytest.mark.parametrize("steps", [(1,), (BUFFER, 3 * BUFFER), (5 * BUFFER, 2 * BUFFER)])
def test_every_visit_is_counted_once_whatever_the_passes(steps: tuple[int, ...]) -> None:
    # One whole block, counted between the steps, and one of a few columns, counted after them.
    request = whole_picture(LANES + 5)
    drawing = create(request)
    total = 0
    for part in steps:
        append(drawing, part)
        total += -(-part // BUFFER) * BUFFER
    assert np.array_equal(snapshot(drawing, periods=False).counts, counts(request, whole, total))


@pytest.mark.parametrize("steps", [1, 5 * BUFFER])
def test_plain_form_counts_the_same(plain_form: None, steps: int) -> None:
    request = whole_picture(LANES + 5)
    drawing = create(request)
    append(drawing, steps)
    total = -(-steps // BUFFER) * BUFFER
    assert np.array_equal(snapshot(drawing, periods=False).counts, counts(request, whole, total))


def settled_pictures() -> list[Field]:
    sine = picture("sine", view("0.62", "0.7", "0", "1"), columns=LANES + 3, rows=50, transient=2000)
    henon = picture("henon", view("0.1", "0.3", "-1.5", "1.5"), columns=LANES + 3, rows=50, transient=2000)
    return [drawn(request, 12 * BUFFER) for request in (sine, henon)]


@pytest.mark.skipif(not wide_registers(), reason="there is only one form here")
def test_both_forms_draw_the_same_settled_pictures(plain_form: None, monkeypatch: pytest.MonkeyPatch) -> None:
    plain = settled_pictures()
    kernels._kernels.cache_clear()
    monkeypatch.setattr(kernels, "wide_registers", lambda: True)
    for one, other in zip(plain, settled_pictures(), strict=True):
        # A fixed point on the edge between two cells may fall on either side.
        moved = np.abs(one.counts.astype(np.int64) - other.counts).sum(axis=0) > 0
        assert moved.mean() < 0.05
        assert np.array_equal(one.period, other.period)
        assert one.lyapunov == pytest.approx(other.lyapunov, abs=1e-9)


def test_an_escaped_orbit_is_counted_outside_and_stays_undefined() -> None:
    request = picture("quadratic", view("1", "3", "-2", "2"), columns=LANES, rows=40, transient=0)
    drawing = create(request)
    append(drawing, 3 * BUFFER)
    inside = drawing.counts[:, 1:-1].sum(axis=1)
    assert (drawing.counts.sum(axis=1) == 3 * BUFFER).all()
    gone = ~np.isfinite(drawing.states[0, 0])
    assert gone[-10:].all()
    assert (inside[gone] < 3 * BUFFER).all()
    assert renderer.snapshot(drawing).escaped[-10:].all()


def test_six_states_with_switches_keep_their_kernels() -> None:
    # As many states as there may be: the lanes no longer fit the registers.
    states = "abcdef"
    after = dict(zip(states, states[1:] + states[0], strict=True))
    text = "\n".join(
        [
            'title = "Test"\nkind = "map"',
            *(f'[states.{name}]\nstart = "0.1"' for name in states),
            '[parameters]\nr = { value = "0.5" }\nq = { value = "2" }\n[next]',
            *(f'{a} = "sin(pi*{b})*r + ({a} if {a} < {b} else exp(-({b}**2)))/q"' for a, b in after.items()),
            '[diagram]\nparameter = "r"\nobserve = "a + b"\n',
        ]
    )
    system = read_system_text(text)
    where = view("0", "1", "-2", "2")
    request = picture(system, where, columns=LANES, rows=30, transient=0)
    drawing = create(request)
    append(drawing, 2 * BUFFER)
    assert kernels_for(system, "r", "a + b").fixed == ("q",)
    assert (drawing.counts.sum(axis=1) == 2 * BUFFER).all()
    states_now = np.full(6, 0.1)
    column = 20
    r = float(Fraction(2 * column + 1, 2 * LANES))
    noted = np.empty((LANES, 6, 8))
    fresh = create(request)
    fresh.kernels.trace(fresh.states[0], fresh.swept, fresh.fixed, 0, LANES, noted)
    for step in range(8):
        b = np.roll(states_now, -1)
        states_now = np.sin(np.pi * b) * r + np.where(states_now < b, states_now, np.exp(-(b**2))) / 2
        assert noted[column, :, step] == pytest.approx(states_now, rel=1e-12)
