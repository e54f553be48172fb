"""Cutting a waveform into one sample a period: at a strobe period, or where a trigger rises."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tinemark.bench.errors import BenchFileError
from tinemark.bench.reading import ReadOptions, run_starts
from tinemark.bench.table import Table

Floats = NDArray[np.float64]


def cut(
    table: Table, knobs: Floats, sample: str, options: ReadOptions
) -> tuple[Floats, NDArray[np.int64], Floats, str]:
    """Samples of a waveform, setting by setting.

    Each is the waveform's value at a strobe time, read between its rows by a cubic through the four nearest.

    Returns
    -------
    settings, counts, samples
        As in `BenchSweep`, counts in place of offsets.
    words
        How it was cut.

    Raises
    ------
    BenchFileError
        Nothing says where to cut, times do not rise, or the trigger never does.
    """
    file = table.source.name
    if options.trigger and options.strobe_period > 0:
        raise BenchFileError(
            "is to be cut at a strobe period and at a trigger", file=file, what_to_do="state one of the two"
        )
    if not options.trigger and not options.strobe_period > 0:
        raise BenchFileError(
            "is a waveform and nothing says where to cut it",
            file=file,
            what_to_do="state the strobe period or the trigger column",
        )
    values = table.column(sample)
    known = ~(np.isnan(knobs) | np.isnan(values))
    if options.time:
        times = table.column(options.time)
        known &= ~np.isnan(times)
    elif options.sampling_interval > 0 or options.trigger:
        times = np.arange(len(values), dtype=np.float64) * (options.sampling_interval or 1.0)
    else:
        raise BenchFileError(
            "is a waveform without times",
            file=file,
            what_to_do="state the time column or the time between rows",
        )
    trigger = table.column(options.trigger)[known] if options.trigger else None
    knobs, values, times = knobs[known], values[known], times[known]
    starts = run_starts(knobs)
    settings, counts, samples = [], [], []
    level = _level(trigger, options.trigger_level) if trigger is not None else 0.0
    for first, end in zip(starts, [*starts[1:], len(knobs)], strict=True):
        part, at = values[first:end], times[first:end]
        if len(part) < 4:
            continue
        if not (np.diff(at) > 0).all():
            place = int(np.flatnonzero(np.diff(at) <= 0)[0])
            raise BenchFileError(
                f"its time goes from {at[place]:g} to {at[place + 1]:g} within the setting {knobs[first]:g}",
                file=file,
                column=options.time,
                what_to_do="times must rise within a setting",
            )
        if trigger is not None:
            moments = _rises(trigger[first:end], at, level)
        else:
            begin = at[0] + options.strobe_phase
            periods = int(np.floor((at[-1] - begin) / options.strobe_period + 1e-9))
            moments = begin + options.strobe_period * np.arange(max(periods + 1, 0))
            moments = moments[(moments >= at[0]) & (moments <= at[-1])]
        taken = between_rows(part, at, moments)
        if taken.size:
            settings.append(float(knobs[first]))
            counts.append(len(taken))
            samples.append(taken)
    if not samples:
        raise BenchFileError(
            "gives no samples when cut",
            file=file,
            what_to_do="the trigger must rise through its level"
            if trigger is not None
            else "the strobe period must be shorter than a setting lasts",
        )
    words = (
        f'cut where "{options.trigger}" rises through {level:.6g}'
        if trigger is not None
        else f"cut every {options.strobe_period:g} from {options.strobe_phase:g} after each setting's start"
    )
    return np.array(settings), np.array(counts, np.int64), np.concatenate(samples), words


def _level(trigger: Floats, stated: float) -> float:
    if not np.isnan(stated):
        return stated
    low, high = np.nanpercentile(trigger, [1, 99])
    return float((low + high) / 2)


def _rises(trigger: Floats, times: Floats, level: float) -> Floats:
    """Times at which the trigger rises through a level, once it has been clearly below it before."""
    # A quarter of the swing below re-arms, so that noise on an edge does not count twice.
    swing = float(np.nanmax(trigger) - np.nanmin(trigger))
    armed_below = level - 0.125 * swing
    armed, found = False, []
    for place in np.flatnonzero((trigger < armed_below) | (trigger >= level)):
        if trigger[place] < armed_below:
            armed = True
        elif armed:
            armed = False
            before, after = trigger[place - 1], trigger[place]
            share = (level - before) / (after - before) if after > before else 1.0
            found.append(times[place - 1] + min(max(share, 0.0), 1.0) * (times[place] - times[place - 1]))
    return np.array(found)


def between_rows(values: Floats, times: Floats, moments: Floats) -> Floats:
    """The waveform at moments between its rows: the cubic through the four nearest rows (Lagrange)."""
    if not moments.size:
        return moments
    first = np.clip(np.searchsorted(times, moments, side="right") - 2, 0, len(times) - 4)
    nodes = np.stack([times[first + k] for k in range(4)])
    result = np.zeros(len(moments))
    for k in range(4):
        weight = np.ones(len(moments))
        for other in range(4):
            if other != k:
                weight *= (moments - nodes[other]) / (nodes[k] - nodes[other])
        result += weight * values[first + k]
    return result
