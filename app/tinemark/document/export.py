"""The ledger as text to paste: tab-separated, Markdown, LaTeX, a plain table, and the onsets file."""

from __future__ import annotations

import math
from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import msgspec

from tinemark.document import ledger as led
from tinemark.document.estimates import Estimate, LevelEstimate, estimate_text, scaling_of
from tinemark.document.ledger import Ledger
from tinemark.document.onsets_file import onsets_file
from tinemark.document.rounding import (
    decimal_text,
    exponent,
    group_digits,
    held_digits,
    onset_text,
    round_pair,
)
from tinemark.document.row import Row
from tinemark.document.session import Session, read_system, system_of_row
from tinemark.document.text_table import text_table
from tinemark.document.tolerance_tables import (
    NONE,
    TSV_TOLERANCE_HEADINGS,
    Tolerances,
    latex_tolerances,
    markdown_tolerances,
    tsv_tolerance_cells,
)
from tinemark.onsets.results import Onset, Status
from tinemark.systems.system import System

FORMS = ("tsv", "markdown", "latex")

TSV_HEADINGS = (
    "Ladder",
    "Level",
    "Kind",
    "Criticality",
    "Period before",
    "Period after",
    "Parameter",
    "Other parameters",
    "Value",
    "Uncertainty",
    "Lower",
    "Upper",
    "Gap",
    "Gap uncertainty",
    "Ratio",
    "Ratio uncertainty",
    "Status",
    "Reason",
    "Note",
    *TSV_TOLERANCE_HEADINGS,
)
HEADINGS = ("Level", "Kind", "Period", "Value", "Gap", "Ratio", "Status", "Note")


@dataclass(frozen=True)
class Line:
    """One line of an exported table: a row and what its ladder says of it, or a missing level."""

    level: int | None
    row: Row | None
    estimate: LevelEstimate | None


@dataclass(frozen=True)
class Section:
    """Lines under one heading: a ladder, or the single onsets."""

    title: str
    lines: tuple[Line, ...]


def sections(ledger: Ledger, row_ids: Collection[str] | None = None) -> tuple[Section, ...]:
    """The ledger in reading order: ladders as they were begun, levels rising, single onsets last.

    With `row_ids` only these rows; gaps and ratios still follow from the whole ladder.
    """
    found = []
    for ladder in led.ladder_ids(ledger):
        estimates = led.estimates(ledger, ladder)
        known = {level.level: level for level in estimates.levels} if estimates else {}
        rows = {row.level or 0: row for row in led.ladder_rows(ledger, ladder)}
        lines = [
            Line(level, rows.get(level), known.get(level) if level else None)
            for level in sorted({*rows, *(known if row_ids is None else ())})
        ]
        found.append(Section(led.ladder_title(ledger, ladder), tuple(lines)))
    singles = led.loose_rows(ledger)
    if singles:
        found.append(Section("single onsets", tuple(Line(None, row, None) for row in singles)))
    if row_ids is None:
        return tuple(found)
    chosen = [
        Section(s.title, tuple(line for line in s.lines if line.row is not None and line.row.id in row_ids))
        for s in found
    ]
    return tuple(section for section in chosen if section.lines)


def copy_text(
    ledger: Ledger, form: str, row_ids: Collection[str] | None = None, tolerances: Tolerances = NONE
) -> str:
    """The ledger, or some of its rows, in one of `FORMS`; with what the tolerances say, where given."""
    forms: dict[str, Callable[[Ledger, Collection[str] | None, Tolerances], str]] = {
        "tsv": tsv_text,
        "markdown": markdown_text,
        "latex": latex_text,
    }
    return forms[form](ledger, row_ids, tolerances)


# Numbers


def value_digits(onset: Onset) -> str:
    """The value as a plain number: of a proved one all digits that hold, else the value as it is known."""
    if onset.status is Status.PROVED:
        held = held_digits(Fraction(onset.lower), Fraction(onset.upper))
        if held:
            return held
    return onset.value


def uncertainty_digits(uncertainty: Fraction) -> str:
    """An expanded uncertainty as a plain number: two significant digits, rounded up."""
    if uncertainty == 0:
        return "0"
    places = 1 - exponent(uncertainty)
    scaled = math.ceil(uncertainty * Fraction(10) ** places)
    if scaled == 100:  # 0.0999 became 0.100: again two significant digits, one place less
        scaled, places = 10, places - 1
    return decimal_text(scaled / Fraction(10) ** places, places)


def _estimate_digits(number: Estimate | None) -> tuple[str, str]:
    """A derived number and its expanded uncertainty as plain numbers; empty when there is none."""
    if number is None:
        return "", ""
    if number.uncertainty == 0:
        return estimate_text(number, full=True, grouped=False), "0"
    rounded = round_pair(number.value, number.uncertainty, rigorous=True)
    return decimal_text(rounded.value, rounded.places), decimal_text(rounded.uncertainty, rounded.places)


# Tab-separated


def tsv_text(ledger: Ledger, row_ids: Collection[str] | None = None, tolerances: Tolerances = NONE) -> str:
    """Tab-separated text that pastes into a spreadsheet as columns: plain numbers with all digits.

    `Uncertainty` columns hold half-widths: enclosing where proved, of 95 % coverage otherwise, half a
    pixel where read by eye. The last columns follow from the parameters' tolerances: the onset's combined
    standard uncertainty, its derivatives with each parameter's share of the variance, and the distance from
    the operating point to the onset with its standard uncertainty.
    """
    lines: list[tuple[str, ...]] = [TSV_HEADINGS]
    for section in sections(ledger, row_ids):
        lines += [
            _tsv_cells(section.title, line.row, line.estimate) + tsv_tolerance_cells(tolerances, line.row.id)
            for line in section.lines
            if line.row is not None
        ]
    return "\n".join("\t".join(map(_cell, line)) for line in lines) + "\n"


def _tsv_cells(title: str, row: Row, estimate: LevelEstimate | None) -> tuple[str, ...]:
    onset = row.onset
    gap = _estimate_digits(estimate.gap if estimate else None)
    ratio = _estimate_digits(estimate.ratio if estimate else None)
    return (
        title if row.ladder else "",
        "" if row.level is None else str(row.level),
        onset.kind.value,
        onset.criticality.value,
        str(onset.period_before),
        str(onset.period_after),
        onset.parameter,
        ", ".join(f"{name} = {value}" for name, value in row.fixed),
        value_digits(onset),
        uncertainty_digits(onset.half_width),
        onset.lower,
        onset.upper,
        *gap,
        *ratio,
        onset.status.value,
        onset.reason,
        row.note,
    )


def _cell(text: str) -> str:
    """A cell that stays one cell, and that no spreadsheet takes for a formula."""
    text = " ".join(text.split())
    if text[:1] in ("=", "+", "@") or (text[:1] == "-" and not _is_number(text)):
        return "'" + text
    return text


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True


# Tables for reading


def _reading_cells(line: Line) -> tuple[str, ...]:
    """Level, kind, periods, value, gap, ratio, status and note of a line, in plain text."""
    level = "" if line.level is None else str(line.level)
    if line.row is None:
        return level, "missing", "", "", "", "", "", ""
    onset, estimate = line.row.onset, line.estimate
    before = str(onset.period_before) if onset.period_before else "none"
    after = str(onset.period_after) if onset.period_after else "unknown"
    period = f"{before} -> {after}" if onset.period_after or onset.period_before else "unknown"
    kind = " ".join(word for word in (onset.criticality.value, onset.kind.value) if word)
    return (
        level,
        kind if onset.criticality.value != "undecided" else onset.kind.value,
        period,
        onset_text(onset, full=onset.status is Status.PROVED, grouped=False),
        estimate_text(estimate.gap, grouped=False) if estimate and estimate.gap else "",
        estimate_text(estimate.ratio, grouped=False) if estimate and estimate.ratio else "",
        onset.status.value,
        " ".join(line.row.note.split()),
    )


def ledger_table(ledger: Ledger, row_ids: Collection[str] | None = None) -> str:
    """The ledger as a plain table for a terminal, numbers aligned at the decimal sign."""
    blocks = []
    for section in sections(ledger, row_ids):
        cells = [_reading_cells(line) for line in section.lines]
        kept = [n for n in range(len(HEADINGS)) if n < 4 or any(row[n] for row in cells)]
        table = text_table(
            [HEADINGS[n].lower() for n in kept], [[row[n] for n in kept] for row in cells], frozenset({0})
        )
        blocks.append(f"{section.title[:1].upper()}{section.title[1:]}\n{table}")
    return "\n\n".join(blocks) + "\n" if blocks else "The ledger is empty.\n"


_MARKDOWN_SPECIALS = str.maketrans({c: f"\\{c}" for c in "\\`*_{}[]<>#|~$"})


def markdown_text(
    ledger: Ledger, row_ids: Collection[str] | None = None, tolerances: Tolerances = NONE
) -> str:
    """A Markdown table for each ladder, and one for the tolerances."""
    blocks = []
    for section in sections(ledger, row_ids):
        lines = [
            f"**{section.title.translate(_MARKDOWN_SPECIALS)}**",
            "",
            "| " + " | ".join(HEADINGS) + " |",
            "|---:|---|---|---|---|---|---|---|",
        ]
        for line in section.lines:
            cells = [cell.translate(_MARKDOWN_SPECIALS) for cell in _reading_cells(line)]
            cells[2] = cells[2].replace("-\\>", "→")
            lines.append("| " + " | ".join(cells) + " |")
        blocks.append("\n".join(lines))
    blocks.append(
        markdown_tolerances(ledger, tolerances, row_ids, lambda text: text.translate(_MARKDOWN_SPECIALS))
    )
    blocks = [block for block in blocks if block]
    return "\n\n".join(blocks) + "\n" if blocks else ""


_LATEX_SPECIALS = str.maketrans(
    {c: f"\\{c}" for c in "&%$#_{}"}
    | {
        "\\": r"\textbackslash{}",
        "~": r"\textasciitilde{}",
        "^": r"\textasciicircum{}",
        "<": r"\textless{}",
        ">": r"\textgreater{}",
        "|": r"\textbar{}",
        '"': r"\textquotedbl{}",
    }
)


def latex_text(ledger: Ledger, row_ids: Collection[str] | None = None, tolerances: Tolerances = NONE) -> str:
    """A LaTeX tabular: digits in groups of three, every special character escaped. Needs no package."""
    found = sections(ledger, row_ids)
    if not found:
        return ""
    lines = [
        r"\begin{tabular}{rlcllll p{4cm}}",
        r"\hline",
        " & ".join(HEADINGS) + r" \\",
        r"\hline",
    ]
    for section in found:
        lines.append(
            rf"\multicolumn{{{len(HEADINGS)}}}{{l}}{{{section.title.translate(_LATEX_SPECIALS)}}} \\"
        )
        for line in section.lines:
            level, kind, period, value, gap, ratio, status, note = _reading_cells(line)
            cells = (
                level,
                kind.translate(_LATEX_SPECIALS),
                _latex_period(period),
                *(_latex_number(number) for number in (value, gap, ratio)),
                status.translate(_LATEX_SPECIALS),
                note.translate(_LATEX_SPECIALS),
            )
            lines.append(" & ".join(cells) + r" \\")
        lines.append(r"\hline")
    lines.append(r"\end{tabular}")
    more = latex_tolerances(
        ledger, tolerances, row_ids, lambda text: text.translate(_LATEX_SPECIALS), _latex_number
    )
    return "\n".join(lines) + "\n" + (f"\n{more}\n" if more else "")


def _latex_period(period: str) -> str:
    before, arrow, after = period.partition(" -> ")
    return f"{before}~$\\to$~{after}" if arrow else before


def _latex_number(text: str) -> str:
    if not text:
        return ""
    parts = (group_digits(part, r"\,") for part in text.split(" ± "))
    number = r" \pm ".join(parts)
    body, power, exponent_digits = number.partition("e")
    return f"${body} \\times 10^{{{exponent_digits}}}$" if power else f"${number}$"


# The onsets file


def onsets_json(session: Session, ladder_id: str = "") -> dict[str, Any]:
    """Onsets as the plain data of an onsets file (format "tinemark-onsets", version 1).

    With a ladder's name its levels with gaps, ratios, limit and class; without, every row of the
    present system and parameter, with no derived numbers.
    """
    system = read_system(session.system_text)
    if ladder_id:
        rows = [row for row in led.ladder_rows(session.ledger, ladder_id) if row.level]
        scaled = scaling_of(rows) if rows else None
        parameter = rows[0].onset.parameter if rows else session.parameter
    else:
        place = led.place_of(system, session.parameter)
        rows = [row for row in session.ledger.rows if row.place == place]
        scaled, parameter = None, session.parameter
    found = [(row.level, row.onset) for row in rows]
    plain: dict[str, Any] = msgspec.to_builtins(
        onsets_file(system.title, parameter, found, scaled, _system_of_rows(session, rows))
    )
    return plain


def _system_of_rows(session: Session, rows: Sequence[Row]) -> System | None:
    """The system that all the rows belong to, at their values."""
    return system_of_row(session, rows[0].id) if rows else None
