"""First looks without a compiler: the picture's own orbits; NumPy's loops over cells against the compiled."""

from __future__ import annotations

import subprocess
import sys
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from tinemark.density import first_look as module
from tinemark.density import renderer, tone_kernels, tone_plain
from tinemark.density.first_look import COUNTED_STEPS, first_look
from tinemark.density.request import PictureRequest, SweepRule, View
from tinemark.density.stopping import StopFlag
from tinemark.systems.library import builtin_names, builtin_system

COUNTS = arrays(np.uint32, st.tuples(st.integers(1, 9), st.integers(1, 9)), elements=st.integers(0, 400))


def request(name: str = "logistic", columns: int = 90, rows: int = 60, **changes) -> PictureRequest:
    system = builtin_system(name)
    swept = system.parameter(system.diagram_parameter)
    left, right = (Fraction(str(float(end))) for end in swept.range)
    low, high = (Fraction(str(float(end))) for end in system.states[0].range)
    view = View(left, right, low, high)
    made = PictureRequest(system, swept.name, system.observe, view, columns, rows, transient_steps=200)
    return replace(made, **changes)


@pytest.mark.parametrize("name", ["logistic", "henon"])
def test_periodic_columns_hit_the_cells_of_the_picture(name) -> None:
    asked = request(name)
    look = first_look(asked, StopFlag())
    *_, picture = renderer.progressive(asked, 2048, threads=1)
    assert look.steps == COUNTED_STEPS * asked.columns
    assert np.isnan(look.lyapunov).all() and not look.period.any()
    assert np.array_equal(look.escaped, picture.escaped)
    for column in np.flatnonzero((picture.period > 0) & (picture.lyapunov < -0.1)):
        assert np.array_equal(look.counts[:, column] > 0, picture.counts[:, column] > 0)


def test_every_map_of_the_library_is_looked_at() -> None:
    for name in builtin_names():
        if builtin_system(name).is_map:
            look = first_look(request(name, 20, 30, transient_steps=20), StopFlag())
            assert look.counts.shape == (30, 20)


def test_several_starts_are_counted_together_and_escapes_told() -> None:
    asked = request(rule=SweepRule.SEVERAL, starts=3, view=View(*map(Fraction, ("3.9", "4.5", "0", "1"))))
    look = first_look(asked, StopFlag())
    assert look.steps == 3 * COUNTED_STEPS * asked.columns
    parameters = 3.9 + 0.6 * (np.arange(asked.columns) + 0.5) / asked.columns
    assert look.escaped[parameters > 4.1].all() and not look.escaped[parameters < 3.99].any()


def test_no_look_at_what_takes_long_or_cannot_be_taken_at_once(monkeypatch) -> None:
    asked = request()
    assert first_look(replace(asked, rule=SweepRule.FORWARD), StopFlag()) is None
    assert first_look(replace(asked, rule=SweepRule.SEVERAL, starts=10**6), StopFlag()) is None
    stopped = StopFlag()
    stopped.set()
    assert first_look(asked, stopped) is None
    monkeypatch.setattr(module, "LONGEST_S", -1.0)
    assert first_look(asked, StopFlag()) is None


def test_a_constant_map_and_quantity_are_one_line() -> None:
    from tinemark.systems.system_file import read_system_text

    text = (
        'title = "Constant"\nkind = "map"\n[states.x]\nstart = "0.5"\nrange = ["0", "1"]\n[parameters.r]\n'
        'value = "1"\nrange = ["0", "2"]\n[next]\nx = "0.25"\n[diagram]\nparameter = "r"\nobserve = "0.25"\n'
    )
    system = read_system_text(text)
    view = View(Fraction(0), Fraction(2), Fraction(0), Fraction(1))
    look = first_look(PictureRequest(system, "r", "0.25", view, 7, 8, transient_steps=3), StopFlag())
    assert (look.counts[2] == COUNTED_STEPS).all() and look.counts.sum() == 7 * COUNTED_STEPS


@given(COUNTS, st.integers(1, 5))
def test_numpys_loops_are_those_of_the_compiled_ones(counts: np.ndarray, stride: int) -> None:
    table = np.arange(tone_plain.KEYS, dtype=np.uint32)
    assert np.array_equal(tone_plain.toned(counts[::-1], table), tone_kernels.toned(counts[::-1], table))
    assert tone_plain.largest(counts) == tone_kernels.largest(counts)
    ours, compiled = (m.visits_of_keys(counts, stride) for m in (tone_plain, tone_kernels))
    assert np.array_equal(ours, compiled)
    assert np.array_equal(tone_plain.even_counts(counts), tone_kernels.even_counts(counts))


def test_a_first_look_and_its_colours_load_no_compiler() -> None:
    code = (
        "import sys, numpy as np\n"
        "from fractions import Fraction as F\n"
        "from tinemark.density.first_look import first_look\n"
        "from tinemark.density.request import PictureRequest, View\n"
        "from tinemark.density.stopping import StopFlag\n"
        "from tinemark.density.tone import coloured, even\n"
        "from tinemark.systems.library import builtin_system\n"
        "s = builtin_system('logistic')\n"
        "r = PictureRequest(s, 'r', 'x', View(F(3), F(4), F(0), F(1)), 40, 30)\n"
        "f = first_look(r, StopFlag())\n"
        "for tone in ('log', 'linear', 'equalised'):\n"
        "    assert coloured(even(f.counts, 192)[::-1], tone, np.arange(256, dtype=np.uint32)).any()\n"
        "assert 'numba' not in sys.modules\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True, timeout=60)
