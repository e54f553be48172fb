"""Agreement of model and measurement: closed cases, published fits and known simulations."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import stats

from tinemark.bench.agreement import ModelOnset, compare_onsets
from tinemark.bench.calibration import fitted_calibration
from tinemark.bench.results import Calibration, MeasuredOnset
from tinemark.systems.errors import TinemarkError

EXACT = Calibration(1.0, 0.0)


def measured(level: int, value: float, type_a: float, type_b: float = 0.0) -> MeasuredOnset:
    reach = 1.96 * math.hypot(type_a, type_b)
    return MeasuredOnset(
        level, 1, 2 ** (level - 1), 2**level, value, type_a, type_b, value - reach, value + reach
    )


def test_one_onset_by_hand() -> None:
    """E_n = 0.3/sqrt((2*0.1)^2 + (2*0.05)^2) by ISO 13528; chi-square = (0.3/sqrt(0.0125))^2."""
    found = compare_onsets([ModelOnset(1, 3.0, 0.05)], [measured(1, 3.3, 0.08, 0.06)], EXACT)
    assert found.onsets[0].normalised_error == pytest.approx(0.3 / math.sqrt(0.04 + 0.01))
    assert found.chi_square == pytest.approx(0.09 / 0.0125)
    assert found.probability == pytest.approx(float(stats.chi2.sf(7.2, 1)))
    assert "level 1" in found.verdict


def test_agreement_is_said() -> None:
    model = [ModelOnset(1, 3.0, 0.01), ModelOnset(2, 3.449, 0.01), ModelOnset(3, 3.544, 0.01)]
    found = compare_onsets(
        model, [measured(1, 3.005, 0.01), measured(2, 3.44, 0.01), measured(3, 3.55, 0.01)], EXACT
    )
    assert found.verdict.startswith("All 3 onsets agree")
    level, ratio, spread, own = found.ratios[0]
    assert (level, own) == (1, pytest.approx(0.449 / 0.095))
    assert ratio == pytest.approx(0.435 / 0.11)
    # d(ratio) by hand: gaps share the middle onset.
    expected = math.hypot(0.01 / 0.11, 0.01 * (1 / 0.11 + 0.435 / 0.11**2), 0.01 * 0.435 / 0.11**2)
    assert spread == pytest.approx(expected)


def test_levels_are_matched_and_missing_ones_left_out() -> None:
    model = [ModelOnset(level, 3 + 0.1 * level, 0.01) for level in (1, 2, 4)]
    found = compare_onsets(model, [measured(level, 3 + 0.1 * level, 0.01) for level in (2, 3, 4)], EXACT)
    assert [onset.level for onset in found.onsets] == [2, 4]
    assert found.ratios == ()
    with pytest.raises(TinemarkError, match="no level"):
        compare_onsets(model[:1], [measured(3, 3.3, 0.01)], EXACT)


def test_the_worst_onset_and_the_tolerance_that_explains_it_are_named() -> None:
    shifts = [(("R", 0.02), ("C", 0.001)), (("R", 0.05), ("C", -0.001)), (("R", 0.06), ("C", 0.0))]
    model = [ModelOnset(k + 1, 3 + 0.3 * k, 0.001, shifts[k]) for k in range(3)]
    off = 2.6  # standard uncertainties of R
    there = [measured(k + 1, 3 + 0.3 * k + off * shifts[k][0][1], 0.004) for k in range(3)]
    found = compare_onsets(model, there, EXACT, "V")
    assert found.suspect == "R"
    assert found.worst == max(found.onsets, key=lambda o: abs(o.normalised_error)).level
    assert "R 2.6 of its standard uncertainties above its stated value" in found.verdict
    # Beyond what its tolerance could be, it is no explanation.
    far = [measured(k + 1, 3 + 0.3 * k + 8 * shifts[k][0][1], 0.004) for k in range(3)]
    assert compare_onsets(model, far, EXACT).suspect == ""


def test_tolerances_move_all_onsets_together() -> None:
    """Two onsets off by one shared standard uncertainty are one surprise, not two."""
    model = [ModelOnset(k, 3.0 + k, 1e-4, (("R", 0.1),)) for k in (1, 2)]
    together = compare_onsets(model, [measured(k, 3.0 + k + 0.1, 1e-4) for k in (1, 2)], EXACT)
    apart = compare_onsets(model, [measured(1, 4.1, 1e-4), measured(2, 4.9, 1e-4)], EXACT)
    assert together.chi_square == pytest.approx(1.0, abs=0.01)
    assert apart.chi_square > 1000


def test_a_calibration_is_found_from_exact_points() -> None:
    knobs, values = [1.0, 2.0, 4.0, 7.0], [5.0, 8.0, 14.0, 23.0]
    found = fitted_calibration(knobs, [0.01] * 4, values, [0.02] * 4)
    assert found.scale == pytest.approx(3.0)
    assert found.offset == pytest.approx(2.0)
    # Ordinary weighted least squares with the uncertainties of both sides put together.
    both = math.hypot(0.02, 3 * 0.01)
    spread = np.linalg.inv(np.array([[sum(k * k for k in knobs), sum(knobs)], [sum(knobs), 4]])) * both**2
    assert found.scale_uncertainty == pytest.approx(math.sqrt(spread[0, 0]), rel=1e-9)
    assert found.offset_uncertainty == pytest.approx(math.sqrt(spread[1, 1]), rel=1e-9)


def test_orthogonal_regression_on_pearson_s_data_with_york_s_weights() -> None:
    """York 1966 (Can. J. Phys. 44:1079): intercept 5.4799, slope -0.48053 (Reed 1989; from memory)."""
    x = [0.0, 0.9, 1.8, 2.6, 3.3, 4.4, 5.2, 6.1, 6.5, 7.4]
    y = [5.9, 5.4, 4.4, 4.6, 3.5, 3.7, 2.8, 2.8, 2.4, 1.5]
    wx = [1000, 1000, 500, 800, 200, 80, 60, 20, 1.8, 1]
    wy = [1, 1.8, 4, 8, 20, 20, 70, 70, 100, 500]
    found = fitted_calibration(x, [w**-0.5 for w in wx], y, [w**-0.5 for w in wy])
    assert found.scale == pytest.approx(-0.48053, abs=2e-5)
    assert found.offset == pytest.approx(5.4799, abs=2e-4)


def test_a_fitted_calibration_needs_three_onsets_and_leaves_the_rest_to_test() -> None:
    model = [ModelOnset(k, 3.0 + k, 0.01) for k in (1, 2, 3)]
    there = [measured(k, 1 + 2 * k, 0.01) for k in (1, 2, 3)]
    with pytest.raises(TinemarkError, match="calibration"):
        compare_onsets(model[:2], there[:2])
    found = compare_onsets(model, there)
    assert found.degrees == 1
    assert found.calibration.scale == pytest.approx(0.5)


@pytest.mark.parametrize("is_fitted", [False, True])
def test_chi_square_is_one_of_its_degrees_when_the_model_is_right(is_fitted: bool) -> None:
    """Drawn from the model's own uncertainties, the probabilities are uniform (Kolmogorov-Smirnov)."""
    rng = np.random.default_rng(5)
    values = np.array([3.0, 3.449, 3.544, 3.5644])
    shifts = np.array([0.02, 0.03, 0.032, 0.033])
    probabilities = []
    for _ in range(400):
        truth = values + rng.normal() * shifts
        knobs = (truth - 1.0) / 2.0 + 0.004 * rng.normal(size=4)
        model = [ModelOnset(k + 1, values[k], 1e-6, (("R", shifts[k]),)) for k in range(4)]
        there = [measured(k + 1, float(knobs[k]), 0.004) for k in range(4)]
        found = compare_onsets(model, there, None if is_fitted else Calibration(2.0, 1.0))
        assert found.probability is not None
        probabilities.append(found.probability)
    assert stats.kstest(probabilities, "uniform").pvalue > 1e-3
