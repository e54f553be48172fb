"""A bad session file gives a clear, typed error and does nothing else."""

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
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from session_samples import CUBIC_TEXT, full_session, json_of, packed

from tinemark.document.session_file import open_session, read_session, session_bytes
from tinemark.systems.errors import SessionFileError


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
