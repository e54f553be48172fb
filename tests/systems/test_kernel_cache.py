"""Generated kernels are compiled once: a second process finds them in the cache folder."""

from __future__ import annotations

import itertools
import json
import math
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from random_formulas import NAMES

from tinemark.systems.emit import emit
from tinemark.systems.expression import ARITIES
from tinemark.systems.formula import read_formula
from tinemark.systems.native import cache_folder, native_module
from tinemark.systems.plain import plain_function

CHILD = """
import json
from numba.core import event
from tinemark.systems.native import native_module
from tinemark.systems.library import builtin_system
from tinemark.systems.emit import emit

system = builtin_system("{name}")
bind = {{name: name for name in system.names}}
outputs = [f"next_{{name}}" for name in system.state_names]
lines = emit(list(zip(outputs, system.expressions)), bind, "native")
source = "\\n".join([
    "from tinemark.systems.lane_math import *",
    "from tinemark.systems.native import jit",
    "@jit",
    f"def step({{', '.join(system.names)}}):",
    *(f"    {{line}}" for line in lines),
    f"    return {{', '.join(outputs)}}",
])
recorder = event.RecordingListener()
event.register("numba:compile", recorder)
module = native_module(source, "test")
result = module.step(*[0.3 + 0.1 * place for place in range(len(system.names))])
print(json.dumps({{
    "compiled": [str(seen.data["dispatcher"]) for _, seen in recorder.buffer if seen.is_start],
    "hits": sum(module.step.stats.cache_hits.values()),
    "misses": sum(module.step.stats.cache_misses.values()),
    "file": module.__file__,
    "result": result if isinstance(result, float) else list(result),
}}))
"""


PICTURE = """
import json
from fractions import Fraction
from numba.core import event
from tinemark.density.renderer import StopFlag, progressive
from tinemark.density.request import PictureRequest, View
from tinemark.systems.library import builtin_system

recorder = event.RecordingListener()
event.register("numba:compile", recorder)
system = builtin_system("{name}")
swept = system.parameter(system.diagram_parameter)
across, up = swept.range, system.states[0].range
view = View(across[0].fraction, across[1].fraction, up[0].fraction, up[1].fraction)
request = PictureRequest(system, swept.name, system.observe, view, 40, 30, transient_steps=64)
field = list(progressive(request, 256, StopFlag(), 1))[-1]
print(json.dumps({{
    "compiled": [str(seen.data["dispatcher"]) for _, seen in recorder.buffer if seen.is_start],
    "result": field.counts.tolist(),
}}))
"""


def run(name: str, cache: Path, child: str = CHILD, **environment: str) -> dict[str, Any]:
    """Compile and call the step of a built-in system in a process of its own."""
    finished = subprocess.run(
        [sys.executable, "-c", child.format(name=name)],
        capture_output=True,
        text=True,
        check=True,
        env={**os.environ, "TINEMARK_CACHE_DIR": str(cache), "NUMBA_DISABLE_JIT": "0", **environment},
    )
    answer: dict[str, Any] = json.loads(finished.stdout)
    return answer


def compiled_files(cache: Path) -> dict[str, int]:
    return {
        str(file.relative_to(cache)): file.stat().st_mtime_ns
        for file in cache.rglob("*")
        if file.suffix in (".py", ".nbc", ".nbi")
    }


def test_a_second_process_compiles_nothing(tmp_path: Path) -> None:
    first = run("henon", tmp_path)
    assert first["misses"] == 1
    assert any("step" in name for name in first["compiled"])
    files = compiled_files(tmp_path)
    assert any(name.endswith(".nbc") for name in files)
    second = run("henon", tmp_path, PYTHONHASHSEED="5")
    assert second["compiled"] == []
    assert (second["hits"], second["misses"]) == (1, 0)
    assert compiled_files(tmp_path) == files
    assert second["result"] == first["result"]
    assert second["file"] == first["file"]
    assert Path(first["file"]).is_relative_to(tmp_path)


def test_a_second_picture_of_a_system_compiles_nothing(tmp_path: Path) -> None:
    first = run("ricker", tmp_path, PICTURE)
    assert first["compiled"]
    files = compiled_files(tmp_path)
    second = run("ricker", tmp_path, PICTURE, PYTHONHASHSEED="9")
    assert second["compiled"] == []
    assert compiled_files(tmp_path) == files
    assert second["result"] == first["result"]


def test_every_function_and_condition_compiles_to_what_it_means() -> None:
    texts = [f"{name}({', '.join('xyr'[:count])})" for name, count in ARITIES.items()]
    texts += [
        "x + y*r",
        "x - y/r",
        "-x",
        "x**3",
        "x**-2",
        "x**y",
        "abs(x)**r",
        "x**0.5",
        "2**y",
        "pi*x",
        "1/3",
    ]
    texts += [
        "1 if x < y else 2",
        "x if x >= 0 else y if y > r else r",
        "x if -1 < x <= 1 else 1/x",
        "min(x, y, r)",
    ]
    expressions = [read_formula(text, NAMES) for text in texts]
    results = [f"r{place}" for place in range(len(texts))]
    body = emit(list(zip(results, expressions, strict=True)), {n: n for n in NAMES}, "native")
    source = "\n".join(
        [
            "from tinemark.systems.lane_math import *",
            "from tinemark.systems.native import jit",
            "@jit",
            "def evaluate(x, y, r):",
            *(f"    {line}" for line in body),
            "    return [" + ", ".join(f"float({result})" for result in results) + "]",
        ]
    )
    compiled = native_module(source, "everything").evaluate
    obvious = plain_function(expressions, NAMES)
    values = (0.0, 0.25, -0.25, 0.9, -1.5, 3.75, 1e-300, 1e300, math.inf, -math.inf, math.nan)
    for x, y, r in itertools.product(values, values, (0.5, -2.0)):
        expected = [float(np.asarray(value)) for value in obvious([np.float64(v) for v in (x, y, r)])]
        found = compiled(x, y, r)
        for text, value, wanted in zip(texts, found, expected, strict=True):
            if text.startswith(("min", "max")) and any(map(math.isnan, (x, y))):
                continue  # which of the two comes out is not promised
            if text in ("sin(x)", "cos(x)", "tan(x)") and x == 1e300:
                assert math.isnan(value)  # an angle beyond 2**51 counts as escaped
                continue
            same = value == wanted or (math.isnan(value) and math.isnan(wanted))
            if text == "x**y" and x == -math.inf:
                same = not math.isfinite(value) or same  # C calls an even root of -inf infinite
            close = abs(value - wanted) <= 1e-14 * abs(wanted) + 1e-307
            assert same or close, (text, x, y, r, value, wanted)


def test_a_changed_file_in_the_cache_is_never_run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("TINEMARK_CACHE_DIR", str(tmp_path))
    source = "VALUE = 41\n"
    module = native_module(source, "tampered")
    path = Path(module.__file__ or "")
    honest = path.read_text(encoding="utf-8")
    path.write_text(honest + "\nVALUE = 42\n", encoding="utf-8")
    monkeypatch.delitem(sys.modules, module.__name__)
    again = native_module(source, "tampered")
    assert again.VALUE == 41
    assert path.read_text(encoding="utf-8") == honest


def test_one_source_is_one_module(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("TINEMARK_CACHE_DIR", str(tmp_path))
    module = native_module("VALUE = 1\n", "same")
    assert native_module("VALUE = 1\n", "same") is module
    other = native_module("VALUE = 2\n", "same")
    assert other is not module
    assert (module.VALUE, other.VALUE) == (1, 2)
    assert not [file for file in cache_folder().iterdir() if file.name.startswith(".new-")]


def test_a_source_that_fails_leaves_nothing_behind(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("TINEMARK_CACHE_DIR", str(tmp_path))
    before = set(sys.modules)
    with pytest.raises(ZeroDivisionError):
        native_module("1/0\n", "failing")
    assert not [name for name in set(sys.modules) - before if "failing" in name]


def test_a_folder_that_cannot_be_made_is_no_obstacle(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    blocked = tmp_path / "file"
    blocked.write_text("not a folder", encoding="utf-8")
    monkeypatch.setenv("TINEMARK_CACHE_DIR", str(blocked / "below"))
    folder = cache_folder()
    assert folder.is_dir()
    assert native_module("VALUE = 3\n", "elsewhere").VALUE == 3
