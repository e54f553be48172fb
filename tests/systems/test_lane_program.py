"""Straight-line code as vector operations: read whole, and compiled to what it says."""

from __future__ import annotations

import math

import mpmath
import numpy as np
import pytest

from tinemark.density.lane_block import BUFFER, LANES, TILE, functions
from tinemark.systems import lane_math, lane_turns, lane_wide
from tinemark.systems.expression import ARITIES
from tinemark.systems.formula import read_formula
from tinemark.systems.lane_program import lane_program
from tinemark.systems.lane_turns import HALF_TURNS, in_half_turns
from tinemark.systems.native import native_module
from tinemark.systems.plain import plain_function

NAN, INF = float("nan"), float("inf")
SPECIAL = [0.0, -0.0, 1.0, -1.0, 0.5, -0.5, 3.0, 5e-324, 1e-310, 1e308, -1e308, INF, -INF, NAN, 709.9, -745.2]


def test_equal_operations_are_kept_once_and_unused_ones_not_at_all() -> None:
    program = lane_program(
        ["a = x * x", "b = x * x", "c = lane_exp(a)", "d = lane_exp(b)", "unused = lane_log(x)", "y = c + d"],
        ["x"],
        ["y"],
        functions(),
    )
    alone = lane_program(["y = lane_exp(x)"], ["x"], ["y"], functions())
    assert program.length == alone.length + 2
    assert [op.name for op in program.ops].count("scaled") == 1


def test_depth_is_that_of_the_longest_chain() -> None:
    program = lane_program(
        ["a = x + 1.0", "b = a * a", "c = x * 3.0", "y = b - c"], ["x"], ["y"], functions()
    )
    assert (program.length, program.depth) == (4, 3)


def test_only_a_formulas_own_arithmetic_may_be_fused() -> None:
    program = lane_program(["y = lane_sin(x * 3.0)"], ["x"], ["y"], functions())
    assert [op.name for op in program.ops if op.fusible] == ["mul"]


@pytest.mark.parametrize(
    "statement",
    [
        "for i in x:\n    y = i",
        "y = x if x else x.real",
        "y = [x]",
        "y = x % 2.0",
        "y = x << 1.0",
        "y = True",
    ],
)
def test_what_is_no_straight_line_is_refused(statement: str) -> None:
    with pytest.raises((SyntaxError, KeyError)):
        lane_program([statement], ["x"], ["y"], functions())


def in_lanes(lines: list[str], values: list[np.ndarray]) -> list[np.ndarray]:
    """Run y0, y1, … of x0, x1, … once in compiled lanes; the values are padded to whole blocks."""
    n = len(values)
    settings = f"{n}, 0, '', False"
    source = (
        "import numpy as np\nfrom tinemark.density.lane_block import lane_block\n"
        "from tinemark.systems.native import jit\n"
        f"move = lane_block({[*lines, 'seen = x0']!r}, {settings})\n"
        "@jit\ndef run(lanes, fixed, noted, counts):\n"
        "    move(lanes, fixed, noted, 0, counts, 0, 0, 1, 1.0, 0.0)\n"
    )
    run = native_module(source, "lanes").run
    size = len(values[0])
    results = np.empty((n, -(-size // LANES) * LANES))
    room = np.zeros((n + 1) * LANES + 8)
    skipped = -room.ctypes.data % 64 // 8
    lanes = room[skipped : skipped + (n + 1) * LANES].reshape(n + 1, LANES)
    space = np.zeros(2 * BUFFER * LANES + 32, np.uint16)
    skipped = -space.ctypes.data % 64 // 2
    noted = space[skipped : skipped + 2 * BUFFER * LANES].reshape(2, LANES // TILE, BUFFER, TILE)
    padded = [np.resize(value, results.shape[1]) for value in values]
    for first in range(0, results.shape[1], LANES):
        lanes[:n] = [value[first : first + LANES] for value in padded]
        run(lanes, np.zeros(0), noted, np.zeros((1, 2), np.uint32))
        results[:, first : first + LANES] = lanes[:n]
    return list(results[:, :size])


needs_wide_registers = pytest.mark.skipif(
    not lane_wide.wide_registers(), reason="this processor has no wide registers, or the compiler is off"
)


@needs_wide_registers
def test_functions_give_the_same_bits_in_lanes_as_one_by_one() -> None:
    rng = np.random.default_rng(11)
    ordinary = rng.normal(size=100) * 10.0 ** rng.integers(-3, 3, 100)
    a = np.concatenate([SPECIAL, ordinary, rng.uniform(-1, 1, 100)])
    b = rng.permutation(a)
    two = [*(name for name, count in ARITIES.items() if count == 2), "pow"]
    one = [*(name for name, count in ARITIES.items() if count == 1), *HALF_TURNS.values()]
    lines = [f"y{i} = lane_{name}(x{i})" for i, name in enumerate(one)]
    last = len(one)
    lines += [f"y{last + i} = lane_{name}(x{last + i}, x0)" for i, name in enumerate(two)]
    found = in_lanes(lines, [b] + [a] * (len(one) + len(two) - 1))
    with np.errstate(all="ignore"):
        for name, values in zip([*one, *two], found, strict=True):
            module = lane_turns if name in HALF_TURNS.values() else lane_wide if name == "exp" else lane_math
            function = getattr(module, f"lane_{name}")
            arguments = (
                zip(a, b, strict=True) if name in two else ((x,) for x in (b if name == one[0] else a))
            )
            # Equality takes zeros of both signs for the same: kernels promise no more.
            wanted = np.array([float(function(*map(np.float64, pair))) for pair in arguments])
            if name == "tanh":  # takes the other exponential in lanes
                np.testing.assert_allclose(values, wanted, rtol=3e-16, atol=0)
            else:
                np.testing.assert_array_equal(values, wanted, err_msg=name)


@needs_wide_registers
def test_conditions_and_bounds_keep_what_is_not_a_number() -> None:
    x = np.array(SPECIAL)
    lines = [
        "y0 = (1.0 if x0 < 0.5 else (2.0 if x0 >= 3.0 else x0))",
        "y1 = (x1 if -1.0 < x1 <= 1.0 else 7.0)",
        "y2 = lane_min(lane_max(x2, -1.0), 1.0)",
    ]
    found = in_lanes(lines, [x, x, x])
    np.testing.assert_array_equal(found[0], np.where(x < 0.5, 1.0, np.where(x >= 3.0, 2.0, x)))
    np.testing.assert_array_equal(found[1], np.where((x > -1.0) & (x <= 1.0), x, 7.0))
    np.testing.assert_array_equal(found[2], np.minimum(np.maximum(x, -1.0), 1.0))


def test_wide_exponential_stays_within_its_units_down_to_subnormals() -> None:
    rng = np.random.default_rng(4)
    arguments = np.concatenate(
        [
            rng.uniform(-745.1, 709.78, 1500),
            rng.uniform(-3, 3, 1500),
            rng.uniform(-1, 1, 300) * 10.0 ** rng.uniform(-20, 0, 300),
            np.arange(-40, 41) * np.log(2) / 16,
        ]
    )
    with mpmath.workprec(160):
        for x in map(float, arguments):
            exact = mpmath.exp(mpmath.mpf(x))
            found = float(lane_wide.lane_exp(x))
            unit = float(np.spacing(float(exact)))
            assert abs(mpmath.mpf(found) - exact) <= 1.1 * unit, x


def test_wide_exponential_at_its_ends() -> None:
    for x in (*SPECIAL, 709.782712893384, 709.7827128933841, 710.0, -745.13, -745.14, -1e4, 1e4):
        with np.errstate(all="ignore"):
            wanted = float(np.exp(x))
        found = float(lane_wide.lane_exp(x))
        assert (math.isnan(found) and math.isnan(wanted)) or found == pytest.approx(
            wanted, rel=3e-16, abs=5e-324
        ), x


TURNED = {
    "sin(pi*x)": "lane_sinpi",
    "sin(2*pi*x)": "lane_sinpi",
    "sin(x*pi/3)": "lane_sinpi",
    "cos(-pi*x)": "lane_cospi",
    "tan(pi*x/4)": "lane_tanpi",
    "sin(pi*x + pi*y)": "lane_sinpi",
    "cos(pi*(x - y)*0.5)": "lane_cospi",
    "sin(pi*sin(pi*x))": "lane_sinpi",
    "sin(pi) + x": "lane_sinpi",
    "x + sin(pi*x) if x < y else cos(pi*y)": "lane_cospi",
    "sin(pi*x + 1)": "",
    "sin(x/pi)": "",
    "cos(pi*x*pi) - sin(x)": "lane_cospi",
}


@pytest.mark.parametrize("text", TURNED)
def test_a_formula_means_the_same_in_half_turns(text: str) -> None:
    expr = read_formula(text, ("x", "y"))
    turned = in_half_turns(expr)
    assert (turned != expr) == bool(TURNED[text])
    from tinemark.systems.emit import emit

    lines = emit([("result", turned)], {"x": "x", "y": "y"}, "native")
    assert TURNED[text] in "\n".join(lines)
    known = {**vars(lane_math), **vars(lane_turns)}
    rng = np.random.default_rng(2)
    for x, y in rng.uniform(-2, 2, (20, 2)):
        scope = {"x": x, "y": y}
        exec("\n".join(lines), known, scope)
        wanted = float(plain_function([expr], ("x", "y"))([x, y])[0])
        assert float(scope["result"]) == pytest.approx(wanted, rel=1e-13, abs=1e-14)
