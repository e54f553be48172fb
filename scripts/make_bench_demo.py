"""Make the invented bench sweeps of the demo scenarios: ``python3 scripts/make_bench_demo.py``.

Nobody has measured these: each is drawn from the demo's own model with parameters a little off, noise, and a
fixed seed, and written as an instrument would write it. The files say so in their first lines.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parents[1]
FOLDER = ROOT / "resources" / "demo"
SEED = 20261201
SETTLING = 3000


def tank_rows() -> list[str]:
    """Feed in kg/day, stock counted once a season: 0.1 % short of the stated growth response."""
    rng = np.random.default_rng(SEED)
    rows = []
    stock = 12.0
    for feed in np.arange(98.0, 140.01, 0.25):
        growth = 0.01999 * feed
        for season in range(SETTLING + 32):
            stock = 0.9 * stock * float(np.exp(growth * (1 - stock / 40.0)))
            if season >= SETTLING:
                rows.append(f"{feed:.2f};{stock + 0.25 * rng.normal():.2f}".replace(".", ","))
    return rows


def board_rows() -> list[str]:
    """Generator dial in volts peak to peak, charge at each strobe; up, then down."""
    from tinemark.equations.returns import return_map
    from tinemark.systems.library import builtin_system

    rng = np.random.default_rng(SEED + 1)
    # The knee lies half a standard uncertainty above its stated value.
    system = builtin_system("resonator_board").with_value("knee", "0.402")
    sampled = return_map(system, "amplitude", 1e-9)
    rows = []
    state = np.zeros((2, 1))
    up = np.arange(1.50, 3.941, 0.01)
    for dial in [*up, *up[::-1]]:
        for period in range(SETTLING + 32):
            state = sampled.step(state, dial / 2)
            if period >= SETTLING:
                rows.append(f"{dial:.2f},{float(state[0, 0]) + 0.004 * rng.normal():.5f}")
    return rows


def main() -> int:
    """Write both files."""
    sys.path.insert(0, str(ROOT / "app"))
    marked = "Invented data: drawn from the demo's model with noise, measured by nobody"
    tank = [f"# {marked}", "feed (kg/day);stock (thousand fish)", *tank_rows()]
    board = [f"# {marked}", "dial (Vpp),charge (nC)", *board_rows()]
    for name, lines in (("hatchery_sweep.csv", tank), ("resonator_board_sweep.csv", board)):
        (FOLDER / name).write_text("\n".join(lines) + "\n", encoding="utf-8")
        print(f"wrote {name} ({len(lines)} lines)")
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
