"""Measure: ``python3 scripts/bench.py NAME [--json FILE|-]``, NAME one of the benches or ``all``.

Prints a table of figures with their targets; exits 1 when a target does not hold.
"""

from __future__ import annotations

import argparse
import importlib
import importlib.util
import json
import os
import subprocess
import sys
import time
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from benches.measuring import Figure

FOLDER = Path(__file__).resolve().parent / "benches"


def names() -> list[str]:
    """Every bench: the modules that yield figures, by name."""
    return sorted(
        path.stem.replace("_", "-")
        for path in FOLDER.glob("*.py")
        if path.stem not in ("__init__", "measuring")
    )


def main(arguments: Sequence[str]) -> int:
    """Run the benches asked for; 0 when every target holds."""
    parser = argparse.ArgumentParser(prog="bench.py", description="Measure ours and the peers in one run.")
    parser.add_argument("name", choices=[*names(), "all"])
    parser.add_argument("--json", metavar="FILE", help="write the figures as JSON; - for standard output")
    options = parser.parse_args(arguments)
    figures: list[Figure] = []
    # With JSON on standard output the table goes beside it.
    table = sys.stderr if options.json == "-" else sys.stdout
    for name in names() if options.name == "all" else [options.name]:
        print(f"{name}:", file=table)
        began = time.perf_counter()
        for figure in importlib.import_module(f"benches.{name.replace('-', '_')}").figures():
            figures.append(figure)
            print(line(figure), file=table, flush=True)
        print(f"  ({time.perf_counter() - began:.0f} s)", file=table)
    if options.json:
        plain = [{key: figure[key] for key in ("figure", "value", "target", "holds")} for figure in figures]
        text = json.dumps(plain, indent=1, allow_nan=False)
        if options.json == "-":
            print(text)
        else:
            Path(options.json).write_text(text + "\n", encoding="utf-8")
    return 0 if all(figure["holds"] for figure in figures) else 1


def line(figure: Figure) -> str:
    """A figure as a line of the table."""
    target = figure["target"]
    asked = "" if target is None else f"target {target:<8g} {'holds' if figure['holds'] else 'DOES NOT HOLD'}"
    return f"  {figure['figure']:<72} {figure['value']:>10.4g}  {asked}".rstrip()


if __name__ == "__main__":
    if importlib.util.find_spec("tinemark") is None:
        import environment

        environment.prepare(environment.RUN_REQUIREMENTS, environment.TEST_REQUIREMENTS)
        # The figures are taken in the environment that run.py uses.
        command = [str(environment.python()), __file__, *sys.argv[1:]]
        sys.exit(subprocess.run(command, check=False, env=dict(os.environ)).returncode)
    sys.exit(main(sys.argv[1:]))
