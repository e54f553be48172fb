"""The onsets file: what `ladder` and `refine` found, as JSON for other programs (format version 1).

Numbers that carry more digits than a double are texts. `lower` and `upper` enclose the value,
rigorously when it is proved and at 95 % coverage otherwise; every uncertainty is expanded alike: the
number lies in value ± uncertainty, for certain where it follows from proved onsets alone, else at 95 %
coverage.
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from fractions import Fraction
from typing import Any, Final, Literal

import msgspec

from tinemark.onsets.ladder_points import Estimate
from tinemark.onsets.results import Kind, Onset, Status
from tinemark.onsets.scaling import UNDECIDED, Scaling
from tinemark.systems.errors import NumberError, TinemarkError
from tinemark.systems.exact import exact

FORMAT: Final = "tinemark-onsets"
VERSION = 1
MAX_FILE_BYTES = 16 * 1024 * 1024

Found = tuple[int | None, Onset]
"""Level in its ladder (None outside one) and the onset."""


class OnsetsFileError(TinemarkError):
    """An onsets file that cannot be read."""


class Number(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """A number with its expanded uncertainty; both None where it is not known."""

    value: str | None
    uncertainty: str | None


class Delta(msgspec.Struct, frozen=True, forbid_unknown_fields=True, rename={"class_": "class"}):
    """Where the ratios tend, and the class of the cascade."""

    value: str | None
    uncertainty: str | None
    class_: str
    consistent: bool | None


class Entry(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """One onset."""

    level: int | None
    kind: str
    period_before: int
    period_after: int
    criticality: Literal["supercritical", "subcritical", "undecided", ""]
    value: str
    lower: str
    upper: str
    status: str
    reason: str
    states: dict[str, str]
    gap: str | None
    ratio: str | None
    ratio_uncertainty: str | None


class OnsetsFile(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """The whole file."""

    format: Literal["tinemark-onsets"]
    version: int
    system: str
    parameter: str
    onsets: list[Entry]
    limit: Number
    delta: Delta


def onsets_file(system: str, parameter: str, found: Sequence[Found], scaled: Scaling | None) -> OnsetsFile:
    """The file for a set of onsets.

    Parameters
    ----------
    system
        Name or path of the system, as its user wrote it.
    found
        Onsets in the order to be written.
    scaled
        What a ladder's onsets say together; None for single onsets.
    """
    levels = {item.level: item for item in scaled.levels} if scaled else {}
    entries = []
    for level, onset in found:
        here = levels.get(level) if level is not None else None
        gap, ratio = (here.gap, here.ratio) if here else (None, None)
        entries.append(
            Entry(
                level=level,
                kind=onset.kind.value,
                period_before=onset.period_before,
                period_after=onset.period_after,
                criticality=onset.criticality.value,
                value=onset.value,
                lower=onset.lower,
                upper=onset.upper,
                status=onset.status.value,
                reason=onset.reason,
                states=dict(onset.states),
                gap=gap.value if gap else None,
                ratio=ratio.value if ratio else None,
                ratio_uncertainty=ratio.expanded_text if ratio else None,
            )
        )
    limit = scaled.limit if scaled else None
    delta = scaled.delta if scaled else None
    return OnsetsFile(
        format=FORMAT,
        version=VERSION,
        system=system,
        parameter=parameter,
        onsets=entries,
        limit=Number(*_texts(limit)),
        delta=Delta(
            *_texts(delta),
            class_=scaled.verdict.name if scaled else UNDECIDED,
            consistent=scaled.verdict.consistent if scaled else None,
        ),
    )


def _texts(number: Estimate | None) -> tuple[str | None, str | None]:
    return (None, None) if number is None else (number.value, number.expanded_text)


def write_onsets_text(file: OnsetsFile) -> str:
    """JSON text of the file, ending in a line break."""
    return json.dumps(msgspec.to_builtins(file), indent=1, ensure_ascii=False) + "\n"


def read_onsets_bytes(data: bytes, *, file: str = "") -> OnsetsFile:
    """Read an onsets file.

    Raises
    ------
    OnsetsFileError
        It is no such file, is of a later version, or holds something that does not fit, with its place.
    """
    if len(data) > MAX_FILE_BYTES:
        raise OnsetsFileError("is too large for an onsets file", where=file, what_to_do="check the file")
    try:
        plain = msgspec.json.decode(data)
    except (msgspec.DecodeError, UnicodeDecodeError, RecursionError) as error:
        reason = str(error).removesuffix(".")
        raise OnsetsFileError(
            f"is not JSON ({reason[:1].lower()}{reason[1:]})",
            where=file,
            what_to_do="export the onsets again",
        ) from error
    _check_header(plain, file)
    try:
        read = msgspec.convert(plain, OnsetsFile)
    except msgspec.ValidationError as error:
        reason, _, place = str(error).partition(" - at `$.")
        where = ", ".join(part for part in (file, place.removesuffix("`")) if part)
        raise OnsetsFileError(
            reason[:1].lower() + reason[1:], where=where, what_to_do="export the onsets again"
        ) from error
    for number, entry in enumerate(read.onsets):
        _check_entry(entry, f"onsets[{number}]", file)
    return read


def _check_header(plain: Any, file: str) -> None:
    if not isinstance(plain, dict) or plain.get("format") != FORMAT:
        raise OnsetsFileError(
            f'is JSON, but not an onsets file: it has no "format": "{FORMAT}"',
            where=file,
            what_to_do="pass a file that was written with --json",
        )
    version = plain.get("version")
    if isinstance(version, int) and version > VERSION:
        raise OnsetsFileError(
            f"has format version {version}, and this Tinemark reads up to {VERSION}",
            where=file,
            what_to_do="use a newer Tinemark",
        )
    if version != VERSION or isinstance(version, bool):
        raise OnsetsFileError("has no valid version", where=file, what_to_do="export the onsets again")


def _check_entry(entry: Entry, place: str, file: str) -> None:
    def fail(message: str, key: str) -> OnsetsFileError:
        where = ", ".join(part for part in (file, f"{place}.{key}") if part)
        return OnsetsFileError(message, where=where, what_to_do="export the onsets again")

    if entry.kind not in {kind.value for kind in Kind}:
        raise fail(f'"{entry.kind[:40]}" is no kind of onset', "kind")
    if entry.status not in {status.value for status in Status}:
        raise fail(f'"{entry.status[:40]}" is no status', "status")
    numbers: dict[str, Fraction] = {}
    for key in ("value", "lower", "upper", "gap", "ratio", "ratio_uncertainty"):
        text = getattr(entry, key)
        if text is not None:
            try:
                numbers[key] = exact(text).fraction
            except NumberError as error:
                raise fail(error.message, key) from error
    if not numbers["lower"] <= numbers["value"] <= numbers["upper"]:
        raise fail("the value lies outside its own interval", "value")
