"""Errors of bench files, with file, line and column."""

from __future__ import annotations

from tinemark.systems.errors import TinemarkError


class BenchFileError(TinemarkError):
    """A bench file that cannot be read. `line` counts from 1 (0: unknown); `column` is a column's name."""

    def __init__(
        self, message: str, *, file: str = "", line: int = 0, column: str = "", what_to_do: str = ""
    ) -> None:
        parts = (file, f"line {line}" if line else "", f'column "{column}"' if column else "")
        super().__init__(message, where=", ".join(part for part in parts if part), what_to_do=what_to_do)
        self.file = file
        self.line = line
        self.column = column
