"""What the command line does, once its arguments are understood. Engines are loaded where they are used.

Progress goes to standard error, results to standard output. Bad input raises before anything is written.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Generator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING, TypeVar

from tinemark.systems.errors import NoOnsetFound, TinemarkError
from tinemark.systems.exact import Exact

if TYPE_CHECKING:
    from tinemark.document.onsets_file import Found
    from tinemark.document.session import PictureSettings, Session
    from tinemark.onsets.results import LadderLevel, LadderRequest, Step
    from tinemark.onsets.scaling import Scaling
    from tinemark.systems.system import System

Item = TypeVar("Item")
Result = TypeVar("Result")

PICTURE_SIZE = (1600, 1000)
DEMO_PICTURE = "tinemark-demo.png"
DEMO_LEVELS = 6


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


@dataclass(frozen=True)
class RefineOptions:
    """Arguments of `refine`."""

    system: str
    near: Exact
    observed: Exact | None
    window: Exact
    digits: int
    json: str | None


@dataclass(frozen=True)
class PictureOptions:
    """Arguments of `picture`."""

    system: str
    start: Exact
    stop: Exact
    size: tuple[int, int]
    output: Path


def ladder(options: LadderOptions) -> None:
    """Follow a cascade and print it.

    Raises
    ------
    NoOnsetFound
        There is no cascade there.
    TinemarkError
        Bad input.
    """
    from tinemark.onsets.results import LadderRequest
    from tinemark.systems.library import find_system

    _check_json(options.json)
    system = find_system(options.system)
    parameter = options.parameter or system.diagram_parameter
    start, stop = _sweep(system, parameter, options.start, options.stop)
    request = LadderRequest(
        system, parameter, start, stop, options.base_period, options.levels, options.digits
    )
    found, scaled, message = _follow(request)
    if not found:
        raise NoOnsetFound(message or "no cascade was found there", where=options.system)
    _print_onsets(options.system, parameter, found, scaled, options.json)
    if message:
        _say(message)


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


def _follow(request: LadderRequest) -> tuple[list[Found], Scaling | None, str]:
    from tinemark.onsets import engine
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

    message = ""
    try:
        result = _run(engine.ladder(request), hear)
        levels, message = list(result.levels), result.message
    except NoOnsetFound as error:
        # What was found before it gave out still counts.
        if not levels:
            raise
        message = str(error)
    finally:
        progress.clear()
    found: list[Found] = [(item.level, item.onset) for item in levels]
    return found, scaling(points_of(levels)) if levels else None, message


def refine(options: RefineOptions) -> None:
    """Find what a click would, and print it.

    Raises
    ------
    NoOnsetFound
        There is no onset within the window.
    TinemarkError
        Bad input.
    """
    from tinemark.document.first_view import first_view
    from tinemark.onsets import engine
    from tinemark.onsets.results import RefineRequest
    from tinemark.systems.library import find_system

    _check_json(options.json)
    system = find_system(options.system)
    near, width = options.near.fraction, options.window.fraction
    observed, height = None, None
    if options.observed is not None:
        # On screen a click has a height too: that of a diagram of this window.
        observed = options.observed.fraction
        height = first_view(_swept_over(system, near - width / 2, near + width / 2)).height
    request = RefineRequest(system, system.diagram_parameter, near, width, observed, height, options.digits)
    progress = Progress()
    try:
        result = _run(engine.refine(request), lambda item: progress.step(item.text))
    finally:
        progress.clear()
    if not result.onsets:
        raise NoOnsetFound(result.message or "no onset was found there", where=options.system)
    found: list[Found] = [(None, onset) for onset in result.onsets]
    _print_onsets(options.system, system.diagram_parameter, found, None, options.json)
    if result.message:
        _say(result.message)


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

    _check_target(options.output)
    system = find_system(options.system)
    left, right = sorted((options.start.fraction, options.stop.fraction))
    session = replace(new_session(system), view=first_view(_swept_over(system, left, right)))
    steps = _draw(session, system, options.size, options.output)
    print(f"{options.output}: {options.size[0]} x {options.size[1]} pixels, {steps} steps")


def _swept_over(system: System, left: Fraction, right: Fraction) -> System:
    """The system with another range of the swept parameter."""
    from tinemark.systems.exact import exact

    ends = (exact(left), exact(right))
    parameters = tuple(
        replace(p, range=ends) if p.name == system.diagram_parameter else p for p in system.parameters
    )
    return replace(system, parameters=parameters)


def _draw(session: Session, system: System, size: tuple[int, int], output: Path) -> int:
    """Draw a session's view to its budget and write it; returns the steps drawn."""
    from tinemark.density import renderer
    from tinemark.density.png import picture_png
    from tinemark.density.request import PictureRequest
    from tinemark.document.session import BUDGETS

    settings: PictureSettings = session.picture
    request = PictureRequest(
        system=system,
        parameter=session.parameter,
        observe=session.observe,
        view=session.view,
        columns=size[0],
        rows=size[1],
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
        for field in renderer.progressive(
            request, BUDGETS[settings.budget]
        ):
            progress.step(f"{field.steps} steps drawn")
    finally:
        progress.clear()
    assert field is not None
    _write(output, picture_png(field, tone=settings.tone, palette=settings.palette))
    return int(field.steps)


def inspect(path: Path) -> None:
    """Say what a file is.

    Raises
    ------
    TinemarkError
        It is no file of ours, or what is wrong with it.
    """
    from tinemark.document.inspection import inspect_file

    print(f"{path}: " + "\n  ".join(inspect_file(path).lines))


def without_display(path: Path | None) -> None:
    """The window's job where there is none: a session's ledger as tables, and its picture.

    Parameters
    ----------
    path
        A session or a system; None for the demo.
    """
    from tinemark.document.ledger import ladder_title
    from tinemark.document.session import system_of

    session = session_of(path)
    _say("there is no display, so the job runs without the window")
    system = system_of(session)
    print(session.title or system.title)
    if not session.ledger.rows:
        session = _with_a_ladder(session, system)
    for name, found, scaled in _groups(session):
        print(f"\n{ladder_title(session.ledger, name) if name else 'other onsets'}\n")
        _print_onsets(system.title, session.parameter, found, scaled, None)
    output = _picture_place(DEMO_PICTURE if path is None else f"{path.stem}.png")
    _draw(session, system, PICTURE_SIZE, output)
    print(f"\npicture: {output}")


def session_of(path: Path | None) -> Session:
    """The session in a session file, a fresh one on a system file, or the demo.

    Raises
    ------
    TinemarkError
        The file is neither, or cannot be read.
    """
    from tinemark.document.inspection import inspect_file
    from tinemark.document.session import demo_session, new_session
    from tinemark.document.session_file import open_session

    if path is None:
        return demo_session()
    kind = inspect_file(path).kind
    if kind == "session":
        return open_session(path)
    if kind != "system":
        raise TinemarkError(
            "is neither a session nor a system",
            where=str(path),
            what_to_do="open a .tinemark or a .toml file; inspect says what this one holds",
        )
    return new_session(path.read_text(encoding="utf-8-sig"))


def _with_a_ladder(session: Session, system: System) -> Session:
    from tinemark.document.ledger import add_ladder, place_of
    from tinemark.onsets.results import LadderLevel, LadderRequest, LadderResult

    view = session.view
    request = LadderRequest(system, session.parameter, view.left, view.right, levels=DEMO_LEVELS)
    try:
        found, _, message = _follow(request)
    except NoOnsetFound as error:
        _say(str(error))
        return session
    levels = tuple(LadderLevel(level, onset) for level, onset in found if level is not None)
    place = place_of(system, session.parameter)
    ledger = add_ladder(session.ledger, LadderResult(1, levels, message), place)
    return replace(session, ledger=ledger)


def _groups(session: Session) -> list[tuple[str, list[Found], Scaling | None]]:
    """The ledger's ladders with what they say together, then what belongs to none."""
    from tinemark.document.ledger import ladder_ids, ladder_rows, loose_rows
    from tinemark.onsets.results import LadderLevel
    from tinemark.onsets.scaling import points_of, scaling

    groups: list[tuple[str, list[Found], Scaling | None]] = []
    for name in ladder_ids(session.ledger):
        rows = ladder_rows(session.ledger, name)
        flips = [LadderLevel(row.level, row.onset) for row in rows if row.level]
        groups.append((name, [(row.level, row.onset) for row in rows], scaling(points_of(flips))))
    loose: list[Found] = [(None, row.onset) for row in loose_rows(session.ledger)]
    return groups + ([("", loose, None)] if loose else [])


def _picture_place(name: str) -> Path:
    import tempfile

    here = Path.cwd()
    return (here if os.access(here, os.W_OK) else Path(tempfile.gettempdir())) / name


def _print_onsets(
    system: str, parameter: str, found: Sequence[Found], scaled: Scaling | None, json: str | None
) -> None:
    from tinemark.document.onsets_file import onsets_file, write_onsets_text
    from tinemark.document.text_table import onsets_table, scaling_lines

    if json is not None:
        text = write_onsets_text(onsets_file(system, parameter, found, scaled))
        if json == "-":
            sys.stdout.write(text)
            return
        _write(Path(json), text.encode())
    print(onsets_table(found, scaled))
    for reason in dict.fromkeys(onset.reason for _, onset in found if onset.reason):
        print(f"not proved: {reason}")
    if scaled is not None:
        print("\n" + "\n".join(scaling_lines(scaled, parameter)))


def _check_json(json: str | None) -> None:
    if json is not None and json != "-":
        _check_target(Path(json))


def _check_target(path: Path) -> None:
    """Make sure, before any work, that a file can be written there."""
    if path.is_dir():
        raise TinemarkError("is a folder", where=str(path), what_to_do="name a file in it")
    if not path.parent.is_dir():
        raise TinemarkError(
            "cannot be written: its folder does not exist",
            where=str(path),
            what_to_do="make the folder first",
        )
    if not os.access(path if path.exists() else path.parent, os.W_OK):
        raise TinemarkError(
            "cannot be written: no permission", where=str(path), what_to_do="name another file or folder"
        )


def _write(path: Path, data: bytes) -> None:
    from tinemark.document.atomic_file import write_whole

    try:
        write_whole(path, data)
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise TinemarkError(f"cannot be written ({reason})", where=str(path)) from error


def _run(steps: Generator[Item, None, Result], hear: Callable[[Item], None]) -> Result:
    while True:
        try:
            item = next(steps)
        except StopIteration as end:
            result: Result = end.value
            return result
        hear(item)


class Progress:
    """Progress on standard error: one line that changes on a terminal, only what is found elsewhere."""

    def __init__(self) -> None:
        self.changing = sys.stderr.isatty()

    def step(self, text: str) -> None:
        """Say what is being done."""
        if self.changing and text:
            sys.stderr.write(f"\r\x1b[K{text[:100]}")
            sys.stderr.flush()

    def line(self, text: str) -> None:
        """Say what has been found."""
        self.clear()
        print(text, file=sys.stderr, flush=True)

    def clear(self) -> None:
        """Take the changing line away."""
        if self.changing:
            sys.stderr.write("\r\x1b[K")
            sys.stderr.flush()


def _say(text: str) -> None:
    print(f"tinemark: {text}", file=sys.stderr, flush=True)
