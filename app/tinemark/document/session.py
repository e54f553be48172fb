"""The session: everything that is kept of one piece of work, as one frozen value."""

from __future__ import annotations

import contextlib
from dataclasses import dataclass, field, replace
from fractions import Fraction
from functools import lru_cache

from tinemark.density.request import SweepRule, View
from tinemark.document import views
from tinemark.document.first_view import first_view
from tinemark.document.ledger import Ledger
from tinemark.document.views import ViewHistory
from tinemark.equations.accuracy import Accuracy
from tinemark.resources_path import resource
from tinemark.systems.errors import TinemarkError
from tinemark.systems.library import DEMO, builtin_text
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text
from tinemark.systems.system_text import write_system_text

BUDGETS = {"quick": 2_000, "standard": 20_000, "thorough": 200_000}
"""Names of the picture budgets, and the steps per column after which the picture of a map rests."""

STEPS_A_SAMPLE = 16
"""Steps of a map that count as much as one sample of equations, which takes a hundred times as long."""

TONES = ("linear", "log", "equalised")


@dataclass(frozen=True)
class PictureSettings:
    """How the diagram is drawn.

    Attributes
    ----------
    rule, transient_steps, starts
        As in `density.request.PictureRequest`.
    budget
        A name from `BUDGETS`; see `budget_steps`.
    tone
        One of `TONES`.
    palette
        Name of a colour map of `density.tone.palettes()`; empty means the theme's own.
    accuracy
        How accurately equations are integrated; maps have no use for it.
    """

    rule: SweepRule = SweepRule.FRESH
    transient_steps: int = 500
    starts: int = 1
    budget: str = "standard"
    tone: str = "log"
    palette: str = ""
    accuracy: Accuracy = Accuracy.PICTURE


@dataclass(frozen=True)
class Session:
    """One piece of work.

    Attributes
    ----------
    system_text
        The system as TOML, comments included.
    parameter, observe
        What the diagram shows: the swept parameter and the observed quantity (a formula).
    view, history
        The present view, and the views before and after it.
    picture
        How the diagram is drawn.
    ledger
        All picks.
    systems
        (key, TOML text) of every system that a row of the ledger belongs to, so that no row is
        left without its formulas when the system is edited or changed. Kept complete by itself,
        however a session is made.
    probe
        Parameter value at which the orbit is shown; None when the probe is closed.
    title, notes
        The user's own words.
    """

    system_text: str
    parameter: str
    observe: str
    view: View
    history: ViewHistory = field(default_factory=ViewHistory)
    picture: PictureSettings = field(default_factory=PictureSettings)
    ledger: Ledger = field(default_factory=Ledger)
    systems: tuple[tuple[str, str], ...] = ()
    probe: Fraction | None = None
    title: str = ""
    notes: str = ""

    def __post_init__(self) -> None:
        object.__setattr__(self, "systems", _needed_systems(self))


def _needed_systems(session: Session) -> tuple[tuple[str, str], ...]:
    """Texts of the systems that rows belong to: the session's own as it now reads, others as kept."""
    needed = dict.fromkeys(row.system_key for row in session.ledger.rows)
    if not needed:
        return ()
    texts = dict(session.systems)
    # A text that is no system is not found out here, but when the system is asked for.
    with contextlib.suppress(TinemarkError):
        texts[read_system(session.system_text).key] = session.system_text
    return tuple((key, texts[key]) for key in needed if key in texts)


def budget_steps(budget: str, system: System) -> int:
    """Steps, or samples of equations, per column after which a picture of a system rests.

    Parameters
    ----------
    budget
        A name from `BUDGETS`.
    """
    return BUDGETS[budget] // (1 if system.is_map else STEPS_A_SAMPLE)


# Beginning


def new_session(system: System | str) -> Session:
    """A session that begins with a system, given as a value or as TOML text (which keeps its comments).

    Raises
    ------
    SystemFileError, FormulaError
        The text is no system.
    """
    text = system if isinstance(system, str) else write_system_text(system)
    known = read_system(text)
    return Session(
        system_text=text,
        parameter=known.diagram_parameter,
        observe=known.observe,
        view=first_view(known),
        title=known.title,
    )


def demo_session(name: str = DEMO) -> Session:
    """A demo, an invented scenario with onsets that the engine found (`scripts/make_demo.py`).

    Parameters
    ----------
    name
        One of `systems.library.DEMOS`.
    """
    from tinemark.document.session_file import open_session

    file = resource("demo", f"{name}.tinemark")
    try:
        return open_session(file)
    except TinemarkError:
        # The demo must not keep the program from starting: its system alone still shows the job.
        return new_session(builtin_text(name))


@lru_cache(maxsize=32)
def read_system(text: str) -> System:
    """The system of a TOML text, read once."""
    return read_system_text(text)


def system_of(session: Session) -> System:
    """The session's system, with the session's diagram."""
    system = read_system(session.system_text)
    if (system.diagram_parameter, system.observe) == (session.parameter, session.observe):
        return system
    return _with_diagram(system, session.parameter, session.observe)


@lru_cache(maxsize=32)
def _with_diagram(system: System, parameter: str, observe: str) -> System:
    return system.with_diagram(parameter, observe)


def system_of_row(session: Session, row_id: str) -> System | None:
    """The system that a row's onset belongs to, the other parameters at the row's values.

    None when the row is gone. Where the row belongs to the session's present system, that is it.
    """
    row = session.ledger.row(row_id)
    if row is None:
        return None
    texts = {read_system(session.system_text).key: session.system_text, **dict(session.systems)}
    if row.system_key not in texts:
        return None
    present = read_system(session.system_text)
    system = present if present.key == row.system_key else read_system(texts[row.system_key])
    for name, value in row.fixed:
        if name in system.parameter_names:
            system = system.with_value(name, value)
    observe = session.observe if system.key == present.key else system.observe
    return system.with_diagram(row.onset.parameter, observe)


# Changes


def with_system(session: Session, system_text: str) -> Session:
    """The session with another, or an edited, system.

    The diagram follows the text where the text's own diagram changed, or where the present
    one is not possible any more. The view stays while the diagram does and its ranges are as they were.

    Raises
    ------
    SystemFileError, FormulaError
        The text is no system; the session is as it was.
    """
    old, new = read_system(session.system_text), read_system(system_text)
    parameter, observe = session.parameter, session.observe
    same_states = old.state_names == new.state_names
    same_text = (old.diagram_parameter, old.observe) == (new.diagram_parameter, new.observe)
    if not (
        same_text and same_states and parameter in new.parameter_names and _readable(new, parameter, observe)
    ):
        parameter, observe = new.diagram_parameter, new.observe
    changed = replace(session, system_text=system_text, parameter=parameter, observe=observe)
    # A title that nobody changed goes with its system.
    if session.title == old.title:
        changed = replace(changed, title=new.title)
    before, after = system_of(session), system_of(changed)
    if (session.parameter, session.observe, _ranges(before)) != (parameter, observe, _ranges(after)):
        changed = replace(changed, view=first_view(after), history=ViewHistory(), probe=None)
    return changed


def _readable(system: System, parameter: str, observe: str) -> bool:
    try:
        system.with_diagram(parameter, observe)
    except TinemarkError:
        return False
    return True


def _ranges(system: System) -> object:
    swept = system.parameter(system.diagram_parameter)
    return swept.range, swept.value if swept.range is None else None, [state.range for state in system.states]


def with_diagram(session: Session, parameter: str, observe: str) -> Session:
    """The session with another swept parameter or observed quantity, seen whole.

    Raises
    ------
    SystemFileError, FormulaError
        The parameter is not known, or the observed quantity cannot be read.
    """
    if (parameter, observe) == (session.parameter, session.observe):
        return session
    system = read_system(session.system_text).with_diagram(parameter, observe)
    probe = session.probe if parameter == session.parameter else None
    return replace(
        session,
        parameter=parameter,
        observe=observe,
        view=first_view(system),
        history=ViewHistory(),
        probe=probe,
    )


def with_view(session: Session, view: View) -> Session:
    """The session in another view; the present one can be gone back to."""
    if view == session.view:
        return session
    return replace(session, view=view, history=views.leave(session.history, session.view))


def view_back(session: Session) -> Session:
    """One view back; the same session when there is none."""
    history, view = views.back(session.history, session.view)
    return replace(session, history=history, view=view)


def view_forward(session: Session) -> Session:
    """One view forward again; the same session when there is none."""
    history, view = views.forward(session.history, session.view)
    return replace(session, history=history, view=view)


def whole_view(session: Session) -> View:
    """The view of the whole diagram."""
    return first_view(system_of(session))


def with_picture(session: Session, picture: PictureSettings) -> Session:
    """The session drawn otherwise."""
    return replace(session, picture=picture)


def with_probe(session: Session, value: Fraction | None) -> Session:
    """The session with its probe at a parameter value, or closed."""
    return replace(session, probe=value)


def with_ledger(session: Session, ledger: Ledger) -> Session:
    """The session with another ledger."""
    return replace(session, ledger=ledger)


def with_words(session: Session, *, title: str | None = None, notes: str | None = None) -> Session:
    """The session with another title or other notes."""
    return replace(
        session,
        title=session.title if title is None else title,
        notes=session.notes if notes is None else notes,
    )


def changed(session: Session, since: Session) -> bool:
    """Whether closing now would lose work: anything but where one was looking.

    The view, its history and the probe are saved with a session, but nobody should be asked about
    having looked around.
    """
    return replace(session, view=since.view, history=since.history, probe=since.probe) != since
