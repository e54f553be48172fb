"""Uncertainty budgets by the law of propagation, and how they are written beside the ledger."""

from __future__ import annotations

import csv
import dataclasses
import io
import json
import math
from fractions import Fraction

import onset_samples as known
import pytest
import tolerance_samples as tank

from tinemark.document import ledger as led
from tinemark.document import tolerance as tol
from tinemark.document.export import copy_text, onsets_json
from tinemark.document.onsets_file import OnsetsFileError, onsets_file, read_onsets_bytes, write_onsets_text
from tinemark.document.rounding import THIN_SPACE
from tinemark.document.tolerance import budget_of, root, standard_uncertainty
from tinemark.document.tolerance_tables import share_text, slope_text, tolerance_rows, tolerances_of
from tinemark.onsets.results import Kind, Onset, Sensitivity, Status


def test_the_law_of_propagation() -> None:
    # JCGM 100:2008, equation 10: (5263.4 * 0.0004)^2 + (55.56 * 0.01)^2 = 2.1054^2 + 0.5556^2 = 2.1774^2.
    budget = budget_of(tank.onset(tank.FIRST, 1), tank.tank())
    by_hand = math.hypot(float(tank.FIRST) / 0.02 * 0.0004, 0.01 / (0.02 * 0.9))
    assert budget.combined is not None
    assert float(budget.combined) == pytest.approx(by_hand, rel=1e-10)
    assert [line.parameter for line in budget.lines] == ["response", "harvest", "capacity"]
    response, harvest, capacity = budget.lines
    assert response.amount is not None
    assert float(response.amount) == pytest.approx(2.105360515656, rel=1e-10)
    assert response.share is not None
    assert harvest.share is not None
    assert float(harvest.share) == pytest.approx((0.5555555555 / by_hand) ** 2, rel=1e-9)
    assert capacity.share == capacity.amount == 0
    assert budget.unit == "kg/day"
    assert budget.reason == ""


def test_shares_add_up_with_the_value_s_own() -> None:
    # Estimated at 95 % coverage ± 2: a standard uncertainty of 1 of its own.
    wide = dataclasses.replace(
        tank.onset(tank.FIRST, 1),
        status=Status.ESTIMATED,
        lower=f"{float(tank.FIRST) - 2:.12f}",
        upper=f"{float(tank.FIRST) + 2:.12f}",
    )
    budget = budget_of(wide, tank.tank())
    assert float(budget.own) == pytest.approx(1, abs=1e-9)
    shares = [line.share for line in budget.lines if line.share is not None]
    assert budget.own_share is not None
    assert sum(shares) + budget.own_share == 1
    assert budget.combined is not None
    assert float(budget.combined) == pytest.approx(math.sqrt(1 + 2.177426204534**2), rel=1e-9)


def test_the_swept_parameter_s_tolerance_is_about_the_setting() -> None:
    looser = tank.tank(('tolerance = "1.5"', 'tolerance = "15"'))
    assert budget_of(tank.onset(tank.FIRST, 1), looser) == budget_of(tank.onset(tank.FIRST, 1), tank.tank())


def test_what_an_interval_says_by_its_status() -> None:
    # A rectangle's half-width over root 3 where proved or read, half of a 95 % interval otherwise.
    for status, share in (
        (Status.PROVED, 1 / math.sqrt(3)),
        (Status.READ_BY_EYE, 1 / math.sqrt(3)),
        (Status.ESTIMATED, 0.5),
        (Status.MEASURED, 0.5),
    ):
        found = known.onset(Kind.FLIP, "3", 1, 2, "0.01", status)
        assert float(standard_uncertainty(found)) == pytest.approx(0.01 * share, rel=1e-4)


def test_reasons_where_there_is_nothing_to_combine() -> None:
    plain = tank.read_system_text(tank.without_tolerances())
    full = tank.onset(tank.FIRST, 1)
    bare = tank.onset(tank.FIRST, 1, slopes=False)
    eye = dataclasses.replace(bare, status=Status.READ_BY_EYE)
    crisis = dataclasses.replace(bare, kind=Kind.CRISIS, status=Status.ESTIMATED)
    cases = (
        (full, plain, tol.NO_TOLERANCES),
        (bare, tank.tank(), tol.NOT_KNOWN),
        (eye, tank.tank(), tol.NOT_REFINED),
        (crisis, tank.tank(), tol.NO_EQUATIONS),
    )
    for found, system, reason in cases:
        budget = budget_of(found, system)
        assert budget.combined is None
        assert budget.own_share is None
        assert budget.reason == reason
    assert budget_of(bare, tank.tank()).left_out == ("response", "harvest", "capacity")


def test_a_system_with_nothing_but_the_swept_parameter() -> None:
    from tinemark.systems.library import builtin_system

    budget = budget_of(known.flip(known.LOGISTIC[0], 1), builtin_system("logistic"))
    assert budget.lines == ()
    assert budget.reason == tol.NO_OTHERS


def test_a_tolerance_without_a_derivative_is_left_out_and_named() -> None:
    partly = dataclasses.replace(
        tank.onset(tank.FIRST, 1), sensitivities=(Sensitivity("harvest", "55.5555555556"),)
    )
    budget = budget_of(partly, tank.tank())
    assert budget.combined is not None
    assert float(budget.combined) == pytest.approx(0.555555555556)
    assert budget.left_out == ("response", "capacity")


def test_roots_to_forty_digits() -> None:
    assert root(Fraction(4)) == 2
    assert abs(root(Fraction(2)) ** 2 - 2) < Fraction(1, 10**38)
    assert root(Fraction(0)) == 0


# Beside the ledger


def read_tsv(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text), dialect="excel-tab", quoting=csv.QUOTE_NONE))


def test_columns_for_a_spreadsheet() -> None:
    session = tank.session()
    rows = read_tsv(copy_text(session.ledger, "tsv", tolerances=tolerances_of(session)))
    assert rows[0]["Standard uncertainty with tolerances"] == "2.2"
    slopes = rows[0]["Derivatives and shares"]
    assert slopes.startswith("response: -5263.4012891")
    assert "(93 %), harvest: 55.5555555556 (7 %), capacity: 0 (0 %)" in slopes
    assert float(rows[0]["Margin"]) == pytest.approx(5.268025782891, rel=1e-9)
    assert rows[0]["Margin standard uncertainty"] == "2.7"  # 2.644, rounded by GUM 7.2.6
    assert float(rows[1]["Margin"]) == pytest.approx(31.591412075582, rel=1e-9)


def test_tables_for_reading() -> None:
    session = tank.session()
    ledger, tolerances = session.ledger, tolerances_of(session)
    markdown = copy_text(ledger, "markdown", tolerances=tolerances)
    assert "**Tolerances**" in markdown
    assert "| harvest | 55.5556 | 0.01 | 0.56 | 7 % |" in markdown
    assert markdown.rstrip().endswith(
        "with k = 2 the margin is 5.3 +/- 5.3 kg/day, which reaches past the onset."
    )
    latex = copy_text(ledger, "latex", tolerances=tolerances)
    assert latex.count(r"\begin{tabular}") == latex.count(r"\end{tabular}") == 2
    assert r"harvest & $55.555\,6$ & $0.01$ & $0.56$ & 7 \% \\" in latex
    assert r"$\pm$" in latex
    for text in (markdown, latex):
        assert not set(text) & {THIN_SPACE, "\u2212", "\u00b1"}


def test_only_the_rows_that_are_wanted() -> None:
    session = tank.session()
    lines = tolerance_rows(session.ledger, tolerances_of(session), {"r2"})
    assert len(lines) == 3
    assert all(line[0].startswith("131.59") for line in lines)


def test_without_tolerances_the_texts_are_as_they_were() -> None:
    session = tank.session(tank.without_tolerances(), (tank.onset(tank.FIRST, 1, slopes=False),))
    markdown = copy_text(session.ledger, "markdown", tolerances=tolerances_of(session))
    assert "Tolerances" not in markdown
    assert "No tolerances are given" in markdown
    assert copy_text(session.ledger, "markdown") == markdown[: markdown.rindex("\n\n") + 1]


def test_rows_of_other_systems_have_budgets_and_no_margin() -> None:
    from tinemark.document import session as ses

    session = tank.session()
    edited = ses.with_system(session, tank.changed_text(('value = "0.1"', 'value = "0.2"')))
    tolerances = tolerances_of(edited)
    assert set(tolerances.budgets) == {"r1", "r2"}
    assert tolerances.margins == {}
    assert tolerances.nearest is None


def test_short_texts() -> None:
    assert [share_text(s) for s in (None, Fraction(0), Fraction(1, 1000), Fraction(2, 3))] == [
        "",
        "0 %",
        "< 1 %",
        "67 %",
    ]
    assert [slope_text(t) for t in ("", "0", "-5263.40128914", "0.0123456789", "123456789")] == [
        "",
        "0",
        "-5263.40",
        "0.0123457",
        "123456789",
    ]


# The onsets file


def test_the_onsets_file_carries_them() -> None:
    plain = onsets_json(tank.session())
    entry = plain["onsets"][0]
    assert [(item["parameter"], item["share"]) for item in entry["sensitivities"]] == [
        ("response", "0.934902"),
        ("harvest", "0.0650981"),
        ("capacity", "0"),
    ]
    assert Fraction(entry["sensitivities"][1]["derivative"]) == Fraction("55.5555555556")
    margin = entry["margin"]
    assert Fraction(margin["value"]) == Fraction(tank.FIRST) - 100
    assert margin["operating_point"] == "100"
    assert float(margin["expanded_uncertainty"]) == pytest.approx(5.28818, rel=1e-5)
    read = read_onsets_bytes(json.dumps(plain).encode())
    assert read.onsets[0].sensitivities[1].parameter == "harvest"


def file_of(onset: Onset) -> dict[str, object]:
    plain: dict[str, object] = json.loads(write_onsets_text(onsets_file("s", "feed", [(1, onset)], None)))
    return plain


def test_files_without_them_can_be_read_and_bad_ones_are_refused() -> None:
    plain = file_of(tank.onset(tank.FIRST, 1))
    (entry,) = plain["onsets"]  # type: ignore[misc]
    assert entry["margin"] is None
    assert {item["share"] for item in entry["sensitivities"]} == {None}
    entry["sensitivities"][1]["derivative"] = "much"
    with pytest.raises(OnsetsFileError, match=r"onsets\[0\].sensitivities\[1\]"):
        read_onsets_bytes(json.dumps(plain).encode())
    del entry["sensitivities"], entry["margin"]
    assert read_onsets_bytes(json.dumps(plain).encode()).onsets[0].sensitivities == []


# The ledger


def test_a_row_takes_the_derivatives_that_a_later_refinement_brings() -> None:
    bare, full = tank.onset(tank.FIRST, 1, slopes=False), tank.onset(tank.FIRST, 1)
    session = tank.session(onsets=(bare,))
    ledger = led.replace_onset(session.ledger, "r1", full)
    assert ledger.rows[0].onset.sensitivities
    assert led.replace_onset(ledger, "r1", bare) == ledger
