"""How a text table is written: encoding, separator, decimal mark, header, units, where the numbers begin."""

from __future__ import annotations

import codecs
import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

from tinemark.bench.errors import BenchFileError

LOOKED_AT = 64 * 1024
MOST_COLUMNS = 4096
MOST_HEAD_LINES = 2000

WHITESPACE = " "
SEPARATORS = ("\t", ";", ",", WHITESPACE)
SEPARATOR_WORDS = {"\t": "tabs", ";": "semicolons", ",": "commas", WHITESPACE: "blanks"}
DECIMAL_WORDS = {".": "decimal point", ",": "decimal comma"}

MISSING = frozenset({"", "-", "--", "---", "?", "na", "n/a", "nan", "null", "none", "inf", "+inf", "-inf"})
"""Fields that stand for no value, in small letters."""

_NUMBER = {
    ".": re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?"),
    ",": re.compile(r"[+-]?(?:\d+,?\d*|,\d+)(?:[eE][+-]?\d+)?"),
}
_COMMENT = re.compile(r"\s*(?:#|%|//|\"#)")
_UNIT = re.compile(r"^(.*?)\s*[\[(]\s*([^\])]*?)\s*[\])]$|^(.+?)\s+/\s+(\S+)$|^(.+?)\s+in\s+(\S+)$")


@dataclass(frozen=True)
class Dialect:
    """How a table is written.

    Attributes
    ----------
    head_lines
        Lines before the first row of numbers.
    names, units
        Of each column; made up where the file names none.
    words
        What was understood, a sentence.
    """

    encoding: str
    separator: str
    decimal: str
    head_lines: int
    names: tuple[str, ...]
    units: tuple[str, ...]
    words: str

    def number(self, field: str) -> float | None:
        """The number in a field, nan where it stands for no value, None where it is neither."""
        text = field.strip().strip('"').strip()
        if text.lower() in MISSING:
            return float("nan")
        if not _NUMBER[self.decimal].fullmatch(text):
            return None
        value = float(text.replace(",", "."))
        # IEEE 488.2 instruments write an overload as 9.9E37 and no value as 9.91E37.
        return float("nan") if abs(value) >= 9.9e37 else value

    def fields(self, line: str) -> list[str]:
        """The fields of a line."""
        return split(line, self.separator)


def split(line: str, separator: str) -> list[str]:
    """Fields of a line; runs of blanks separate once."""
    if separator == WHITESPACE:
        return line.split()
    return [field.strip() for field in line.split(separator)]


def encoding_of(head: bytes, file: str) -> str:
    """The encoding of a text that begins with some bytes.

    Raises
    ------
    BenchFileError
        It is no text.
    """
    for mark, name in (
        (codecs.BOM_UTF8, "utf-8-sig"),
        (codecs.BOM_UTF16_LE, "utf-16"),
        (codecs.BOM_UTF16_BE, "utf-16"),
    ):
        if head.startswith(mark):
            return name
    if b"\0" in head:
        raise BenchFileError(
            "is binary and no table that is known here",
            file=file,
            what_to_do="export the sweep as text with commas, semicolons, tabs or blanks, or as .npy or .npz",
        )
    try:
        head.decode("utf-8")
    except UnicodeDecodeError as error:
        # A character may be cut at the end of what was looked at.
        if error.start < len(head) - 4:
            return "cp1252"
    return "utf-8"


def dialect_of(
    head: str, file: str, encoding: str = "utf-8", separator: str = "", decimal: str = ""
) -> Dialect:
    """Tell how a table is written from its beginning.

    Parameters
    ----------
    head
        The first lines, whole ones.
    separator, decimal
        As stated by the user; empty to find out.

    Raises
    ------
    BenchFileError
        There are no rows of numbers; says what stands there instead.
    """
    lines = head.splitlines()
    best: tuple[int, int] = (0, 0)
    chosen = ("", "")
    for mark in (separator,) if separator else SEPARATORS:
        for point in (decimal,) if decimal else (".", ","):
            if mark == point:
                continue
            score = _score(lines, mark, point)
            if score > best:
                best, chosen = score, (mark, point)
    if best[0] == 0:
        shown = next((line.strip() for line in lines if line.strip()), "")
        raise BenchFileError(
            "has no rows of numbers" if shown else "is empty",
            file=file,
            line=1 if shown else 0,
            what_to_do=f'it begins with "{shown[:60]}"; write a column for the knob and one for the samples'
            if shown
            else "choose the file that holds the sweep",
        )
    count = best[1]
    return _described(lines, encoding, chosen[0], chosen[1], count, file)


def _score(lines: Sequence[str], separator: str, decimal: str) -> tuple[int, int]:
    """How many lines are rows of numbers of one length, and that length."""
    lengths: Counter[int] = Counter()
    for line in lines:
        if not line.strip() or _COMMENT.match(line):
            continue
        fields = split(line.rstrip(separator) if separator == "\t" else line, separator)
        texts = [field.strip('"').strip() for field in fields]
        numbers = sum(bool(_NUMBER[decimal].fullmatch(text)) for text in texts)
        missing = sum(text.lower() in MISSING for text in texts)
        if numbers and numbers + missing == len(texts):
            lengths[len(texts)] += 1
    if not lengths:
        return 0, 0
    # Most rows first; of equally many the ones with more columns: a wrong separator leaves one column.
    length, rows = max(lengths.items(), key=lambda item: (item[1], item[0]))
    if length > MOST_COLUMNS:
        return 0, 0
    # A single column is a table only where nothing else is.
    return (rows * 2 if length > 1 else 1), length


def _described(
    lines: Sequence[str], encoding: str, separator: str, decimal: str, count: int, file: str
) -> Dialect:
    bare = Dialect(encoding, separator, decimal, 0, (), (), "")
    first = next(place for place, line in enumerate(lines) if _is_row(line, bare, count))
    above = [
        (place, [field.strip('"').strip() for field in split(_uncommented(line), separator)])
        for place, line in enumerate(lines[:first])
        if line.strip()
    ]
    headers = [(place, fields) for place, fields in above if len(fields) == count and _wordy(fields)]
    if not headers and separator == WHITESPACE:
        # "Drive (V) Response (mm)" has blanks of its own.
        headers = [
            (place, _spaced(lines[place], count))
            for place, _ in above
            if len(_spaced(lines[place], count)) == count
        ]
    names, units = [f"column {number}" for number in range(1, count + 1)], [""] * count
    if headers and first - headers[-1][0] <= 2:
        titles = headers[-1][1]
        if len(headers) > 1 and headers[-1][0] - headers[-2][0] == 1 and _are_units(titles):
            names = headers[-2][1]
            units = [title.strip("[]()") for title in titles]
        else:
            pairs = [_name_and_unit(title) for title in titles]
            names, units = [name for name, _ in pairs], [unit for _, unit in pairs]
    named = [name or f"column {number}" for number, name in enumerate(names, 1)]
    marks = f"separated by {SEPARATOR_WORDS[separator]}, {DECIMAL_WORDS[decimal]}"
    words = f"{count} column{'s' if count > 1 else ''} {marks}"
    if count == 1:
        words = f"1 column, {DECIMAL_WORDS[decimal]}"
    if encoding not in ("utf-8", "utf-8-sig"):
        words += f", read as {'Windows-1252' if encoding == 'cp1252' else encoding.upper()}"
    if first > MOST_HEAD_LINES:
        raise BenchFileError(
            "has too long a heading", file=file, what_to_do="cut it down to the column names"
        )
    return Dialect(encoding, separator, decimal, first, _distinct(named), tuple(units), words)


def _is_row(line: str, dialect: Dialect, count: int) -> bool:
    if not line.strip() or _COMMENT.match(line):
        return False
    fields = dialect.fields(line)
    values = [dialect.number(field) for field in fields]
    return (
        len(fields) == count
        and None not in values
        and any(value == value for value in values if value is not None)
    )


def _uncommented(line: str) -> str:
    return re.sub(r"^\s*(?:#|%|//)+\s*", "", line)


def _wordy(fields: Sequence[str]) -> bool:
    return any(any(mark.isalpha() for mark in field) for field in fields)


def _are_units(fields: Sequence[str]) -> bool:
    return all(not field or (field[0] in "[(" and field[-1] in "])") for field in fields)


def _spaced(line: str, count: int) -> list[str]:
    return re.findall(r"\S+(?:\s*[\[(][^\])]*[\])])?", _uncommented(line)) if count else []


def _name_and_unit(title: str) -> tuple[str, str]:
    found = _UNIT.match(title)
    if not found:
        return title, ""
    groups = [group for group in found.groups() if group is not None]
    return groups[0].strip(), groups[1].strip()


def _distinct(names: Sequence[str]) -> tuple[str, ...]:
    seen: Counter[str] = Counter()
    result = []
    for name in names:
        seen[name] += 1
        result.append(name if seen[name] == 1 else f"{name} ({seen[name]})")
    return tuple(result)


def is_comment(line: str) -> bool:
    """Whether a line is left out as a comment."""
    return bool(_COMMENT.match(line))
