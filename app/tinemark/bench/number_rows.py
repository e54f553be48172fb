"""Rows of numbers from bytes, compiled: an instrument's table may have ten million of them."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from tinemark.systems.native import jit

TAKEN, WRONG_COUNT, NOT_PLAIN = 0, 1, 2
"""What became of a row: its numbers stand in the table; it has another number of fields; it holds something
that has to be looked at more closely (a word, a missing value, a number of very many digits)."""

_POWERS: NDArray[np.float64] = np.array([10.0**power for power in range(23)])
"""Powers of ten that doubles hold exactly: a product or quotient with one is rounded once (Clinger 1990)."""


@jit
def parse_rows(
    data: NDArray[np.uint8],
    separator: int,
    decimal: int,
    columns: int,
    powers: NDArray[np.float64],
    table: NDArray[np.float64],
    status: NDArray[np.uint8],
    starts: NDArray[np.int64],
    ends: NDArray[np.int64],
    lines: NDArray[np.int64],
    counted: NDArray[np.int64],
) -> int:
    """Read whole lines; returns the number of rows noted.

    Parameters
    ----------
    data
        Whole lines, each with its line feed (the last may lack it).
    separator
        Code of the separator; 0 for any run of blanks and tabs.
    table, status, starts, ends, lines
        For each row its numbers, what became of it, where it stands in `data`, and its line counted from 0.
        Blank lines give no row.
    counted
        ``counted[0]`` becomes the number of lines seen.
    """
    size = data.shape[0]
    at, row, line = 0, 0, 0
    while at < size:
        end = at
        while end < size and data[end] != 10:
            end += 1
        last = end
        while last > at and (data[last - 1] == 13 or data[last - 1] == 32 or data[last - 1] == 9):
            # A tab that separates may end a line whose last field is missing: left to the closer look.
            if data[last - 1] == 9 and separator == 9:
                break
            last -= 1
        first = at
        while first < last and (data[first] == 32 or (data[first] == 9 and separator != 9)):
            first += 1
        if first < last:
            starts[row], ends[row], lines[row] = first, last, line
            column, place, plain = 0, first, True
            while place <= last and plain:
                while place < last and data[place] == 32:
                    place += 1
                negative = False
                if place < last and (data[place] == 45 or data[place] == 43):
                    negative = data[place] == 45
                    place += 1
                whole = np.uint64(0)
                digits, significant, shift = 0, 0, 0
                seen_point = False
                while place < last:
                    mark = data[place]
                    if 48 <= mark <= 57:
                        digits += 1
                        if significant > 0 or mark != 48:
                            significant += 1
                        if significant <= 18:
                            whole = whole * np.uint64(10) + np.uint64(mark - 48)
                        if seen_point:
                            shift -= 1
                    elif mark == decimal and not seen_point:
                        seen_point = True
                    else:
                        break
                    place += 1
                if digits == 0 or significant > 18:
                    plain = False
                    break
                if place < last and (data[place] == 101 or data[place] == 69):
                    place += 1
                    down = False
                    if place < last and (data[place] == 45 or data[place] == 43):
                        down = data[place] == 45
                        place += 1
                    power, marks = 0, 0
                    while place < last and 48 <= data[place] <= 57 and marks < 5:
                        power = power * 10 + (data[place] - 48)
                        marks += 1
                        place += 1
                    if marks == 0:
                        plain = False
                        break
                    shift += -power if down else power
                if whole >= np.uint64(1 << 53) or shift > 22 or shift < -22:
                    plain = False
                    break
                number = float(whole)
                number = number * powers[shift] if shift >= 0 else number / powers[-shift]
                if column < columns:
                    table[row, column] = -number if negative else number
                column += 1
                blank = place
                while place < last and (data[place] == 32 or (data[place] == 9 and separator != 9)):
                    place += 1
                if place >= last:
                    place = last + 1
                elif separator == 0:
                    plain = place > blank
                elif data[place] == separator:
                    place += 1
                    if place >= last:
                        plain = False
                else:
                    plain = False
            status[row] = 2 if not plain else (0 if column == columns else 1)
            row += 1
        line += 1
        at = end + 1
    counted[0] = line
    return row


def powers_of_ten() -> NDArray[np.float64]:
    """The table that `parse_rows` takes."""
    assert math.isclose(_POWERS[-1], 1e22)
    return _POWERS
