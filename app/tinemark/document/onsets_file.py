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

from tinemark.document.margin import OperatingPoint, margin_sentence, margin_to
from tinemark.document.rounding import plain
from tinemark.document.tolerance import budget_of
from tinemark.onsets.ladder_points import Estimate
from tinemark.onsets.results import Certificate, Kind, Onset, Status
from tinemark.onsets.scaling import UNDECIDED, Scaling
from tinemark.systems.errors import NumberError, TinemarkError
from tinemark.systems.exact import exact, fraction_text
from tinemark.systems.system import System

FORMAT: Final = "tinemark-onsets"
VERSION = 1
SHARE_DIGITS = 6
"""Significant digits of what follows from tolerances."""
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


class Slope(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """How an onset moves with one other parameter, and that parameter's share of its variance (0 to 1)."""

    parameter: str
    derivative: str
    share: str | None


class MarginEntry(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """Distance from the operating point to an onset: onset minus operating point, and its uncertainties.

    `expanded_uncertainty` has the coverage factor 2; both are None where no tolerance counts.
    """

    operating_point: str
    value: str
    percent: str | None
    standard_uncertainty: str | None
    expanded_uncertainty: str | None
    sentence: str


class CertificateEntry(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """How to check a proof again; see `onsets.results.Certificate`."""

    system_text: str
    kind: str
    period: int
    parameter: str
    criticality: str
    precision: int
    parameter_box: tuple[str, str]
    state_boxes: list[tuple[str, str, str]]
    digest: str


class Expected(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """An onset of the ladder that is not known yet, with its expanded uncertainty."""

    level: int
    value: str
    uncertainty: str


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
    sensitivities: list[Slope] = []
    consequence: str = ""
    margin: MarginEntry | None = None
    certificate: CertificateEntry | None = None


class OnsetsFile(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """The whole file."""

    format: Literal["tinemark-onsets"]
    version: int
    system: str
    parameter: str
    onsets: list[Entry]
    limit: Number
    delta: Delta
    alpha: Number = Number(None, None)
    expected: list[Expected] = []


def onsets_file(
    system: str,
    parameter: str,
    found: Sequence[Found],
    scaled: Scaling | None,
    known: System | None = None,
) -> OnsetsFile:
    """The file for a set of onsets.

    Parameters
    ----------
    system
        Name or path of the system, as its user wrote it.
    found
        Onsets in the order to be written.
    scaled
        What a ladder's onsets say together; None for single onsets.
    known
        The onsets' system, for shares and margins by its tolerances; None leaves them out.
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
                sensitivities=_slopes(onset, known),
                consequence=onset.consequence,
                margin=_margin(onset, known),
                certificate=_certificate(onset.certificate),
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
        alpha=Number(*_texts(scaled.alpha if scaled else None)),
        expected=[
            Expected(item.level, item.onset.value, item.onset.expanded_text)
            for item in (scaled.predictions if scaled else ())
        ],
    )


def _certificate(held: Certificate | None) -> CertificateEntry | None:
    if held is None:
        return None
    return CertificateEntry(
        system_text=held.system_text,
        kind=held.kind,
        period=held.period,
        parameter=held.parameter,
        criticality=held.criticality,
        precision=held.precision,
        parameter_box=held.parameter_box,
        state_boxes=list(held.state_boxes),
        digest=held.digest,
    )


def _slopes(onset: Onset, known: System | None) -> list[Slope]:
    shares = {line.parameter: line.share for line in budget_of(onset, known).lines} if known else {}

    def text(name: str) -> str | None:
        share = shares.get(name)
        return None if share is None else fraction_text(share, SHARE_DIGITS)

    return [Slope(item.name, item.derivative, text(item.name)) for item in onset.sensitivities]


def _margin(onset: Onset, known: System | None) -> MarginEntry | None:
    if known is None or onset.parameter not in known.parameter_names:
        return None
    point = OperatingPoint(known.parameter(onset.parameter).value.fraction)
    margin = margin_to(onset, known, point)
    return MarginEntry(
        operating_point=fraction_text(point.value),
        value=fraction_text(margin.distance),
        percent=_rounded(margin.percent),
        standard_uncertainty=_rounded(margin.standard),
        expanded_uncertainty=_rounded(margin.expanded),
        sentence=plain(margin_sentence(margin)),
    )


def _rounded(number: Fraction | None) -> str | None:
    return None if number is None else fraction_text(number, SHARE_DIGITS)


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
    for number, slope in enumerate(entry.sensitivities):
        try:
            exact(slope.derivative)
            exact(slope.share or "0")
        except NumberError as error:
            raise fail(error.message, f"sensitivities[{number}]") from error
