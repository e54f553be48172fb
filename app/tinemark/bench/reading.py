"""From a file to a measured sweep: what was understood is shown first, and imported only then."""

from __future__ import annotations

from dataclasses import dataclass, replace
from enum import Enum
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from tinemark.bench.arrays import read_array_table
from tinemark.bench.errors import BenchFileError
from tinemark.bench.sweep import BenchSweep
from tinemark.bench.table import RefusedRow, Table, read_text_table

WIDE_FROM = 8
"""Columns from which a table without stated columns is taken for one row a knob setting."""

FIRST_ROWS = 12


class Form(Enum):
    """How a table holds a sweep."""

    LONG = "one sample a row"
    WIDE = "one knob setting a row"
    WAVEFORM = "a waveform a knob setting"


@dataclass(frozen=True)
class ReadOptions:
    """What the user states of a file; what is left empty is found out.

    Attributes
    ----------
    knob, sample, time, trigger
        Names of columns. A time or trigger column, or a sampling interval, makes the sample a waveform.
    strobe_period
        Of a waveform: cut once every so much time, in the unit of its time …
    strobe_phase
        … beginning so much time after the start of each setting.
    trigger_level
        Of a waveform with a trigger column: cut where it rises through this; nan for halfway up.
    sampling_interval
        Time between rows of a waveform without a time column.
    knob_step
        Knob values are rounded to multiples of this, for knobs that were read back with noise; 0 for none.
    knob_uncertainty
        Standard uncertainty of a knob setting.
    """

    form: Form | None = None
    knob: str = ""
    sample: str = ""
    time: str = ""
    trigger: str = ""
    strobe_period: float = 0.0
    strobe_phase: float = 0.0
    trigger_level: float = float("nan")
    sampling_interval: float = 0.0
    separator: str = ""
    decimal: str = ""
    knob_step: float = 0.0
    knob_uncertainty: float = 0.0


@dataclass(frozen=True)
class ColumnView:
    """What a column holds."""

    name: str
    unit: str
    low: float
    high: float
    missing: int


@dataclass(frozen=True)
class Preview:
    """What was understood of a file before anything is imported.

    Attributes
    ----------
    words
        How the file is written, a sentence.
    first_rows
        The first rows as numbers, for a small table.
    form, knob, sample
        How it would be read; None and empty where that has to be stated.
    settings, samples, up, down
        Counts of the sweep it gives: settings, samples, settings visited on the way up and down.
    trouble
        Why it gives no sweep as it stands, and what to state; empty when it does.
    notes
        What else was understood.
    """

    file: str
    words: str
    columns: tuple[ColumnView, ...]
    rows: int
    first_rows: tuple[tuple[float, ...], ...]
    refused: tuple[RefusedRow, ...]
    refused_count: int
    form: Form | None
    knob: str
    sample: str
    settings: int = 0
    samples: int = 0
    up: int = 0
    down: int = 0
    trouble: str = ""
    notes: tuple[str, ...] = ()


def read_table(path: str | Path, options: ReadOptions | None = None) -> Table:
    """The table in a file, whatever sweep it holds.

    Raises
    ------
    BenchFileError
        It is no table.
    """
    options = options or ReadOptions()
    file = Path(path)
    if file.suffix.lower() in (".npy", ".npz"):
        return read_array_table(file)
    return read_text_table(file, options.separator, options.decimal)


def read_sweep(path: str | Path, options: ReadOptions | None = None) -> BenchSweep:
    """The sweep in a file.

    Raises
    ------
    BenchFileError
        It is no table, or gives no sweep as it stands; says what to state.
    """
    options = options or ReadOptions()
    return sweep_of(read_table(path, options), options)


def preview(path: str | Path, options: ReadOptions | None = None) -> Preview:
    """What is understood of a file.

    Raises
    ------
    BenchFileError
        It is no table.
    """
    options = options or ReadOptions()
    return preview_of(read_table(path, options), options)


def preview_of(table: Table, options: ReadOptions) -> Preview:
    """What is understood of a table."""
    columns = []
    for place, (name, unit) in enumerate(zip(table.names, table.units, strict=True)):
        values = table.values[:, place]
        known = values[~np.isnan(values)]
        low, high = (float(known.min()), float(known.max())) if known.size else (np.nan, np.nan)
        columns.append(ColumnView(name, unit, low, high, int(values.size - known.size)))
    form, knob, sample = _understood(table, options)
    seen = Preview(
        file=table.source.name,
        words=table.words,
        columns=tuple(columns),
        rows=len(table.values),
        first_rows=tuple(tuple(float(value) for value in row) for row in table.values[:FIRST_ROWS]),
        refused=table.refused,
        refused_count=table.refused_count,
        form=form,
        knob=knob,
        sample=sample,
    )
    try:
        sweep = sweep_of(table, options)
    except BenchFileError as error:
        trouble = f"{error.message}; {error.what_to_do}" if error.what_to_do else error.message
        return replace(seen, trouble=trouble)
    return replace(
        seen,
        settings=len(sweep.settings),
        samples=len(sweep.samples),
        up=int((sweep.directions > 0).sum()),
        down=int((sweep.directions < 0).sum()),
        notes=sweep.notes,
    )


def sweep_of(table: Table, options: ReadOptions) -> BenchSweep:
    """The sweep that a table holds.

    Raises
    ------
    BenchFileError
        A column is missing, the knob never changes, or there are no samples; says what to state.
    """
    form, knob, sample = _understood(table, options)
    file = table.source.name
    if len(table.names) < 2:
        raise BenchFileError(
            "has one column only",
            file=file,
            what_to_do="a sweep needs a column for the knob and one for the samples",
        )
    if knob == sample:
        raise BenchFileError(
            "takes one column for knob and samples", file=file, what_to_do="choose two columns"
        )
    knobs = table.column(knob)
    if options.knob_step > 0:
        knobs = np.round(knobs / options.knob_step) * options.knob_step
    notes: list[str] = []
    if form is Form.WIDE:
        settings, counts, samples = _wide(table, knob, knobs)
        label = "samples"
    elif form is Form.WAVEFORM:
        from tinemark.bench.waveform import cut

        settings, counts, samples, words = cut(table, knobs, sample, options)
        notes.append(words)
        label = sample
    else:
        settings, counts, samples = _long(table, knobs, sample)
        label = sample
    if not samples.size:
        raise BenchFileError(
            "gives no samples", file=file, what_to_do="check the columns of knob and samples"
        )
    if settings.size < 2 or np.ptp(settings) == 0:
        raise BenchFileError(
            f'its knob column "{knob}" never changes',
            file=file,
            what_to_do="choose the column that was swept",
        )
    directions = _directions(settings)
    notes += _told(settings, counts, directions, form)
    unit = table.units[table.names.index(label)] if label in table.names else ""
    return BenchSweep(
        knob=knob,
        sample=label,
        settings=settings,
        offsets=np.concatenate([[0], np.cumsum(counts)]).astype(np.int64),
        samples=samples,
        directions=directions,
        source=table.source,
        knob_unit=table.units[table.names.index(knob)],
        sample_unit=unit,
        knob_uncertainty=options.knob_uncertainty,
        notes=tuple(notes),
    )


def _understood(table: Table, options: ReadOptions) -> tuple[Form, str, str]:
    """Form, knob and sample, as stated or as they look."""
    names = table.names
    time = options.time or next(
        (n for n in names if n.lower() in ("t", "time", "zeit", "temps", "tiempo")), ""
    )
    is_waveform = bool(options.time or options.trigger or options.sampling_interval or options.strobe_period)
    form = options.form or (
        Form.WAVEFORM
        if is_waveform
        else Form.WIDE
        if len(names) >= WIDE_FROM and not options.sample
        else Form.LONG
    )
    others = [name for name in names if name not in (time, options.trigger)] or list(names)
    knob = options.knob or next((name for name in others if name != options.sample), others[0])
    sample = options.sample or next((name for name in reversed(others) if name != knob), knob)
    return form, knob, sample


def _long(
    table: Table, knobs: NDArray[np.float64], sample: str
) -> tuple[NDArray[np.float64], NDArray[np.int64], NDArray[np.float64]]:
    values = table.column(sample)
    known = ~(np.isnan(knobs) | np.isnan(values))
    knobs, values = knobs[known], values[known]
    starts = run_starts(knobs)
    counts = np.diff([*starts, len(knobs)]).astype(np.int64)
    return knobs[starts], counts, np.ascontiguousarray(values)


def _wide(
    table: Table, knob: str, knobs: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.int64], NDArray[np.float64]]:
    rest = [place for place, name in enumerate(table.names) if name != knob]
    values = table.values[:, rest]
    known = ~np.isnan(values)
    rows = known.any(axis=1) & ~np.isnan(knobs)
    return knobs[rows], known[rows].sum(axis=1).astype(np.int64), values[rows][known[rows]]


def run_starts(knobs: NDArray[np.float64]) -> NDArray[np.int64]:
    """Where runs of equal values begin."""
    if not knobs.size:
        return np.zeros(0, np.int64)
    return np.concatenate([[0], np.flatnonzero(np.diff(knobs)) + 1]).astype(np.int64)


def _directions(settings: NDArray[np.float64]) -> NDArray[np.int8]:
    """Which way the knob was going at each setting: the way it came, and at first the way it leaves."""
    moves = np.sign(np.diff(settings))
    ways = np.concatenate([moves[:1], moves])
    for place in np.flatnonzero(ways == 0):
        ways[place] = ways[place - 1] if place else 1
    ways[ways == 0] = 1
    return ways.astype(np.int8)


def _told(
    settings: NDArray[np.float64], counts: NDArray[np.int64], directions: NDArray[np.int8], form: Form
) -> list[str]:
    notes = [f"{form.value}; {len(settings)} settings with {counts.min()} to {counts.max()} samples each"]
    up, down = int((directions > 0).sum()), int((directions < 0).sum())
    turns = int((np.diff(directions) != 0).sum())
    if up and down:
        notes.append(f"{up} settings on the way up and {down} on the way down")
    if turns > max(4, len(settings) // 10):
        notes.append(
            "the knob goes back and forth: if it was read back with noise, state the step it was set in"
        )
    if form is Form.LONG and counts.max() == 1:
        notes.append(
            "every row has a knob value of its own: a continuous ramp, or state the step of the knob"
        )
    return notes
