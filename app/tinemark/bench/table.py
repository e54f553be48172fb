"""A text table of numbers, read whole: columns, units, and what was refused by line."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from tinemark.bench.dialect import (
    LOOKED_AT,
    WHITESPACE,
    Dialect,
    dialect_of,
    encoding_of,
    is_comment,
)
from tinemark.bench.errors import BenchFileError
from tinemark.bench.sweep import BenchSource

MOST_BYTES = 2**31
MOST_RECODED = 2**29
"""Bytes of a file that has to be written in another encoding before it can be read."""

BLOCK = 8 * 2**20
MOST_VALUES = 60_000_000
MOST_TOLD = 200
"""Refused rows that are told one by one."""


@dataclass(frozen=True)
class RefusedRow:
    """A line that is not part of the table, and why."""

    line: int
    reason: str


@dataclass(frozen=True, eq=False)
class Table:
    """Columns of numbers.

    Attributes
    ----------
    values
        float64, shape (rows, columns); nan where a value is missing.
    refused, refused_count
        Lines left out, the first `MOST_TOLD` of them; and how many there are.
    words
        What was understood of the file.
    """

    names: tuple[str, ...]
    units: tuple[str, ...]
    values: NDArray[np.float64]
    refused: tuple[RefusedRow, ...]
    refused_count: int
    words: str
    source: BenchSource

    def column(self, name: str) -> NDArray[np.float64]:
        """The column of that name.

        Raises
        ------
        BenchFileError
            There is none; says which there are.
        """
        if name not in self.names:
            raise BenchFileError(
                f'there is no column "{name}"',
                file=self.source.name,
                what_to_do="columns: " + ", ".join(self.names[:20]),
            )
        return self.values[:, self.names.index(name)]


def read_text_table(path: Path, separator: str = "", decimal: str = "") -> Table:
    """Read a text table.

    Parameters
    ----------
    separator, decimal
        As stated by the user; empty to find out.

    Raises
    ------
    BenchFileError
        It cannot be read, or holds no rows of numbers, or more of its rows are refused than taken.
    """
    file = path.name
    try:
        size = path.stat().st_size
        if size > MOST_BYTES:
            raise BenchFileError(
                f"is larger than {MOST_BYTES // 2**30} GiB",
                file=file,
                what_to_do="split the sweep into parts",
            )
        with path.open("rb") as handle:
            head = handle.read(LOOKED_AT)
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise BenchFileError(
            f"cannot be read ({reason})", file=str(path), what_to_do="check the path"
        ) from error
    encoding = encoding_of(head, file)
    lone_returns = b"\r" in head and b"\n" not in head
    dialect = dialect_of(_whole_lines(head, encoding, lone_returns), file, encoding, separator, decimal)
    reader = _Reader(dialect, file)
    digest = hashlib.sha256()
    for block in _blocks(path, encoding, lone_returns, digest, file):
        reader.take(block)
    source = BenchSource(file, size, digest.hexdigest())
    return reader.table(source)


def _whole_lines(head: bytes, encoding: str, lone_returns: bool) -> str:
    text = head.decode(encoding, errors="replace")
    if lone_returns:
        text = text.replace("\r", "\n")
    return text[: text.rfind("\n") + 1] if len(head) == LOOKED_AT and "\n" in text else text


def _blocks(
    path: Path, encoding: str, lone_returns: bool, digest: hashlib._Hash, file: str
) -> Iterator[bytes]:
    """The file in blocks of whole lines, in UTF-8 with line feeds."""
    with path.open("rb") as handle:
        if encoding in ("utf-16", "cp1252"):
            data = handle.read(MOST_RECODED + 1)
            if len(data) > MOST_RECODED:
                raise BenchFileError(
                    f"is larger than {MOST_RECODED // 2**20} MiB and not in UTF-8",
                    file=file,
                    what_to_do="save it as UTF-8 text",
                )
            digest.update(data)
            yield data.decode(encoding, errors="replace").replace("\r\n", "\n").replace("\r", "\n").encode()
            return
        rest = b""
        first = True
        while True:
            block = handle.read(BLOCK)
            digest.update(block)
            if first and block.startswith(b"\xef\xbb\xbf"):
                block = block[3:]
            first = False
            if lone_returns:
                block = block.replace(b"\r", b"\n")
            if not block:
                break
            cut = block.rfind(b"\n") + 1
            if not cut:
                rest += block
                if len(rest) > 4 * BLOCK:
                    raise BenchFileError(
                        "has a line of more than 32 MiB", file=file, what_to_do="export it with line breaks"
                    )
                continue
            yield rest + block[:cut]
            rest = block[cut:]
        if rest:
            yield rest


class _Reader:
    def __init__(self, dialect: Dialect, file: str) -> None:
        self.dialect, self.file = dialect, file
        self.columns = len(dialect.names)
        self.parts: list[NDArray[np.float64]] = []
        self.rows = 0
        self.lines = 0
        self.refused: list[RefusedRow] = []
        self.refused_count = 0

    def take(self, block: bytes) -> None:
        from tinemark.bench.number_rows import TAKEN, parse_rows, powers_of_ten

        data = np.frombuffer(block, np.uint8)
        most = block.count(b"\n") + 1
        if (self.rows + most) * self.columns > MOST_VALUES and self.rows * self.columns > MOST_VALUES // 2:
            raise BenchFileError(
                f"holds more than {MOST_VALUES // 10**6} million values",
                file=self.file,
                what_to_do="leave out columns or split the sweep",
            )
        table = np.empty((most, self.columns))
        status, lines = np.zeros(most, np.uint8), np.zeros(most, np.int64)
        starts, ends, counted = np.zeros(most, np.int64), np.zeros(most, np.int64), np.zeros(1, np.int64)
        separator = 0 if self.dialect.separator == WHITESPACE else ord(self.dialect.separator)
        rows = parse_rows(
            data,
            separator,
            ord(self.dialect.decimal),
            self.columns,
            powers_of_ten(),
            table,
            status,
            starts,
            ends,
            lines,
            counted,
        )
        keep = status[:rows] == TAKEN
        head = self.dialect.head_lines - self.lines
        if head > 0:
            keep &= lines[:rows] >= head
        # What the fast reading did not take is looked at line by line.
        for row in np.flatnonzero(status[:rows] != TAKEN):
            if lines[row] < head:
                continue
            text = block[starts[row] : ends[row]].decode("utf-8", errors="replace")
            keep[row] = self.look_closely(text, int(lines[row]), table[row])
        self.parts.append(table[:rows][keep])
        self.rows += len(self.parts[-1])
        self.lines += int(counted[0])

    def look_closely(self, text: str, line: int, into: NDArray[np.float64]) -> bool:
        if is_comment(text):
            return False
        fields = self.dialect.fields(text)
        while len(fields) > self.columns and not fields[-1]:
            fields.pop()  # a separator at the end of each line
        if len(fields) != self.columns:
            return self.refuse(line, f"{len(fields)} columns instead of {self.columns}")
        for place, field in enumerate(fields):
            value = self.dialect.number(field)
            if value is None:
                shown = field if len(field) <= 24 else field[:21] + "..."
                return self.refuse(line, f'"{shown}" in column "{self.dialect.names[place]}" is no number')
            into[place] = value
        if np.isnan(into).all():
            return self.refuse(line, "no value in any column")
        return True

    def refuse(self, line: int, reason: str) -> bool:
        self.refused_count += 1
        if len(self.refused) < MOST_TOLD:
            self.refused.append(RefusedRow(self.lines + line + 1, reason))
        return False

    def table(self, source: BenchSource) -> Table:
        values = np.concatenate(self.parts) if self.parts else np.empty((0, self.columns))
        self.parts = []
        # IEEE 488.2: an overload is written 9.9E37.
        values[np.abs(values) >= 9.9e37] = np.nan
        if self.refused_count > len(values):
            first = self.refused[0]
            raise BenchFileError(
                f"{self.refused_count} rows are refused and {len(values)} taken; the first: {first.reason}",
                file=self.file,
                line=first.line,
                what_to_do="check the separator and the decimal mark, or state them",
            )
        dialect = self.dialect
        return Table(
            dialect.names,
            dialect.units,
            values,
            tuple(self.refused),
            self.refused_count,
            dialect.words,
            source,
        )
