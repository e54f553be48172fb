"""`onsets`: every onset of a range, found in this process, printed and kept."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from tinemark.commands.kinds import kinds_of
from tinemark.commands.output import check_json, print_onsets
from tinemark.commands.progress import Progress, run_steps, say
from tinemark.systems.errors import NoOnsetFound
from tinemark.systems.exact import Exact

if TYPE_CHECKING:
    from tinemark.document.onsets_file import Found
    from tinemark.onsets.results import Step, SurveyFind


@dataclass(frozen=True)
class SurveyOptions:
    """Arguments of `onsets`."""

    system: str
    parameter: str | None
    start: Exact
    stop: Exact
    max_period: int
    digits: int
    kinds: str | None
    json: str | None


def onsets(options: SurveyOptions) -> None:
    """List every onset of a range, in the order of the parameter.

    Raises
    ------
    NoOnsetFound
        There is none; says what was looked at.
    TinemarkError
        Bad input.
    """
    from tinemark.onsets import engine
    from tinemark.onsets.results import Step, SurveyRequest
    from tinemark.systems.library import find_system

    kinds = kinds_of(options.kinds)
    check_json(options.json)
    system = find_system(options.system)
    parameter = system.parameter(options.parameter or system.diagram_parameter).name
    request = SurveyRequest(
        system,
        parameter,
        options.start.fraction,
        options.stop.fraction,
        options.max_period,
        options.digits,
        kinds,
    )
    progress = Progress()

    def hear(item: Step | SurveyFind) -> None:
        if isinstance(item, Step):
            share = "" if item.share is None else f"{item.share:4.0%} "
            progress.step(share + item.text)
            return
        onset = item.onset
        progress.line(f"{onset.kind.value}: {onset.parameter} = {onset.value} ({onset.status.value})")

    try:
        result = run_steps(engine.survey(request), hear)
    finally:
        progress.clear()
    if not result.onsets:
        raise NoOnsetFound(result.message, where=options.system)
    found: list[Found] = [(None, onset) for onset in result.onsets]
    print_onsets(options.system, parameter, found, None, options.json, system)
    say(result.message)
