"""Hostile texts end in an error of ours with a column, and nothing in them ever runs."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from tinemark.systems.errors import FormulaError
from tinemark.systems.formula import MAX_LENGTH, read_formula

NAMES = ("x", "y", "r")

_watched: list[str] | None = None


def _hook(event: str, _arguments: tuple[object, ...]) -> None:
    if _watched is not None:
        _watched.append(event)


@pytest.fixture(scope="module", autouse=True)
def _listen() -> None:
    sys.addaudithook(_hook)  # cannot be taken off again; idle when nothing watches


@contextmanager
def watching() -> Iterator[list[str]]:
    """Collect what the interpreter reports: code run, files opened, modules loaded, processes started."""
    global _watched
    events: list[str] = []
    _watched = events
    try:
        yield events
    finally:
        _watched = None


TRAP = "__import__('pathlib').Path('{trap}').write_text('run')"

TEXTS = {
    "attribute": "x.__class__",
    "attribute of a number": "(1).__class__.__bases__",
    "attribute of a call": "sin(x).real",
    "import": "__import__('os')",
    "trap": TRAP,
    "trap in an argument": f"sin({TRAP})",
    "trap in a condition": f"1 if {TRAP} else x",
    "trap in a default": f"(lambda q={TRAP}: q)(x)",
    "eval": "eval('1')",
    "exec": "exec('x = 1')",
    "open": "open('/etc/passwd')",
    "getattr": "getattr(x, 'real')",
    "type": "type(x)",
    "call of a state": "x(1)",
    "call of a number": "1(x)",
    "call of a call": "sin(x)(y)",
    "call of a condition": "(sin if x < 1 else cos)(x)",
    "starred": "min(*x)",
    "double starred": "min(**x)",
    "lambda": "lambda: x",
    "lambda called": "(lambda q: q)(x)",
    "text": "'x'",
    "double quotes": '"x"',
    "f-string": "f'{x}'",
    "bytes": "b'x'",
    "triple quotes": "'''x'''",
    "subscript": "x[0]",
    "slice": "x[0:1]",
    "list": "[x]",
    "dict": "{x: y}",
    "set": "{x}",
    "tuple": "(x, y)",
    "empty tuple": "()",
    "walrus": "(q := x)",
    "list comprehension": "[q for q in x]",
    "generator": "sum(q for q in x)",
    "dict comprehension": "{q: q for q in x}",
    "await": "await x",
    "yield": "(yield x)",
    "ellipsis": "...",
    "caret": "x^2",
    "and": "x and y",
    "not": "not x",
    "is": "x is y",
    "in": "x in y",
    "equal": "x == y",
    "not equal": "x != y",
    "shift": "x << 2",
    "bits": "x | y",
    "invert": "~x",
    "matrix product": "x @ y",
    "modulo": "x % y",
    "whole division": "x // y",
    "True": "True",
    "None": "None*x",
    "debug": "__debug__",
    "statement": "x = 1",
    "two statements": "x; y",
    "semicolon import": "x; import os",
    "newline": "x\nimport os",
    "comment": "x # y",
    "continuation": "x \\\n + y",
    "backslash": "x\\",
    "infinite": "inf",
    "nan": "nan",
    "complex": "1j",
    "hexadecimal": "0xff",
    "octal": "0o17",
    "binary": "0b1",
    "underscore number": "1_000",
    "leading zeros": "007",
    "power tower": "9**9**9**9",
    "power tower of small numbers": "2**2**2**2**2**2",
    "power tower in parentheses": "((((9**64)**64)**64)**64)",
    "power tower with negative": "9**-9**9",
    "product of powers": "*".join(["9**64"] * 20),
    "huge exponent": "x**999999999999",
    "huge decimal exponent": "1e999999999",
    "tiny decimal exponent": "1e-999999999",
    "million digits": "9" * 10**6,
    "million digits after the point": "0." + "9" * 10**6,
    "thousand digits": "9" * 1000,
    "five thousand digits": "1" + "0" * 5000,
    "million signs": "-" * 10**6 + "x",
    "thousand signs": "-" * 1000 + "x",
    "thousand pluses": "+" * 1500 + "x",
    "five thousand parentheses": "(" * 5000 + "x" + ")" * 5000,
    "five hundred parentheses": "(" * 500 + "x" + ")" * 500,
    "five thousand open parentheses": "(" * 5000,
    "five thousand closed parentheses": ")" * 5000,
    "five hundred calls": "sin(" * 500 + "x" + ")" * 500,
    "five hundred conditions": "x if x < 1 else " * 120 + "y",
    "nested conditions": "(" * 60 + "x" + " if x < 1 else y)" * 60,
    "five thousand terms": "+".join(["x"] * 5000),
    "a thousand terms": "+".join(["x"] * 999),
    "right-nested powers": "**".join(["x"] * 400),
    "very long name": "q" * 1900,
    "very long call": "q" * 1900 + "(x)",
    "very long text": "x + " * 10**5 + "x",
    "null byte": "x\0",
    "only null": "\0",
    "null inside": "r*x\0*y",
    "Cyrillic lookalike": "r*\N{CYRILLIC SMALL LETTER HA}",
    "Greek lookalike": "s\N{GREEK SMALL LETTER IOTA}n(x)",
    "full-width letters": "\N{FULLWIDTH LATIN SMALL LETTER X}",
    "full-width digit": "\N{FULLWIDTH DIGIT TWO}*x",
    "mathematical letter": "\N{MATHEMATICAL ITALIC SMALL X}",
    "superscript": "x\N{SUPERSCRIPT TWO}",
    "Arabic digit": "\N{ARABIC-INDIC DIGIT TWO}*x",
    "division sign": "x\N{DIVISION SIGN}y",
    "middle dot": "r\N{MIDDLE DOT}x",
    "true minus": "1 \N{MINUS SIGN} x",
    "no-break space": "r\N{NO-BREAK SPACE}*x",
    "zero-width space": "r\N{ZERO WIDTH SPACE}x",
    "right-to-left mark": "r\N{RIGHT-TO-LEFT OVERRIDE}x",
    "byte order mark": "\ufeffx",
    "lone surrogate": "x\ud800",
    "emoji": "\N{SLICE OF PIZZA}",
    "combining": "x\N{COMBINING ACUTE ACCENT}",
    "form feed": "x\fy",
    "vertical tab": "x\vy",
    "encoding cookie": "# -*- coding: utf-7 -*-",
    "dunder name": "__name__",
    "private name": "_x",
}


@pytest.mark.parametrize("label", TEXTS)
def test_hostile_text_is_refused_and_never_run(label: str, tmp_path: Path) -> None:
    trap = tmp_path / "trap"
    text = TEXTS[label].replace("{trap}", str(trap))
    with pytest.raises(FormulaError) as caught, watching() as events:
        read_formula(text, NAMES, key="next.x")
    # Reading compiles to a syntax tree at most; code that runs is reported as "exec".
    assert set(events) <= {"compile", "object.__getattr__"}
    assert not trap.exists()
    error = caught.value
    assert 1 <= error.column <= len(text)
    assert error.message
    assert len(str(error)) < 600
    assert "\0" not in str(error)
    assert len(text) <= MAX_LENGTH or str(MAX_LENGTH) in str(error)


def test_the_watch_sees_code_that_runs() -> None:
    with watching() as events:
        eval("1 + 1")
    assert "exec" in events


@pytest.mark.parametrize("value", [None, 3, 2.5, b"x", ["x"], {"x": 1}, True])
def test_what_is_no_text_is_refused(value: object) -> None:
    with pytest.raises(FormulaError, match="text"):
        read_formula(value, NAMES)  # type: ignore[arg-type]
