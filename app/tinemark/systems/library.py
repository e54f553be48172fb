"""The built-in library: system files that ship with Tinemark, found by name."""

from __future__ import annotations

import difflib
from functools import lru_cache
from pathlib import Path

from tinemark.resources_path import resource
from tinemark.systems.errors import SystemFileError
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_file

DEMO = "hatchery"
"""The demo that the program opens with."""

DEMOS = (DEMO, "resonator_board")
"""Names of the demo systems: invented scenarios, found by name but not listed among the built-ins."""


@lru_cache(maxsize=1)
def builtin_names() -> tuple[str, ...]:
    """Names of the built-in systems, sorted; each is the name of its file in the library.

    Raises
    ------
    SystemFileError
        The library is not where it was installed.
    """
    folder = resource("systems")
    names = tuple(sorted(file.stem for file in folder.glob("*.toml")))
    if not names:
        raise SystemFileError(
            "the built-in library is missing", file=str(folder), what_to_do="install Tinemark again"
        )
    return names


def builtin_text(name: str) -> str:
    """TOML text of a built-in system, comments and all, or of a demo.

    Raises
    ------
    SystemFileError
        There is no built-in system of that name.
    """
    return _builtin_file(name).read_text(encoding="utf-8")


@lru_cache(maxsize=64)
def builtin_system(name: str) -> System:
    """A built-in system, or a demo.

    Raises
    ------
    SystemFileError
        There is no built-in system of that name.
    """
    return read_system_file(_builtin_file(name))


def find_system(name_or_path: str | Path) -> System:
    """The system meant by a built-in's name or by the path of a system file.

    A built-in's name wins; to read a file of the same name, write its path with a folder, as in
    ``./logistic``.

    Raises
    ------
    SystemFileError, FormulaError
        Neither a built-in nor a file, with the closest names; or what is wrong in the file.
    """
    text = str(name_or_path)
    if isinstance(name_or_path, str) and (text in DEMOS or text in builtin_names()):
        return builtin_system(text)
    if _is_path(name_or_path):
        return read_system_file(name_or_path)
    raise _unknown(text)


def _builtin_file(name: str) -> Path:
    # The name is looked up, never joined unchecked: "../x" must not reach a file.
    if name in DEMOS:
        return resource("demo", f"{name}.toml")
    if name not in builtin_names():
        raise _unknown(name)
    return resource("systems", f"{name}.toml")


def _is_path(name_or_path: str | Path) -> bool:
    if isinstance(name_or_path, Path):
        return True
    if "\0" in name_or_path or not name_or_path.strip():
        return False
    if name_or_path.lower().endswith(".toml") or "/" in name_or_path or "\\" in name_or_path:
        return True
    try:
        return Path(name_or_path).exists()
    except OSError:  # a name longer than the file system takes
        return False


def _unknown(name: str) -> SystemFileError:
    known = (*builtin_names(), *DEMOS)
    shown = name if len(name) <= 60 else name[:57] + "..."
    shown = shown if shown.isprintable() else ascii(shown)[1:-1]
    close = difflib.get_close_matches(name[:60].strip().lower(), known, 3, 0.5)
    if close:
        hint = "did you mean " + " or ".join(f'"{item}"' for item in close)
        hint += "? A system file is named by its path"
    else:
        hint = "built-in systems: " + ", ".join(known) + "; a system file is named by its path"
    return SystemFileError(
        f'"{shown}" is neither a built-in system nor a file' if shown.strip() else "no system is named",
        what_to_do=hint,
    )
