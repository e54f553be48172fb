"""`inspect`, and the window's job where there is no display."""

from __future__ import annotations

import os
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

from tinemark.commands.output import print_onsets
from tinemark.commands.progress import say
from tinemark.systems.errors import NoOnsetFound, TinemarkError

if TYPE_CHECKING:
    from tinemark.document.onsets_file import Found
    from tinemark.document.session import Session
    from tinemark.onsets.scaling import Scaling
    from tinemark.systems.system import System

PICTURE_SIZE = (1600, 1000)
DEMO_LEVELS = 6


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
    from tinemark.commands.pictures import draw
    from tinemark.document.ledger import ladder_title
    from tinemark.document.session import system_of
    from tinemark.document.tolerance_tables import nearest_sentence, tolerances_of

    session = session_of(path)
    say("there is no display, so the job runs without the window")
    system = system_of(session)
    print(session.title or system.title)
    if not session.ledger.rows:
        session = _with_a_ladder(session, system)
    for name, found, scaled in _groups(session):
        print(f"\n{ladder_title(session.ledger, name) if name else 'other onsets'}\n")
        print_onsets(system.title, session.parameter, found, scaled, None)
    margin = nearest_sentence(tolerances_of(session))
    if margin:
        print(f"\nmargin: {margin}")
    output = _picture_place(path.stem if path is not None else "demo")
    draw(session, system, PICTURE_SIZE, output)
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
    from tinemark.commands.onsets import follow
    from tinemark.document.ledger import add_ladder, place_of
    from tinemark.onsets.results import LadderLevel, LadderRequest, LadderResult

    view = session.view
    request = LadderRequest(system, session.parameter, view.left, view.right, levels=DEMO_LEVELS)
    try:
        found, _, message = follow(request)
    except NoOnsetFound as error:
        say(str(error))
        return session
    levels = tuple(LadderLevel(level, onset) for level, onset in found if level is not None)
    besides = tuple(onset for level, onset in found if level is None)
    place = place_of(system, session.parameter)
    ledger = add_ladder(session.ledger, LadderResult(1, levels, message, besides=besides), place)
    return replace(session, ledger=ledger)


def _groups(session: Session) -> list[tuple[str, list[Found], Scaling | None]]:
    """The ledger's ladders with what they say together, then what belongs to none."""
    from tinemark.document.ledger import alpha_of, ladder_ids, ladder_rows, loose_rows
    from tinemark.onsets.ladder_points import COVERAGE, Estimate
    from tinemark.onsets.results import LadderLevel
    from tinemark.onsets.scaling import points_of, scaling

    groups: list[tuple[str, list[Found], Scaling | None]] = []
    for name in ladder_ids(session.ledger):
        rows = ladder_rows(session.ledger, name)
        flips = [LadderLevel(row.level, row.onset) for row in rows if row.level]
        said = scaling(points_of(flips))
        alpha = alpha_of(session.ledger, name)
        if alpha is not None:
            number = Estimate(alpha.value, alpha.uncertainty, COVERAGE) if alpha.value else None
            said = replace(said, alpha=number, alpha_reason=alpha.reason)
        groups.append((name, [(row.level, row.onset) for row in rows], said))
    loose: list[Found] = [(None, row.onset) for row in loose_rows(session.ledger)]
    return groups + ([("", loose, None)] if loose else [])


def _picture_place(name: str) -> Path:
    # A name of our own, so that no picture of the user's is ever replaced.
    import tempfile

    here = Path.cwd()
    return (here if os.access(here, os.W_OK) else Path(tempfile.gettempdir())) / f"tinemark-{name}.png"
