"""Sessions come back the same to the byte, and a bad file gives a clear error and nothing else."""

from __future__ import annotations

import io
import json
import os
import pickle
import random
import stat
import struct
import warnings
import zipfile
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import onset_samples as known
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from session_samples import CUBIC_TEXT, full_session, pick, sessions

from tinemark.document import atomic_file, session_file
from tinemark.document import session as ses
from tinemark.document.ladders import grouped
from tinemark.document.session import Session
from tinemark.document.session_file import open_session, read_session, save_session, session_bytes
from tinemark.systems.errors import SessionFileError

FILES = Path(__file__).parent / "files"


# The same again


def test_a_whole_session_comes_back(tmp_path: Path) -> None:
    session = full_session()
    first, second = tmp_path / "a.tinemark", tmp_path / "b.tinemark"
    save_session(session, first)
    opened = open_session(first)
    assert opened == session
    save_session(opened, second)
    assert first.read_bytes() == second.read_bytes()


@settings(max_examples=60, deadline=None)
@given(sessions())
def test_save_open_save_gives_the_same_bytes(session: Session) -> None:
    data = session_bytes(session)
    opened = read_session(data)
    assert opened == session
    assert session_bytes(opened) == data


def test_rows_keep_the_text_of_their_system() -> None:
    session = pick(full_session(), known.flip("3.2", 8))
    cubic = ses.with_system(session, CUBIC_TEXT)
    cubic = pick(cubic, known.flip("2.2360679", 2, width="1e-7"))
    opened = read_session(session_bytes(cubic))
    assert len(opened.systems) == 2
    old, new = (ses.system_of_row(opened, name) for name in ("r1", opened.ledger.rows[-1].id))
    assert old is not None
    assert new is not None
    assert (old.formulas, new.formulas) == (("r*x*(1 - x)",), ("r*x*(1 - x**2)",))
    assert ses.system_of_row(opened, "r999") is None


def test_the_version_1_file_still_opens() -> None:
    """Written once by schema version 1 and never again: a change of the format must not lose it."""
    opened, expected = open_session(FILES / "version_1.tinemark"), full_session()
    # How rows are grouped may improve; what they are may not change.
    regrouped = [
        replace(s, ledger=replace(s.ledger, rows=grouped(s.ledger.rows))) for s in (opened, expected)
    ]
    assert regrouped[0] == regrouped[1]


def test_the_present_version_is_written_to_the_byte() -> None:
    """A change of what is written needs a new schema version: then this file gets a younger brother."""
    data = (FILES / "version_1.tinemark").read_bytes()
    assert session_bytes(read_session(data)) == data


def test_a_repacked_session_opens(tmp_path: Path) -> None:
    session = full_session()
    assert read_session(packed(json_of(session), compression=zipfile.ZIP_DEFLATED)) == session


def test_keys_are_only_labels_in_a_file() -> None:
    """Keys made in another way, by an older or newer Tinemark, still tie the rows to their systems."""
    session = pick(ses.with_system(full_session(), CUBIC_TEXT), known.flip("2.2360679", 2, width="1e-7"))
    content = json_of(session)
    for number, (key, _) in enumerate(session.systems):
        content = content.replace(key.encode(), f"{number:064d}".encode())
    assert read_session(packed(content)) == session


# Migration


def test_steps_are_taken_one_by_one() -> None:
    """The machinery, on invented formats: there is no older version than 1 yet."""
    steps = {
        1: lambda plain: {"colour": plain["color"]},
        2: lambda plain: {"colours": [plain["colour"]]},
    }
    plain = {"version": 1, "color": "red"}
    assert session_file.migrated(plain, 1, steps, 3) == {"version": 3, "colours": ["red"]}
    with pytest.raises(SessionFileError, match="schema version 1 is not read"):
        session_file.migrated({"version": 1}, 1, {2: steps[2]}, 3)
    with pytest.raises(SessionFileError, match="does not hold what its schema version promises"):
        session_file.migrated({"version": 1}, 1, steps, 3)


def test_an_older_file_is_brought_up_to_date(monkeypatch: pytest.MonkeyPatch) -> None:
    """A made-up version 0 runs through the real reader, its step in the real register."""
    plain = json.loads(json_of(full_session()))
    plain["heading"] = plain.pop("title")
    plain["version"] = 0
    data = packed(json.dumps(plain).encode())
    with pytest.raises(SessionFileError, match="0 is no schema version"):
        read_session(data)
    monkeypatch.setattr(session_file, "OLDEST_VERSION", 0)

    def rename(old: dict[str, Any]) -> dict[str, Any]:
        return {"title" if key == "heading" else key: value for key, value in old.items()}

    monkeypatch.setattr(session_file, "MIGRATIONS", {0: rename})
    assert read_session(data) == full_session()


def test_a_newer_version_is_refused_in_words() -> None:
    data = packed(json_of(full_session()).replace(b'"version": 1', b'"version": 7'))
    with pytest.raises(
        SessionFileError, match=r"f, version: has schema version 7.*reads up to 1; open it with a newer"
    ):
        read_session(data, file="f")


# Bad files


def json_of(session: Session) -> bytes:
    with zipfile.ZipFile(io.BytesIO(session_bytes(session))) as archive:
        return archive.read("session.json")


def packed(
    content: bytes, name: str = "session.json", *, compression: int = zipfile.ZIP_STORED, mode: int = 0o100644
) -> bytes:
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", compression) as archive:
        info = zipfile.ZipInfo(name)
        info.compress_type = compression
        info.external_attr = mode << 16
        archive.writestr(info, content)
    return buffer.getvalue()


def two_members(*names: str) -> bytes:
    buffer = io.BytesIO()
    with warnings.catch_warnings(action="ignore"), zipfile.ZipFile(buffer, "w") as archive:
        for name in names:
            info = zipfile.ZipInfo("x")
            info.filename = name
            archive.writestr(info, json_of(full_session()))
    return buffer.getvalue()


def edited(change: Callable[[Any], None]) -> bytes:
    plain = json.loads(json_of(full_session()))
    change(plain)
    return packed(json.dumps(plain).encode())


def put(*path: str | int, value: Any) -> bytes:
    def change(plain: Any) -> None:
        for step in path[:-1]:
            plain = plain[step]
        plain[path[-1]] = value

    return edited(change)


def npy_of_pickle() -> bytes:
    class Bad:
        def __reduce__(self) -> tuple:
            return (os.mkdir, ("/tmp/should-never-exist",))

    header = (
        b"\x93NUMPY\x01\x00v\x00"
        + b"{'descr': '|O', 'fortran_order': False, 'shape': (1,), }".ljust(117)
        + b"\n"
    )
    return header + pickle.dumps(Bad())


def lying_size() -> bytes:
    data = bytearray(packed(b"0" * 1000))
    directory = data.rfind(b"PK\x01\x02")
    struct.pack_into("<I", data, directory + 24, 10)
    struct.pack_into("<I", data, 22, 10)
    return bytes(data)


def huge_directory() -> bytes:
    entry = packed(b"", "session.json")
    start, end = entry.rfind(b"PK\x01\x02"), entry.rfind(b"PK\x05\x06")
    entries = entry[start:end] * 300_000
    head = entry[:start]
    tail = b"PK\x05\x06" + struct.pack("<HHHHIIH", 0, 0, 0xFFFF, 0xFFFF, len(entries), len(head), 0)
    return head + entries + tail


def zip64_directory() -> bytes:
    data = packed(json_of(full_session()))
    end = data.rfind(b"PK\x05\x06")
    locator = b"PK\x06\x07" + struct.pack("<IQI", 0, end, 1)
    return data[:end] + locator + data[end:]


BAD: dict[str, tuple[Callable[[], bytes], str]] = {
    "empty": (lambda: b"", "is empty"),
    "text": (lambda: b"title = 1", "is not a Tinemark session"),
    "cut off": (lambda: session_bytes(full_session())[:-40], "broken archive"),
    "damaged": (
        lambda: session_bytes(full_session()).replace(b"hatch", b"match").replace(b"3.449", b"3.448"),
        "broken",
    ),
    "no member": (lambda: two_members(), "is not a Tinemark session"),
    "unknown member": (lambda: two_members("session.json", "notes.txt"), 'holds "notes.txt"'),
    "parent path": (lambda: two_members("../session.json"), r'holds "\.\./session.json"'),
    "absolute path": (lambda: two_members("/session.json"), 'holds "/session.json"'),
    "backslash": (lambda: two_members("..\\session.json"), "holds "),
    "null in the name": (
        lambda: packed(b"{}", "session.json").replace(b"session.json", b"session\0json"),
        "holds ",
    ),
    "twice": (lambda: two_members("session.json", "session.json"), "is there twice"),
    "link": (lambda: packed(b"/etc/passwd", mode=stat.S_IFLNK | 0o777), "is a link"),
    "pickled array": (lambda: packed(npy_of_pickle(), "bench/0.npy"), 'holds "bench/0.npy"'),
    "bomb": (lambda: packed(b" " * (15 << 20), compression=zipfile.ZIP_DEFLATED), "200 times its size"),
    "larger bomb": (
        lambda: packed(b" " * (40 << 20), compression=zipfile.ZIP_DEFLATED),
        "larger than 16 MiB",
    ),
    "bzip2": (lambda: packed(b"{}", compression=zipfile.ZIP_BZIP2), "packed in a way"),
    "lying size": (lying_size, "broken archive|another size"),
    "huge directory": (huge_directory, "more than a session holds"),
    "zip64": (zip64_directory, "more than a session holds"),
    "no JSON": (lambda: packed(b"{"), "is not JSON"),
    "binary": (lambda: packed(bytes(range(256))), "is not JSON"),
    "deep lists": (lambda: packed(b"[" * 200_000), "JSON|nested|expected"),
    "deep in a field": (
        lambda: packed(json_of(full_session())[:-2] + b', "x": ' + b"[" * 200_000),
        "JSON|nested|unknown field",
    ),
    "deep objects": (
        lambda: packed(b'{"format": "tinemark-session", "version": 1, "notes": ' + b'{"a":' * 100_000),
        "JSON|nested",
    ),
    "a number": (lambda: packed(b"3"), "expected"),
    "long number": (
        lambda: packed(b'{"format": "tinemark-session", "version": ' + b"9" * 1_000_000 + b"}"),
        "version|JSON",
    ),
    "other format": (lambda: put("format", value="something"), 'format: is not "tinemark-session"'),
    "no version": (lambda: edited(lambda plain: plain.pop("version")), "missing required field `version`"),
    "text version": (lambda: put("version", value="1"), "version: expected `int`"),
    "half version": (lambda: put("version", value=1.5), "version"),
    "negative version": (lambda: put("version", value=-1), "no schema version"),
    "unknown key": (lambda: put("class", value="tinemark.Session"), "unknown field `class`"),
    "unknown key deep": (
        lambda: put("ledger", "rows", 0, "onset", "x", value=1),
        r"ledger\.rows.*onset: .*unknown field",
    ),
    "missing key": (lambda: edited(lambda plain: plain.pop("view")), "missing required field `view`"),
    "wrong type": (lambda: put("title", value=3), "title: expected `str`"),
    "unknown rule": (lambda: put("picture", "rule", value="backwards"), r"picture\.rule: invalid enum"),
    "unknown tone": (lambda: put("picture", "tone", value="loud"), r"picture\.tone"),
    "unknown palette": (lambda: put("picture", "palette", value="mud"), r"picture\.palette"),
    "unknown budget": (lambda: put("picture", "budget", value="endless"), r"picture\.budget"),
    "too many starts": (lambda: put("picture", "starts", value=10**9), r"picture\.starts"),
    "NaN": (lambda: put("view", "left", value="nan"), 'view: "nan" is not a number'),
    "JSON NaN": (lambda: put("probe", value=float("nan")), "JSON|probe"),
    "infinite edge": (lambda: put("view", "right", value="1e999999999"), "view"),
    "zero denominator": (lambda: put("view", "right", value="1/0"), "view"),
    "long edge": (lambda: put("view", "right", value="9" * 1_000_000), r"view\.right"),
    "turned view": (lambda: put("view", "right", value="0"), "view: the view has no width"),
    "bad history": (lambda: put("history", "back", 0, "top", value="x"), r"history\.back\[0\]"),
    "bad value": (lambda: put("ledger", "rows", 0, "onset", "value", value="three"), r"rows\[.*onset\.value"),
    "huge power": (lambda: put("ledger", "rows", 0, "onset", "value", value="1e99999"), r"onset\.value"),
    "outside": (
        lambda: put("ledger", "rows", 1, "onset", "lower", value="3.6"),
        r"rows\[1\]\.onset: the value lies",
    ),
    "unknown status": (lambda: put("ledger", "rows", 0, "onset", "status", value="sure"), "onset.status"),
    "bad row name": (lambda: put("ledger", "rows", 0, "id", value="r1\n"), r"rows\[.*id"),
    "double row": (lambda: put("ledger", "rows", 0, "id", value="r2"), "is there twice"),
    "used number": (lambda: put("ledger", "next_number", value=2), "next_number"),
    "half a ladder": (lambda: put("ledger", "rows", 0, "level", value=None), "go together"),
    "double level": (lambda: put("ledger", "rows", 0, "level", value=2), "there twice"),
    "bad system": (lambda: put("system", value="title = "), "system: line 1"),
    "code in a formula": (
        lambda: put("system", value=CUBIC_TEXT.replace("r*x*(1", "__import__('os')*(1")),
        r"system: next\.x",
    ),
    "unknown parameter": (lambda: put("parameter", value="q"), 'system: there is no parameter "q"'),
    "unknown observable": (lambda: put("observe", value="y + 1"), "system: diagram.observe"),
    "double key": (
        lambda: edited(lambda plain: plain["systems"].append(plain["systems"][0])),
        r"systems\[1\]\.key: this key is there twice",
    ),
    "bad old system": (lambda: put("systems", 0, "text", value="kind = 1"), r"systems\[0\]: kind"),
    "half a character": (
        lambda: packed(json_of(full_session()).replace(b"line 1", b"\\ud800")),
        "JSON|notes",
    ),
}


@pytest.mark.parametrize("name", BAD)
def test_bad_files_are_named(name: str, tmp_path: Path) -> None:
    make, message = BAD[name]
    data = make()
    with pytest.raises(SessionFileError, match=message) as caught:
        read_session(data, file="sample.tinemark")
    assert "sample.tinemark" in caught.value.where
    assert caught.value.what_to_do
    assert len(str(caught.value)) < 600


def test_files_that_are_none(tmp_path: Path) -> None:
    for path in (tmp_path / "gone.tinemark", tmp_path, tmp_path / ("x" * 400), "nul\0byte"):
        with pytest.raises(SessionFileError):
            open_session(path)
    fifo = tmp_path / "fifo"
    if hasattr(os, "mkfifo"):
        os.mkfifo(fifo)
        with pytest.raises(SessionFileError, match="is not a file"):
            open_session(fifo)


def test_a_file_beyond_all_bounds(tmp_path: Path) -> None:
    file = tmp_path / "large.tinemark"
    with file.open("wb") as handle:
        handle.write(b"PK\x03\x04")
        handle.truncate(5 << 30)
    with pytest.raises(SessionFileError, match="larger than 32 MiB"):
        open_session(file)


def test_mutated_files_give_typed_errors_only() -> None:
    """Seeded damage to the archive and to the JSON within it."""
    whole, plain = session_bytes(full_session()), json_of(full_session())
    generator = random.Random(20_260)
    opened = 0
    for round_number in range(400):
        source = bytearray(plain if round_number % 2 else whole)
        for _ in range(generator.randint(1, 4)):
            at = generator.randrange(len(source))
            match generator.randrange(4):
                case 0:
                    source[at] = generator.randrange(256)
                case 1:
                    del source[at : at + generator.randint(1, 60)]
                case 2:
                    source[at:at] = source[generator.randrange(len(source)) :][: generator.randint(1, 60)]
                case _:
                    source[at : at + 1] = generator.choice(
                        [b'"', b"{", b"]", b"null", b"1e9", b"-", b"\0", b"\\u0000"]
                    )
        data = packed(bytes(source)) if round_number % 2 else bytes(source)
        try:
            session = read_session(data, file="f")
        except SessionFileError:
            continue
        opened += 1
        # What does open is a session in every respect.
        assert read_session(session_bytes(session)) == session
    assert opened < 200


@settings(max_examples=40, deadline=None)
@given(st.binary(max_size=400))
def test_any_bytes(data: bytes) -> None:
    for whole in (data, b"PK\x03\x04" + data, packed(data)):
        with pytest.raises(SessionFileError):
            read_session(whole)


# Saving


def test_what_could_not_be_opened_is_not_saved(tmp_path: Path) -> None:
    file = tmp_path / "a.tinemark"
    save_session(full_session(), file)
    before = file.read_bytes()
    for notes, message in (
        ("n" * 300_000, "notes: cannot be saved.*shorten it"),
        ("\ud800", "half of a character"),
    ):
        with pytest.raises(SessionFileError, match=message):
            save_session(ses.with_words(full_session(), notes=notes), file)
    assert file.read_bytes() == before
    assert [path.name for path in tmp_path.iterdir()] == ["a.tinemark"]


@pytest.mark.skipif(os.name == "nt", reason="POSIX permissions and links")
def test_permissions_and_links_are_kept(tmp_path: Path) -> None:
    real, link = tmp_path / "real.tinemark", tmp_path / "link.tinemark"
    save_session(full_session(), real)
    mask = os.umask(0)
    os.umask(mask)
    assert stat.S_IMODE(real.stat().st_mode) == 0o666 & ~mask
    real.chmod(0o640)
    link.symlink_to(real.name)
    save_session(ses.with_words(full_session(), title="changed"), link)
    assert link.is_symlink()
    assert stat.S_IMODE(real.stat().st_mode) == 0o640
    assert open_session(real).title == "changed"
    # A link to a file that is not there yet makes it there.
    ahead = tmp_path / "ahead.tinemark"
    ahead.symlink_to("later.tinemark")
    save_session(full_session(), ahead)
    assert (tmp_path / "later.tinemark").is_file()
    assert ahead.is_symlink()


@pytest.mark.parametrize("step", ["write", "fsync", "replace", "open"])
def test_a_failing_step_loses_nothing(step: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    file = tmp_path / "a.tinemark"
    save_session(full_session(), file)
    before = file.read_bytes()

    def full_disk(*_: object, **__: object) -> None:
        raise OSError(28, "No space left on device")

    if step == "write":
        original = os.fdopen

        def failing(handle: int, mode: str) -> io.IOBase:
            opened = original(handle, mode, buffering=0)
            opened.close()
            return FullDisk()

        class FullDisk(io.RawIOBase):
            def writable(self) -> bool:
                return True

            def write(self, data: object) -> int:
                raise OSError(28, "No space left on device")

        monkeypatch.setattr(atomic_file.os, "fdopen", failing)
    else:
        monkeypatch.setattr(atomic_file.os, step, full_disk)
    with pytest.raises(
        SessionFileError, match=r"cannot be saved \(no space left on device\); save it under another"
    ):
        save_session(ses.with_words(full_session(), title="changed"), file)
    monkeypatch.undo()
    assert file.read_bytes() == before
    assert [path.name for path in tmp_path.iterdir()] == ["a.tinemark"]


def test_an_interruption_leaves_no_litter(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def interrupted(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(atomic_file.os, "replace", interrupted)
    with pytest.raises(KeyboardInterrupt):
        save_session(full_session(), tmp_path / "a.tinemark")
    assert list(tmp_path.iterdir()) == []


def test_places_that_cannot_be_written(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    for path in (tmp_path / "missing" / "a.tinemark", tmp_path):
        with pytest.raises(SessionFileError, match="cannot be saved"):
            save_session(full_session(), path)
    # A file protected against writing is not replaced behind its owner's back (faked: tests may run as root).
    file = tmp_path / "a.tinemark"
    save_session(full_session(), file)
    monkeypatch.setattr(atomic_file.os, "access", lambda path, mode: False)
    with pytest.raises(SessionFileError, match="permission denied"):
        save_session(full_session(), file)
