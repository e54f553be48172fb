"""Picking the splits of a measured sweep: which settings tell, where they open, and what noise hides."""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tinemark.bench.bootstrap import FittedOnset, bootstrap_onset, excess, rough_fit
from tinemark.bench.branch_count import NOT_PERIODIC, branch_counts
from tinemark.bench.jumps import Jump, level_jumps, opening_jump
from tinemark.bench.ladder_shape import Stretch, splits_upwards, stretches_of
from tinemark.bench.results import BenchPicks, MeasuredOnset
from tinemark.bench.separation import Separations, batches, separations, smoothed
from tinemark.bench.sweep import BenchSweep
from tinemark.bench.words import hidden_words, jump_words, split_words
from tinemark.onsets.results import Step
from tinemark.systems.errors import NoOnsetFound, TinemarkError

LEAST_SETTINGS = 8
SHARES_OF_STRETCH = (1.0, 0.75, 0.55, 0.4, 0.28)
"""How much of a stretch past its split is fitted: the most that the law fits."""

FITS = 0.2
"""Probability of chi-square from which on the law fits."""

DOUBT_OF_PRECURSOR = 0.3
"""Standard uncertainty of the law before a split in dynamic noise, as a share of what it gives there."""

BLURRED = 1.0
"""Standard uncertainty of an onset in dynamic noise, as a share of the width of its rounded corner: what the
scatter within settings does not show, since noise there is as slow as a setting is long. From simulation."""

LAW_ERROR = 0.006
"""Standard uncertainty of the law's shape between two settings, as a share of their distance: what is left of
the terms that are not fitted where noise is too low to hide them. From simulation."""

COVERAGE = 1.959963984540054
UNIFORM = 12**-0.5

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class _Look:
    """One direction of a sweep: settings in the order in which cycles split.

    Attributes
    ----------
    sign
        1 when cycles split as the knob rises, -1 when as it falls; `knobs` are multiplied by it.
    """

    direction: int
    sign: int
    knobs: Floats
    counts: NDArray[np.int64]
    levels: Floats
    scatter: Floats
    grouped: list[tuple[NDArray[np.int64], Floats]]

    @property
    def rising_counts(self) -> tuple[int, ...]:
        return tuple(int(count) for count in self.counts[:: self.sign])


def pick_all(
    sweep: BenchSweep, direction: int = 1, levels: int = 4, seed: int = 1
) -> Generator[Step, None, BenchPicks]:
    """Find all splits of a sweep in one direction, with uncertainties, and say what is hidden.

    Parameters
    ----------
    direction
        1 for the way up, -1 for the way down.
    levels
        Splits of the ladder to look for.
    seed
        Of the bootstrap: the same sweep and seed give the same picks.

    Raises
    ------
    TinemarkError
        The direction was not swept, or by too few settings.
    """
    look = yield from _look(sweep, direction)
    shape, reason = stretches_of(look.counts, levels + 1)
    if len(shape) > levels:
        shape, reason = shape[:levels], ""
    back = None
    found: list[MeasuredOnset] = []
    for stretch in shape:
        onset = yield from _pick(sweep, look, stretch, seed)
        if isinstance(onset, str):
            reason = onset
            break
        if onset.is_jump:
            if back is None:
                back = yield from _look_back(sweep, direction)
            onset = _undone(onset, back, stretch.level)
        found.append(onset)
    found += [_jump_onset(sweep, look, jump, 0, 1, 1) for jump in _level_jumps(look, shape)]
    found.sort(key=lambda onset: (onset.level == 0, onset.level, onset.value))
    hidden = "" if len(shape) >= levels and not reason else hidden_words(len(shape) + 1, reason, sweep)
    if len([onset for onset in found if onset.level]) < len(shape):
        hidden = hidden_words(len([onset for onset in found if onset.level]) + 1, reason, sweep)
    return BenchPicks(tuple(found), look.rising_counts, hidden)


def pick_near(
    sweep: BenchSweep, knob_value: float, direction: int = 1, seed: int = 1
) -> Generator[Step, None, MeasuredOnset]:
    """The split or jump nearest to a knob value.

    Raises
    ------
    TinemarkError
        The direction was not swept, or by too few settings.
    NoOnsetFound
        It shows no split, or noise hides the nearest.
    """
    look = yield from _look(sweep, direction)
    shape, reason = stretches_of(look.counts, 4)
    jumps = _level_jumps(look, shape)
    near = look.sign * knob_value
    places: list[tuple[float, Stretch | Jump]] = [
        (abs(float(look.knobs[stretch.split - 1 : stretch.split + 1].mean()) - near), stretch)
        for stretch in shape
    ]
    places += [(abs(float(look.knobs[jump.before : jump.after + 1].mean()) - near), jump) for jump in jumps]
    if not places:
        raise NoOnsetFound(
            hidden_words(1, reason, sweep),
            what_to_do="record more samples at each setting, or settings closer together",
        )
    nearest = min(places, key=lambda place: place[0])[1]
    if isinstance(nearest, Jump):
        return _jump_onset(sweep, look, nearest, 0, 1, 1)
    onset = yield from _pick(sweep, look, nearest, seed)
    if isinstance(onset, str):
        raise NoOnsetFound(
            hidden_words(nearest.level, onset, sweep),
            what_to_do="record more samples at each setting, or settings closer together",
        )
    if onset.is_jump:
        back = yield from _look_back(sweep, direction)
        onset = _undone(onset, back, nearest.level)
    return onset


def _look(sweep: BenchSweep, direction: int) -> Generator[Step, None, _Look]:
    visits = sweep.visits(direction)
    way = "up" if direction == 1 else "down"
    if not len(visits):
        raise TinemarkError(f"the knob was not swept {way}", what_to_do="pick in the other direction")
    if len(visits) < LEAST_SETTINGS:
        raise TinemarkError(
            f"the way {way} has {len(visits)} settings, too few to fit an opening",
            what_to_do=f"sweep at least {LEAST_SETTINGS} settings",
        )
    if not np.isfinite(sweep.samples).all():
        raise TinemarkError(
            "some samples are no finite numbers", what_to_do="leave out rows without a reading"
        )
    knobs = sweep.settings[visits]
    order = visits
    counts = np.ones(len(order), np.int64)
    levels, scatter = np.full(len(order), np.nan), np.full(len(order), np.nan)
    grouped = batches(sweep, order)
    for done, (places, samples) in enumerate(grouped):
        counts[places] = branch_counts(samples)
        levels[places] = samples.mean(axis=1)
        scatter[places] = samples.std(axis=1)
        yield Step("counting branches", done / len(grouped))
    if splits_upwards(counts):
        return _Look(direction, 1, knobs, counts, levels, scatter, grouped)
    last = len(order) - 1
    mirrored = [(last - places, samples) for places, samples in grouped]
    return _Look(direction, -1, -knobs[::-1], counts[::-1], levels[::-1], scatter[::-1], mirrored)


def _look_back(sweep: BenchSweep, direction: int) -> Generator[Step, None, _Look | None]:
    if len(sweep.visits(-direction)) < LEAST_SETTINGS:
        return None
    return (yield from _look(sweep, -direction))


def _pick(
    sweep: BenchSweep, look: _Look, stretch: Stretch, seed: int
) -> Generator[Step, None, MeasuredOnset | str]:
    """The onset of one split, or why there is none."""
    period = 2 ** (stretch.level - 1)
    measured = yield from separations(look.grouped, len(look.knobs), period)
    measured = _doubtful_before(measured, stretch.split)
    windows = yield from _windows(look, stretch, measured)
    if not windows:
        return (
            "the settings around it hold too few samples or stand too far apart for its opening to be fitted"
        )
    window = windows[0]
    knobs, squared = look.knobs[window], measured.squared[window]
    spread, stretches = measured.spread[window], measured.stretches[window]
    smooth = rough_fit(knobs, squared, spread)
    jump = opening_jump(knobs, squared, spread, smooth, excess(smooth, len(knobs)))
    if jump is not None:
        whole = Jump(int(window[jump.before]), int(window[jump.after]))
        return _jump_onset(sweep, look, whole, stretch.level, period, 2 * period)
    random = np.random.default_rng([seed, stretch.level, int(look.direction > 0)])
    fitted = yield from bootstrap_onset(knobs, squared, spread, measured.deviations, stretches, random)
    blur = BLURRED * _corner(knobs, squared, spread, fitted)
    law = LAW_ERROR * float(np.median(np.diff(knobs)))
    moved = _moved(look, measured, windows[1], fitted.value) if len(windows) > 1 else 0.0
    beside = float(np.hypot(blur, law))
    onset = _split_onset(sweep, look, stretch, fitted, len(knobs), moved, beside)
    past = knobs[-1] - look.sign * onset.value
    if onset.upper - onset.lower > past or not knobs[0] < look.sign * onset.value < knobs[-1]:
        return f"noise leaves its onset uncertain by {onset.upper - onset.lower:.2g}"
    return onset


def _doubtful_before(measured: Separations, split: int) -> Separations:
    """Trust what noise raises before the split less: far from it, it falls otherwise than near it."""
    raised = np.maximum(smoothed(measured.squared), 0.0)
    is_before = np.arange(len(raised)) < split
    doubt = np.where(is_before, DOUBT_OF_PRECURSOR * raised, 0.0)
    return replace(measured, spread=np.hypot(measured.spread, doubt))


def _windows(
    look: _Look, stretch: Stretch, measured: Separations
) -> Generator[Step, None, tuple[NDArray[np.int64], ...]]:
    """Settings to fit, as far before the split as past it: the most that the law fits, and then fewer."""
    from scipy.special import chdtrc

    usable = np.isfinite(measured.squared) & (measured.stretches > 1)
    split = stretch.split
    # The last setting before the next split may be split already without its showing.
    end = stretch.end - 1 if stretch.end < len(look.knobs) and stretch.end - split > 5 else stretch.end
    found: list[NDArray[np.int64]] = []
    chances: list[float] = []
    seen = set()
    for share in SHARES_OF_STRETCH:
        last = min(end, split + max(4, int(np.ceil(share * (end - split)))))
        if last in seen:
            continue
        seen.add(last)
        reach = look.knobs[last - 1] - look.knobs[split - 1]
        settled = stretch.first if stretch.level == 1 else (3 * stretch.first + split) // 4
        first = max(settled, int(np.searchsorted(look.knobs, look.knobs[split] - reach)))
        first = max(settled, min(first, split - 3))
        places = np.arange(first, last)[usable[first:last]]
        if len(places) < 6 or (places < split).sum() < 2 or (places >= split).sum() < 3:
            continue
        found.append(places)
        if max(chances, default=0.0) > FITS:
            break
        fit = rough_fit(look.knobs[places], measured.squared[places], measured.spread[places])
        model = int(np.argmin(fit.criteria[:, 0]))
        yield Step("looking for the settings that the opening law fits")
        chances.append(float(chdtrc(len(places) - fit.unknowns[model], fit.chi_squares[model, 0])))
    return tuple(found[int(np.argmax(chances)) :]) if found else ()


def _corner(knobs: Floats, squared: Floats, spread: Floats, fitted: FittedOnset) -> float:
    """Width of the corner that dynamic noise rounds, from how much it raises what lies before the onset.

    Before it, h (h/c) F(-|e|/h) = h^2/(2 c |e|) with 1/c the slope past it. 0 where nothing is
    clearly raised.
    """
    away = knobs - fitted.value
    past = np.flatnonzero(away > 0)[:5]
    before = np.flatnonzero(away < 0)
    if not len(past) or not len(before):
        return 0.0
    slope = float((fitted.curve[past] * away[past]).sum() / (away[past] ** 2).sum())
    if slope <= 0:
        return 0.0
    ratio = 2 * np.abs(away[before]) / slope
    weight = 1 / (spread[before] * ratio) ** 2
    width = float((weight * squared[before] * ratio).sum() / weight.sum())
    doubt = float(weight.sum() ** -0.5)
    return float(np.sqrt(max(width - 2 * doubt, 0.0)))


def _moved(look: _Look, measured: Separations, places: NDArray[np.int64], value: float) -> float:
    """How far the onset moves when other settings are fitted."""
    fit = rough_fit(look.knobs[places], measured.squared[places], measured.spread[places])
    weights = fit.weights(excess(fit, len(places)))[:, 0]
    return float(weights @ fit.onsets[:, 0]) - value


def _split_onset(
    sweep: BenchSweep,
    look: _Look,
    stretch: Stretch,
    fitted: FittedOnset,
    settings: int,
    moved: float,
    beside: float,
) -> MeasuredOnset:
    period = 2 ** (stretch.level - 1)
    away = fitted.replicates - np.median(fitted.replicates)
    own = float(np.mean((fitted.replicates - fitted.value) ** 2))
    # What moves it by more than chance when fewer settings are fitted is the law's own error.
    type_a = float(np.sqrt(max(own, moved**2) + beside**2))
    type_b = float(sweep.knob_uncertainty)
    low, high = np.quantile(away, [0.025, 0.975])
    below = float(np.hypot(max(-low, COVERAGE * type_a), COVERAGE * type_b))
    above = float(np.hypot(max(high, COVERAGE * type_a), COVERAGE * type_b))
    value = look.sign * fitted.value
    if look.sign < 0:
        below, above = above, below
    words = split_words(sweep, look.direction, period, value, fitted, settings)
    return MeasuredOnset(
        stretch.level,
        look.direction,
        period,
        2 * period,
        value,
        type_a,
        type_b,
        value - below,
        value + above,
        words=words,
    )


def _jump_onset(
    sweep: BenchSweep, look: _Look, jump: Jump, level: int, before: int, after: int
) -> MeasuredOnset:
    """A jump lies anywhere between two settings with equal right: a uniform distribution (GUM 4.3.7)."""
    ends = look.knobs[[jump.before, jump.after]]
    middle, width = float(ends.mean()), float(ends[1] - ends[0])
    type_a, type_b = width * UNIFORM, float(sweep.knob_uncertainty)
    reach = float(np.hypot(0.475 * width, COVERAGE * type_b))
    value = look.sign * middle
    words = jump_words(sweep, look.direction, before, after, value, None)
    return MeasuredOnset(
        level,
        look.direction,
        before,
        after,
        value,
        type_a,
        type_b,
        value - reach,
        value + reach,
        is_jump=True,
        words=words,
    )


def _undone(onset: MeasuredOnset, back: _Look | None, level: int) -> MeasuredOnset:
    """The jump with the knob value at which it is undone on the way back, where that is another."""
    if back is None:
        return onset
    shape, _ = stretches_of(back.counts, level)
    match = [stretch for stretch in shape if stretch.level == level]
    if not match:
        return onset
    ends = back.knobs[match[0].split - 1 : match[0].split + 1]
    there = back.sign * float(ends.mean())
    if abs(there - onset.value) <= float(ends[1] - ends[0]) + (onset.upper - onset.lower) / 2:
        return onset
    words = f"{onset.words} On the way back it is undone at {there:.6g}."
    return replace(onset, back=there, words=words)


def _level_jumps(look: _Look, shape: tuple[Stretch, ...]) -> tuple[Jump, ...]:
    """Jumps of the level among settings of one branch, before the first split."""
    end = shape[0].split if shape else len(look.knobs)
    single = (look.counts[:end] == 1) | (look.counts[:end] == NOT_PERIODIC)
    return level_jumps(look.levels[:end], look.scatter[:end]) if single.all() and end > 5 else ()
