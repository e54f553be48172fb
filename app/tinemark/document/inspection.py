"""What a file is: any file of ours is recognised by what it holds, not by its name."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from tinemark.document.onsets_file import MAX_FILE_BYTES, read_onsets_bytes
from tinemark.systems.errors import TinemarkError
from tinemark.systems.system import System, formula_section
from tinemark.systems.system_file import read_system_bytes

_ZIP = b"PK\x03\x04"
_EMPTY_ZIP = b"PK\x05\x06"
_PNG = b"\x89PNG\r\n\x1a\n"


@dataclass(frozen=True)
class Inspection:
    """What a file is ("system", "session", "onsets" or "picture"), and lines that say what is in it."""

    kind: str
    lines: tuple[str, ...]


def inspect_file(path: Path) -> Inspection:
    """Read any file of ours.

    Raises
    ------
    TinemarkError
        It is none, or something is wrong in it: where, what, and what to do.
    """
    data = _start_of(path)
    if data.startswith((_ZIP, _EMPTY_ZIP)) or (path.suffix == ".tinemark" and data):
        return _session(path)
    if data.startswith(_PNG):
        return _picture(path, data)
    if data.lstrip()[:1] in (b"{", b"[") and not _looks_like_toml(data):
        return _onsets(path, data)
    return _system(path, data)


def _start_of(path: Path) -> bytes:
    try:
        if path.is_dir():
            raise TinemarkError("is a folder", where=str(path), what_to_do="name a file")
        with path.open("rb") as file:
            data = file.read(MAX_FILE_BYTES + 1)
    except (OSError, ValueError) as error:
        reason = str(getattr(error, "strerror", None) or error).lower()
        raise TinemarkError(
            f"cannot be read ({reason})", where=str(path), what_to_do="check the path"
        ) from error
    if not data.strip():
        raise TinemarkError(
            "is empty",
            where=str(path),
            what_to_do="Tinemark reads systems (TOML), sessions (.tinemark) and onsets files (JSON)",
        )
    return data


def _looks_like_toml(data: bytes) -> bool:
    # A TOML file may begin with a section, "[states.x]"; JSON never has a line of that form.
    first = data.lstrip().split(b"\n", 1)[0].strip()
    return first.startswith(b"[") and first.endswith(b"]") and b'"' not in first and len(first) > 2


def _system(path: Path, data: bytes) -> Inspection:
    if b"\0" in data[:4096]:
        raise TinemarkError(
            "is a binary file that is none of ours",
            where=str(path),
            what_to_do="Tinemark reads systems (TOML), sessions (.tinemark) and onsets files (JSON)",
        )
    system = read_system_bytes(data, file=str(path))
    # Reading every formula is what finds a mistake in one.
    surfaces = len(system.surfaces)
    lines = [
        f'a system: "{system.title}" ({system.kind}, {_count(len(system.states), "state")})',
        "states: " + ", ".join(system.state_names),
        "parameters: " + ", ".join(f"{p.name} = {p.value}" for p in system.parameters),
        *(
            f"{formula_section(system.kind)} {name} = {text}"
            for name, text in zip(system.state_names, system.formulas, strict=True)
        ),
        *_sample(system),
        f"diagram: {system.observe} against {system.diagram_parameter}",
        "smooth" if surfaces == 0 else f"piecewise, with {_count(surfaces, 'switching surface')}",
    ]
    return Inspection("system", tuple(lines))


def _sample(system: System) -> tuple[str, ...]:
    if system.sample is None:
        return ()
    if system.kind == "driven":
        return (f"sampled every {system.sample.every}",)
    return (f"sampled where {system.sample.crosses} crosses zero, {system.sample.direction}",)


def _session(path: Path) -> Inspection:
    from tinemark.document.ledger import ladder_ids, ladder_title
    from tinemark.document.proofs import waits
    from tinemark.document.session import system_of
    from tinemark.document.session_file import open_session

    session = open_session(path)
    system = system_of(session)
    rows = session.ledger.rows
    proved = sum(row.onset.status.value == "proved" for row in rows)
    waiting = sum(waits(row.onset) for row in rows)
    lines = [
        f'a session: "{session.title}"' if session.title else "a session",
        f'system: "{system.title}" ({system.kind}, {_count(len(system.states), "state")})',
        f"diagram: {session.observe} against {session.parameter}",
        f"ledger: {_count(len(rows), 'row')}, {proved} proved"
        + (f", {waiting} to be proved again (see verify)" if waiting else ""),
        *(f"ladder: {ladder_title(session.ledger, name)}" for name in ladder_ids(session.ledger)),
    ]
    return Inspection("session", tuple(lines))


def _onsets(path: Path, data: bytes) -> Inspection:
    read = read_onsets_bytes(data, file=str(path))
    proved = sum(entry.status == "proved" for entry in read.onsets)
    lines = [
        f"an onsets file, format version {read.version}",
        f"system: {read.system}; parameter: {read.parameter}",
        f"{_count(len(read.onsets), 'onset')}, {proved} proved",
    ]
    if read.limit.value is not None:
        lines.append(f"limit: {read.limit.value} ± {read.limit.uncertainty}")
    if read.delta.value is not None:
        lines.append(f"delta: {read.delta.value} ± {read.delta.uncertainty} ({read.delta.class_})")
    return Inspection("onsets", tuple(lines))


def _picture(path: Path, data: bytes) -> Inspection:
    if len(data) < 33 or data[12:16] != b"IHDR":
        raise TinemarkError("is a broken PNG picture", where=str(path), what_to_do="write the picture again")
    width, height = (int.from_bytes(data[at : at + 4], "big") for at in (16, 20))
    return Inspection("picture", (f"a PNG picture of {width} x {height} pixels",))


def _count(number: int, noun: str) -> str:
    return f"{number} {noun}" + ("" if number == 1 else "s")
