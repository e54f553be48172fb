"""Every check of the project, run together: pytest, ruff, mypy, the import contract."""

from __future__ import annotations

import os
import subprocess
import sys
from concurrent.futures import ThreadPoolExecutor

import environment
import libraries

SECOND_HALF = ("equations", "onsets", "verify")
"""Folders of tests/ that take about half of the time, and are run by a second pytest on the other core."""


def check_everything(pytest_arguments: list[str]) -> int:
    """Run every check and print one closing line for each; 0 when all passed.

    Without arguments the tests are divided between two runs of pytest, side by side. The second run and
    the checks that only read the sources are told of once the first is done.
    """
    if sys.platform.startswith("linux"):
        libraries.provide(libraries.TESTS)
    environment.prepare(environment.RUN_REQUIREMENTS, environment.TEST_REQUIREMENTS)
    python = str(environment.python())
    tools = environment.python().parent
    reading = {
        "ruff check": [python, "-m", "ruff", "check", "app", "scripts", "tests"],
        "ruff format": [python, "-m", "ruff", "format", "--check", "app", "scripts", "tests"],
        "mypy": [python, "-m", "mypy"],
        "import contract": [str(tools / "lint-imports"), "--no-cache"],
    }
    surroundings = {name: value for name, value in os.environ.items() if name != "PYTHONHOME"}
    surroundings["PYTHONPATH"] = str(environment.ROOT / "app")
    surroundings.setdefault("QT_QPA_PLATFORM", "offscreen")
    first, second = _halves(pytest_arguments)
    pytest = [python, "-m", "pytest"]
    with ThreadPoolExecutor(max_workers=2) as beside:
        running = {}
        if second:
            running[f"pytest {' '.join(SECOND_HALF)}"] = beside.submit(
                _read, [*pytest, *second], surroundings
            )
        running |= {name: beside.submit(_read, command, surroundings) for name, command in reading.items()}
        ended = subprocess.run([*pytest, *first], check=False, cwd=environment.ROOT, env=surroundings)
        failed = {"pytest": ended.returncode != 0}
        for name, answer in running.items():
            finished = answer.result()
            failed[name] = finished.returncode != 0
            if failed[name] or name.startswith("pytest"):
                print(f"\n==== {name}\n{finished.stdout}", flush=True)
    print()
    for name, bad in failed.items():
        print(f"{name}: {'FAILED' if bad else 'good'}")
    return 1 if any(failed.values()) else 0


def _halves(arguments: list[str]) -> tuple[list[str], list[str]]:
    """Arguments of the two runs of pytest; the second is empty where the user says what to run."""
    if arguments:
        return arguments, []
    folders = [f"tests/{name}" for name in SECOND_HALF]
    return [f"--ignore={folder}" for folder in folders], folders


def _read(command: list[str], surroundings: dict[str, str]) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        command,
        check=False,
        cwd=environment.ROOT,
        env=surroundings,
        stdout=subprocess.PIPE,
        stderr=subprocess.STDOUT,
        text=True,
        encoding="utf-8",
        errors="replace",
    )
