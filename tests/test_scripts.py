"""The scripts that set up, check and measure."""

from __future__ import annotations

import json
import subprocess
import sys
import types
from pathlib import Path

import pytest

import bench
import checks
import environment
import libraries
from benches.measuring import Timing, alternately, at_least, at_most, reading, times_faster

ROOT = Path(__file__).resolve().parents[1]


@pytest.fixture
def venv(tmp_path, monkeypatch):
    """A made-up checkout with an environment that is current."""
    requirements = tmp_path / "scripts" / "requirements.txt"
    requirements.parent.mkdir()
    requirements.write_text("thing==1 --hash=sha256:0\n")
    folder = tmp_path / ".venv"
    monkeypatch.setattr(environment, "ROOT", tmp_path)
    monkeypatch.setattr(environment, "VENV", folder)
    environment.python().parent.mkdir(parents=True)
    environment.python().touch()
    (folder / "tinemark-requirements.stamp").write_text(environment._fingerprint(requirements))
    assert environment.is_current(requirements)
    return requirements


def test_changed_requirements_are_not_current(venv) -> None:
    venv.write_text("thing==2 --hash=sha256:0\n")
    assert not environment.is_current(venv)


def test_a_half_made_environment_is_not_current(venv) -> None:
    (environment.VENV / "tinemark-requirements.stamp").unlink()
    assert not environment.is_current(venv)


def test_an_environment_without_its_interpreter_is_not_current(venv) -> None:
    environment.python().unlink()
    assert not environment.is_current(venv)


def test_a_moved_checkout_is_not_current(venv, tmp_path, monkeypatch) -> None:
    monkeypatch.setattr(environment, "ROOT", tmp_path / "elsewhere")
    assert not environment.is_current(venv)


def test_what_is_half_made_is_made_anew(venv, monkeypatch) -> None:
    """Nothing of an interrupted start is kept, and the stamp comes last."""
    (environment.VENV / "tinemark-requirements.stamp").unlink()
    rubbish = environment.VENV / "half"
    rubbish.touch()
    order = []

    def make() -> None:
        order.append("venv")
        environment.python().parent.mkdir(parents=True)
        environment.python().touch()

    def install(command, **_):
        order.append("pip")
        assert "--require-hashes" in command
        assert not environment.is_current(venv)
        return subprocess.CompletedProcess(command, 0)

    monkeypatch.setattr(environment, "_make_venv", make)
    monkeypatch.setattr(subprocess, "run", install)
    environment.prepare(venv)
    assert order == ["venv", "pip"]
    assert not rubbish.exists()
    assert environment.is_current(venv)
    environment.prepare(venv)
    assert order == ["venv", "pip"]


def test_a_failed_installation_says_so_and_leaves_no_stamp(venv, monkeypatch) -> None:
    venv.write_text("other==1 --hash=sha256:0\n")
    monkeypatch.setattr(environment, "_make_venv", lambda: None)
    monkeypatch.setattr(subprocess, "run", lambda command, **_: subprocess.CompletedProcess(command, 1))
    with pytest.raises(SystemExit, match="could not be installed"):
        environment.prepare(venv)
    assert not environment.is_current(venv)


def test_a_start_that_is_stopped_leaves_no_stamp(venv, monkeypatch) -> None:
    def stopped() -> None:
        raise KeyboardInterrupt

    venv.write_text("other==1 --hash=sha256:0\n")
    monkeypatch.setattr(environment, "_make_venv", stopped)
    with pytest.raises(SystemExit, match="makes the environment anew"):
        environment.prepare(venv)
    assert not environment.is_current(venv)


def test_an_unchanged_start_only_becomes_the_program(venv, monkeypatch) -> None:
    became = []
    (environment.VENV / "tinemark-libraries.stamp").touch()
    monkeypatch.setattr(environment, "RUN_REQUIREMENTS", venv)
    monkeypatch.setattr(environment.os, "execv", lambda path, command: became.append(command))
    monkeypatch.setattr(environment, "prepare", lambda *_: pytest.fail("nothing is to be prepared"))
    environment.start(["ladder", "logistic"])
    assert became == [[str(environment.python()), "-m", "tinemark", "ladder", "logistic"]]


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="system libraries are Linux's matter")
def test_missing_libraries_are_named_with_the_line_that_installs_them(monkeypatch, capsys) -> None:
    wanted = {
        "libc.so.6": "libc6",
        "libnothing-of-that-name.so.1": "libnothing1",
        "no-such-program": "nothing-tools",
    }
    assert libraries.missing(wanted) == ["libnothing1", "nothing-tools"]
    monkeypatch.setattr(libraries.os, "geteuid", lambda: 1000)
    monkeypatch.setattr(libraries, "_install", lambda _: pytest.fail("only root installs"))
    assert not libraries.provide(wanted, optional=True)
    said = capsys.readouterr().err
    assert "apt-get install --no-install-recommends libnothing1 nothing-tools" in said
    with pytest.raises(SystemExit, match="libnothing1"):
        libraries.provide(wanted)


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="system libraries are Linux's matter")
def test_root_installs_only_what_is_missing(monkeypatch) -> None:
    installed: list[str] = []
    monkeypatch.setattr(libraries.os, "geteuid", lambda: 0)
    monkeypatch.setattr(libraries.shutil, "which", lambda name: f"/usr/bin/{name}")
    monkeypatch.setattr(libraries, "_is_there", lambda name: name == "there.so" or bool(installed))
    monkeypatch.setattr(libraries, "_install", installed.extend)
    assert libraries.provide({"there.so": "there", "gone.so": "gone"})
    assert installed == ["gone"]
    assert libraries.provide({"there.so": "there"})
    assert installed == ["gone"]


def test_an_old_python_gets_a_sentence() -> None:
    for script in ("run.py", "test.py"):
        source = (ROOT / "scripts" / script).read_text(encoding="ascii")
        old = types.SimpleNamespace(version_info=(3, 10, 4), exit=sys.exit)
        code = compile(source.replace("import sys\n", "", 1), script, "exec")
        with pytest.raises(SystemExit, match=r"needs Python 3\.11 or newer, and this is Python 3\.10"):
            exec(code, {"sys": old, "__name__": "__main__"})


@pytest.mark.parametrize("broken", ["pytest", "ruff", "mypy", "lint-imports", None])
def test_one_failing_check_fails_all(monkeypatch, capsys, broken: str | None) -> None:
    def run(command, **_):
        fails = broken is not None and any(part.endswith(broken) for part in command)
        return subprocess.CompletedProcess(command, int(fails), stdout="its own words")

    monkeypatch.setattr(checks.environment, "prepare", lambda *_: None)
    monkeypatch.setattr(checks.libraries, "provide", lambda *_: True)
    monkeypatch.setattr(checks.subprocess, "run", run)
    assert checks.check_everything([]) == (0 if broken is None else 1)
    lines = capsys.readouterr().out.splitlines()
    closing = [line for line in lines if line.endswith((": good", ": FAILED"))]
    assert len(closing) == 6  # the tests are run in two halves
    assert any("FAILED" in line for line in closing) == (broken is not None)


def test_bench_prints_and_writes_its_figures(monkeypatch, capsys, tmp_path) -> None:
    module = types.ModuleType("benches.made_up")
    module.figures = lambda: iter(
        [at_least("speed", 3.0, 2.0), at_most("memory", 9.0, 5.0), reading("size", 1.0)]
    )
    monkeypatch.setitem(sys.modules, "benches.made_up", module)
    monkeypatch.setattr(bench, "names", lambda: ["made_up"])
    target = tmp_path / "out.json"
    assert bench.main(["all", "--json", str(target)]) == 1
    assert "DOES NOT HOLD" in capsys.readouterr().out
    assert json.loads(target.read_text()) == [
        {"figure": "speed", "value": 3.0, "target": 2.0, "holds": True},
        {"figure": "memory", "value": 9.0, "target": 5.0, "holds": False},
        {"figure": "size", "value": 1.0, "target": None, "holds": True},
    ]
    module.figures = lambda: iter([at_least("speed", 3.0, 2.0)])
    assert bench.main(["made_up", "--json", "-"]) == 0
    assert json.loads(capsys.readouterr().out)[0]["figure"] == "speed"


def test_benches_measure_in_turn() -> None:
    calls: list[str] = []
    ticks = iter(range(1000))
    timings = alternately(
        {name: lambda name=name: calls.append(name) for name in ("ours", "peer")},
        rounds=4,
        warm_ups=1,
        clock=lambda: float(next(ticks)),
    )
    assert calls[:2] == ["ours", "peer"]
    assert calls[2:] == ["ours", "peer", "peer", "ours", "ours", "peer", "peer", "ours"]
    assert timings["ours"].seconds == (1.0, 1.0, 1.0, 1.0)
    assert times_faster(Timing((1.0, 2.0, 4.0)), Timing((10.0, 10.0, 12.0))) == 5.0


def test_every_bench_yields_figures() -> None:
    import importlib

    for name in bench.names():
        assert callable(importlib.import_module(f"benches.{name.replace('-', '_')}").figures)
