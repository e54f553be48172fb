"""The built-in library: complete, in the format of its own reader, and fit to be drawn as it stands."""

from __future__ import annotations

import os
import re
import shutil
import subprocess
import sys
import tomllib
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from tinemark.resources_path import resource
from tinemark.systems.derivatives import jacobian
from tinemark.systems.errors import SystemFileError
from tinemark.systems.library import DEMO, DEMOS, builtin_names, builtin_system, builtin_text, find_system
from tinemark.systems.plain import plain_function
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text
from tinemark.systems.system_text import write_system_text

WANTED = {
    *("logistic", "cubic", "sine", "ricker", "gaussian", "quadratic", "quartic", "tent", "hassell"),
    *("henon", "delayed_logistic", "two_patch", "restitution", "peak_current", "cubic_hump"),
}
DRIVEN = {
    *("damped_pendulum", "hardening_oscillator", "two_well_oscillator", "soft_wall", "diode_resonator"),
    *("modulated_laser", "shaken_pendulum", "seasonal_epidemic", "buck_converter"),
}
FLOWS = {"rossler", "lorenz", "food_chain"}
SMOOTH = (WANTED | DRIVEN | FLOWS) - {"tent", "restitution", "peak_current", "buck_converter"}
ALL = [*builtin_names(), *DEMOS]
MAPS = [name for name in ALL if builtin_system(name).is_map]


def sweep(system: System, columns: int) -> list[NDArray[np.float64]]:
    """Values of the names over the system's sweep: starts, then parameters."""
    values = [np.full(columns, float(state.start)) for state in system.states]
    for parameter in system.parameters:
        row = np.full(columns, float(parameter.value))
        if parameter.name == system.diagram_parameter:
            assert parameter.range is not None
            row = np.linspace(float(parameter.range[0]), float(parameter.range[1]), columns)
        values.append(row)
    return values


def test_the_library_is_complete() -> None:
    assert set(builtin_names()) == WANTED | DRIVEN | FLOWS
    kinds = {name: builtin_system(name).kind for name in builtin_names()}
    assert {name for name, kind in kinds.items() if kind == "driven"} == DRIVEN
    assert {name for name, kind in kinds.items() if kind == "flow"} == FLOWS
    assert list(builtin_names()) == sorted(builtin_names())
    assert {name for name in builtin_names() if builtin_system(name).is_smooth} == SMOOTH


@pytest.mark.parametrize("name", ALL)
def test_each_system_is_ready_for_use(name: str) -> None:
    system = builtin_system(name)
    assert len(system.notes.split()) >= 20
    assert "\n" not in system.notes.strip()
    assert system.title
    assert all(state.range is not None for state in system.states)
    swept = system.parameter(system.diagram_parameter)
    assert swept.range is not None
    assert swept.tolerance is not None
    for parameter in system.parameters:
        if parameter.range is not None:
            assert parameter.range[0].fraction <= parameter.value.fraction <= parameter.range[1].fraction
    assert re.search(r"Met in|Met where|Met as|Met when|Invented example", system.notes)


@pytest.mark.parametrize("name", ALL)
def test_each_file_is_written_as_the_design_says(name: str) -> None:
    text = builtin_text(name)
    data = tomllib.loads(text)
    formulas = ["next"] if data["kind"] == "map" else ["rate", "sample"]
    assert [key for key in data if key != "notes"] == [
        *("title", "kind", "states", "parameters"),
        *formulas,
        "diagram",
    ]
    assert list(data[formulas[0]]) == list(data["states"])
    for table in (*data["states"].values(), *data["parameters"].values()):
        numbers = [table.get("start"), table.get("value"), table.get("tolerance"), *table.get("range", [])]
        assert all(isinstance(number, str) for number in numbers if number is not None)
    assert "://" not in text
    assert "\t" not in text
    assert text.endswith("\n")


@pytest.mark.parametrize("name", ALL)
def test_writing_and_reading_gives_the_same_system(name: str) -> None:
    system = builtin_system(name)
    again = read_system_text(write_system_text(system))
    assert again == system
    assert again.key == system.key


def test_no_two_built_ins_are_alike() -> None:
    systems = [builtin_system(name) for name in ALL]
    assert len({system.title for system in systems}) == len(systems)
    assert len({system.key for system in systems}) == len(systems)


@pytest.mark.parametrize("name", MAPS)
def test_orbits_from_the_start_stay_in_view_over_the_sweep(name: str) -> None:
    system = builtin_system(name)
    step = plain_function(system.expressions, system.names)
    values: list[object] = list(sweep(system, 300))
    count = len(system.states)
    ranges = [state.range for state in system.states]
    for number in range(1500):
        values[:count] = step(values)  # type: ignore[arg-type]
        for place, ends in enumerate(ranges):
            row = np.asarray(values[place])
            assert np.isfinite(row).all()
            if number >= 500:
                assert ends is not None
                assert row.min() >= float(ends[0]) - 1e-9
                assert row.max() <= float(ends[1]) + 1e-9


@pytest.mark.parametrize("name", MAPS)
def test_a_start_is_neither_superstable_nor_an_unstable_steady_state(name: str) -> None:
    system = builtin_system(name)
    values = sweep(system, 2001)
    moved = np.max(
        [
            np.abs(np.asarray(after) - before)
            for after, before in zip(
                plain_function(system.expressions, system.names)(values), values, strict=False
            )
        ],
        axis=0,
    )
    matrix = np.empty((2001, len(system.states), len(system.states)))
    for i, row in enumerate(jacobian(system)):
        for j, entry in enumerate(plain_function(row, system.names)(values)):
            matrix[:, i, j] = entry
    radius = np.abs(np.linalg.eigvals(matrix)).max(axis=1)
    steady = moved < 1e-3 * max(float(abs(state.start.fraction)) for state in system.states)
    assert not (steady & (radius > 1 + 1e-9)).any()
    if len(system.states) == 1:
        assert radius.min() > 1e-3


@pytest.mark.parametrize("name", DEMOS)
def test_a_demo_is_marked_as_invented(name: str) -> None:
    demo = builtin_system(name)
    assert demo.title.startswith("Invented example: ")
    assert demo.notes.startswith("Invented example. ")
    assert name not in builtin_names()
    assert all(parameter.tolerance is not None for parameter in demo.parameters)
    assert all(parameter.unit for parameter in demo.parameters if parameter.name in ("feed", "amplitude"))


def test_a_system_is_found_by_name_or_path(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    assert find_system("logistic") is builtin_system("logistic")
    assert find_system(DEMO).title.startswith("Invented")
    path = tmp_path / "own.toml"
    path.write_text(builtin_text("ricker").replace('"3.3"', '"3.2"'), encoding="utf-8")
    assert find_system(str(path)).parameter("r").range[1].fraction == Fraction(16, 5)  # type: ignore[index]
    assert find_system(path) == find_system(str(path))
    monkeypatch.chdir(tmp_path)
    (tmp_path / "logistic").write_text(builtin_text("sine"), encoding="utf-8")
    (tmp_path / "mine").write_text(builtin_text("sine"), encoding="utf-8")
    assert find_system("logistic").title == "Logistic growth"
    assert find_system("./logistic").title == "Sine"
    assert find_system("mine").title == "Sine"


@pytest.mark.parametrize(
    ("name", "hint"),
    [
        ("logstic", '"logistic"'),
        ("Ricker", '"ricker"'),
        ("hennon", '"henon"'),
        ("peak-current", '"peak_current"'),
        ("hatchry", f'"{DEMO}"'),
        ("xyzzy", "built-in systems: buck_converter, "),
        ("", "built-in systems: "),
        ("q" * 10**5, "built-in systems: "),
        ("\0", "built-in systems: "),
        ("logistic\n", '"logistic"'),
    ],
)
def test_an_unknown_name_is_answered_with_the_closest(name: str, hint: str) -> None:
    with pytest.raises(SystemFileError) as caught:
        find_system(name)
    assert hint in str(caught.value)
    assert "\0" not in str(caught.value)
    assert len(str(caught.value)) < 700


@pytest.mark.parametrize("name", ["missing.toml", "no/such/folder/x", ".", "/", "..\\x"])
def test_a_path_that_cannot_be_read_is_named(name: str) -> None:
    with pytest.raises(SystemFileError) as caught:
        find_system(name)
    assert caught.value.file == name
    assert "cannot be read" in str(caught.value)


@pytest.mark.parametrize(
    "name", ["../demo/hatchery", "logistic.toml", "./logistic", "LOGISTIC", "*", "", "systems"]
)
def test_built_in_names_are_never_joined_to_a_path(name: str) -> None:
    with pytest.raises(SystemFileError):
        builtin_text(name)
    with pytest.raises(SystemFileError):
        builtin_system(name)


def test_the_library_is_found_in_a_wheel_and_loads_no_engine(tmp_path: Path) -> None:
    # The wheel's layout: the package with the resources inside it, and no checkout around.
    package = tmp_path / "site" / "tinemark"
    source = Path(sys.modules["tinemark"].__file__ or "").parent
    shutil.copytree(source / "systems", package / "systems", ignore=shutil.ignore_patterns("__pycache__"))
    for file in ("__init__.py", "resources_path.py"):
        shutil.copy(source / file, package)
    shutil.copytree(resource("systems"), package / "resources" / "systems")
    shutil.copytree(resource("demo"), package / "resources" / "demo")
    script = (
        "import sys, tinemark\n"
        "from tinemark.systems.library import builtin_names, builtin_system\n"
        "names = (*builtin_names(), 'hatchery', 'resonator_board')\n"
        "systems = [builtin_system(name).expressions for name in names]\n"
        "heavy = {'sympy', 'numba', 'flint', 'scipy', 'mpmath', 'numpy', 'tomlkit', 'PySide6'}\n"
        "print(tinemark.__file__, len(systems), sorted(heavy & set(sys.modules)), sep='|')\n"
    )
    run = subprocess.run(
        [sys.executable, "-c", script],
        capture_output=True,
        text=True,
        check=True,
        cwd=tmp_path,
        env={**os.environ, "PYTHONPATH": str(package.parent)},
    )
    file, count, heavy = run.stdout.strip().split("|")
    assert Path(file).parent == package
    assert count == str(len(ALL))
    assert heavy == "[]"
