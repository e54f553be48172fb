"""Cycles carried through ball arithmetic: generated loops over python-flint's `arb`.

Plain ball evaluation of an orbit loses log2(sup|f'|-like sums) bits a step, about 1.8 for the logistic
map, because a formula sees its argument more than once. Two things avoid that here. Newton steps run
on midpoints. Rigorous passes carry the orbit's box in mean-value form (Moore, 1966),
f(m, r_m) + f_x(X, R)(X - m) + f_r(X, R)(R - r_m), so that a box grows by |f_x| a step and no faster.

`flint.ctx.prec` is one value per process, so every function here sets it in a scoped block, and no
generator yields inside one.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Generator, Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from time import perf_counter
from typing import Any

import flint
from flint import arb, fmpq

from tinemark.onsets.one_map import OneMap, depends_on
from tinemark.onsets.results import Step
from tinemark.systems.balls import ball_tools
from tinemark.systems.emit import emit
from tinemark.systems.errors import SwitchingTouched, Unbounded
from tinemark.systems.expression import ZERO, Call, Expr, walk

_RATIONAL = re.compile(r"fmpq\((-?\d+), (\d+)\)")
SLICE_S = 0.02
"""Seconds of looping between two chances to cancel."""


LONGEST_EXPONENT = 100_000
"""Powers of two beyond this stand for no state and no parameter."""


@contextmanager
def precision(bits: int) -> Iterator[None]:
    """Ball arithmetic at `bits` bits, restored on leaving."""
    before = flint.ctx.prec
    flint.ctx.prec = bits
    try:
        yield
    finally:
        flint.ctx.prec = before


def ball_of(value: Fraction) -> arb:
    """A rational as a ball, at the precision in force."""
    return arb(fmpq(value.numerator, value.denominator))


def fraction_of(exact: arb) -> Fraction:
    """An exact ball as the rational it is.

    Raises
    ------
    Unbounded
        The number is so large or so small that it would fill the memory.
    """
    mantissa, exponent = exact.man_exp()
    if abs(exponent) > LONGEST_EXPONENT:
        raise Unbounded("a number is too large or too small to be written")
    whole = int(mantissa)
    power = int(exponent)
    return Fraction(whole * 2**power) if power >= 0 else Fraction(whole, 2**-power)


@dataclass(frozen=True)
class BallLoops:
    """Generated loops of one map; each takes and returns its whole state, n steps further.

    orbit(x, r, n)
        Midpoint orbit alone.
    newton(x, r, u, v, w, z, n)
        Midpoint orbit with the first derivatives u, v of f^n in x and r, and w = u_x, z = u_r.
    point(X, r, u, n)
        Rigorous orbit of an exact point at an exact parameter, with its multiplier.
    box(X, R, r_m, spread, u, v, w, z, s, n)
        Rigorous orbit of a box with all derivatives, and s, the Schwarzian derivative of f^n.
        `spread` is R - r_m.
    """

    orbit: Callable[..., Any]
    newton: Callable[..., tuple[Any, ...]]
    point: Callable[..., tuple[Any, ...]]
    box: Callable[..., tuple[Any, ...]]


@lru_cache(maxsize=64)
def ball_loops(one: OneMap) -> BallLoops:
    """Generate and compile the loops of a map."""
    exprs = one.exact_derivatives
    space: dict[str, Any] = ball_tools() | {"off_cut": _off_cut}
    sources = (_orbit_source, _newton_source, _point_source, _box_source)
    source = "\n".join(line for part in sources for line in part(one, exprs))

    def hoist(match: re.Match[str]) -> str:
        label = f"q{match[1].replace('-', 'm')}_{match[2]}"
        space[label] = fmpq(int(match[1]), int(match[2]))
        return label

    source = _RATIONAL.sub(hoist, source)
    # The source is our own print of checked nodes: no text of the user passes through.
    exec(compile(source, "<ball loops>", "exec"), space)  # noqa: S102
    return BallLoops(space["orbit"], space["newton"], space["point"], space["box"])


def _split(
    one: OneMap, exprs: Mapping[str, Expr], wanted: Sequence[str]
) -> tuple[list[tuple[str, Expr]], list[tuple[str, Expr]]]:
    """Targets that stay the same along an orbit, and those computed anew at each step."""
    targets = [(name, exprs[name]) for name in wanted]
    steady = [target for target in targets if not depends_on(target[1], one.state)]
    return steady, [target for target in targets if target not in steady]


def _loop(head: str, before: list[str], body: list[str], result: str) -> list[str]:
    return [
        f"def {head}:",
        *(f"    {line}" for line in before),
        "    for _ in range(n):",
        *(f"        {line}" for line in body),
        f"    return {result}",
    ]


def _times(factor: str, value: str, exprs: Mapping[str, Expr]) -> str:
    """A product, or nothing where the factor is known to be zero."""
    return "" if exprs[factor] == ZERO else f"{factor}*{value}"


def _sum(*terms: str) -> str:
    return " + ".join(term for term in terms if term) or "0*u"


def _chain(exprs: Mapping[str, Expr]) -> list[str]:
    """Derivatives of f^(n+1) from those of f^n, by the chain rule; order matters."""
    twist = _sum(_times("fxx", "v", exprs), "fxr" if exprs["fxr"] != ZERO else "")
    z = f"({twist})*u" if twist != "0*u" else ""
    return [
        f"w = {_sum(_times('fxx', '(u*u)', exprs), 'fx*w')}",
        f"z = {_sum(z, 'fx*z')}",
        f"v = {_sum('fx*v', 'fr' if exprs['fr'] != ZERO else '')}",
        "u = fx*u",
    ]


def _orbit_source(one: OneMap, exprs: Mapping[str, Expr]) -> list[str]:
    bind = {one.state: "x", one.parameter: "r"}
    return _loop("orbit(x, r, n)", [], [*emit([("f", exprs["f"])], bind, "ball", "t"), "x = f.mid()"], "x")


def _newton_source(one: OneMap, exprs: Mapping[str, Expr]) -> list[str]:
    bind = {one.state: "x", one.parameter: "r"}
    steady, moving = _split(one, exprs, ("f", "fx", "fr", "fxx", "fxr"))
    body = [*emit(moving, bind, "ball", "t"), *_chain(exprs), "x = f.mid()"]
    before = emit(steady, bind, "ball", "c") if steady else []
    return _loop("newton(x, r, u, v, w, z, n)", before, body, "x, u, v, w, z")


def _value_lines(one: OneMap, exprs: Mapping[str, Expr], centre_r: str) -> list[str]:
    """The step of the midpoint alone, in its own names."""
    lines = ["m = X.mid()"]
    return lines + emit([("f", exprs["f"])], {one.state: "m", one.parameter: centre_r}, "ball", "p")


def _surface_lines(one: OneMap, bind: Mapping[str, str]) -> list[str]:
    """Checks that the whole ball lies off every switching surface; they raise `SwitchingTouched`.

    The formula itself is evaluated at midpoints, and its derivatives may have lost a surface (floor has
    derivative zero on both sides of its jumps), so the surfaces are looked at by themselves.
    """
    lines = []
    for surface in one.exact_surfaces:
        lines += emit([("side", surface.expr)], bind, "ball", "g")
        lines.append("ball_less(side, 0)" if surface.kind == "zero" else "ball_floor(side)")
    for node in walk(one.exact_derivatives["f"]):
        if isinstance(node, Call) and node.fn == "atan2":
            height, width = node.args
            lines += emit([("rise", height), ("run", width)], bind, "ball", "g")
            lines.append("off_cut(rise, run)")
    return lines


def _off_cut(rise: Any, run: Any) -> None:
    """Raise where a ball may touch the cut of atan2, along which it jumps but its derivatives do not."""
    if rise.contains(0) and not run > 0:
        raise SwitchingTouched("the orbit touches the cut of atan2")


def _point_source(one: OneMap, exprs: Mapping[str, Expr]) -> list[str]:
    bind = {one.state: "X", one.parameter: "r"}
    steady, moving = _split(one, exprs, ("fx",))
    before = emit(steady, bind, "ball", "c") if steady else []
    body = [*_value_lines(one, exprs, "r")]
    body += emit(moving, bind, "ball", "t") if moving else []
    body += [*_surface_lines(one, bind), "X = f + fx*(X - m)", "u = fx*u"]
    return _loop("point(X, r, u, n)", before, body, "X, u")


def _box_source(one: OneMap, exprs: Mapping[str, Expr]) -> list[str]:
    bind = {one.state: "X", one.parameter: "R"}
    steady, moving = _split(one, exprs, ("fx", "fr", "fxx", "fxr", "fxxx"))
    before = emit(steady, bind, "ball", "c") if steady else []
    body = _surface_lines(one, bind)
    body += emit(moving, bind, "ball", "t") if moving else []
    # Schwarzian of a composition: S(g o h) = S(g)(h) h'^2 + S(h). Every term of a map with negative
    # Schwarzian has one sign, so the sum loses nothing, where f_xxx/6 + f_xx^2/4 would cancel.
    body += ["bend = fxx/fx" if exprs["fxx"] != ZERO else "bend = 0*u"]
    third = "fxxx/fx" if exprs["fxxx"] != ZERO else ""
    body += [f"s = s + ({third} - fmpq(3, 2)*(bend*bend))*(u*u)"]
    body += _chain(exprs)
    body += _value_lines(one, exprs, "r_m")
    body += [f"X = f + fx*(X - m){' + fr*spread' if exprs['fr'] != ZERO else ''}"]
    return _loop("box(X, R, r_m, spread, u, v, w, z, s, n)", before, body, "X, u, v, w, z, s")


def in_chunks(
    advance: Callable[[Any, int], Any], state: Any, steps: int, bits: int, text: str
) -> Generator[Step, None, Any]:
    """Run a loop `steps` further in chunks, each in its own precision block, yielding between them."""
    left, count = steps, 400
    while left > 0:
        count = min(left, count)
        began = perf_counter()
        with precision(bits):
            state = advance(state, count)
        left -= count
        if left > 0:
            # The length of a slice changes nothing but where the steps are yielded.
            pace = (perf_counter() - began) / count
            yield Step(text)
            count = max(20, min(4 * count, int(SLICE_S / max(pace, 1e-9))))
    return state
