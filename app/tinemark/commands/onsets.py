"""`ladder` and `refine`: onsets found in this process, printed and kept."""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction
from typing import TYPE_CHECKING

from tinemark.commands.kinds import kinds_of
from tinemark.commands.output import check_json, print_onsets
from tinemark.commands.progress import Progress, run_steps, say
from tinemark.systems.errors import NoOnsetFound, TinemarkError
from tinemark.systems.exact import Exact

if TYPE_CHECKING:
    from tinemark.document.onsets_file import Found
    from tinemark.onsets.results import Kind, LadderLevel, LadderRequest, Onset, RefineResult, Step
    from tinemark.onsets.scaling import Scaling
    from tinemark.systems.system import System


@dataclass(frozen=True)
class LadderOptions:
    """Arguments of `ladder`."""

    system: str
    parameter: str | None
    start: Exact | None
    stop: Exact | None
    base_period: int
    levels: int
    digits: int
    json: str | None
    kinds: str | None = None


@dataclass(frozen=True)
class RefineOptions:
    """Arguments of `refine`."""

    system: str
    near: Exact
    observed: Exact | None
    window: Exact
    digits: int
    json: str | None
    kinds: str | None = None


def ladder(options: LadderOptions) -> None:
    """Follow a cascade and print it.

    Raises
    ------
    NoOnsetFound
        There is no cascade there.
    TinemarkError
        Bad input.
    """
    from tinemark.onsets.results import Kind, LadderRequest
    from tinemark.systems.library import find_system

    kinds = kinds_of(options.kinds)
    if kinds is not None and Kind.FLIP not in kinds:
        raise TinemarkError(
            "a ladder is made of flips, and these kinds leave them out",
            where="--kinds",
            what_to_do="add flip; other kinds are listed by: tinemark onsets",
        )
    check_json(options.json)
    system = find_system(options.system)
    parameter = options.parameter or system.diagram_parameter
    start, stop = _sweep(system, parameter, options.start, options.stop)
    request = LadderRequest(
        system, parameter, start, stop, options.base_period, options.levels, options.digits
    )
    try:
        found, scaled, message = follow(request)
    except NoOnsetFound as error:
        if options.start is not None or options.stop is not None:
            raise
        # Many cascades run downwards; where nobody said which way, the other one is tried too.
        found, scaled, message = _downwards(request, error)
    if not found:
        raise NoOnsetFound(message or "no cascade was found there", where=options.system)
    if kinds is not None:
        found = [item for item in found if item[1].kind in kinds]
        if kinds != {Kind.FLIP}:
            found = _opened(request, found, kinds)
    print_onsets(options.system, parameter, found, scaled, options.json, system)
    for level, onset in found:
        if level is not None and onset.consequence:
            say(f"level {level}: {onset.consequence}")
    if message:
        say(message)


def _opened(request: LadderRequest, found: list[Found], kinds: frozenset[Kind]) -> list[Found]:
    """The levels, and before them the onset at which the cycle that splits first appears."""
    from tinemark.document.ledger import same_onset
    from tinemark.onsets import engine

    progress = Progress()
    first = next(onset for level, onset in found if level is not None)
    try:
        opening = run_steps(engine.opening(request, first, kinds), lambda item: progress.step(item.text))
    finally:
        progress.clear()
    if opening is None:
        say("the cycle that splits first appears in no onset of these kinds within reach")
        return found
    if any(same_onset(opening, onset) for _, onset in found):
        return found
    return [(None, opening), *found]


def _sweep(
    system: System, parameter: str, start: Exact | None, stop: Exact | None
) -> tuple[Fraction, Fraction]:
    swept = system.parameter(parameter)
    if (start is None or stop is None) and swept.range is None:
        option = "--from" if start is None else "--to"
        raise TinemarkError(
            f"is needed, since the system gives {parameter} no range",
            where=option,
            what_to_do=f"add {option} VALUE, or a range under [parameters.{parameter}]",
        )
    first = start if start is not None else swept.range[0] if swept.range else None
    last = stop if stop is not None else swept.range[1] if swept.range else None
    assert first is not None
    assert last is not None
    if first.fraction == last.fraction:
        raise TinemarkError("is the same as --from", where="--to", what_to_do="give two different ends")
    return first.fraction, last.fraction


def _downwards(request: LadderRequest, upwards: NoOnsetFound) -> tuple[list[Found], Scaling | None, str]:
    try:
        return follow(replace(request, start=request.stop, stop=request.start))
    except NoOnsetFound:
        raise upwards from None


def follow(request: LadderRequest) -> tuple[list[Found], Scaling | None, str]:
    """Run a ladder in this process, with its progress on standard error.

    Returns
    -------
    found, scaled, message
        The levels, and between them (without a level) what else was met on the way; what the levels say
        together (None without levels); and why the ladder ended early if it did.

    Raises
    ------
    NoOnsetFound
        There is no first level.
    """
    from tinemark.onsets import engine
    from tinemark.onsets.ladder_points import COVERAGE, Estimate
    from tinemark.onsets.results import Step
    from tinemark.onsets.scaling import points_of, scaling

    levels: list[LadderLevel] = []
    progress = Progress()

    def hear(item: Step | LadderLevel) -> None:
        if isinstance(item, Step):
            progress.step(item.text)
            return
        levels.append(item)
        onset = item.onset
        progress.line(f"level {item.level}: {onset.parameter} = {onset.value} ({onset.status.value})")

    message, alpha, alpha_reason = "", None, ""
    besides: tuple[Onset, ...] = ()
    try:
        result = run_steps(engine.ladder(request), hear)
        levels, message = list(result.levels), result.message
        alpha, alpha_reason, besides = result.alpha, result.alpha_reason, result.besides
    except NoOnsetFound as error:
        # What was found before it gave out still counts.
        if not levels:
            raise
        message = str(error)
    finally:
        progress.clear()
    found: list[Found] = [(item.level, item.onset) for item in levels]
    found += [(None, onset) for onset in besides]
    found.sort(key=lambda item: item[1].value_fraction, reverse=request.stop < request.start)
    if not levels:
        return found, None, message
    number = Estimate(*alpha, COVERAGE) if alpha is not None else None
    scaled = replace(scaling(points_of(levels)), alpha=number, alpha_reason=alpha_reason)
    return found, scaled, message


def refine(options: RefineOptions) -> None:
    """Find what a click would, and print it.

    Raises
    ------
    NoOnsetFound
        There is no onset within the window.
    TinemarkError
        Bad input.
    """
    from tinemark.commands.pictures import swept_over
    from tinemark.document.first_view import first_view
    from tinemark.onsets import engine
    from tinemark.onsets.results import RefineRequest
    from tinemark.systems.library import find_system

    kinds = kinds_of(options.kinds)
    check_json(options.json)
    system = find_system(options.system)
    near, width = options.near.fraction, options.window.fraction
    observed, height = None, None
    if options.observed is not None:
        # On screen a click has a height too: that of a diagram of this window.
        observed = options.observed.fraction
        height = first_view(swept_over(system, near - width / 2, near + width / 2)).height
    request = RefineRequest(
        system, system.diagram_parameter, near, width, observed, height, options.digits, kinds
    )
    progress = Progress()
    try:
        result = run_steps(engine.refine(request), lambda item: progress.step(item.text))
    finally:
        progress.clear()
    result = _with_digits(result, system, options.digits)
    if not result.onsets:
        raise NoOnsetFound(result.message or "no onset was found there", where=options.system)
    found: list[Found] = [(None, onset) for onset in result.onsets]
    print_onsets(options.system, system.diagram_parameter, found, None, options.json, system)
    if result.message:
        say(result.message)


def _with_digits(result: RefineResult, system: System, digits: int) -> RefineResult:
    """The digits asked for, where an onset of equations was found in doubles: that takes some seconds."""
    from tinemark.onsets import engine
    from tinemark.onsets.results import SharpenRequest

    if system.is_map:
        return result
    onsets, words = [], []
    progress = Progress()
    for onset in result.onsets:
        if onset.digits >= digits:
            onsets.append(onset)
            continue
        work = engine.sharpen(SharpenRequest(system, onset, digits))
        try:
            more = run_steps(work, lambda item: progress.step(item.text))
        except NoOnsetFound as error:
            onsets.append(onset)
            words.append(str(error))
        else:
            onsets += more.onsets
            words.append(more.message)
        finally:
            progress.clear()
    return replace(result, onsets=tuple(onsets), message="; ".join(words) or result.message)
