"""Onsets as a table of plain text, for terminals."""

from __future__ import annotations

from collections.abc import Sequence

from tinemark.document.rounding import concise, held_digits, onset_text
from tinemark.onsets.ladder_points import ENCLOSURE, Estimate
from tinemark.onsets.onset_words import period_words
from tinemark.onsets.results import Kind, Onset, Status
from tinemark.onsets.scaling import Scaling

SHOWN_DIGITS = 9


def text_table(headings: Sequence[str], rows: Sequence[Sequence[str]], right: frozenset[int]) -> str:
    """Columns two spaces apart; those in `right` are set flush right, and numbers meet at the decimal sign.

    Cells of columns that hold a decimal sign anywhere are padded so that the signs stand below each other.
    """
    columns = [_aligned([row[place] for row in rows]) for place in range(len(headings))]
    lines = []
    widths = [
        max([len(heading), *map(len, column)]) for heading, column in zip(headings, columns, strict=True)
    ]
    for cells in [tuple(headings), *zip(*columns, strict=True)]:
        parts = [
            cell.rjust(width) if place in right else cell.ljust(width)
            for place, (cell, width) in enumerate(zip(cells, widths, strict=True))
        ]
        lines.append("  ".join(parts).rstrip())
    return "\n".join(lines)


def _aligned(cells: Sequence[str]) -> list[str]:
    wholes = [cell.find(".") if cell[:1] in tuple("-0123456789") else -1 for cell in cells]
    if max(wholes, default=-1) < 0:
        return list(cells)
    before = max(wholes)
    padded = [" " * (before - at) + cell if at >= 0 else cell for cell, at in zip(cells, wholes, strict=True)]
    width = max(map(len, padded))
    return [cell.ljust(width) for cell in padded]


def onsets_table(found: Sequence[tuple[int | None, Onset]], scaled: Scaling | None = None) -> str:
    """Table of onsets with all digits that hold, with gaps and ratios where a ladder is given.

    Parameters
    ----------
    found
        Levels (None outside a ladder) and onsets.
    scaled
        What the ladder's onsets say together.
    """
    levels = {item.level: item for item in scaled.levels} if scaled else {}
    headings = ["level", "kind", "period", "value", "status"] + (["gap", "ratio"] if scaled else [])
    rows = []
    for level, onset in found:
        row = [
            "-" if level is None else str(level),
            _kind_words(onset),
            period_words(onset),
            # All digits of a proved value hold; of any other the brackets say how many do.
            onset_text(onset, full=onset.status is Status.PROVED, grouped=False),
            onset.status.value,
        ]
        if scaled:
            here = levels.get(level) if level is not None else None
            row += [_number_text(here.gap if here else None), _number_text(here.ratio if here else None)]
        rows.append(row)
    return text_table(headings, rows, frozenset({0}))


def scaling_lines(scaled: Scaling, parameter: str) -> list[str]:
    """Limit, delta, alpha, class and the next onsets, a line each; what is not known says why."""
    lines = [
        f"limit   {parameter} = {_full_text(scaled.limit)}"
        if scaled.limit
        else f"limit   not known: {scaled.limit_reason}",
        f"delta   {_full_text(scaled.delta)}"
        if scaled.delta
        else f"delta   not known: {scaled.delta_reason}",
    ]
    if scaled.alpha:
        lines.append(f"alpha   {_full_text(scaled.alpha)}")
    elif scaled.alpha_reason:
        lines.append(f"alpha   not known: {scaled.alpha_reason}")
    lines.append(f"class   {scaled.verdict.sentence}")
    for place, following in enumerate(scaled.predictions):
        head = "        " if place else "next    "
        lines.append(f"{head}level {following.level} expected at {parameter} = {_full_text(following.onset)}")
    return lines


def _kind_words(onset: Onset) -> str:
    if onset.kind in (Kind.FLIP, Kind.PITCHFORK) and onset.criticality.value:
        return f"{onset.criticality.value} {onset.kind.value}"
    return onset.kind.value


def _full_text(number: Estimate) -> str:
    if number.uncertainty_fraction == 0:
        return number.value
    return f"{number.value} ± {number.expanded_text}"


def _number_text(number: Estimate | None) -> str:
    if number is None:
        return "-"
    # Where it is known far better than a table needs, its leading digits, each of which holds, say enough.
    held = held_digits(number.lower, number.upper, most=SHOWN_DIGITS)
    if (number.basis == ENCLOSURE and held) or sum(map(str.isdigit, held.lstrip("-0."))) >= SHOWN_DIGITS:
        return held
    return concise(number.value_fraction, number.uncertainty_fraction, grouped=False)
