"""`onsets`, and --kinds of all three commands that find onsets."""

from __future__ import annotations

import json
from fractions import Fraction

import pytest

from tinemark.cli import main

# Windows of the logistic map up to period 4: check_values.md, section 4.4 (R 28; 1 + 2 sqrt(2) exact).
EXPECTED = [
    ("flip", 1, "3"),
    ("flip", 2, "3.44948974278317809819728407470589139196594748065667"),
    ("flip", 4, "3.54409035955192285361596598660480454058309984544457"),
    ("fold", 3, "3.8284271247461900976033774484"),
    ("flip", 3, "3.8414990075435078463107024438"),
    ("fold", 4, "3.9601018826899520122292674415"),
    ("flip", 4, "3.9607686524066452560463714273"),
]


def encloses(entry: dict, true: str) -> bool:
    slack = Fraction(1, 10**28)
    return Fraction(entry["lower"]) - slack <= Fraction(true) <= Fraction(entry["upper"]) + slack


def test_every_onset_of_a_range_as_json(tinemark) -> None:
    ended = tinemark("onsets", "logistic", "--range", "2.8", "4", "--max-period", "4", "--json", "-")
    assert ended.code == 0
    read = json.loads(ended.out)
    assert (read["format"], read["version"]) == ("tinemark-onsets", 1)
    assert (read["system"], read["parameter"]) == ("logistic", "r")
    crises = [entry for entry in read["onsets"] if entry["kind"] == "crisis"]
    splits = [entry for entry in read["onsets"] if entry["kind"] != "crisis"]
    assert len(splits) == len(EXPECTED)
    for entry, (kind, period, true) in zip(splits, EXPECTED, strict=True):
        assert entry["kind"] == kind
        assert entry["period_before" if kind == "flip" else "period_after"] == period
        assert (entry["level"], entry["status"]) == (None, "proved")
        assert entry["criticality"] == ("supercritical" if kind == "flip" else "")
        assert encloses(entry, true)
        # The logistic map has no other parameter that the onset could move with.
        assert list(entry["sensitivities"]) == []
    # The end of the whole cascade, of the windows of period 3 and 4, and before each its bands merge: from
    # two to one, four to two and eight to four in the whole one.
    assert {entry["status"] for entry in crises} == {"estimated"}
    assert sorted(entry["period_before"] for entry in crises) == [1, 1, 2, 3, 3, 4, 4, 4]
    assert read["delta"]["class"] == "undecided"
    # Finds and the sentence on completeness went elsewhere.
    assert ended.err.count("(proved)") == len(EXPECTED)
    assert "all 4 superstable cycles" in ended.err


def test_the_table_lists_them_in_order_and_a_file_holds_the_same(tinemark, tmp_path) -> None:
    words = ("--range", "4", "3.8", "--max-period", "3", "--digits", "30", "--json", "out.json")
    ended = tinemark("onsets", "logistic", *words)
    assert ended.code == 0
    lines = ended.out.splitlines()
    assert lines[0].split() == ["level", "kind", "period", "value", "status"]
    assert lines[1].split()[:4] == ["-", "fold", "new", "3"]
    assert lines[1].split()[4].startswith("3.82842712474619009760337744841")
    assert lines[2].split()[:6] == ["-", "supercritical", "flip", "3", "->", "6"]
    assert lines[5].split()[:2] == ["-", "crisis"]
    read = json.loads((tmp_path / "out.json").read_text(encoding="utf-8"))
    assert [entry["kind"] for entry in read["onsets"]] == ["fold", "flip", "crisis", "crisis", "crisis"]


def test_the_file_can_be_read_again(tinemark, tmp_path) -> None:
    words = ("--range", "2.9", "3.1", "--max-period", "1", "--json", "out.json")
    assert tinemark("onsets", "logistic", *words).code == 0
    assert tinemark("inspect", "out.json").code == 0


def test_only_the_kinds_asked_for(tinemark) -> None:
    words = ("--range", "2.8", "4", "--max-period", "3", "--json", "-")
    ended = tinemark("onsets", "logistic", *words, "--kinds", "Fold, neimark-sacker")
    assert [entry["kind"] for entry in json.loads(ended.out)["onsets"]] == ["fold"]


def test_sensitivities_come_with_them(tinemark) -> None:
    words = ("--range", "0.3", "0.4", "--max-period", "1", "--parameter", "a", "--json", "-")
    (entry,) = json.loads(tinemark("onsets", "henon", *words).out)["onsets"]
    # Hénon's first flip 3 (1 - b)^2 / 4 moves with b at -3 (1 - b) / 2 = -1.05 (exact).
    moves = entry["sensitivities"]
    assert "b" in json.dumps(moves)
    assert "-1.05" in json.dumps(moves)


def test_nothing_there_is_exit_1(tinemark) -> None:
    ended = tinemark("onsets", "logistic", "--range", "3.1", "3.2", "--max-period", "2", "--json", "out.json")
    assert (ended.code, ended.out) == (1, "")
    assert "no onset of periods up to 2 between r = 3.1 and 3.2" in ended.err


def test_refine_takes_the_nearest_of_a_kind(tinemark) -> None:
    near = ("--near", "3.8415", "--window", "0.05", "--json", "-")
    assert json.loads(tinemark("refine", "logistic", *near).out)["onsets"][0]["kind"] == "flip"
    (entry,) = json.loads(tinemark("refine", "logistic", *near, "--kinds", "fold").out)["onsets"]
    assert entry["kind"] == "fold"
    assert encloses(entry, EXPECTED[3][2])


def test_a_ladder_is_listed_with_the_onset_its_cycle_appears_in(tinemark) -> None:
    words = ("--from", "3.83", "--to", "3.86", "--base-period", "3", "--levels", "2", "--json", "-")
    read = json.loads(tinemark("ladder", "logistic", *words, "--kinds", "flip,fold").out)
    assert [(entry["level"], entry["kind"]) for entry in read["onsets"]] == [
        (None, "fold"),
        (1, "flip"),
        (2, "flip"),
    ]
    assert encloses(read["onsets"][0], EXPECTED[3][2])
    plain = json.loads(tinemark("ladder", "logistic", *words).out)
    assert plain["onsets"] == read["onsets"][1:]
    assert json.loads(tinemark("ladder", "logistic", *words, "--kinds", "flip").out) == plain


def test_a_ladder_of_several_states_opens_in_a_fold(tinemark) -> None:
    words = ("--from", "0", "--to", "1", "--levels", "1", "--kinds", "flip,fold", "--json", "-")
    fold, flip = json.loads(tinemark("ladder", "henon", *words).out)["onsets"]
    # Hénon: fold at -(1 - b)^2 / 4 = -0.1225, flip at 0.3675 (exact).
    assert (fold["kind"], flip["kind"]) == ("fold", "flip")
    assert encloses(fold, "-0.1225")


def test_a_ladder_whose_cycle_appears_otherwise_says_so(tinemark) -> None:
    words = ("--from", "2.8", "--to", "3.2", "--levels", "1", "--kinds", "flip,fold", "--json", "-")
    ended = tinemark("ladder", "logistic", *words)
    assert [entry["kind"] for entry in json.loads(ended.out)["onsets"]] == ["flip"]
    assert "appears in no onset of these kinds" in ended.err


KINDS = ("flip", "fold", "Neimark-Sacker", "transcritical", "pitchfork", "border collision", "crisis")
SURVEY = ("onsets", "logistic", "--range", "2.8", "4", "--max-period", "3")
BAD = {
    "a word that is no kind": ((*SURVEY, "--kinds", "flip,cusp"), ("--kinds", '"cusp"', *KINDS)),
    "no word": ((*SURVEY, "--kinds", "flip,,fold"), ("--kinds", "a kind is missing")),
    "refine too": (
        ("refine", "logistic", "--near", "3", "--window", "1", "--kinds", "x"),
        ("--kinds", '"x"', *KINDS),
    ),
    "ladder too": (("ladder", "logistic", "--kinds", "unknown"), ("--kinds", '"unknown"', *KINDS)),
    "a ladder without flips": (("ladder", "logistic", "--kinds", "fold"), ("--kinds", "made of flips")),
    "the same ends": (
        ("onsets", "logistic", "--range", "3", "3.0", "--max-period", "3"),
        ("--range", "both ends are the same"),
    ),
    "no number": (("onsets", "logistic", "--range", "3", "four", "--max-period", "3"), ("--range", '"four"')),
    "no period": (("onsets", "logistic", "--range", "3", "4"), ("--max-period",)),
    "period zero": (
        ("onsets", "logistic", "--range", "3", "4", "--max-period", "0"),
        ("--max-period", '"0"'),
    ),
    "too long a period": (
        ("onsets", "logistic", "--range", "3", "4", "--max-period", "65"),
        ("--max-period", "from 1 to 64"),
    ),
    "too many digits": ((*SURVEY, "--digits", "1000"), ("--digits",)),
    "no such parameter": ((*SURVEY, "--parameter", "q"), ("q",)),
    "no such system": (("onsets", "logistik", "--range", "3", "4", "--max-period", "3"), ("logistik",)),
    "a file that cannot be written": ((*SURVEY, "--json", "nowhere/out.json"), ("nowhere",)),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_input_is_exit_2_and_one_line(tinemark, tmp_path, case: str) -> None:
    words, shown = BAD[case]
    ended = tinemark(*words)
    assert (ended.code, ended.out) == (2, "")
    (line,) = ended.err.strip().splitlines()
    assert line.startswith("tinemark: ")
    for word in shown:
        assert word in line
    assert list(tmp_path.iterdir()) == []


def test_help_of_the_command(capsys) -> None:
    assert main(["onsets", "--help"]) == 0
    shown = capsys.readouterr().out
    for option in ("--range", "--max-period", "--parameter", "--kinds", "--digits", "--json"):
        assert option in shown
