"""`picture`: the diagram as a PNG."""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING

from tinemark.commands.output import check_target, not_written
from tinemark.commands.progress import Progress
from tinemark.systems.errors import NoOnsetFound, TinemarkError
from tinemark.systems.exact import Exact

if TYPE_CHECKING:
    from tinemark.document.session import Session
    from tinemark.equations.accuracy import Accuracy
    from tinemark.systems.system import System


PALETTE = "ink"
"""Where a session names none."""


@dataclass(frozen=True)
class PictureOptions:
    """Arguments of `picture`; no accuracy named means the usual one."""

    system: str
    start: Exact
    stop: Exact
    size: tuple[int, int]
    output: Path
    accuracy: str = ""


def picture(options: PictureOptions) -> None:
    """Write a picture of the diagram.

    Raises
    ------
    TinemarkError
        Bad input, or the file cannot be written.
    """
    from tinemark.document.first_view import first_view
    from tinemark.document.session import new_session
    from tinemark.systems.library import find_system

    check_target(options.output)
    system = find_system(options.system)
    left, right = options.start.fraction, options.stop.fraction
    if left > right:
        raise TinemarkError(
            f"runs from {options.start.text} down to {options.stop.text}, but a picture goes left to right",
            where="--range",
            what_to_do=f"write --range {options.stop.text} {options.start.text}",
        )
    session = replace(new_session(system), view=first_view(swept_over(system, left, right)))
    if options.accuracy:
        settings = replace(session.picture, accuracy=accuracy_named(options.accuracy, system))
        session = replace(session, picture=settings)
    steps = draw(session, system, options.size, options.output)
    print(f"{options.output}: {options.size[0]} x {options.size[1]} pixels, {steps} {steps_word(system)}")


def accuracy_named(name: str, system: System) -> Accuracy:
    """The accuracy of a name, for a system that has a use for it.

    Raises
    ------
    TinemarkError
        There is none of that name, or the system is a map.
    """
    from tinemark.equations.accuracy import Accuracy

    names = ", ".join(accuracy.value for accuracy in Accuracy)
    if name not in {accuracy.value for accuracy in Accuracy}:
        raise TinemarkError(
            f'"{name}" is not one of {names}', where="--accuracy", what_to_do="write one of them"
        )
    if system.is_map:
        raise TinemarkError(
            "is for equations, and this system is a map: each step is as exact as doubles are",
            where="--accuracy",
            what_to_do="leave it out",
        )
    return Accuracy(name)


def swept_over(system: System, left: Fraction, right: Fraction) -> System:
    """The system with another range of the swept parameter."""
    from tinemark.systems.exact import exact

    ends = (exact(left), exact(right))
    parameters = tuple(
        replace(p, range=ends) if p.name == system.diagram_parameter else p for p in system.parameters
    )
    return replace(system, parameters=parameters)


def steps_word(system: System) -> str:
    """What a picture of a system counts."""
    return "steps" if system.is_map else "samples"


def draw(session: Session, system: System, size: tuple[int, int], output: Path) -> int:
    """Draw a session's view to its budget and write it with axes; returns the steps drawn."""
    from tinemark.density import renderer
    from tinemark.density.png import Frame, framed_cells, smallest_framed, write_picture_png
    from tinemark.density.request import PictureRequest
    from tinemark.document.session import budget_steps

    settings = session.picture
    least = smallest_framed()
    if size[0] < least[0] or size[1] < least[1]:
        raise TinemarkError(
            f"{size[0]} x {size[1]} pixels leave no room between the axes",
            where="--size",
            what_to_do=f"take {least[0]} x {least[1]} or more",
        )
    columns, rows = framed_cells(*size)
    request = PictureRequest(
        system=system,
        parameter=session.parameter,
        observe=session.observe,
        view=session.view,
        columns=columns,
        rows=rows,
        rule=settings.rule,
        transient_steps=settings.transient_steps,
        starts=settings.starts,
        accuracy=settings.accuracy,
    )
    if not renderer.columns_distinct(request):
        raise NoOnsetFound(
            "the columns are closer than double precision can tell, so a picture would show noise",
            what_to_do="take a wider range; refine still works there",
        )
    progress = Progress()
    counted = steps_word(system)
    field = None
    try:
        for field in renderer.progressive(request, budget_steps(settings.budget, system)):
            progress.step(f"{field.steps} {counted} drawn")
    finally:
        progress.clear()
    assert field is not None
    frame = Frame(session.view, *_axis_names(system, session), session.title or system.title, size)
    try:
        write_picture_png(field, output, settings.tone, settings.palette or PALETTE, frame=frame)
    except OSError as error:
        raise not_written(output, error) from error
    return int(field.steps)


def _axis_names(system: System, session: Session) -> tuple[str, str]:
    units = {state.name: state.unit for state in system.states}
    units |= {parameter.name: parameter.unit for parameter in system.parameters}

    def named(name: str) -> str:
        return f"{name} ({units[name]})" if units.get(name) else name

    return named(session.parameter), named(session.observe)
