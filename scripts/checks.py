"""Every check of the project, run together: pytest, ruff, mypy, the import contract."""

from __future__ import annotations

import os
import subprocess
import sys
from concurrent.futures import ThreadPoolExecutor

import environment
import libraries


def check_everything(pytest_arguments: list[str]) -> int:
    """Run every check and print one closing line for each; 0 when all passed.

    The checks that only read the sources run beside pytest, on the other core, and their words are
    printed once it is done.
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
    with ThreadPoolExecutor(max_workers=1) as beside:
        running = {name: beside.submit(_read, command, surroundings) for name, command in reading.items()}
        pytest = subprocess.run(
            [python, "-m", "pytest", *pytest_arguments], check=False, cwd=environment.ROOT, env=surroundings
        )
        failed = {"pytest": pytest.returncode != 0}
        for name, answer in running.items():
            finished = answer.result()
            failed[name] = finished.returncode != 0
            if failed[name]:
                print(f"\n==== {name}\n{finished.stdout}", flush=True)
    print()
    for name, bad in failed.items():
        print(f"{name}: {'FAILED' if bad else 'good'}")
    return 1 if any(failed.values()) else 0


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
