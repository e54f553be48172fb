"""System files: every mistake is named by file, key and place; a good file comes back whole."""

from __future__ import annotations

import pickle
import tomllib
from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tinemark.systems.errors import FormulaError, SystemFileError, TinemarkError
from tinemark.systems.exact import Exact, exact
from tinemark.systems.formula import RESERVED
from tinemark.systems.library import builtin_text
from tinemark.systems.system import MAX_MAP_STATES, Parameter, State, System
from tinemark.systems.system_file import (
    MAX_FILE_BYTES,
    read_system_bytes,
    read_system_file,
    read_system_text,
)
from tinemark.systems.system_text import edit_system_text, write_system_text

GOOD = """\
# A comment that must survive.
title = "Two states"   # trailing
kind  = "map"
notes = "free text"

[states.x]
start = "0.4"
range = ["0", "1"]
unit  = "A"

[states.y]
start = 0.25

[parameters.r]
value = "3.20"
range = [2.8, 4]
unit  = "per season"
tolerance = "0.01"

[parameters.b]
value = 3

[next]
x = "r*x*(1 - x) + y"
y = "x/b"

[diagram]
parameter = "r"
observe   = "x - y"
"""


STATES = GOOD[GOOD.index("[states.x]") : GOOD.index("[parameters.r]")]


def change(old: str, new: str) -> str:
    assert old in GOOD
    return GOOD.replace(old, new, 1)


def test_a_good_file_is_read_as_written() -> None:
    system = read_system_text(GOOD)
    assert system.title == "Two states"
    assert system.kind == "map"
    assert system.notes == "free text"
    assert system.states == (
        State("x", exact("0.4"), (exact("0"), exact("1")), "A"),
        State("y", exact("0.25")),
    )
    assert system.parameters == (
        Parameter("r", exact("3.20"), (exact("2.8"), exact("4")), "per season", exact("0.01")),
        Parameter("b", exact("3")),
    )
    assert system.formulas == ("r*x*(1 - x) + y", "x/b")
    assert system.diagram_parameter == "r"
    assert system.observe == "x - y"
    assert system.names == ("x", "y", "r", "b")
    assert system.parameter("r").value.text == "3.20"
    assert system.is_smooth


def test_unquoted_decimals_are_exact_too() -> None:
    system = read_system_text(change('value = "3.20"', "value = 3.3000000000000000000000001"))
    assert system.parameter("r").value.fraction == Fraction("3.3000000000000000000000001")
    system = read_system_text(change('start = "0.4"', "start = -1.5e-3"))
    assert system.states[0].start.fraction == Fraction(-15, 10000)


def test_a_diagram_may_be_left_out() -> None:
    text = GOOD[: GOOD.index("[diagram]")]
    system = read_system_text(text)
    assert (system.diagram_parameter, system.observe) == ("r", "x")


# What is spoiled, the key that the error must name, and words it must hold.
SPOILED = [
    ("unknown top key", "titel = 'x'\n" + GOOD, "titel", "title"),
    ("missing title", change('title = "Two states"   # trailing\n', ""), "title", "missing"),
    ("missing kind", change('kind  = "map"\n', ""), "kind", "missing"),
    ("wrong kind", change('"map"', '"mop"'), "kind", "map"),
    ("kind as number", change('"map"', "3"), "kind", "quotes"),
    ("title as number", change('"Two states"', "3"), "title", "quotes"),
    ("notes as list", change('"free text"', "['a']"), "notes", "quotes"),
    ("no states", change("[states.x]", "[stats.x]").replace("[states.y]", "[stats.y]"), "stats", '"states"'),
    ("states missing", GOOD.replace(STATES, ""), "states", "missing"),
    ("states no section", "states = 3\n" + GOOD.replace(STATES, ""), "states", "should be a section"),
    ("state no section", GOOD.replace("[states.y]\nstart = 0.25\n", "[states]\ny = 0.25\n"), "states.y", "["),
    ("missing start", change("start = 0.25\n", ""), "states.y.start", "missing"),
    ("unknown state key", change("start = 0.25", "start = 0.25\nstrat = 1"), "states.y.strat", "start"),
    ("start as text", change('"0.4"', '"four"'), "states.x.start", "four"),
    ("start as date", change('"0.4"', "2026-01-01"), "states.x.start", "number"),
    ("start as boolean", change('"0.4"', "true"), "states.x.start", "number"),
    ("start as list", change('"0.4"', "[1]"), "states.x.start", "number"),
    ("start nan", change('"0.4"', "nan"), "states.x.start", "nan"),
    ("start infinite", change('"0.4"', '"-inf"'), "states.x.start", "inf"),
    ("start with comma", change('"0.4"', '"0,4"'), "states.x.start", "point"),
    ("start empty", change('"0.4"', '""'), "states.x.start", "number"),
    ("huge start", change('"0.4"', '"1e999"'), "states.x.start", "power of ten"),
    ("long start", change('"0.4"', "9" * 300), "states.x.start", "300 digits"),
    ("endless start", change('"0.4"', "9" * 5000), "", "beyond all bounds"),
    ("unit as number", change('"A"', "3"), "states.x.unit", "quotes"),
    ("range of one", change('["0", "1"]', '["0"]'), "states.x.range", "two"),
    ("range of three", change('["0", "1"]', "[0, 1, 2]"), "states.x.range", "two"),
    ("range as text", change('["0", "1"]', '"0..1"'), "states.x.range", "two"),
    ("range reversed", change('["0", "1"]', '["1", "0"]'), "states.x.range", "lower"),
    ("range empty", change('["0", "1"]', '["1", "1.0"]'), "states.x.range", "lower"),
    ("range nan", change('["0", "1"]', "[nan, 1]"), "states.x.range", "nan"),
    ("range nan above", change('["0", "1"]', '[0, "nan"]'), "states.x.range", "nan"),
    ("sweep reversed", change("[2.8, 4]", "[4, 2.8]"), "parameters.r.range", "lower"),
    ("sweep infinite", change("[2.8, 4]", "[2.8, inf]"), "parameters.r.range", "inf"),
    ("missing parameters", GOOD.replace("parameters", "settings"), "", "parameters"),
    ("missing value", change('value = "3.20"\n', ""), "parameters.r.value", "missing"),
    ("unknown parameter key", change("tolerance", "tolerence"), "parameters.r.tolerence", "tolerance"),
    ("negative tolerance", change('= "0.01"', '= "-0.01"'), "parameters.r.tolerance", "negative"),
    ("tolerance nan", change('tolerance = "0.01"', "tolerance = nan"), "parameters.r.tolerance", "nan"),
    ("missing next", change("[next]", "[nxt]"), "", "next"),
    ("missing formula", change('y = "x/b"\n', ""), "next.y", "missing"),
    ("formula too many", change('y = "x/b"', 'y = "x/b"\nz = "x"'), "next.z", ""),
    ("formula as number", change('"x/b"', "3"), "next.y", "quotes"),
    ("same name twice", change("[parameters.b]", "[parameters.x]"), "states or parameters", "both"),
    ("unknown diagram key", change("observe ", "obsrve "), "diagram.obsrve", "observe"),
    ("unknown diagram parameter", change('parameter = "r"', 'parameter = "q"'), "diagram.parameter", "r, b"),
    ("state as diagram parameter", change('parameter = "r"', 'parameter = "x"'), "diagram.parameter", "r, b"),
    ("diagram no section", change("[diagram]", "[diagran]"), "diagran", '"diagram"'),
    ("rate in a map", GOOD + "\n[rate]\nx = '1'\n", "rate", ""),
]  # fmt: skip


@pytest.mark.parametrize(
    ("text", "key", "words"), [row[1:] for row in SPOILED], ids=[row[0] for row in SPOILED]
)
def test_each_mistake_is_named(text: str, key: str, words: str) -> None:
    with pytest.raises(SystemFileError) as caught:
        read_system_text(text, file="own.toml")
    error = caught.value
    assert error.file == "own.toml"
    assert key in error.key
    assert words in str(error)
    assert str(error).startswith("own.toml, " if key else "own.toml")
    assert len(str(error)) < 500


@pytest.mark.parametrize("name", sorted(RESERVED))
def test_reserved_names_are_refused(name: str) -> None:
    text = GOOD.replace("[parameters.b]", f"[parameters.{name}]")
    with pytest.raises(SystemFileError, match=r"meaning|cannot be a name") as caught:
        read_system_text(text)
    assert name in str(caught.value)


@pytest.mark.parametrize(
    "name",
    [
        "if",
        "else",
        "lambda",
        "None",
        "True",
        '"a b"',
        "1a",
        "_a",
        '"é"',
        '""',
        "a-b",
        '"x.y"',
        "a" * 41,
        "for",
    ],
)
def test_what_is_no_name_is_refused(name: str) -> None:
    with pytest.raises(SystemFileError) as caught:
        read_system_text(GOOD.replace("[parameters.b]", f"[parameters.{name}]"))
    assert "name" in str(caught.value)


@pytest.mark.parametrize(
    ("old", "new", "key", "column"),
    [
        ('"x/b"', '"x^b"', "next.y", 2),
        ('"x/b"', '"x/q"', "next.y", 3),
        ('"x/b"', '""', "next.y", 1),
        ('"r*x*(1 - x) + y"', '"r*x*(1 - x + y"', "next.x", 5),
        ('"x - y"', '"x - z"', "diagram.observe", 5),
        ('"x - y"', '"t"', "diagram.observe", 1),
        ('"x/b"', "\"__import__('os')\"", "next.y", 12),
    ],
)
def test_formula_mistakes_say_file_key_and_column(old: str, new: str, key: str, column: int) -> None:
    with pytest.raises(FormulaError) as caught:
        read_system_text(change(old, new), file="own.toml")
    assert caught.value.column == column
    assert str(caught.value).startswith(f"own.toml, {key}, column {column}: ")
    with pytest.raises(FormulaError) as caught:
        read_system_text(change(old, new))
    assert caught.value.key == key


@pytest.mark.parametrize(
    ("text", "line"),
    [
        ('title = "a\nkind = "map"\n', 1),
        ('title = "a"\nkind = map\n', 2),
        ('title = "a"\n[states.x\n', 2),
        ('title = "a"\ntitle = "b"\n', 2),
        ("title\n", 1),
        (GOOD + "\n[states.x]\n", GOOD.count("\n") + 2),
        ('title = """a\n\n', 3),
        ("= 3", 1),
        ("\0", 1),
        ("%PDF-1.7\n", 1),
        ('{"title": "json"}', 1),
    ],
)
def test_toml_mistakes_say_the_line(text: str, line: int) -> None:
    with pytest.raises(SystemFileError) as caught:
        read_system_text(text, file="own.toml")
    assert caught.value.line == line
    assert str(caught.value).startswith(f"own.toml, line {line}")


@pytest.mark.parametrize("data", [b"", b"  \n\n", b"\xef\xbb\xbf"])
def test_empty_files_are_refused(data: bytes) -> None:
    with pytest.raises(SystemFileError, match="is empty"):
        read_system_bytes(data, file="own.toml")


@pytest.mark.parametrize(
    "data",
    [
        b"\xff\xfe\x00",
        GOOD.encode("utf-16"),
        "title = 'é'".encode("latin-1"),
        bytes(range(256)),
        b"\x89PNG\r\n\x1a\n\0",
    ],
)
def test_what_is_not_utf8_is_refused(data: bytes) -> None:
    with pytest.raises(SystemFileError, match="UTF-8"):
        read_system_bytes(data, file="own.toml")


def test_a_huge_file_is_not_read_whole(tmp_path: Path) -> None:
    path = tmp_path / "huge.toml"
    path.write_bytes(b"#" * (MAX_FILE_BYTES + 1))
    with pytest.raises(SystemFileError, match="larger than"):
        read_system_file(path)


@pytest.mark.parametrize(
    "text",
    [
        "x = " + "[" * 5000,
        "x = " + "{a=" * 5000,
        "[" + "a." * 5000 + "b]",
        "x = " + "9" * 10**5,
        "a=1\n" * 5000,
    ],
)
def test_deep_and_long_files_end_in_an_error(text: str) -> None:
    with pytest.raises(SystemFileError):
        read_system_text(text)


def test_windows_line_ends_and_a_byte_order_mark_are_read(tmp_path: Path) -> None:
    path = tmp_path / "own.toml"
    path.write_bytes(b"\xef\xbb\xbf" + GOOD.replace("\n", "\r\n").encode())
    assert read_system_file(path) == read_system_text(GOOD)


@pytest.mark.parametrize("count", [0, MAX_MAP_STATES, MAX_MAP_STATES + 1])
def test_a_map_has_one_to_six_states(count: int) -> None:
    names = [f"s{place}" for place in range(count)]
    states = "".join(f"[states.{name}]\nstart = 0\n" for name in names) or "[states]\n"
    following = "".join(f"{name} = 'r'\n" for name in names)
    text = f"title = 'a'\nkind = 'map'\n{states}[parameters.r]\nvalue = 1\n[next]\n{following}"
    if 1 <= count <= MAX_MAP_STATES:
        assert len(read_system_text(text).states) == count
    else:
        with pytest.raises(SystemFileError, match="1 to 6"):
            read_system_text(text)


@settings(max_examples=60, deadline=None)
@given(st.binary(max_size=300))
def test_any_bytes_are_read_or_refused(data: bytes) -> None:
    with pytest.raises(TinemarkError):
        read_system_bytes(data, file="own.toml")


@settings(max_examples=150, deadline=None)
@given(
    st.integers(0, len(GOOD)),
    st.integers(0, 12),
    st.sampled_from(["", '"', "=", "[", "]", "\n", "x", "0", "\0", "nan"]),
)
def test_a_spoiled_file_is_read_or_refused(place: int, dropped: int, junk: str) -> None:
    text = GOOD[:place] + junk + GOOD[place + dropped :]
    try:
        system = read_system_text(text, file="own.toml")
    except TinemarkError as error:
        spoiled = str(error)
    else:
        spoiled = ""
        assert read_system_text(write_system_text(system)) == system
    assert not spoiled or spoiled.startswith("own.toml")


texts = st.text(st.characters(codec="utf-8", exclude_characters="\r"), max_size=30)
decimals = st.decimals(-1000, 1000, places=6).map(lambda value: Exact(str(value), Fraction(value)))


@settings(max_examples=100, deadline=None)
@given(texts, texts, texts, st.lists(decimals, min_size=3, max_size=3, unique=True), st.booleans())
def test_any_system_survives_being_written(
    title: str, notes: str, unit: str, numbers: list[Exact], ranged: bool
) -> None:
    low, high = sorted(numbers[:2], key=lambda number: number.fraction)
    ends = (low, high) if ranged else None
    system = System(
        title=title,
        kind="map",
        states=(State("x", numbers[2], ends, unit),),
        parameters=(Parameter("r", numbers[0], ends, unit, None if ranged else exact("0.5")),),
        formulas=("r*x",),
        diagram_parameter="r",
        observe="x",
        notes=notes,
    )
    text = write_system_text(system)
    tomllib.loads(text)
    assert read_system_text(text) == system


def test_editing_keeps_comments_and_layout() -> None:
    edited = edit_system_text(GOOD, {"parameters.r.value": "3.5", "next.y": "x/(b + 1)"})
    expected = GOOD.replace('"3.20"', '"3.5"').replace('"x/b"', '"x/(b + 1)"')
    assert edited == expected
    edited = edit_system_text(GOOD, {"parameters.r.range": ["1", "2"], "parameters.r.tolerance": None})
    system = read_system_text(edited)
    assert system.parameter("r").range == (exact("1"), exact("2"))
    assert system.parameter("r").tolerance is None
    assert "# A comment that must survive." in edited
    assert "# trailing" in edited
    added = read_system_text(edit_system_text(GOOD, {"parameters.b.range": ["1", "9"], "notes": "new"}))
    assert added.parameter("b").range == (exact("1"), exact("9"))
    assert added.notes == "new"


def test_editing_makes_missing_sections() -> None:
    text = GOOD[: GOOD.index("[diagram]")]
    edited = edit_system_text(text, {"diagram.parameter": "b", "diagram.observe": "y"})
    system = read_system_text(edited)
    assert (system.diagram_parameter, system.observe) == ("b", "y")
    assert edited.startswith(text.rstrip())


def test_inline_tables_and_dotted_keys_are_read_and_edited() -> None:
    text = 'title="a"\nkind="map"\nstates.x.start="0.4"\nparameters={r={value="3.2"}}\nnext.x="r*x"\n'
    assert read_system_text(text).names == ("x", "r")
    edited = edit_system_text(text, {"parameters.r.value": "3.3", "states.x.start": "0.1"})
    assert edited == text.replace("3.2", "3.3").replace("0.4", "0.1")


@pytest.mark.parametrize(
    ("text", "key"), [("title = ", "title"), ("= 3", "title"), ("states = 3\n", "states.x.start")]
)
def test_what_cannot_be_edited_is_an_error_of_ours(text: str, key: str) -> None:
    with pytest.raises(SystemFileError):
        edit_system_text(text, {key: "1"})


def test_half_a_character_is_refused_before_it_can_spoil_a_save() -> None:
    with pytest.raises(SystemFileError, match="broken character"):
        read_system_text(change("free text", "free \ud83d text"))
    assert read_system_text(change("free text", "free \U0001f41f text")).notes == "free \U0001f41f text"


def test_every_built_in_can_be_edited() -> None:
    text = builtin_text("restitution")
    edited = edit_system_text(text, {"parameters.T.value": "333"})
    assert edited == text.replace('value = "345"', 'value = "333"')


def test_values_are_changed_without_changing_the_mathematics() -> None:
    system = read_system_text(GOOD)
    other = system.with_value("r", "3.4")
    assert other.parameter("r").value == exact("3.4")
    assert other.parameter("b") == system.parameter("b")
    assert other.key == system.key
    assert system.with_diagram("b", "x*y").key == system.key
    assert read_system_text(change('"x/b"', '"x/b + 0"')).key != system.key
    with pytest.raises(SystemFileError, match="known parameters: r, b"):
        system.with_value("q", "1")
    with pytest.raises(SystemFileError):
        system.with_diagram("x", "x")
    with pytest.raises(FormulaError):
        system.with_diagram("r", "q")


def test_a_system_crosses_processes() -> None:
    system = read_system_text(GOOD)
    assert system.expressions
    copy = pickle.loads(pickle.dumps(system))
    assert copy == system
    assert hash(copy) == hash(system)
    assert copy.expressions == system.expressions
    assert b"expressions" not in pickle.dumps(system)
