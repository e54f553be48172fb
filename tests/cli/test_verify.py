"""`tinemark verify`: exit codes and words."""

from __future__ import annotations

import io
import json
import shutil
import zipfile
from pathlib import Path

import pytest

from tinemark.resources_path import resource

OLD = Path(__file__).parents[1] / "document" / "files" / "version_1.tinemark"


def rewritten(source: Path, target: Path, change) -> str:
    """A copy of a session with its JSON changed."""
    plain = json.loads(zipfile.ZipFile(source).read("session.json"))
    change(plain)
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w") as archive:
        archive.writestr("session.json", json.dumps(plain))
    target.write_bytes(buffer.getvalue())
    return str(target)


@pytest.fixture
def demo(tmp_path):
    path = tmp_path / "demo.tinemark"
    shutil.copy(resource("demo", "hatchery.tinemark"), path)
    return path


def test_a_whole_session_is_confirmed(tinemark, demo) -> None:
    ended = tinemark("verify", str(demo))
    assert ended.code == 0
    lines = ended.out.splitlines()
    assert all(line.endswith(": confirmed") for line in lines[:-1])
    assert lines[-1] == "10 confirmed of 10 proofs"


def onset(plain, number: int):
    return plain["ledger"]["rows"][number]["onset"]


def value_changed(plain) -> None:
    for key in ("value", "lower", "upper"):
        onset(plain, 2)[key] = onset(plain, 2)[key].replace("138.0856890", "138.0856891")


def box_changed(plain) -> None:
    middle, half = onset(plain, 2)["certificate"]["parameter_box"]
    onset(plain, 2)["certificate"]["parameter_box"] = [middle.replace("138.0856890", "138.0856891"), half]


def formula_changed(plain) -> None:
    plain["certified"] = [text.replace("(1 - stock", "(1.0000001 - stock") for text in plain["certified"]]


def status_changed(plain) -> None:
    onset(plain, 2)["status"] = "estimated"


def certificate_taken(plain) -> None:
    onset(plain, 2)["certificate"] = None


@pytest.mark.parametrize(
    ("change", "name"),
    [
        (value_changed, "value"),
        (box_changed, "box"),
        (formula_changed, "formula"),
        (status_changed, "status"),
        (certificate_taken, "status"),
    ],
)
def test_what_was_altered_is_refused_by_name(tinemark, demo, tmp_path, change, name: str) -> None:
    ended = tinemark("verify", rewritten(demo, tmp_path / "altered.tinemark", change))
    assert ended.code == 1
    assert f": refused ({name}): " in ended.out.splitlines()[2]


def test_a_session_of_version_1_says_that_nothing_bears_it_out(tinemark) -> None:
    ended = tinemark("verify", str(OLD))
    assert ended.code == 1
    assert "has no certificate" in ended.out
    assert ended.out.splitlines()[-1] == "13 refused of 13 proofs"


def test_onsets_as_json_carry_their_certificates(tinemark, tmp_path) -> None:
    assert tinemark("ladder", "logistic", "--levels", "3", "--json", "onsets.json").code == 0
    ended = tinemark("verify", "onsets.json")
    assert ended.code == 0
    assert ended.out.splitlines()[-1] == "3 confirmed of 3 proofs"
    plain = json.loads(Path("onsets.json").read_text())
    plain["onsets"][1]["criticality"] = "subcritical"
    Path("onsets.json").write_text(json.dumps(plain))
    ended = tinemark("verify", "onsets.json")
    assert ended.code == 1
    assert "refused (criticality)" in ended.out.splitlines()[1]


def test_hostile_certificates_are_refused_in_words(tinemark, tmp_path) -> None:
    assert tinemark("ladder", "logistic", "--levels", "1", "--json", "onsets.json").code == 0
    good = json.loads(Path("onsets.json").read_text())
    for key, value in (
        ("parameter_box", ["3." + "1" * 1_000_000, "1e-20"]),
        ("parameter_box", ["3", "1e-99999999999"]),
        ("parameter_box", ["nan", "inf"]),
        ("state_boxes", [["x", "0.6", "0"]] * 500),
        ("period", 10**9),
        ("period", -1),
        ("system_text", "[" * 100_000),
        ("system_text", good["onsets"][0]["certificate"]["system_text"].replace("(1", "(" * 900 + "1")),
        ("system_text", good["onsets"][0]["certificate"]["system_text"].replace("r*x", "9**9**9**9*x")),
        ("kind", "\x1b[31m"),
        ("digest", "\N{SNOWMAN}" * 1000),
    ):
        plain = json.loads(json.dumps(good))
        plain["onsets"][0]["certificate"][key] = value
        Path("bad.json").write_text(json.dumps(plain))
        ended = tinemark("verify", "bad.json")
        assert ended.code == 1, key
        assert "\x1b" not in ended.out
        assert len(ended.out) < 1000
        assert "refused" in ended.out or "not checkable here" in ended.out


def test_files_without_proofs(tinemark, tmp_path) -> None:
    ended = tinemark("verify", str(resource("systems", "henon.toml")))
    assert ended.code == 2
    assert "is a system, and holds no proofs" in ended.err
    assert tinemark("verify", "gone.tinemark").code == 2
    (tmp_path / "broken.tinemark").write_bytes(b"PK\x03\x04 and then nothing")
    assert tinemark("verify", "broken.tinemark").code == 2
    empty = rewritten(OLD, tmp_path / "empty.tinemark", lambda plain: plain["ledger"].update(rows=[]))
    ended = tinemark("verify", empty)
    assert ended.code == 1
    assert "no proof in it to check" in ended.err
