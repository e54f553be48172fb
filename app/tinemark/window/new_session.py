"""Fresh sessions: of a system's text, and the demonstration."""

from __future__ import annotations

from tinemark.document.first_view import first_view
from tinemark.document.session import Session
from tinemark.systems.library import DEMO, builtin_text
from tinemark.systems.system_file import read_system_text


def new_session(system_text: str) -> Session:
    """A session that shows the whole diagram of a system and has an empty ledger.

    Raises
    ------
    SystemFileError, FormulaError
        The text cannot be read.
    """
    system = read_system_text(system_text)
    return Session(
        system_text=system_text,
        parameter=system.diagram_parameter,
        observe=system.observe,
        view=first_view(system),
        title=system.title,
    )


def demo_session() -> Session:
    """The demonstration: an invented scenario, marked so in its title and notes."""
    return new_session(builtin_text(DEMO))
