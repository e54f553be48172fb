"""Session files (`.tinemark`): saving whole, opening with suspicion.

A session is a zip with one member, `session.json`: plain data under one schema version. Saving is
deterministic to the byte, so that save, open, save gives the same file. Opening trusts nothing:
sizes, names and shapes are checked before they are used, and every fault is a
`SessionFileError` that names the file and the key.
"""

from __future__ import annotations

import io
import stat
import zipfile
import zlib
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import msgspec

from tinemark.document.atomic_file import write_whole
from tinemark.document.migrations import MIGRATIONS, Migration
from tinemark.document.proofs import with_doubts
from tinemark.document.session import Session, read_system
from tinemark.document.session_schema import FORMAT, VERSION, Misfit, PlainSession, from_plain, to_plain
from tinemark.systems.errors import SessionFileError, TinemarkError

MEMBER = "session.json"
SUFFIX = ".tinemark"
MAX_FILE_BYTES = 32 * 1024 * 1024
MAX_JSON_BYTES = 16 * 1024 * 1024
MAX_RATIO = 200
MAX_DIRECTORY_BYTES = 64 * 1024

_RATIO_COUNTS_FROM = 1024 * 1024  # a small member cannot be a bomb, however well it packs
_MOMENT = (1980, 1, 1, 0, 0, 0)  # the same in every file: when it was saved stands in the folder
_UNDAMAGED = "open an undamaged copy"

OLDEST_VERSION = 1


# Saving


def save_session(session: Session, path: str | Path) -> None:
    """Write a session. The old file stays whole until the new one is.

    Raises
    ------
    SessionFileError
        It cannot be written; nothing was changed.
    """
    data = session_bytes(session)
    try:
        write_whole(path, data)
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise SessionFileError(
            f"cannot be saved ({reason})",
            where=str(path),
            what_to_do="save it under another name or in another folder; the file is as it was",
        ) from error


def session_bytes(session: Session) -> bytes:
    """The file's bytes: the same for equal sessions, on every machine.

    The member is stored, not packed: it is small, and packing differs between builds of zlib.

    Raises
    ------
    SessionFileError
        The session holds more than a file may, so it could not be opened again.
    """
    try:
        plain = msgspec.json.format(msgspec.json.encode(to_plain(session), order="sorted"), indent=1)
    except UnicodeEncodeError as error:
        raise SessionFileError(
            "a text holds half of a character, which no file can hold", what_to_do="type that text again"
        ) from error
    buffer = io.BytesIO()
    info = zipfile.ZipInfo(MEMBER, date_time=_MOMENT)
    info.compress_type = zipfile.ZIP_STORED
    info.create_system = 3  # the same on every system
    info.external_attr = (stat.S_IFREG | 0o644) << 16
    with zipfile.ZipFile(buffer, "w") as archive:
        archive.writestr(info, plain)
    data = buffer.getvalue()
    # A file that cannot be opened again is lost work: what is written must be what can be read.
    try:
        back = read_session(data, file="this session")
    except SessionFileError as error:
        raise SessionFileError(
            f"cannot be saved: {error.message}",
            where=error.where,
            what_to_do="change or shorten it; nothing was written, and the session is still open",
        ) from error
    if back != session:
        raise SessionFileError("this session would not come back the same", what_to_do="report this fault")
    return data


# Opening


def open_session(path: str | Path) -> Session:
    """Read a session file; rows whose certificates do not fit them are shown as estimated (`with_doubts`).

    Raises
    ------
    SessionFileError
        What is wrong with it, with file and key.
    """
    file = Path(path)
    try:
        if not stat.S_ISREG(file.stat().st_mode):
            raise SessionFileError("is not a file", where=str(path), what_to_do="name a session file")
        with file.open("rb") as handle:
            data = handle.read(MAX_FILE_BYTES + 1)
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise SessionFileError(
            f"cannot be read ({reason.lower()})", where=str(path), what_to_do="check the path"
        ) from error
    return with_doubts(read_session(data, file=str(path)))


def read_session(data: bytes, *, file: str = "") -> Session:
    """The session in the bytes of a file, exactly as it stands there; see `open_session`."""
    plain = _checked(_json_of(data, file), file)
    try:
        session = from_plain(plain)
    except Misfit as error:
        raise _fault(error.message, file, error.key) from error
    return _with_present_keys(session, _present_keys(plain, file))


def _fault(message: str, file: str, key: str = "", what_to_do: str = _UNDAMAGED) -> SessionFileError:
    where = ", ".join(part for part in (file, key) if part)
    return SessionFileError(message, where=where, what_to_do=what_to_do)


def _json_of(data: bytes, file: str) -> bytes:
    """The one member of the archive, its size checked before and while it is unpacked."""
    if len(data) > MAX_FILE_BYTES:
        raise _fault(f"is larger than {MAX_FILE_BYTES >> 20} MiB, and no session is", file)
    if not data.startswith(b"PK\x03\x04"):
        what = "is empty" if not data else "is not a Tinemark session"
        raise _fault(what, file, what_to_do=f"name a session file ({SUFFIX})")
    _check_directory(data, file)
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            info = _only_member(archive.infolist(), file)
            with archive.open(info) as member:
                content = member.read(MAX_JSON_BYTES + 1)
    except (
        zipfile.BadZipFile,
        zlib.error,
        EOFError,
        OSError,
        NotImplementedError,
        RuntimeError,
        ValueError,
        UnicodeError,
    ) as error:
        raise _fault("is a broken archive", file) from error
    if len(content) > MAX_JSON_BYTES or len(content) != info.file_size:
        raise _fault("says another size than it has, or is too large", file, MEMBER)
    return content


def _check_directory(data: bytes, file: str) -> None:
    """Refuse a directory of a million entries before it is read."""
    end = data.rfind(b"PK\x05\x06", max(0, len(data) - 65_557))
    if end < 0 or end + 22 > len(data):
        raise _fault("is a broken archive (cut off?)", file)
    size = int.from_bytes(data[end + 12 : end + 16], "little")
    if size > MAX_DIRECTORY_BYTES or data[max(0, end - 20) : end].startswith(b"PK\x06\x07"):
        raise _fault("is an archive of more than a session holds", file)


def _only_member(members: list[zipfile.ZipInfo], file: str) -> zipfile.ZipInfo:
    for info in members:
        if info.filename != MEMBER or info.orig_filename != MEMBER:
            raise _fault(f'holds "{_printable(info.orig_filename)}", which no session holds', file)
        kind = stat.S_IFMT(info.external_attr >> 16)
        if kind not in (0, stat.S_IFREG):
            raise _fault("is a link or a folder, and should be a file", file, MEMBER)
    if len(members) != 1:
        raise _fault("is missing" if not members else "is there twice", file, MEMBER)
    info = members[0]
    if info.flag_bits & 0x1:
        raise _fault("is encrypted", file, MEMBER, "save it without a password")
    if info.compress_type not in (zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED):
        raise _fault("is packed in a way that is not read here", file, MEMBER)
    if info.file_size > MAX_JSON_BYTES:
        raise _fault(f"is larger than {MAX_JSON_BYTES >> 20} MiB", file, MEMBER)
    if info.file_size > _RATIO_COUNTS_FROM and info.file_size > MAX_RATIO * info.compress_size:
        raise _fault(f"unpacks to more than {MAX_RATIO} times its size", file, MEMBER)
    return info


def _printable(name: str) -> str:
    return "".join(c if c.isprintable() else "?" for c in name[:60])


class _Header(msgspec.Struct):
    format: str
    version: int


def _checked(content: bytes, file: str) -> PlainSession:
    """The plain data, brought up to the present schema."""
    try:
        header = msgspec.json.decode(content, type=_Header)
        version = header.version
        if header.format != FORMAT:
            raise _fault(f'is not "{FORMAT}"', f"{file}, {MEMBER}" if file else MEMBER, "format")
        if version > VERSION:
            raise _fault(
                f"has schema version {version}, and this Tinemark reads up to {VERSION}",
                file,
                "version",
                "open it with a newer Tinemark",
            )
        if version == VERSION:
            return msgspec.json.decode(content, type=PlainSession)
        if version < OLDEST_VERSION:
            raise _fault(f"{version} is no schema version", file, "version")
        return msgspec.convert(migrated(msgspec.json.decode(content), version), type=PlainSession)
    except msgspec.ValidationError as error:
        reason, _, place = str(error).partition(" - at `$")
        raise _fault(_lower(reason), file, place.strip("`").removeprefix(".")) from error
    except (msgspec.DecodeError, UnicodeDecodeError) as error:
        raise _fault(f"is not JSON: {_lower(str(error))}", file, MEMBER) from error
    except RecursionError as error:
        raise _fault("is nested too deeply", file, MEMBER) from error


def _lower(text: str) -> str:
    text = text.removesuffix(".")
    return text[:1].lower() + text[1:]


def migrated(
    plain: dict[str, Any],
    version: int,
    migrations: Mapping[int, Migration] | None = None,
    present: int = VERSION,
) -> dict[str, Any]:
    """Plain data of an older schema version, brought to the present one step by step.

    Raises
    ------
    SessionFileError
        A step from that version is not known, or the data are not what it expects.
    """
    steps = MIGRATIONS if migrations is None else migrations
    while version < present:
        step = steps.get(version)
        if step is None:
            raise _fault(f"schema version {version} is not read any more", "", "version")
        version += 1
        try:
            plain = {**step(plain), "version": version}
        except (LookupError, TypeError, ValueError, AttributeError) as error:
            raise _fault("does not hold what its schema version promises", "", MEMBER) from error
    return plain


def _present_keys(plain: PlainSession, file: str) -> dict[str, str]:
    """Keys in the file and the keys that this Tinemark gives the same systems; all systems are read.

    In a file a key is only a label that ties rows to a text: should keys be made otherwise one day, old
    files still open.
    """
    try:
        system = read_system(plain.system)
        system.with_diagram(plain.parameter, plain.observe)
    except TinemarkError as error:
        raise _inside("system", error, file) from error
    keys: dict[str, str] = {}
    for n, kept in enumerate(plain.systems):
        if kept.key in keys:
            raise _fault("this key is there twice", file, f"systems[{n}].key")
        try:
            keys[kept.key] = read_system(kept.text).key
        except TinemarkError as error:
            raise _inside(f"systems[{n}]", error, file) from error
    return keys


def _with_present_keys(session: Session, keys: Mapping[str, str]) -> Session:
    if all(old == new for old, new in keys.items()):
        return session
    rows = tuple(
        replace(row, system_key=keys.get(row.system_key, row.system_key)) for row in session.ledger.rows
    )
    systems = tuple((keys.get(key, key), text) for key, text in session.systems)
    return replace(session, ledger=replace(session.ledger, rows=rows), systems=systems)


def _inside(key: str, error: TinemarkError, file: str) -> SessionFileError:
    return _fault(
        f"{error.where}: {error.message}" if error.where else error.message, file, key, error.what_to_do
    )
