"""Proved onsets of every kind whose proofs the second implementation must check, by name."""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache

from running import click, own_map, system_of

from tinemark.onsets.results import Onset, Status
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text


def own_states(formulas: dict[str, str], low: str = "-1", high: str = "1", start: str = "0.1") -> System:
    """A map of several states along r, all states alike."""
    lines = ['title = "own states"', 'kind = "map"', "[parameters.r]", 'value = "1"', 'range = ["0", "2"]']
    for name in formulas:
        lines += [f"[states.{name}]", f'start = "{start}"', f'range = ["{low}", "{high}"]']
    lines += ["[next]", *(f'{name} = "{formula}"' for name, formula in formulas.items())]
    lines += ["[diagram]", 'parameter = "r"', f'observe = "{next(iter(formulas))}"']
    return read_system_text("\n".join(lines))


TWO_PIECES = "{}*x + r if x < 0 else {}*x + r"
SAMPLES: dict[str, tuple[str, Callable[[], tuple[Onset, ...]]]] = {
    # One state
    "flip": ("flip", lambda: click(system_of("logistic"), "3.45", "0.05").onsets),
    "fold": ("fold", lambda: click(system_of("logistic"), "3.83", "0.02").onsets),
    "crossing at zero": ("transcritical", lambda: click(system_of("logistic"), "1", "0.2").onsets),
    "crossing at a third": (
        "transcritical",
        lambda: click(own_map("x + (x - 1/3)*(r - x)", low="0", high="2"), "0.35", "0.2").onsets,
    ),
    "crossing on a curve": (
        "transcritical",
        lambda: (
            click(
                own_map("x + (x - r)*(x - 2*r + 1)/2", low="-3", high="3", start="0.9"), "1.05", "0.3"
            ).onsets
        ),
    ),
    "fork": ("pitchfork", lambda: click(own_map("r*x - x**3"), "1", "0.2").onsets),
    "fork of a cycle": ("pitchfork", lambda: click(own_map("-r*x*(1 - x**2)"), "1.97", "0.5").onsets),
    "fork about a curve": (
        "pitchfork",
        lambda: (
            click(
                own_map("r/2 - r*(x - r/2)*(1 - (x - r/2)**2)", low="-3", high="3", start="0.6"),
                "1.97",
                "0.4",
            ).onsets
        ),
    ),
    "fork of pieces": (
        "pitchfork",
        lambda: click(own_map("abs(x)*r*(1 - x**2)*(-1 if x > 0 else 1)", start="0.6"), "1.97", "0.5").onsets,
    ),
    "border, doubling": (
        "border collision",
        lambda: click(own_map(TWO_PIECES.format("0.5", "-1.5")), "0.02", "0.5").onsets,
    ),
    "border, a pair": (
        "border collision",
        lambda: click(own_map(TWO_PIECES.format("0.5", "2")), "0.02", "0.5").onsets,
    ),
    "border of a cycle": (
        "border collision",
        lambda: click(own_map("min(r*x*(1 - x), 0.7)", low="0"), "3.0104", "0.01").onsets,
    ),
    "border, a jump": (
        "border collision",
        lambda: click(own_map("x/2 + r + floor(x)/3", low="0", high="3"), "0.49", "0.2").onsets,
    ),
    # Several states
    "many: flip": ("flip", lambda: click(system_of("henon"), "0.37", "0.1").onsets),
    "many: turning": (
        "Neimark-Sacker",
        lambda: (
            click(
                own_states({"x": "r*x*(1 - 0.7*y - 0.3*z)", "y": "x", "z": "y"}, "-1", "2", "0.5"),
                "1.9",
                "0.9",
            ).onsets
        ),
    ),
    "many: areas kept": (
        "flip",
        lambda: click(own_states({"x": "r - x**2 - y", "y": "x"}, "-2", "2"), "3.0", "0.5").onsets,
    ),
    "many: a predator comes in": (
        "transcritical",
        lambda: (
            click(own_states({"x": "r*x*(1 - x) - x*y", "y": "2*x*y"}, "0", "1", "0.3"), "2.01", "0.2").onsets
        ),
    ),
    "many: fork": (
        "pitchfork",
        lambda: (
            click(
                own_states({"x": "r*x - x**3", "y": "0.5*y + 0.1*x"}),
                "1.02",
                "0.3",
                observed="0.1",
                height="1",
            ).onsets
        ),
    ),
    "many: fork of a cycle": (
        "pitchfork",
        lambda: (
            click(
                own_states({"x": "x + y + r*sin(x)", "y": "y + r*sin(x)"}, "-4", "4"),
                "6.28",
                "0.5",
                observed="1.57",
                height="2",
            ).onsets
        ),
    ),
    "many: border": (
        "border collision",
        lambda: click(own_states({"x": "1 - r*x**2 + y", "y": "0.3*abs(x)"}, "-2", "2"), "0.5", "0.6").onsets,
    ),
    "many: border, a jump": (
        "border collision",
        lambda: (
            click(
                own_states({"x": "r*x*(1 - x)", "y": "y/2 + floor(12*x/7)/9"}, "0", "1"), "2.39", "0.2"
            ).onsets
        ),
    ),
}


@lru_cache(maxsize=64)
def sample(name: str) -> Onset:
    """The proved onset of a name."""
    kind, find = SAMPLES[name]
    onset = next(each for each in find() if each.kind.value == kind)
    assert onset.status is Status.PROVED
    return onset
