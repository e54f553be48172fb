"""The rules of the house, checked on the sources themselves."""

from __future__ import annotations

import ast
import re
import shutil
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest
from packaging.requirements import Requirement
from packaging.utils import canonicalize_name

ROOT = Path(__file__).resolve().parents[1]
APP = ROOT / "app" / "tinemark"
TOP_LEVEL = {"pyproject.toml", "README.md", "DEVELOPERS.md", "app", "tests", "resources", "scripts"}
REQUIREMENT_FILES = ("requirements.txt", "requirements-test.txt")


def tracked() -> list[Path]:
    listing = subprocess.run(
        ["git", "ls-files", "-z", "--cached"], cwd=ROOT, capture_output=True, text=True, check=False
    )
    if listing.returncode != 0:
        pytest.skip("not a git checkout")
    return [Path(name) for name in listing.stdout.split("\0") if name]


def test_top_level_is_exactly_the_designs() -> None:
    names = {path.parts[0] for path in tracked()}
    assert {name for name in names if not name.startswith(".")} == TOP_LEVEL


def lint_imports(folder: Path) -> subprocess.CompletedProcess[str]:
    code = (
        "import sys; from importlinter import cli; "
        f"sys.exit(cli.lint_imports(config_filename={str(ROOT / 'pyproject.toml')!r}, no_cache=True))"
    )
    return subprocess.run(
        [sys.executable, "-c", code],
        cwd=folder,
        env=_environment(folder),
        capture_output=True,
        text=True,
        check=False,
    )


def _environment(app: Path) -> dict[str, str]:
    import os

    return {**os.environ, "PYTHONPATH": str(app), "PYTHONIOENCODING": "utf-8"}


def test_import_contract_holds() -> None:
    result = lint_imports(ROOT / "app")
    assert result.returncode == 0, result.stdout + result.stderr


@pytest.mark.parametrize(
    ("room", "line"),
    [
        ("systems", "import tinemark.work"),
        ("density", "from tinemark.onsets import results"),
        ("window", "import numba"),
        ("onsets", "from PySide6 import QtCore"),
    ],
)
def test_import_contract_can_fail(tmp_path: Path, room: str, line: str) -> None:
    shutil.copytree(APP, tmp_path / "tinemark", ignore=shutil.ignore_patterns("__pycache__"))
    (tmp_path / "tinemark" / room / "intruder.py").write_text(line + "\n")
    result = lint_imports(tmp_path)
    assert result.returncode == 1, result.stdout + result.stderr
    assert "intruder" in result.stdout


BLOCK_AND_IMPORT = """
import importlib, pkgutil, sys

class Block:
    def find_spec(self, name, path=None, target=None):
        if name.partition(".")[0] in ("PySide6", "shiboken6", "pyqtgraph"):
            raise ImportError("blocked: " + name)

sys.meta_path.insert(0, Block())
import tinemark
seen = []
for module in pkgutil.walk_packages(tinemark.__path__, "tinemark."):
    if not module.name.startswith("tinemark.window") and module.name != "tinemark.__main__":
        importlib.import_module(module.name)
        seen.append(module.name)
print("\\n".join(seen))
"""


def test_rooms_without_the_window_import_with_qt_blocked() -> None:
    result = subprocess.run(
        [sys.executable, "-c", BLOCK_AND_IMPORT], capture_output=True, text=True, check=False
    )
    assert result.returncode == 0, result.stderr
    seen = result.stdout.split()
    for name in (
        "cli",
        "work.refinery",
        "document.session",
        "onsets.results",
        "density.request",
        "systems.system",
    ):
        assert f"tinemark.{name}" in seen


def test_command_line_loads_nothing_heavy() -> None:
    code = "import sys, tinemark.cli; print(*{name.partition('.')[0] for name in sys.modules})"
    result = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    heavy = {"numba", "sympy", "scipy", "flint", "mpmath", "numpy", "PySide6"}
    assert heavy & set(result.stdout.split()) == set()


def requirements(name: str) -> list[str]:
    text = (ROOT / "scripts" / name).read_text(encoding="utf-8")
    joined = text.replace("\\\n", " ")
    return [line.strip() for line in joined.splitlines() if line.strip() and not line.startswith("#")]


@pytest.mark.parametrize("name", REQUIREMENT_FILES)
def test_requirements_are_names_versions_and_hashes(name: str) -> None:
    lines = requirements(name)
    assert lines
    for line in lines:
        assert re.fullmatch(
            r"[a-z0-9][a-z0-9-]*==[0-9][0-9a-z.]*( ; [^/:@]+)?( +--hash=sha256:[0-9a-f]{64})+", line
        ), line.partition(" --hash")[0]


def test_requirements_serve_every_system() -> None:
    """Compiled packages carry the hashes of many wheels: more than one system's."""
    hashes = {
        line.partition("==")[0]: line.count("--hash")
        for name in REQUIREMENT_FILES
        for line in requirements(name)
    }
    for package in (
        "numpy",
        "numba",
        "llvmlite",
        "scipy",
        "msgspec",
        "python-flint",
        "ruff",
        "mypy",
        "grimp",
    ):
        assert hashes[package] >= 15, package
    for package in ("pyside6-essentials", "shiboken6"):
        # One wheel a system there, for every Python at once.
        assert hashes[package] >= 4, package


def test_pins_lie_within_the_projects_ranges() -> None:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    pins = {}
    for name in REQUIREMENT_FILES:
        for line in requirements(name):
            package, _, rest = line.partition("==")
            pins[package] = rest.split()[0]
    for text in project["dependencies"] + project["optional-dependencies"]["test"]:
        requirement = Requirement(text)
        assert pins[canonicalize_name(requirement.name)] in requirement.specifier, text


# The brackets keep this file from holding what it looks for.
MACHINE = re.compile(r"(?<![\w.])/([r]oot|[w]ork|[h]ome|[t]mp/env|[o]pt/wheels)/|[p]ypi\.org|[p]ythonhosted")


def test_no_machine_paths_or_package_hosts_are_kept() -> None:
    found = []
    for path in tracked():
        file = ROOT / path
        if not file.is_file() or file.suffix in {".png", ".tinemark", ".npy", ".ico"}:
            continue
        text = file.read_text(encoding="utf-8")
        found += [f"{path}: {match[0]}" for match in MACHINE.finditer(text)]
    assert found == []


def compilers_named(source: str) -> set[str]:
    """Names of numba's compiling decorators in code, or in the text of generated code."""
    names = {"njit", "vectorize", "guvectorize", "stencil", "cfunc", "prange"}
    found = set()
    for node in ast.walk(ast.parse(source)):
        if (
            isinstance(node, ast.Attribute)
            and node.attr in names | {"jit"}
            and ast.unparse(node.value) in {"numba", "nb"}
        ):
            found.add(ast.unparse(node))
        elif isinstance(node, ast.ImportFrom) and (node.module or "").partition(".")[0] == "numba":
            found |= {alias.name for alias in node.names if alias.name in names | {"jit"}}
        elif isinstance(node, ast.Constant) and isinstance(node.value, str):
            found |= set(re.findall(r"@(?:numba\.|nb\.)n?jit|@njit|import njit", node.value))
    return found


# The one decorator, and that of the elementary functions it inlines, which must not be re-associated.
COMPILING = {"systems/native.py", "systems/lane_math.py"}


def test_there_is_one_jit_decorator() -> None:
    sources = {
        path.relative_to(APP).as_posix(): path.read_text(encoding="utf-8") for path in APP.rglob("*.py")
    }
    users = {path: names for path, source in sources.items() if (names := compilers_named(source))}
    assert users == {path: {"numba.njit"} for path in COMPILING}
    assert all(sources[path].count("numba.njit(") == 1 for path in COMPILING)
    assert "fastmath=False" in sources["systems/lane_math.py"]
    assert compilers_named("import numba\n@numba.njit\ndef f(): pass") == {"numba.njit"}
    assert compilers_named("SOURCE = '@njit(parallel=True)'") == {"@njit"}


def test_no_module_is_named_for_nothing() -> None:
    vague = {"utils", "util", "helpers", "helper", "common", "misc"}
    assert [path for path in tracked() if vague & {part.removesuffix(".py") for part in path.parts}] == []


@pytest.mark.parametrize("script", ["run.py", "test.py"])
def test_scripts_can_be_read_by_an_old_python(script: str) -> None:
    """The refusal of an old Python only works where that Python can read the file."""
    source = (ROOT / "scripts" / script).read_bytes()
    assert source.isascii()
    ast.parse(source, feature_version=(3, 4))


def test_pages_point_at_files_that_are_there() -> None:
    pointers = [
        (page, target)
        for page in tracked()
        if page.suffix == ".md"
        for target in re.findall(r"\]\(([^)#:]+)\)", (ROOT / page).read_text(encoding="utf-8"))
    ]
    assert [(page, target) for page, target in pointers if not (ROOT / page.parent / target).exists()] == []
