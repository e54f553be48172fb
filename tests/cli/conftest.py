"""Runs the command line in this process."""

from __future__ import annotations

import sys
from dataclasses import dataclass
from pathlib import Path

import pytest

from tinemark.cli import main

sys.path.insert(0, str(Path(__file__).parent))

from own_system import OWN


@dataclass(frozen=True)
class Ended:
    code: int
    out: str
    err: str


@pytest.fixture
def tinemark(capsys, monkeypatch, tmp_path):
    """tinemark(*words) -> Ended, in a folder of its own and without a display."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.delenv("DISPLAY", raising=False)
    monkeypatch.delenv("WAYLAND_DISPLAY", raising=False)

    def run(*words: str) -> Ended:
        code = main(words)
        captured = capsys.readouterr()
        return Ended(code, captured.out, captured.err)

    return run


@pytest.fixture
def own(tmp_path):
    """own(text) -> path of a system file; own(formula=…) puts one formula into a good one."""

    def write(text: str | bytes = OWN, *, formula: str | None = None, name: str = "own.toml") -> str:
        if formula is not None:
            assert isinstance(text, str)
            text = text.replace("r*x*(1 - x)", formula)
        path = tmp_path / name
        path.write_bytes(text if isinstance(text, bytes) else text.encode())
        return str(path)

    return write
