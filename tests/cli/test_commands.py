"""What the commands answer, word for word where the design says so."""

from __future__ import annotations

import json
import math
import os
import signal
import subprocess
import sys
from decimal import Decimal
from fractions import Fraction

import pytest
from own_system import DRIVEN, OWN

# Onsets of the logistic map: 3, 1 + sqrt(6), and the third as in check_values.md, section 4.1 (R 55).
LOGISTIC = ["3", "3.44948974278317809819728407470589139196594748065667", "3.54409035955192285361596598660480"]

KEYS = [
    "level",
    "kind",
    "period_before",
    "period_after",
    "criticality",
    "value",
    "lower",
    "upper",
    "status",
    "reason",
    "states",
    "gap",
    "ratio",
    "ratio_uncertainty",
    "sensitivities",
    "consequence",
    "margin",
    "certificate",
]


def encloses(entry: dict, true: str) -> bool:
    # The published decimals are cut after 30 or more digits: one more unit there is allowed for.
    slack = Fraction(1, 10**30)
    return Fraction(entry["lower"]) - slack <= Fraction(true) <= Fraction(entry["upper"]) + slack


def test_ladder_as_json(tinemark) -> None:
    ended = tinemark("ladder", "logistic", "--levels", "3", "--digits", "25", "--json", "-")
    assert ended.code == 0
    read = json.loads(ended.out)
    assert list(read) == [
        "format",
        "version",
        "system",
        "parameter",
        "onsets",
        "limit",
        "delta",
        "alpha",
        "expected",
    ]
    assert (read["format"], read["version"]) == ("tinemark-onsets", 1)
    assert (read["system"], read["parameter"]) == ("logistic", "r")
    for number, (entry, true) in enumerate(zip(read["onsets"], LOGISTIC, strict=True), 1):
        assert list(entry) == KEYS
        assert entry["level"] == number
        assert (entry["period_before"], entry["period_after"]) == (2 ** (number - 1), 2**number)
        assert (entry["kind"], entry["criticality"]) == ("flip", "supercritical")
        assert (entry["status"], entry["reason"]) == ("proved", "")
        assert encloses(entry, true)
        assert abs(Fraction(entry["value"]) - Fraction(true)) < Fraction(1, 10**24)
        assert list(entry["states"]) == ["x"]
        assert isinstance(entry["states"]["x"], str)
    first, second, third = read["onsets"]
    ratio = (Fraction(LOGISTIC[1]) - 3) / (Fraction(LOGISTIC[2]) - Fraction(LOGISTIC[1]))
    assert abs(Fraction(first["ratio"]) - ratio) <= Fraction(first["ratio_uncertainty"]) + Fraction(1, 10**28)
    assert (second["ratio"], second["ratio_uncertainty"]) == (None, None)
    assert isinstance(second["gap"], str)
    assert (third["gap"], third["ratio"]) == (None, None)
    assert list(read["limit"]) == ["value", "uncertainty"]
    assert list(read["delta"]) == ["value", "uncertainty", "class", "consistent"]
    assert read["delta"]["class"] == "undecided"
    assert read["alpha"] == {"value": None, "uncertainty": None}
    # Progress went elsewhere.
    assert "level 3" in ended.err


def test_ladder_as_a_table_and_a_file(tinemark, tmp_path) -> None:
    ended = tinemark(
        "ladder", "logistic", "--levels", "6", "--from", "2.9", "--to", "3.6", "--json", "out.json"
    )
    assert ended.code == 0
    lines = ended.out.splitlines()
    assert lines[0].split() == ["level", "kind", "period", "value", "status", "gap", "ratio"]
    assert lines[2].split()[:6] == ["2", "supercritical", "flip", "2", "->", "4"]
    assert lines[2].split()[6].startswith("3.4494897427831780981")
    # Decimal signs stand below each other.
    assert len({line.index(".") for line in lines[1:7]}) == 1
    assert "quadratic maximum" in ended.out
    read = json.loads((tmp_path / "out.json").read_text(encoding="utf-8"))
    assert len(read["onsets"]) == 6
    assert read["delta"]["class"] == "quadratic maximum"
    assert read["delta"]["consistent"] is True
    # Limit, delta and alpha of the quadratic class: check_values.md, sections 1 and 4 (R).
    known = (
        ("limit", "3.569945671870944901842"),
        ("delta", "4.669201609102990671853"),
        ("alpha", "2.502907875095892822284"),
    )
    for key, true in known:
        reach = abs(Decimal(read[key]["value"]) - Decimal(true))
        assert reach <= Decimal(read[key]["uncertainty"])
    # Levels 7 and 8 of the published ladder lie where they are expected.
    assert [item["level"] for item in read["expected"]] == [7, 8, 9]
    for item, true in zip(read["expected"], ("3.56989125937812", "3.56993401837397"), strict=False):
        assert abs(Decimal(item["value"]) - Decimal(true)) <= Decimal(item["uncertainty"])
    assert "level 9 expected" in ended.out
    assert [path.name for path in tmp_path.iterdir()] == ["out.json"]


def test_an_existing_file_is_replaced_whole(tinemark, tmp_path) -> None:
    target = tmp_path / "out.json"
    target.write_text("old")
    assert tinemark("refine", "logistic", "--near", "3.01", "--window", "0.2", "--json", "out.json").code == 0
    assert json.loads(target.read_text())["onsets"][0]["period_after"] == 2


def test_refine_is_what_a_click_does(tinemark) -> None:
    ended = tinemark("refine", "logistic", "--near", "3.45,0.85", "--window", "0.1", "--json", "-")
    assert ended.code == 0
    read = json.loads(ended.out)
    (entry,) = read["onsets"]
    assert entry["level"] is None
    assert (entry["gap"], entry["ratio"], entry["ratio_uncertainty"]) == (None, None, None)
    assert (entry["period_before"], entry["period_after"], entry["status"]) == (2, 4, "proved")
    assert encloses(entry, LOGISTIC[1])
    assert read["limit"] == {"value": None, "uncertainty": None}
    assert read["delta"] == {"value": None, "uncertainty": None, "class": "undecided", "consistent": None}


def test_refine_with_a_negative_place(tinemark, own) -> None:
    # The logistic map with its parameter turned round: onset at r = -3.
    text = OWN.replace("r*x*(1 - x)", "-r*x*(1 - x)").replace('["2.8", "4"]', '["-4", "-2.8"]')
    path = own(text.replace('"3.2"', '"-3.2"'), name="down.toml")
    ended = tinemark("refine", path, "--near", "-3.02,0.6", "--window", "0.2", "--json", "-")
    assert ended.code == 0, ended.err
    assert encloses(json.loads(ended.out)["onsets"][0], "-3")


def test_no_answer_is_exit_1(tinemark, tmp_path) -> None:
    # Between the first flip and the second the logistic map has no onset at all.
    ended = tinemark("refine", "logistic", "--near", "3.2", "--window", "0.05", "--json", "out.json")
    assert ended.code == 1
    assert ended.out == ""
    assert ended.err.startswith("tinemark: ")
    assert list(tmp_path.iterdir()) == []


def test_a_ladder_where_there_is_none_is_exit_1(tinemark, tmp_path) -> None:
    ended = tinemark("ladder", "logistic", "--from", "1.2", "--to", "2.5", "--json", "out.json")
    assert ended.code == 1
    assert ended.out == ""
    assert list(tmp_path.iterdir()) == []


def test_a_cascade_that_runs_downwards_is_found_unasked(tinemark, own) -> None:
    # The logistic map run backwards: its onsets at 6.8 - 3 and 6.8 - (1 + sqrt(6)).
    path = own(formula="(6.8 - r)*x*(1 - x)")
    ended = tinemark("ladder", path, "--levels", "2", "--json", "-")
    assert ended.code == 0, ended.err
    first, second = json.loads(ended.out)["onsets"]
    assert Fraction(first["lower"]) <= Fraction("3.8") <= Fraction(first["upper"])
    assert abs(Fraction(second["value"]) - (Fraction("6.8") - Fraction(LOGISTIC[1]))) < Fraction(1, 10**18)
    assert first["gap"].startswith("-")
    assert tinemark("ladder", path, "--from", "2.8", "--levels", "2").code == 1


def test_inspect_knows_our_files(tinemark, own, tmp_path) -> None:
    ended = tinemark("inspect", own())
    assert ended.code == 0
    assert 'a system: "Own" (map, 1 state)' in ended.out
    assert "next x = r*x*(1 - x)" in ended.out
    assert ended.err == ""
    tinemark("refine", own(), "--near", "3.01", "--window", "0.2", "--json", "out.json")
    ended = tinemark("inspect", "out.json")
    assert ended.code == 0
    assert "an onsets file, format version 1" in ended.out
    assert "1 onset, 1 proved" in ended.out


def test_inspect_finds_what_is_wrong_in_an_onsets_file(tinemark, tmp_path) -> None:
    tinemark("refine", "logistic", "--near", "3.01", "--window", "0.2", "--json", "out.json")
    good = json.loads((tmp_path / "out.json").read_text())
    spoiled = {
        "onsets[0].value": lambda d: d["onsets"][0].update(value="5"),
        "onsets[0].lower": lambda d: d["onsets"][0].update(lower="low"),
        "onsets[0].kind": lambda d: d["onsets"][0].update(kind="PD"),
        "onsets[0].level": lambda d: d["onsets"][0].update(level="1"),
        "version 2": lambda d: d.update(version=2),
        "onsets[0]": lambda d: d["onsets"][0].pop("status"),
        "colour": lambda d: d.update(colour="red"),
    }
    for place, spoil in spoiled.items():
        copy = json.loads(json.dumps(good))
        spoil(copy)
        (tmp_path / "bad.json").write_text(json.dumps(copy))
        ended = tinemark("inspect", "bad.json")
        assert ended.code == 2
        assert place in ended.err
        assert "bad.json" in ended.err


def test_inspect_knows_a_session(tinemark, tmp_path) -> None:
    from tinemark.document.session import new_session
    from tinemark.document.session_file import save_session
    from tinemark.systems.library import builtin_system

    save_session(new_session(builtin_system("ricker")), tmp_path / "mine.tinemark")
    ended = tinemark("inspect", "mine.tinemark")
    assert ended.code == 0
    assert "a session" in ended.out
    assert "ledger: 0 rows" in ended.out


def test_picture(tinemark, tmp_path) -> None:
    ended = tinemark("picture", "logistic", "--range", "2.8", "4", "--size", "200x120", "-o", "out.png")
    assert ended.code == 0, ended.err
    assert "out.png: 200 x 120 pixels" in ended.out
    data = (tmp_path / "out.png").read_bytes()
    assert data.startswith(b"\x89PNG\r\n\x1a\n")
    assert [path.name for path in tmp_path.iterdir()] == ["out.png"]
    ended = tinemark("inspect", "out.png")
    assert ended.code == 0
    assert "a PNG picture of" in ended.out


def test_a_picture_of_equations_has_an_accuracy(tinemark, tmp_path) -> None:
    (tmp_path / "driven.toml").write_text(DRIVEN)
    words = ("picture", "driven.toml", "--range", "0.5", "2", "--size", "200x120", "-o", "out.png")
    ended = tinemark(*words, "--accuracy", "bench")
    assert ended.code == 0, ended.err
    assert " samples" in ended.out
    ended = tinemark(*words, "--accuracy", "perfect")
    assert ended.code == 2
    assert "picture, bench, reference" in ended.err
    ended = tinemark("picture", "logistic", *words[2:], "--accuracy", "bench")
    assert ended.code == 2
    assert "is a map" in ended.err


def test_a_picture_deeper_than_doubles_is_exit_1(tinemark, tmp_path) -> None:
    ended = tinemark("picture", "logistic", "--range", "3.5", "3.5000000000000000001", "-o", "out.png")
    assert ended.code == 1
    assert "double precision" in ended.err
    assert list(tmp_path.iterdir()) == []


def test_without_a_display_the_demo_runs_all_the_same(tinemark, tmp_path) -> None:
    ended = tinemark()
    assert ended.code == 0, ended.err
    assert "no display" in ended.err
    assert "nvented" in ended.out
    assert "period 1 in feed" in ended.out
    # The first onset of the Ricker map is r = 2; the demo's feed follows by hand:
    # (2 - ln(0.9))/0.02.
    assert "105.268025782891315" in ended.out
    assert "proved" in ended.out
    picture = tmp_path / "tinemark-demo.png"
    assert str(picture) in ended.out
    assert picture.read_bytes().startswith(b"\x89PNG")


def test_without_a_display_an_own_system_runs_too(tinemark, own, tmp_path) -> None:
    ended = tinemark(own())
    assert ended.code == 0, ended.err
    assert "3.44948974278317809" in ended.out
    assert (tmp_path / "tinemark-own.png").exists()


def test_help_and_version(tinemark) -> None:
    from tinemark import __version__

    assert tinemark("--version").out == f"tinemark {__version__}\n"
    ended = tinemark("--help")
    assert ended.code == 0
    for command in ("ladder", "refine", "onsets", "picture", "inspect"):
        assert command in ended.out
        assert tinemark(command, "--help").code == 0


def test_with_a_display_the_window_opens(tinemark, own, monkeypatch) -> None:
    import types

    opened = []
    monkeypatch.setenv("DISPLAY", ":77")
    door = types.ModuleType("tinemark.window.app")
    door.open_window = lambda path: opened.append(path) or 0
    monkeypatch.setitem(sys.modules, "tinemark.window.app", door)
    assert tinemark().code == 0
    path = own()
    assert tinemark(path).code == 0
    assert [str(item) for item in opened] == ["None", path]
    # A file that cannot be read is told before any window.
    assert tinemark(own(b"\0\0", name="bad")).code == 2
    assert len(opened) == 2


def test_a_missing_library_of_the_window_is_told(tinemark, monkeypatch) -> None:
    monkeypatch.setenv("DISPLAY", ":77")
    monkeypatch.setitem(sys.modules, "tinemark.window.app", None)
    ended = tinemark()
    assert ended.code == 2
    assert "window cannot be opened" in ended.err


def test_a_defect_is_a_sentence(tinemark, monkeypatch) -> None:
    from tinemark.commands import sessions

    def broken(path: object) -> None:
        raise ZeroDivisionError("oops")

    monkeypatch.setattr(sessions, "inspect", broken)
    ended = tinemark("inspect", "anything")
    assert ended.code == 70
    assert "ZeroDivisionError: oops" in ended.err
    monkeypatch.setenv("TINEMARK_TRACEBACK", "1")
    with pytest.raises(ZeroDivisionError):
        tinemark("inspect", "anything")


def test_a_reader_that_leaves_is_no_error(own) -> None:
    reading, writing = os.pipe()
    os.close(reading)
    command = [sys.executable, "-m", "tinemark", "inspect", own()]
    ended = subprocess.run(command, stdout=writing, stderr=subprocess.PIPE, text=True, check=False)
    os.close(writing)
    assert ended.stderr == ""
    assert ended.returncode == 141


def test_an_interrupt_leaves_cleanly(tmp_path) -> None:
    """Ctrl-C in the middle of a long ladder: one word, no traceback, nothing written."""
    words = ["ladder", "logistic", "--levels", "40", "--digits", "150", "--json", "out.json"]
    running = subprocess.Popen(
        [sys.executable, "-m", "tinemark", *words],
        cwd=tmp_path,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    assert "level 1" in running.stderr.readline()
    running.send_signal(signal.SIGINT)
    out, err = running.communicate(timeout=60)
    assert running.returncode == 130
    assert out == ""
    assert "Traceback" not in err
    assert err.strip().endswith("tinemark: stopped")
    assert list(tmp_path.iterdir()) == []


def test_tolerances_beside_the_onsets(tinemark) -> None:
    ended = tinemark("refine", "henon", "--near", "0.37", "--window", "0.1", "--json", "-")
    (entry,) = json.loads(ended.out)["onsets"]
    # a = 3(1 - b)^2/4, so da/db = -6(1 - b)/4; b is the only other parameter.
    assert entry["sensitivities"] == [{"parameter": "b", "derivative": "-1.05000000000", "share": "1.00000"}]
    # a stands at 1 with the tolerance 0.005, b has 0.002.
    assert Fraction(entry["margin"]["value"]) == Fraction("-0.6325")
    assert abs(float(entry["margin"]["standard_uncertainty"]) - math.hypot(0.005, 1.05 * 0.002)) < 1e-8
    ended = tinemark("ladder", "hatchery", "--levels", "2")
    assert "standard uncertainty 2.2 kg/day by the tolerances: response 93 %, harvest 7 %" in ended.out
    assert "The onset at 105.27 lies 5.27 kg/day (5.3 %) above the operating point" in ended.out
