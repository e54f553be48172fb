"""Budgets and margins of a whole session, and how they are written beside the ledger's tables."""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction

from tinemark.document.ledger import Ledger
from tinemark.document.margin import (
    Margin,
    OperatingPoint,
    margin_sentence,
    margin_to,
    nearest_row,
    operating_point,
    rows_here,
)
from tinemark.document.rounding import (
    PLUS_MINUS,
    decimal_text,
    exponent,
    onset_text,
    plain,
    round_uncertainty,
)
from tinemark.document.row import Place
from tinemark.document.session import Session, system_of, system_of_row
from tinemark.document.tolerance import Budget, Contribution, budget_of
from tinemark.onsets.results import Onset, Status
from tinemark.systems.system import System

HEADINGS = ("Onset", "Parameter", "Derivative", "Tolerance", "Contribution", "Share")
TSV_TOLERANCE_HEADINGS = (
    "Standard uncertainty with tolerances",
    "Derivatives and shares",
    "Margin",
    "Margin standard uncertainty",
)
DERIVATIVE_DIGITS = 6


@dataclass(frozen=True)
class Tolerances:
    """What the tolerances say of a session's rows.

    Attributes
    ----------
    budgets
        By row, where the row's system is known.
    margins
        By row, where it belongs to the session's operating point.
    nearest
        The margin to the nearest onset; None where no row belongs to the operating point.
    """

    budgets: Mapping[str, Budget] = field(default_factory=dict)
    margins: Mapping[str, Margin] = field(default_factory=dict)
    nearest: Margin | None = None


NONE = Tolerances()


def tolerances_of(session: Session) -> Tolerances:
    """Budgets and margins of every row."""
    budgets = {}
    systems: dict[Place, System | None] = {}
    for row in session.ledger.rows:
        if row.place not in systems:
            systems[row.place] = system_of_row(session, row.id)
        system = systems[row.place]
        if system is not None:
            budgets[row.id] = budget_of(row.onset, system)
    point, present = operating_point(session), system_of(session)
    here = rows_here(session)
    margins = {row.id: margin_to(row.onset, present, point, row.id, budgets[row.id]) for row in here}
    nearest = nearest_row(here, point)
    return Tolerances(budgets, margins, margins[nearest.id] if nearest else None)


# Numbers


def standard_text(uncertainty: Fraction | None) -> str:
    """A standard uncertainty as a plain number of two digits; empty where there is none."""
    if uncertainty is None:
        return ""
    if uncertainty == 0:
        return "0"
    return decimal_text(*round_uncertainty(uncertainty))


def share_text(share: Fraction | None) -> str:
    """A share of the variance as a whole percentage; empty where there is none."""
    if share is None:
        return ""
    if 0 < share < Fraction(1, 200):
        return "< 1 %"
    return f"{decimal_text(100 * share, 0)} %"


def tolerance_text(tolerance: Fraction) -> str:
    """A tolerance as it was typed, or to six digits."""
    return decimal_text(tolerance, max(_decimals(tolerance), 0))


def slope_text(derivative: str, digits: int = DERIVATIVE_DIGITS) -> str:
    """A derivative rounded for reading; empty where it is not known."""
    if not derivative:
        return ""
    value = Fraction(derivative)
    return decimal_text(value, max(digits - 1 - exponent(value), 0)) if value else "0"


# For a terminal


def tolerance_lines(onsets: Sequence[Onset], known: System | None) -> list[str]:
    """The nearest onset's uncertainty and margin, a line each, where tolerances are given."""
    if known is None or not onsets:
        return []
    point = OperatingPoint(known.parameter(onsets[0].parameter).value.fraction)
    margins = [margin_to(onset, known, point) for onset in onsets]
    nearest = min(margins, key=lambda margin: abs(margin.distance))
    lines = []
    if nearest.budget.combined is not None:
        shares = [(line.parameter, share_text(line.share)) for line in nearest.budget.lines if line.share]
        words = ", ".join(f"{name} {share}" for name, share in shares)
        unit = f" {nearest.unit}" if nearest.unit else ""
        size = standard_text(nearest.budget.combined)
        lines.append(f"spread  standard uncertainty {size}{unit} by the tolerances: {words}")
    if nearest.standard is not None:
        lines.append(f"margin  {plain(margin_sentence(nearest))}")
    return lines


# Tab-separated


def tsv_tolerance_cells(tolerances: Tolerances, row_id: str) -> tuple[str, ...]:
    """Cells of one row: its uncertainty, its derivatives, its margin and that one's uncertainty."""
    budget, margin = tolerances.budgets.get(row_id), tolerances.margins.get(row_id)
    slopes = [_slope_words(line) for line in budget.lines if line.derivative] if budget else []
    distance = ""
    if margin is not None:
        onset, point = margin.onset, margin.point.value
        distance = decimal_text(onset - point, max(11 - exponent(max(abs(onset), abs(point))), 0))
    return (
        standard_text(budget.combined if budget else None),
        ", ".join(slopes),
        distance,
        standard_text(margin.standard if margin else None),
    )


def _slope_words(line: Contribution) -> str:
    share = share_text(line.share)
    return f"{line.parameter}: {line.derivative}" + (f" ({share})" if share else "")


# Tables for reading


def tolerance_rows(
    ledger: Ledger, tolerances: Tolerances, row_ids: Collection[str] | None = None
) -> list[tuple[str, ...]]:
    """Lines of the table of `HEADINGS`, in the ledger's order, of every row that has derivatives.

    Shares of one onset add up to 100 %: what the value's own uncertainty takes is a line of its own where
    it is worth one.
    """
    lines: list[tuple[str, ...]] = []
    for row in ledger.rows:
        budget = tolerances.budgets.get(row.id)
        if budget is None or not row.onset.sensitivities or (row_ids is not None and row.id not in row_ids):
            continue
        onset = onset_text(row.onset, full=row.onset.status is Status.PROVED, grouped=False)
        for line in budget.lines:
            given = "none given" if line.tolerance is None else tolerance_text(line.tolerance)
            cells = (line.parameter, slope_text(line.derivative), given)
            lines.append((onset, *cells, standard_text(line.amount), share_text(line.share)))
        if budget.own_share and budget.own_share >= Fraction(1, 200):
            cells = ("the value itself", "", "")
            lines.append((onset, *cells, standard_text(budget.own), share_text(budget.own_share)))
    return lines


def _decimals(value: Fraction) -> int:
    """Decimals that a typed tolerance needs; six digits of any other."""
    for places in range(25):
        if (value * 10**places).denominator == 1:
            return places
    return 5 - exponent(value)


def nearest_sentence(tolerances: Tolerances) -> str:
    """The margin to the nearest onset as a sentence for other programs; empty where there is none."""
    if tolerances.nearest is None:
        return ""
    return plain(margin_sentence(tolerances.nearest)).replace(PLUS_MINUS, "+/-")


def markdown_tolerances(
    ledger: Ledger, tolerances: Tolerances, row_ids: Collection[str] | None, escape: Callable[[str], str]
) -> str:
    """The table and the margin as Markdown; empty where there is nothing to say."""
    blocks = []
    lines = tolerance_rows(ledger, tolerances, row_ids)
    if lines:
        head = ["**Tolerances**", "", "| " + " | ".join(HEADINGS) + " |", "|---|---|---:|---:|---:|---:|"]
        blocks.append("\n".join([*head, *("| " + " | ".join(map(escape, line)) + " |" for line in lines)]))
    sentence = nearest_sentence(tolerances)
    if sentence:
        blocks.append(escape(sentence))
    return "\n\n".join(blocks)


def latex_tolerances(
    ledger: Ledger,
    tolerances: Tolerances,
    row_ids: Collection[str] | None,
    escape: Callable[[str], str],
    number: Callable[[str], str],
) -> str:
    """The same as a LaTeX tabular and a sentence below it."""
    blocks = []
    lines = tolerance_rows(ledger, tolerances, row_ids)
    if lines:
        body = [_latex_line(line, escape, number) for line in lines]
        head = [r"\begin{tabular}{llrrrr}", r"\hline", " & ".join(HEADINGS) + r" \\", r"\hline"]
        blocks.append("\n".join([*head, *body, r"\hline", r"\end{tabular}"]))
    sentence = nearest_sentence(tolerances)
    if sentence:
        blocks.append(escape(sentence).replace("+/-", r"$\pm$"))
    return "\n\n".join(blocks)


def _latex_line(line: Sequence[str], escape: Callable[[str], str], number: Callable[[str], str]) -> str:
    onset, parameter, slope, tolerance, amount, share = line
    given = number(tolerance) if tolerance[:1].isdigit() else escape(tolerance)
    cells = (number(onset), escape(parameter), number(slope), given, number(amount), escape(share))
    return " & ".join(cells) + r" \\"
