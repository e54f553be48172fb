"""Driven and free-running systems as files: read, written, and every mistake named."""

from __future__ import annotations

import pytest

from tinemark.systems.errors import TinemarkError
from tinemark.systems.expression import Name, walk
from tinemark.systems.system_file import read_system_text
from tinemark.systems.system_text import write_system_text

DRIVEN = """\
title = "Shaken rod"
kind  = "driven"

[states.x]
start = "0.1"
[states.v]
start = "0"

[parameters.g]
value = "1.2"
range = ["1", "1.5"]
[parameters.w]
value = "2/3"

[rate]
x = "v"
v = "-0.5*v - sin(x) + g*cos(w*t)"

[sample]
every = "2*pi/w"
""".replace('"2/3"', '"0.6666666667"')

FLOW = """\
title = "Turning flow"
kind  = "flow"

[states.x]
start = "1"
[states.y]
start = "0.1"

[parameters.a]
value = "0.2"

[rate]
x = "-y"
y = "x + a*y"

[sample]
crosses   = "y - a"
direction = "falling"
"""


@pytest.mark.parametrize("text", [DRIVEN, FLOW])
def test_written_and_read_again_it_is_equal(text: str) -> None:
    system = read_system_text(text)
    assert read_system_text(write_system_text(system)) == system


def test_a_driven_system_knows_time_and_its_strobe() -> None:
    system = read_system_text(DRIVEN)
    assert not system.is_map
    assert any(node == Name("t") for node in walk(system.expressions[1]))
    assert any(node == Name("w") for node in walk(system.every_expression))


def test_a_flow_knows_its_section() -> None:
    system = read_system_text(FLOW)
    assert system.sample is not None and system.sample.direction == "falling"
    assert {node.name for node in walk(system.crosses_expression) if isinstance(node, Name)} == {"y", "a"}


def test_the_sample_counts_as_mathematics() -> None:
    other = FLOW.replace('"falling"', '"rising"')
    assert read_system_text(FLOW).key != read_system_text(other).key


def test_eight_states_are_read_and_nine_are_not() -> None:
    def text(count: int) -> str:
        states = "".join(f'[states.x{i}]\nstart = "0"\n' for i in range(count))
        rates = "".join(f'x{i} = "-k*x{i}"\n' for i in range(count))
        return (
            f'title = "n"\nkind = "flow"\n{states}[parameters.k]\nvalue = "1"\n[rate]\n{rates}'
            '[sample]\ncrosses = "x0"\n'
        )

    assert len(read_system_text(text(8)).states) == 8
    with pytest.raises(TinemarkError, match="1 to 8"):
        read_system_text(text(9))


@pytest.mark.parametrize(
    ("text", "old", "new", "words"),
    [
        (DRIVEN, "[sample]", "[samples]", ["samples", "sample"]),
        (DRIVEN, 'every = "2*pi/w"', "", ["sample.every", "missing"]),
        (DRIVEN, 'every = "2*pi/w"', 'every = "2*pi/t"', ["sample.every", "time t"]),
        (DRIVEN, 'every = "2*pi/w"', 'every = "2*pi/x"', ["sample.every", '"x"']),
        (DRIVEN, 'every = "2*pi/w"', 'crosses = "x"', ["sample.crosses", "strobed"]),
        (DRIVEN, "[rate]", "[next]", ["next", "[rate]"]),
        (DRIVEN, 'kind  = "driven"', 'kind = "map"', ["rate", "map"]),
        (FLOW, 'crosses   = "y - a"', 'every = "1"', ["sample.every", "section"]),
        (FLOW, '"y - a"', '"y - t"', ["sample.crosses", "free-running"]),
        (FLOW, '"x + a*y"', '"x + a*y*t"', ["rate.y", "free-running", "driven"]),
        (FLOW, '"falling"', '"down"', ["sample.direction", "rising"]),
        (FLOW, 'y = "x + a*y"', "", ["rate.y", "missing"]),
        (FLOW, 'kind  = "flow"', 'kind = "flows"', ["kind", "driven"]),
    ],
)
def test_mistakes_are_named(text: str, old: str, new: str, words: list[str]) -> None:
    assert old in text
    with pytest.raises(TinemarkError) as caught:
        read_system_text(text.replace(old, new))
    for word in words:
        assert word in str(caught.value)
