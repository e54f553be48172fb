"""What is pasted elsewhere arrives whole: columns, digits, and no surprises in the notes."""

from __future__ import annotations

import csv
import dataclasses
import io
import re
from fractions import Fraction

import onset_samples as known
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from session_samples import full_session

from tinemark.document import ledger as led
from tinemark.document.export import (
    FORMS,
    TSV_HEADINGS,
    copy_text,
    latex_text,
    ledger_table,
    markdown_text,
    onsets_json,
    sections,
    tsv_text,
    uncertainty_digits,
)
from tinemark.document.ledger import Ledger
from tinemark.document.onsets_file import read_onsets_bytes
from tinemark.document.rounding import THIN_SPACE

HOSTILE = '=HYPERLINK("x")\t| 50% & $3_a^b# {~} \\end{tabular} <b>*`[x](y)\nnext'


def ledger_with(note: str) -> Ledger:
    ledger = led.remove(full_session().ledger, ["r3"])
    return led.note(ledger, "r2", note)


def read_tsv(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text), dialect="excel-tab", quoting=csv.QUOTE_NONE))


def test_tsv_pastes_as_columns_with_all_digits() -> None:
    ledger = ledger_with("")
    rows = read_tsv(tsv_text(ledger))
    assert len(rows) == len(ledger.rows)
    assert tuple(rows[0]) == TSV_HEADINGS
    by_level = {row["Level"]: row for row in rows if row["Ladder"] == "period 1 in r, rising"}
    # 1 + sqrt 6 (OEIS A086180): every digit shown is one of the true number's.
    assert "3.449489742783178098197284".startswith(by_level["2"]["Value"])
    assert len(by_level["2"]["Value"]) > 18
    assert by_level["2"]["Ratio"] == ""
    assert by_level["4"]["Ratio"].startswith("4.66873946927695")
    numbers = (
        "Value",
        "Uncertainty",
        "Lower",
        "Upper",
        "Gap",
        "Gap uncertainty",
        "Ratio",
        "Ratio uncertainty",
    )
    for row in rows:
        assert len(row) == len(TSV_HEADINGS)
        for column in numbers:
            if row[column]:
                float(row[column])
        assert Fraction(row["Lower"]) <= Fraction(row["Upper"])


@pytest.mark.parametrize("form", FORMS)
def test_no_form_carries_thin_spaces_or_typographic_signs(form: str) -> None:
    text = copy_text(ledger_with("plain"), form)
    assert not set(text) & {THIN_SPACE, "\u2212", "\u2026", "\u00b1"}


def test_tsv_says_at_which_values_of_the_other_parameters() -> None:
    place = dataclasses.replace(known.PLACE, fixed=(("b", "0.3"), ("c", "-1")))
    ledger, _ = led.add(Ledger(), known.flip(known.HENON[0], 1), place)
    assert read_tsv(tsv_text(ledger))[0]["Other parameters"] == "b = 0.3, c = -1"


def test_a_note_stays_one_cell_and_is_no_formula() -> None:
    (row,) = [row for row in read_tsv(tsv_text(ledger_with(HOSTILE))) if row["Note"]]
    assert row["Note"].startswith("'=HYPERLINK")
    assert "\n" not in row["Note"]
    for note, cell in {"-3.5": "-3.5", "-x": "'-x", "@a": "'@a", "+1": "'+1", "a=b": "a=b"}.items():
        assert [r["Note"] for r in read_tsv(tsv_text(ledger_with(note))) if r["Note"]] == [cell]


@settings(max_examples=30)
@given(st.text(max_size=40))
def test_any_note_keeps_the_tables_whole(note: str) -> None:
    ledger = ledger_with(note)
    assert {line.count("\t") for line in tsv_text(ledger).rstrip("\n").split("\n")} == {len(TSV_HEADINGS) - 1}
    for line in markdown_text(ledger).split("\n"):
        if line.startswith("|"):
            assert len(re.findall(r"(?<!\\)\|", line.replace("\\\\", ""))) == 9
    for line in latex_text(ledger).split("\n"):
        if line.endswith(r"\\") and "multicolumn" not in line:
            assert len(re.findall(r"(?<!\\)&", line)) == 7


def test_latex_is_escaped_and_balanced() -> None:
    text = latex_text(ledger_with(HOSTILE))
    assert text.count(r"\end{tabular}") == 1
    (line,) = [line for line in text.split("\n") if "HYPERLINK" in line]
    note = line.split(" & ")[-1]
    for bad in ("%", "$", "_", "#"):
        assert f"\\{bad}" in note
        assert not re.search(rf"(?<!\\)\{bad}", note)
    depth = 0
    for mark in re.sub(r"\\[{}]", "", text):
        depth += (mark == "{") - (mark == "}")
        assert depth >= 0
    assert depth == 0
    assert r"$3.449\,489\,742\,783\,178\,09$" in text
    assert r"2~$\to$~4" in text
    assert r"& missing &" in text


def test_markdown_has_a_table_for_each_ladder() -> None:
    text = markdown_text(ledger_with("a|b"))
    assert text.count("|---:|") == len(sections(ledger_with("")))
    assert "a\\|b" in text
    assert "| 3 | missing |" in text
    assert "| 2 | supercritical flip | 2 → 4 | 3.44948974278317809 |" in text
    assert markdown_text(Ledger()) == latex_text(Ledger()) == ""


def test_some_rows_alone_keep_what_their_ladder_says() -> None:
    ledger = ledger_with("")
    rows = read_tsv(tsv_text(ledger, {"r4"}))
    assert [row["Level"] for row in rows] == ["4"]
    assert rows[0]["Ratio"]
    assert "missing" not in markdown_text(ledger, {"r4"})


def test_the_terminal_s_table_stands_under_its_decimal_signs() -> None:
    text = ledger_table(ledger_with(""))
    block = text.split("\n\n")[0].split("\n")
    assert block[0] == "Period 1 in r, rising"
    signs = {line.index(".") for line in block[2:] if "." in line}
    assert len(signs) == 1
    assert ledger_table(Ledger()) == "The ledger is empty.\n"


def test_uncertainties_are_rounded_up() -> None:
    for value, text in {
        "0.00000012": "0.00000012",
        "0.1201": "0.13",
        "0.0999": "0.10",
        "123.4": "130",
        "0": "0",
    }.items():
        assert uncertainty_digits(Fraction(value)) == text


def test_the_onsets_file() -> None:
    import json

    session = full_session()
    plain = onsets_json(session, "L1")
    read = read_onsets_bytes(json.dumps(plain).encode())
    assert [entry.level for entry in read.onsets] == [1, 2, 3, 4, 5, 6]
    assert read.onsets[0].ratio is not None
    assert read.delta.value is not None
    everything = onsets_json(session)
    assert len(everything["onsets"]) == len(session.ledger.rows)
    assert {entry["gap"] for entry in everything["onsets"]} == {None}
    assert everything["system"] == "Logistic growth"
    fold = [entry for entry in onsets_json(session)["onsets"] if entry["kind"] == "fold"]
    assert fold[0]["value"] == known.WINDOWS[0][1]
