"""Picking splits in noise, on sweeps whose onsets are known."""

from __future__ import annotations

from collections.abc import Generator

import numpy as np
import pytest
from sweeps_from_maps import CASES, LOGISTIC, RICKER, as_sweep, draw, recorded, up_and_down

from tinemark.bench.branch_count import MORE, NOT_PERIODIC, branch_counts
from tinemark.bench.opening_law import fit_law, law_bases, rounded
from tinemark.bench.picking import pick_all, pick_near
from tinemark.bench.separation import squared_separation
from tinemark.onsets.results import Step
from tinemark.systems.errors import NoOnsetFound, TinemarkError


def done(job: Generator[Step, None, object]):
    """The result of a generator, its steps looked at."""
    while True:
        try:
            step = next(job)
        except StopIteration as end:
            return end.value
        assert isinstance(step, Step) and step.text


def cycle(points: int, settings: int = 6, length: int = 320) -> np.ndarray:
    values = np.random.default_rng(7).permutation(points) / points
    return np.tile(values, (settings, length // points))


def test_separation_is_unbiased_in_noise_and_drift() -> None:
    """Two points 0.2 apart: a squared half distance of 0.01, whatever white noise and a slope add."""
    random = np.random.default_rng(1)
    sign = 1 - 2.0 * (np.arange(600) % 2)
    noise = 0.15 * random.standard_normal((400, 600))
    found, in_time = squared_separation(0.1 * sign + noise + np.linspace(0, 3, 600), 1)
    assert found.mean() == pytest.approx(0.01, abs=4 * found.std() / 20)
    nothing, _ = squared_separation(noise, 1)
    assert abs(nothing.mean()) < 4 * nothing.std() / 20
    assert in_time.shape[0] == 400 and in_time.shape[1] >= 4


def test_separation_of_one_splitting_does_not_see_the_others() -> None:
    for points in (1, 2, 8):
        record = cycle(points)
        slow, _ = squared_separation(record, points)
        assert np.abs(slow).max() < 1e-15, points
    # Four points a, b, c, d: the mean of ((a - c)/2)^2 and ((b - d)/2)^2 at period 2.
    record = np.tile([0.1, 0.9, 0.3, 0.5], (1, 80))
    found, _ = squared_separation(record, 2)
    assert found[0] == pytest.approx((0.1**2 + 0.2**2) / 2)


@pytest.mark.parametrize("points", [1, 2, 4, 8, 16])
def test_branches_are_counted_in_noise_and_drift(points: int) -> None:
    random = np.random.default_rng(2)
    record = cycle(points, settings=12) + 0.02 * random.standard_normal((12, 320))
    record += np.linspace(0.0, 2.0, 320)
    assert (branch_counts(record) == (points if points < 16 else MORE)).sum() >= 11


def test_what_is_not_periodic_is_said() -> None:
    x = np.full((1, 320), 0.3)
    for step in range(1, 320):
        x[:, step] = 3.9 * x[:, step - 1] * (1 - x[:, step - 1])
    angle = np.sin(np.arange(320) * 2.0)[None]
    noise = 1e-3 * np.random.default_rng(3).standard_normal((1, 320))
    assert branch_counts(x + noise)[0] == NOT_PERIODIC
    assert branch_counts(angle + noise)[0] == NOT_PERIODIC


def test_the_bump_before_a_flip_in_dynamic_noise_is_no_split() -> None:
    random = np.random.default_rng(4)
    x = np.zeros((200, 400))
    for step in range(1, 400):
        x[:, step] = -0.9 * x[:, step - 1] + random.standard_normal(200)
    assert (branch_counts(x) != 1).mean() < 0.02


def test_the_rounded_corner_against_quadrature() -> None:
    from scipy.integrate import quad

    for u in (-20.0, -3.0, 0.0, 0.7, 5.0, 20.0):
        top = max(u, 0.0) ** 2 / 2
        above = quad(lambda a, u=u, top=top: a**2 * np.exp(u * a**2 - a**4 / 2 - top), 0, 9, limit=200)[0]
        below = quad(lambda a, u=u, top=top: np.exp(u * a**2 - a**4 / 2 - top), 0, 9, limit=200)[0]
        assert float(rounded(np.array([u]))[0]) == pytest.approx(above / below, rel=1e-2)


def test_the_law_finds_its_own_curves_and_no_onset_where_there_is_none() -> None:
    knobs = np.linspace(0.0, 1.0, 31)
    past = np.maximum(knobs - 0.4137, 0.0)
    curves = np.stack([2 * past, 2 * past - past**2, 2 * past - past**2 + past**3])
    law = law_bases(knobs, np.full(31, 1e-3), np.linspace(0.3, 0.5, 61), np.empty(0))
    fit = fit_law(law, curves)
    for curve, degree in enumerate((1, 2, 3)):
        assert fit.onsets[degree - 1, curve] == pytest.approx(0.4137, abs=2e-4)
    # Against plain least squares at one candidate.
    noisy = curves[1] + 1e-3 * np.random.default_rng(5).standard_normal(31)
    one = law_bases(knobs, np.full(31, 1e-3), np.array([0.4, 0.4001]), np.empty(0))
    away = np.maximum(knobs - 0.4, 0.0)
    left = np.linalg.lstsq(np.stack([away, away**2], axis=1), noisy, rcond=None)[1][0]
    other = np.maximum(knobs - 0.4001, 0.0)
    right = np.linalg.lstsq(np.stack([other, other**2], axis=1), noisy, rcond=None)[1][0]
    assert fit_law(one, noisy[None]).chi_squares[1, 0] == pytest.approx(min(left, right) * 1e6, rel=1e-6)


@pytest.mark.parametrize("known", [LOGISTIC, RICKER], ids=lambda known: known.name)
@pytest.mark.parametrize("case", CASES)
def test_intervals_cover_the_true_onset(known, case: str) -> None:
    """A small seeded part of scripts/validate_picking.py: at least 7 of 10 by chance alone (p < 0.001)."""
    size = 1.0 if known is LOGISTIC else 2.0
    noise = {name: size * value for name, value in CASES[case].items()}
    hits, hidden = [], 0
    for sweep in draw(known, np.random.default_rng(11), trials=10, transient=800, **noise):
        try:
            onset = done(pick_near(sweep, known.onsets[0]))
        except NoOnsetFound as error:
            assert "noise" in str(error) and case == "dynamic, high"
            hidden += 1
            continue
        hits.append(onset.lower <= known.onsets[0] <= onset.upper)
        assert onset.level == 1 and not onset.is_jump
        assert onset.upper - onset.lower < 0.25 * (known.onsets[1] - known.onsets[0])
    assert sum(hits) + hidden >= 7 and hidden <= 2


def test_a_ladder_is_picked_and_what_is_hidden_is_said() -> None:
    random = np.random.default_rng(21)
    close = {"settings": 160, "left": 2.8, "right": 3.6, "transient": 3000}
    quiet = draw(LOGISTIC, random, additive=0.002, **close)[0]
    picks = done(pick_all(quiet))
    assert [onset.level for onset in picks.onsets] == [1, 2, 3]
    for onset, true in zip(picks.onsets, LOGISTIC.onsets, strict=True):
        assert abs(onset.value - true) < 4 * onset.uncertainty
        assert (onset.branches_before, onset.branches_after) == (2 ** (onset.level - 1), 2**onset.level)
    assert len(picks.branches) == 160 and picks.branches[0] == 1 and picks.branches[-1] == NOT_PERIODIC
    assert "level 4" in picks.hidden
    loud = done(pick_all(draw(LOGISTIC, random, additive=0.15, **close)[0]))
    assert [onset.level for onset in loud.onsets] in ([1], [1, 2])
    assert f"level {len(loud.onsets) + 1}" in loud.hidden
    deaf = done(pick_all(draw(LOGISTIC, random, additive=8.0, **close)[0]))
    assert deaf.onsets == () and "level 1" in deaf.hidden


def test_picks_repeat_under_a_seed_and_follow_the_way_the_knob_goes() -> None:
    sweep = draw(LOGISTIC, np.random.default_rng(31), additive=0.01, transient=1500)[0]
    first = done(pick_near(sweep, 3.0))
    assert done(pick_near(sweep, 3.0)) == first
    assert done(pick_near(sweep, 3.0, seed=2)).value == pytest.approx(first.value, abs=first.type_a)
    # The same record with the knob reversed: cycles split as it falls.
    record = sweep.samples.reshape(45, -1)
    falling = done(pick_near(as_sweep(-sweep.settings[::-1], record[::-1]), -3.0))
    assert falling.value == pytest.approx(-first.value, abs=first.type_a)
    assert falling.lower < -3.0 < falling.upper or first.lower > 3.0 or first.upper < 3.0


def test_the_knob_keeps_its_own_part_of_the_uncertainty() -> None:
    random = np.random.default_rng(32)
    plain = draw(LOGISTIC, random, transient=1500)[0]
    record = plain.samples.reshape(1, 45, -1)
    with_b = recorded(plain.settings, record, np.random.default_rng(1), 0.01, knob_uncertainty=0.004)[0]
    without = recorded(plain.settings, record, np.random.default_rng(1), 0.01)[0]
    one, other = done(pick_near(with_b, 3.0)), done(pick_near(without, 3.0))
    assert (one.value, one.type_a) == (other.value, other.type_a)
    assert (one.type_b, other.type_b) == (0.004, 0.0)
    assert one.upper - one.value == pytest.approx(np.hypot(other.upper - other.value, 1.959964 * 0.004))


def subcritical(direction: int, additive: float) -> object:
    """Phases at +-a, 0 = e + a^2 - a^4 (invented): up, they jump apart at 0; down, together at -1/4."""
    knobs = np.linspace(-0.51, 0.29, 41)
    split = knobs > (0.0 if direction == 1 else -0.25)
    half = np.where(split, np.sqrt(0.5 + np.sqrt(np.maximum(0.25 + knobs, 0.0))), 0.0)
    sign = 1 - 2.0 * (np.arange(200) % 2)
    record = 0.2 * half[:, None] * sign
    record = record + additive * np.random.default_rng(direction + 5).standard_normal(record.shape)
    if direction < 0:
        return as_sweep(knobs[::-1], record[::-1], direction=-1)
    return as_sweep(knobs, record)


@pytest.mark.parametrize("additive", [0.002, 0.02])
def test_a_jump_and_its_hysteresis_are_recognised(additive: float) -> None:
    sweep = up_and_down(subcritical(1, additive), subcritical(-1, additive))
    onset = done(pick_near(sweep, 0.0))
    assert onset.is_jump and onset.level == 1
    assert onset.lower <= 0.0 <= onset.upper
    assert onset.back == pytest.approx(-0.25, abs=0.02)
    assert "way back" in onset.words


def test_a_soft_opening_that_is_wide_open_soon_is_no_jump() -> None:
    for additive in (0.0, 0.001, 0.01):
        for sweep in draw(LOGISTIC, np.random.default_rng(41), settings=20, additive=additive, trials=4):
            assert not done(pick_near(sweep, 3.0)).is_jump


def test_a_level_that_jumps_is_no_split() -> None:
    knobs = np.linspace(0.0, 1.0, 40)
    level = 0.3 * knobs + np.where(knobs > 0.6, 1.0, 0.0)
    record = level[:, None] + 0.01 * np.random.default_rng(6).standard_normal((40, 150))
    onset = done(pick_near(as_sweep(knobs, record), 0.6))
    assert onset.is_jump and onset.level == 0 and onset.lower <= 0.6 <= onset.upper


def test_what_cannot_be_picked_is_refused_in_words() -> None:
    record = 0.5 + 0.01 * np.random.default_rng(8).standard_normal((20, 100))
    still = as_sweep(np.linspace(0, 1, 20), record)
    with pytest.raises(NoOnsetFound, match="one branch"):
        done(pick_near(still, 0.5))
    assert done(pick_all(still)).onsets == ()
    with pytest.raises(TinemarkError, match="not swept down"):
        done(pick_all(still, direction=-1))
    with pytest.raises(TinemarkError, match="too few"):
        done(pick_all(as_sweep(np.linspace(0, 1, 5), record[:5])))
    few = done(pick_all(as_sweep(np.linspace(0, 1, 20), record[:, :3])))
    assert few.onsets == ()
    constant = as_sweep(np.linspace(0, 1, 20), np.ones((20, 100)))
    assert done(pick_all(constant)).branches == (1,) * 20
    broken = record.copy()
    broken[3, 3] = np.nan
    with pytest.raises(TinemarkError, match="finite"):
        done(pick_all(as_sweep(np.linspace(0, 1, 20), broken)))
