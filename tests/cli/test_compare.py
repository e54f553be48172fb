"""`compare`: an invented sweep against the model it was drawn from, and bad input named."""

from __future__ import annotations

import json

import numpy as np
import pytest

from tinemark.resources_path import resource

SWEEP = str(resource("demo", "hatchery_sweep.csv"))


def test_the_demo_sweep_agrees_with_its_model(tinemark) -> None:
    words = ("--bench", SWEEP, "--scale", "1", "--knob-uncertainty", "0.1", "--levels", "2", "--json", "-")
    ended = tinemark("compare", "hatchery", *words)
    assert ended.code == 0
    read = json.loads(ended.out)
    assert (read["format"], read["version"], read["knob"]) == ("tinemark-comparison", 1, "feed")
    # Drawn with a growth response of 0.01999 (scripts/make_bench_demo.py): the split is 2 - ln(0.9) over it.
    first = read["measured"][0]
    assert first["lower"] <= (2 - np.log(0.9)) / 0.01999 <= first["upper"]
    assert all(abs(onset["normalised_error"]) < 1 for onset in read["onsets"])
    assert read["verdict"].startswith("All 2 onsets agree")
    assert len(read["bench"]["sha256"]) == 64


@pytest.mark.parametrize(
    ("text", "more", "words"),
    [
        ("a,b\n1,2\n1,3\n", (), ["never changes", "sweep.csv"]),
        ("nothing\n", (), ["no rows of numbers", "sweep.csv"]),
        ("a,b\n1,2\n2,3\n", ("--knob", "c"), ['no column "c"']),
        ("a,b\n1,2\n2,3\n", ("--scale", "0"), ["--scale"]),
        ("a,b\n1,2\n2,3\n", ("--knob-uncertainty", "-1"), ["--knob-uncertainty", "negative"]),
    ],
)
def test_bad_input_ends_in_2_and_says_where(
    tinemark, tmp_path, text: str, more: tuple[str, ...], words: list[str]
) -> None:
    (tmp_path / "sweep.csv").write_text(text)
    ended = tinemark("compare", "logistic", "--bench", str(tmp_path / "sweep.csv"), *more)
    assert ended.code == 2
    assert ended.out == ""
    for word in words:
        assert word in ended.err
