"""`compare`: a bench sweep's splits picked and held against the model's onsets."""

from __future__ import annotations

import json
import sys
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from tinemark.commands.output import check_json, write_json
from tinemark.commands.progress import Progress, run_steps, say
from tinemark.systems.errors import NoOnsetFound, TinemarkError

if TYPE_CHECKING:
    from tinemark.bench.agreement import ModelOnset
    from tinemark.bench.results import Agreement, BenchPicks, Calibration
    from tinemark.bench.sweep import BenchSweep
    from tinemark.onsets.results import Onset
    from tinemark.systems.system import System

FORMAT, VERSION = "tinemark-comparison", 1
COVERAGE = 2


@dataclass(frozen=True)
class CompareOptions:
    """Arguments of `compare`; see `bench.reading.ReadOptions` for those of reading.

    Attributes
    ----------
    scale, offset
        The calibration, parameter = offset + scale * knob, where it is given; None to fit it.
    """

    system: str
    bench: str
    knob: str
    sample: str
    time: str
    trigger: str
    strobe_period: float
    knob_step: float
    knob_uncertainty: float
    direction: str
    levels: int
    scale: float | None
    offset: float | None
    seed: int
    json: str | None


def compare(options: CompareOptions) -> None:
    """Pick the splits of a sweep, follow the model's ladder, and print how they agree.

    Raises
    ------
    NoOnsetFound
        One side has no split to compare.
    TinemarkError
        Bad input: file, column and what to do.
    """
    from tinemark.bench.agreement import compare_onsets
    from tinemark.bench.picking import pick_all
    from tinemark.bench.reading import ReadOptions, read_sweep
    from tinemark.systems.library import find_system

    check_json(options.json)
    system = find_system(options.system)
    reading = ReadOptions(
        knob=options.knob,
        sample=options.sample,
        time=options.time,
        trigger=options.trigger,
        strobe_period=options.strobe_period,
        knob_step=options.knob_step,
        knob_uncertainty=options.knob_uncertainty,
    )
    sweep = read_sweep(options.bench, reading)
    for note in sweep.notes:
        say(note)
    calibration = _calibration(options)
    progress = Progress()
    direction = 1 if options.direction == "up" else -1
    try:
        picks: BenchPicks = run_steps(
            pick_all(sweep, direction, options.levels, options.seed), lambda item: progress.step(item.text)
        )
    finally:
        progress.clear()
    flips = [onset for onset in picks.onsets if onset.level > 0]
    if not flips:
        raise NoOnsetFound(picks.hidden or "no split can be told in the sweep", where=options.bench)
    model = _model(system, options)
    agreement = compare_onsets(model, flips, calibration, system.diagram_parameter)
    if options.json == "-":
        sys.stdout.write(_json_text(options, sweep, picks, agreement, system))
        return
    if options.json is not None:
        write_json(options.json, _json_text(options, sweep, picks, agreement, system))
    print(_measured_table(sweep, picks))
    if picks.hidden:
        print(f"no more: {picks.hidden}")
    print("\n" + _agreement_table(system, agreement))
    for line in _ratio_lines(agreement):
        print(line)
    print(f"\n{_calibration_words(agreement.calibration, sweep, system)}\n{agreement.verdict}")


def _calibration(options: CompareOptions) -> Calibration | None:
    from tinemark.bench.results import Calibration

    if options.scale is None and options.offset is None:
        return None
    scale = 1.0 if options.scale is None else options.scale
    if scale == 0:
        raise TinemarkError("a scale of 0 takes every knob setting to one value", where="--scale")
    return Calibration(scale, options.offset or 0.0)


def _model(system: System, options: CompareOptions) -> list[ModelOnset]:
    """The model's ladder with what its tolerances do to it."""
    from tinemark.commands.onsets import follow
    from tinemark.document.first_view import parameter_range
    from tinemark.onsets.results import LadderRequest

    start, stop = parameter_range(system)
    request = LadderRequest(system, system.diagram_parameter, start, stop, levels=options.levels, digits=10)
    try:
        found, _, message = follow(request)
    except NoOnsetFound:
        found, _, message = follow(replace(request, start=stop, stop=start))
    levels = [(level, onset) for level, onset in found if level is not None and level > 0]
    if not levels:
        raise NoOnsetFound(message or "the model has no cascade over its sweep", where=options.system)
    return [_model_onset(level, onset, system) for level, onset in levels]


def _model_onset(level: int, onset: Onset, system: System) -> ModelOnset:
    from tinemark.bench.agreement import ModelOnset

    tolerances = {p.name: p.tolerance for p in system.parameters if p.tolerance is not None}
    shifts = tuple(
        (item.name, float(item.derivative) * float(tolerances[item.name]))
        for item in onset.sensitivities
        if item.name in tolerances
    )
    return ModelOnset(level, float(onset.value), float(onset.half_width) / COVERAGE, shifts)


def _measured_table(sweep: BenchSweep, picks: BenchPicks) -> str:
    from tinemark.document.text_table import text_table

    unit = f" ({sweep.knob_unit})" if sweep.knob_unit else ""
    headings = ["level", "branches", f"{sweep.knob}{unit}", "type A", "type B", "95 %", "found"]
    rows = [
        [
            str(onset.level),
            f"{onset.branches_before} -> {onset.branches_after}",
            f"{onset.value:.6g}",
            f"{onset.type_a:.2g}",
            f"{onset.type_b:.2g}",
            f"{onset.lower:.6g} to {onset.upper:.6g}",
            onset.words,
        ]
        for onset in picks.onsets
    ]
    return text_table(headings, rows, frozenset({0}))


def _agreement_table(system: System, agreement: Agreement) -> str:
    from tinemark.document.text_table import text_table

    headings = ["level", f"model {system.diagram_parameter}", "u", "measured", "u", "E_n"]
    rows = [
        [
            str(onset.level),
            f"{onset.model:.7g}",
            f"{onset.model_uncertainty:.2g}",
            f"{onset.measured:.7g}",
            f"{onset.measured_uncertainty:.2g}",
            f"{onset.normalised_error:.2f}",
        ]
        for onset in agreement.onsets
    ]
    return text_table(headings, rows, frozenset({0}))


def _ratio_lines(agreement: Agreement) -> list[str]:
    from tinemark.onsets.class_values import QUADRATIC

    return [
        f"ratio at level {level}: measured {measured:.3g} ± {COVERAGE * spread:.2g}, model {model:.4g}, "
        f"quadratic class {float(QUADRATIC.delta):.4g}"
        for level, measured, spread, model in agreement.ratios
    ]


def _calibration_words(calibration: Calibration, sweep: BenchSweep, system: System) -> str:
    line = f"{system.diagram_parameter} = {calibration.offset:.6g} + {calibration.scale:.6g} * {sweep.knob}"
    if not calibration.is_fitted:
        return f"calibration as given: {line}"
    spreads = f"{calibration.offset_uncertainty:.2g} and {calibration.scale_uncertainty:.2g}"
    return f"calibration fitted to these onsets: {line}, standard uncertainties {spreads}"


def _json_text(
    options: CompareOptions, sweep: BenchSweep, picks: BenchPicks, agreement: Agreement, system: System
) -> str:
    source = sweep.source
    data: dict[str, Any] = {
        "format": FORMAT,
        "version": VERSION,
        "system": options.system,
        "parameter": system.diagram_parameter,
        "bench": {"name": source.name, "size": source.size, "sha256": source.sha256},
        "knob": sweep.knob,
        "sample": sweep.sample,
        "measured": [
            {
                "level": onset.level,
                "branches_before": onset.branches_before,
                "branches_after": onset.branches_after,
                "value": onset.value,
                "type_a": onset.type_a,
                "type_b": onset.type_b,
                "lower": onset.lower,
                "upper": onset.upper,
                "is_jump": onset.is_jump,
                "back": onset.back,
                "words": onset.words,
            }
            for onset in picks.onsets
        ],
        "hidden": picks.hidden,
        "calibration": {
            "scale": agreement.calibration.scale,
            "offset": agreement.calibration.offset,
            "scale_uncertainty": agreement.calibration.scale_uncertainty,
            "offset_uncertainty": agreement.calibration.offset_uncertainty,
            "fitted": agreement.calibration.is_fitted,
        },
        "onsets": [
            {
                "level": onset.level,
                "model": onset.model,
                "model_uncertainty": onset.model_uncertainty,
                "measured": onset.measured,
                "measured_uncertainty": onset.measured_uncertainty,
                "normalised_error": onset.normalised_error,
            }
            for onset in agreement.onsets
        ],
        "chi_square": agreement.chi_square,
        "degrees": agreement.degrees,
        "probability": agreement.probability,
        "ratios": [
            {"level": level, "measured": measured, "uncertainty": spread, "model": model}
            for level, measured, spread, model in agreement.ratios
        ],
        "worst": agreement.worst,
        "suspect": agreement.suspect,
        "verdict": agreement.verdict,
    }
    return json.dumps(data, indent=1, ensure_ascii=False) + "\n"
