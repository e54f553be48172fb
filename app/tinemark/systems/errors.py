"""Every error that Tinemark raises on purpose, each with a place, a reason and a way on."""

from __future__ import annotations


class TinemarkError(Exception):
    """Base of the errors shown to the user as they are.

    Parameters
    ----------
    message
        What is wrong, in words.
    where
        Place: a file, a key, a column. Empty when there is none.
    what_to_do
        The next step for the user. Empty when the message already says it.
    """

    def __init__(self, message: str, *, where: str = "", what_to_do: str = "") -> None:
        super().__init__(message, where, what_to_do)
        self.message = message
        self.where = where
        self.what_to_do = what_to_do

    def __reduce__(self) -> tuple[object, ...]:
        # Keyword-only arguments do not survive the default pickling between processes.
        return (_rebuild, (type(self), dict(self.__dict__)))

    def __str__(self) -> str:
        text = f"{self.where}: {self.message}" if self.where else self.message
        return f"{text}; {self.what_to_do}" if self.what_to_do else text


def _rebuild(kind: type[TinemarkError], fields: dict[str, object]) -> TinemarkError:
    error = kind.__new__(kind)
    Exception.__init__(error, fields["message"], fields["where"], fields["what_to_do"])
    error.__dict__.update(fields)
    return error


class FormulaError(TinemarkError):
    """A formula that cannot be read. `column` counts characters from 1; `key` names the field."""

    def __init__(self, message: str, *, column: int = 0, key: str = "", what_to_do: str = "") -> None:
        place = ", ".join(part for part in (key, f"column {column}" if column else "") if part)
        super().__init__(message, where=place, what_to_do=what_to_do)
        self.column = column
        self.key = key


class SystemFileError(TinemarkError):
    """A system file that cannot be read. `line` and `column` count from 1; 0 means unknown."""

    def __init__(
        self,
        message: str,
        *,
        file: str = "",
        key: str = "",
        line: int = 0,
        column: int = 0,
        what_to_do: str = "",
    ) -> None:
        parts = (file, f"line {line}" if line else "", key, f"column {column}" if column else "")
        super().__init__(message, where=", ".join(part for part in parts if part), what_to_do=what_to_do)
        self.file = file
        self.key = key
        self.line = line
        self.column = column


class NumberError(TinemarkError):
    """A text that should be a number and is not, or one that is too large to work with."""


class SessionFileError(TinemarkError):
    """A session file that cannot be read or written."""


class NoOnsetFound(TinemarkError):
    """The question has no answer there: no onset in reach, and why."""


class SwitchingTouched(TinemarkError):
    """A ball touches a switching surface, so the formula has no single smooth piece on it."""


class Unbounded(TinemarkError):
    """The orbit escaped."""
