"""Defining equations, crossings and normal forms of integrated maps, on maps whose answers are exact.

A map given by formulas stands in for an integrated one, so that nothing but the solvers is under test.
"""

from __future__ import annotations

import math
from functools import cached_property
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
from running import finish

from tinemark.onsets.flow_crossing import solve_crossing
from tinemark.onsets.flow_map import FINEST, FlowMap, Level
from tinemark.onsets.flow_normal_form import findings
from tinemark.onsets.flow_polish import solve_again, solve_onset
from tinemark.onsets.many_cycles import Cycle, newton
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.results import Criticality, Kind
from tinemark.systems.derivatives import derivative
from tinemark.systems.plain import plain_function
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text


class FormulaMap(FlowMap):
    """A map given by formulas in the place of an integrated one."""

    @cached_property
    def integrated(self) -> Any:
        system, n = self.many.system, self.size
        names = (*system.state_names, *system.parameter_names)
        entries = [*system.expressions]
        for name in (*system.state_names, self.many.parameter):
            entries += [derivative(formula, name) for formula in system.expressions]
        function = plain_function(entries, names)

        def linearised(points: Any, r: Any) -> SimpleNamespace:
            swept = np.broadcast_to(np.asarray(r, dtype=float), (len(points),))
            values = function([*points.T, swept])
            table = np.empty((len(values), len(points)))
            for place, value in enumerate(values):
                table[place] = value
            columns = table.reshape(n + 2, n, len(points))
            jacobian = columns[1 : n + 1].transpose(2, 1, 0).copy()
            return SimpleNamespace(
                image=columns[0].T.copy(), jacobian=jacobian, slope=columns[n + 1].T.copy()
            )

        return SimpleNamespace(linearised=linearised, scales=lambda _r: np.ones(n), reasons=lambda: ())

    def at(self, level: Level) -> FlowMap:
        return FormulaMap(self.many.system, self.many.parameter, level)


def map_of(formulas: dict[str, str]) -> FormulaMap:
    """A map swept in r."""
    states = "\n".join(f'[states.{name}]\nstart = "0.1"' for name in formulas)
    lines = "\n".join(f'{name} = "{text}"' for name, text in formulas.items())
    observe = next(iter(formulas))
    system: System = read_system_text(
        f'title = "own"\nkind = "map"\n{states}\n[parameters.r]\nvalue = "1"\n[next]\n{lines}\n'
        f'[diagram]\nparameter = "r"\nobserve = "{observe}"\n'
    )
    return FormulaMap(system, "r", FINEST)


LOGISTIC = {"x": "r*x*(1 - x)"}
HENON = {"x": "1 - r*x**2 + y", "y": "0.3*x"}
DELAYED = {"x": "r*x*(1 - y)", "y": "x"}


def cycle_near(flow: FlowMap, points: list[list[float]], r: float) -> Cycle:
    """The cycle near some points."""
    found = newton(flow, Cycle(np.array(points), r), np.ones(flow.size))
    assert found is not None
    return found


@pytest.mark.parametrize(
    ("formulas", "points", "rough", "value"),
    [
        (LOGISTIC, [[0.66]], 2.96, 3.0),
        (LOGISTIC, [[0.44], [0.85]], 3.44, 1 + math.sqrt(6)),
        # Hénon 1976: the steady state flips at 3 (1 - b)^2 / 4, the 2-cycle at (1 - b)^2 + (1 + b)^2 / 4.
        (HENON, [[0.95, 0.28]], 0.36, 0.3675),
        (HENON, [[1.0, -0.1], [-0.33, 0.3]], 0.9, 0.9125),
    ],
)
def test_flips(formulas: dict[str, str], points: list[list[float]], rough: float, value: float) -> None:
    flow = map_of(formulas)
    start = cycle_near(flow, points, rough)
    found = finish(solve_onset(flow, Kind.FLIP, start, np.ones(flow.size), 0.2))
    assert abs(found.cycle.r - value) < 1e-13
    assert np.min(np.abs(np.linalg.eigvals(found.monodromy) + 1)) < 1e-10
    again = finish(solve_again(flow, Kind.FLIP, found, 0.2))
    assert abs(again.cycle.r - value) < 1e-13
    seen = finish(findings(flow, Kind.FLIP, found, np.ones(flow.size), 1.0))
    assert seen.criticality is Criticality.SUPERCRITICAL
    # The speed that the equations give is the one seen along the branch.
    ends = [
        min(
            np.linalg.eigvals(monodromy(flow, cycle_near(flow, points, found.cycle.r + h))),
            key=lambda v: abs(v + 1),
        )
        for h in (-1e-5, 1e-5)
    ]
    assert float(np.real(ends[1] - ends[0])) / 2e-5 == pytest.approx(found.speed, rel=1e-5)


def monodromy(flow: FlowMap, cycle: Cycle) -> Any:
    """Derivative of f^p at the first point."""
    total = np.eye(flow.size)
    for jacobian in flow.linearised(cycle.points, cycle.r).jacobian:
        total = jacobian @ total
    return total


def test_coefficient_of_the_logistic_flip() -> None:
    flow = map_of(LOGISTIC)
    found = finish(solve_onset(flow, Kind.FLIP, cycle_near(flow, [[0.66]], 2.96), np.ones(1), 0.2))
    seen = finish(findings(flow, Kind.FLIP, found, np.ones(1), 1.0))
    # -S/6 at r = 3, x = 2/3 (Kuznetsov, 5.4.2): f'' = -6, f''' = 0, so 36 / 4 = 9.
    assert seen.coefficient == pytest.approx(9, rel=1e-6)
    assert seen.crossing == pytest.approx(-1, rel=1e-9)


def test_subcritical_flip() -> None:
    flow = map_of({"x": "-r*x - x**2 - 3*x**3"})
    # c = f''^2 / 4 + f''' / 6 = 1 - 3 at the origin.
    found = finish(solve_onset(flow, Kind.FLIP, Cycle(np.array([[0.0]]), 0.97), np.ones(1), 0.2))
    seen = finish(findings(flow, Kind.FLIP, found, np.ones(1), 1.0))
    assert abs(found.cycle.r - 1) < 1e-14
    assert seen.coefficient == pytest.approx(-2, rel=1e-6)
    assert seen.criticality is Criticality.SUBCRITICAL


def test_folds() -> None:
    flow = map_of(LOGISTIC)
    points = [[0.16], [0.515], [0.957]]
    found = finish(solve_onset(flow, Kind.FOLD, Cycle(np.array(points), 3.83), np.ones(1), 0.1))
    assert abs(found.cycle.r - (1 + math.sqrt(8))) < 1e-12
    seen = finish(findings(flow, Kind.FOLD, found, np.ones(1), 1.0))
    assert not seen.is_degenerate
    assert seen.criticality is Criticality.NOT_APPLICABLE


@pytest.mark.parametrize(("sign", "soft"), [("-", True), ("+", False)])
def test_neimark_sacker(sign: str, soft: bool) -> None:
    flow = map_of(DELAYED)
    found = finish(
        solve_onset(flow, Kind.NEIMARK_SACKER, cycle_near(flow, [[0.49, 0.49]], 1.97), np.ones(2), 0.2)
    )
    # Multipliers exp(+-i pi / 3) at r = 2.
    assert abs(found.cycle.r - 2) < 1e-13
    assert abs(found.angle - math.pi / 3) < 1e-12
    assert finish(findings(flow, Kind.NEIMARK_SACKER, found, np.ones(2), 1.0)).criticality is (
        Criticality.SUPERCRITICAL
    )
    # A rotation by 1 radian, its radius multiplied by r -+ radius^2: d is -+1 for q of length 1 in each part.
    turning = {
        "x": f"(r {sign} (x**2 + y**2))*(cos(1)*x - sin(1)*y)",
        "y": f"(r {sign} (x**2 + y**2))*(sin(1)*x + cos(1)*y)",
    }
    flow = map_of(turning)
    found = finish(
        solve_onset(flow, Kind.NEIMARK_SACKER, Cycle(np.array([[0.0, 0.0]]), 0.97), np.ones(2), 0.2)
    )
    assert abs(found.cycle.r - 1) < 1e-13
    assert abs(found.angle - 1) < 1e-13
    assert found.speed == pytest.approx(1, rel=1e-8)
    seen = finish(findings(flow, Kind.NEIMARK_SACKER, found, np.ones(2), 1.0))
    assert seen.criticality is (Criticality.SUPERCRITICAL if soft else Criticality.SUBCRITICAL)


@pytest.mark.parametrize(
    ("formula", "kind", "criticality"),
    [
        ("r*x - x**3", Kind.PITCHFORK, Criticality.SUPERCRITICAL),
        ("r*x + x**3 - x**5", Kind.PITCHFORK, Criticality.SUBCRITICAL),
        ("r*x - x**2", Kind.TRANSCRITICAL, Criticality.NOT_APPLICABLE),
    ],
)
@pytest.mark.parametrize("rough", [0.96, 1.02])
def test_crossings(formula: str, kind: Kind, criticality: Criticality, rough: float) -> None:
    flow = map_of({"x": formula})
    found = finish(solve_crossing(flow, kind, Cycle(np.array([[0.0]]), rough), np.ones(1), 0.3))
    assert abs(found.cycle.r - 1) < 1e-12
    assert found.speed == pytest.approx(1, rel=1e-8)
    seen = finish(findings(flow, kind, found, np.ones(1), 1.0))
    assert seen.criticality is criticality
    assert not seen.is_degenerate


def test_what_is_not_there_is_not_found() -> None:
    flow = map_of(LOGISTIC)
    start = cycle_near(flow, [[0.6]], 2.5)
    with pytest.raises(NotFound):
        finish(solve_onset(flow, Kind.FLIP, start, np.ones(1), 0.1))
    with pytest.raises(NotFound, match="complex pair"):
        finish(solve_onset(flow, Kind.NEIMARK_SACKER, start, np.ones(1), 0.1))
    with pytest.raises(NotFound):
        finish(solve_crossing(flow, Kind.PITCHFORK, start, np.ones(1), 0.1))
