"""The private Python environment that run.py and test.py share.

`.venv` holds the pinned packages. A stamp inside it records what was installed; while it matches,
a start costs one hash of a file and goes straight on to the program.
"""

from __future__ import annotations

import hashlib
import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import NoReturn

ROOT = Path(__file__).resolve().parents[1]
VENV = ROOT / ".venv"
RUN_REQUIREMENTS = ROOT / "scripts" / "requirements.txt"
TEST_REQUIREMENTS = ROOT / "scripts" / "requirements-test.txt"


def python() -> Path:
    """Interpreter of the environment."""
    return VENV / "Scripts" / "python.exe" if os.name == "nt" else VENV / "bin" / "python"


def start(arguments: list[str]) -> NoReturn:
    """Bring the environment up to date and become ``tinemark [arguments]``."""
    if not is_current(RUN_REQUIREMENTS):
        prepare(RUN_REQUIREMENTS)
    if sys.platform.startswith("linux") and not _stamp("libraries").exists():
        import libraries

        if libraries.provide(libraries.WINDOW, optional=True):
            _stamp("libraries").touch()
    command = [str(python()), "-m", "tinemark", *arguments]
    if os.name == "nt":
        # There a replaced process hands the prompt back too early, so this one waits.
        import subprocess

        sys.exit(subprocess.run(command, check=False).returncode)
    sys.stdout.flush()
    sys.stderr.flush()
    os.execv(command[0], command)


def is_current(requirements: Path) -> bool:
    """Whether `requirements` is installed as it stands, in an environment that is whole."""
    try:
        recorded = _stamp(requirements.stem).read_text(encoding="ascii")
    except OSError:
        return False
    return recorded == _fingerprint(requirements) and python().exists()


def prepare(*requirements: Path) -> None:
    """Install every file of `requirements` that is not installed as it stands.

    The first one is the base: where it has changed, or where the environment is half made (its
    stamp is written last), everything is made anew.

    Raises
    ------
    SystemExit
        The environment cannot be made; the message says why and what to do.
    """
    try:
        with _alone():
            _prepare(requirements)
    except KeyboardInterrupt:
        sys.exit("\ntinemark: stopped; the next start makes the environment anew")


def _prepare(requirements: tuple[Path, ...]) -> None:
    import shutil
    import subprocess

    if not is_current(requirements[0]):
        if VENV.exists():
            shutil.rmtree(VENV)
        _say("making .venv (once)")
        _make_venv()
    for path in requirements:
        if is_current(path):
            continue
        _say(f"installing {path.relative_to(ROOT).as_posix()} (once; a few hundred megabytes at first)")
        install = [
            str(python()),
            "-m",
            "pip",
            "install",
            "--quiet",
            "--disable-pip-version-check",
            "--no-input",
        ]
        install += ["--require-hashes", "--only-binary=:all:", "--requirement", str(path)]
        # The caller's own import paths have no business in there.
        clean = {
            name: value for name, value in os.environ.items() if name not in ("PYTHONPATH", "PYTHONHOME")
        }
        if subprocess.run(install, check=False, env=clean, stdout=sys.stderr).returncode != 0:
            sys.exit(
                "Tinemark's packages could not be installed; pip's message above says why. "
                "Check the connection to the package index, then start again."
            )
        _stamp(path.stem).write_text(_fingerprint(path), encoding="ascii")


@contextmanager
def _alone() -> Iterator[None]:
    """Two first starts at once must not tear down each other's half-made environment."""
    try:
        import fcntl
    except ImportError:  # Windows
        yield
        return
    with open(VENV.with_name(".venv.lock"), "w") as lock:
        fcntl.flock(lock, fcntl.LOCK_EX)
        yield


def _make_venv() -> None:
    import importlib.util
    import subprocess

    if importlib.util.find_spec("ensurepip") is None and sys.platform.startswith("linux"):
        import libraries

        libraries.provide({"ensurepip": f"python3.{sys.version_info.minor}-venv"})
    if (
        subprocess.run([sys.executable, "-m", "venv", str(VENV)], check=False, stdout=sys.stderr).returncode
        != 0
    ):
        sys.exit(f"No environment could be made in {VENV}: is the folder writable, and has the disk room?")
    # One line makes the sources importable: no build, no network, and edits count at once.
    purelib = subprocess.run(
        [str(python()), "-c", "import sysconfig; print(sysconfig.get_path('purelib'))"],
        check=True,
        capture_output=True,
        text=True,
    ).stdout.strip()
    Path(purelib, "tinemark.pth").write_text(f"{ROOT / 'app'}\n", encoding="utf-8")


def _fingerprint(requirements: Path) -> str:
    # The folder belongs to it: a moved checkout leaves absolute paths behind inside the environment.
    content = requirements.read_bytes() + b"\0" + os.fsencode(ROOT)
    return hashlib.sha256(content).hexdigest()


def _stamp(name: str) -> Path:
    return VENV / f"tinemark-{name}.stamp"


def _say(text: str) -> None:
    print(f"tinemark: {text}", file=sys.stderr, flush=True)
