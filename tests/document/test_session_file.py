"""Sessions come back the same to the byte, and saving loses nothing."""

from __future__ import annotations

import io
import json
import os
import stat
import zipfile
from dataclasses import replace
from fractions import Fraction
from pathlib import Path
from typing import Any

import onset_samples as known
import pytest
from hypothesis import given, settings
from session_samples import (
    CUBIC_TEXT,
    certified_session,
    followed_session,
    full_session,
    json_of,
    packed,
    pick,
    sessions,
)

from tinemark.document import atomic_file, session_file
from tinemark.document import ledger as led
from tinemark.document import session as ses
from tinemark.document.ladders import grouped
from tinemark.document.proofs import with_doubts
from tinemark.document.session import Session
from tinemark.document.session_file import open_session, read_session, save_session, session_bytes
from tinemark.systems.errors import SessionFileError

FILES = Path(__file__).parent / "files"


# The same again


def test_a_whole_session_comes_back(tmp_path: Path) -> None:
    session = with_doubts(full_session())
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
    # Its proofs left no certificates: what says proved in the file is not relied on.
    assert {row.onset.status.value for row in opened.ledger.rows} == {"estimated", "read by eye", "measured"}
    expected = with_doubts(expected)
    # How rows are grouped may improve; what they are may not change.
    regrouped = [
        replace(s, ledger=replace(s.ledger, rows=grouped(s.ledger.rows))) for s in (opened, expected)
    ]
    assert regrouped[0] == regrouped[1]


def test_the_version_2_file_still_opens() -> None:
    """Written once by schema version 2 and never again. No alpha was kept then, so none is there."""
    data = (FILES / "version_2.tinemark").read_bytes()
    assert read_session(data) == certified_session()
    assert read_session(data).ledger.alphas == ()


def test_the_present_version_is_written_to_the_byte() -> None:
    """A change of what is written needs a new schema version: then this file gets a younger brother."""
    data = (FILES / "version_3.tinemark").read_bytes()
    assert read_session(data) == followed_session()
    assert session_bytes(read_session(data)) == data


def test_alpha_of_a_followed_ladder_is_there_again() -> None:
    """As the ratio panel shows it: the number while the ladder's rows are the same, else nothing."""
    opened = read_session(session_bytes(followed_session()))
    found = led.estimates(opened.ledger, "L1")
    assert found is not None
    assert found.alpha is not None
    assert (found.alpha.value, found.alpha.uncertainty) == (Fraction("-2.50290787509589"), Fraction("3e-14"))
    without = led.remove(opened.ledger, ["r6"])
    assert without.alphas == opened.ledger.alphas[1:]
    shorter = led.estimates(without, "L1")
    assert shorter is not None
    assert (shorter.alpha, shorter.alpha_reason) == (None, "")
    window = led.estimates(opened.ledger, "L7")
    assert window is not None
    assert (window.alpha, window.alpha_reason) == (None, "alpha needs at least 5 successive proved levels")


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
    """The machinery, on invented formats."""
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
    with zipfile.ZipFile(FILES / "version_1.tinemark") as archive:
        plain = json.loads(archive.read("session.json"))
    plain["heading"] = plain.pop("title")
    plain["version"] = 0
    data = packed(json.dumps(plain).encode())
    with pytest.raises(SessionFileError, match="0 is no schema version"):
        read_session(data)
    monkeypatch.setattr(session_file, "OLDEST_VERSION", 0)

    def rename(old: dict[str, Any]) -> dict[str, Any]:
        return {"title" if key == "heading" else key: value for key, value in old.items()}

    monkeypatch.setattr(session_file, "MIGRATIONS", {**session_file.MIGRATIONS, 0: rename})
    assert read_session(data) == read_session((FILES / "version_1.tinemark").read_bytes())


def test_a_newer_version_is_refused_in_words() -> None:
    data = packed(json_of(full_session()).replace(b'"version": 3', b'"version": 7'))
    with pytest.raises(
        SessionFileError, match=r"f, version: has schema version 7.*reads up to 3; open it with a newer"
    ):
        read_session(data, file="f")


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
