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
    from tinemark.systems.system import System


PALETTE = "ink"
"""Where a session names none."""


@dataclass(frozen=True)
class PictureOptions:
    """Arguments of `picture`."""

    system: str
    start: Exact
    stop: Exact
    size: tuple[int, int]
    output: Path


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
    steps = draw(session, system, options.size, options.output)
    print(f"{options.output}: {options.size[0]} x {options.size[1]} pixels, {steps} steps")


def swept_over(system: System, left: Fraction, right: Fraction) -> System:
    """The system with another range of the swept parameter."""
    from tinemark.systems.exact import exact

    ends = (exact(left), exact(right))
    parameters = tuple(
        replace(p, range=ends) if p.name == system.diagram_parameter else p for p in system.parameters
    )
    return replace(system, parameters=parameters)


def draw(session: Session, system: System, size: tuple[int, int], output: Path) -> int:
    """Draw a session's view to its budget and write it with axes; returns the steps drawn."""
    from tinemark.density import renderer
    from tinemark.density.png import Frame, framed_cells, write_picture_png
    from tinemark.density.request import PictureRequest
    from tinemark.document.session import BUDGETS

    settings = session.picture
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
    )
    if not renderer.columns_distinct(request):
        raise NoOnsetFound(
            "the columns are closer than double precision can tell, so a picture would show noise",
            what_to_do="take a wider range; refine still works there",
        )
    progress = Progress()
    field = None
    try:
        for field in renderer.progressive(request, BUDGETS[settings.budget]):
            progress.step(f"{field.steps} steps drawn")
    finally:
        progress.clear()
    assert field is not None
    frame = Frame(session.view, *_axis_names(system, session), session.title or system.title)
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
