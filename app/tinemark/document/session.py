"""The session: everything that is kept of one piece of work, as one frozen value."""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction

from tinemark.density.request import SweepRule, View
from tinemark.document.ledger import Ledger
from tinemark.document.views import ViewHistory

BUDGETS = {"quick": 2_000, "standard": 20_000, "thorough": 200_000}
"""Names of the picture budgets, and the steps per column after which the picture rests."""

TONES = ("linear", "log", "equalised")


@dataclass(frozen=True)
class PictureSettings:
    """How the diagram is drawn.

    Attributes
    ----------
    rule, transient_steps, starts
        As in `density.request.PictureRequest`.
    budget
        A name from `BUDGETS`.
    tone
        One of `TONES`.
    palette
        Name of a colour map of `density.tone.palettes()`; empty means the theme's own.
    """

    rule: SweepRule = SweepRule.FRESH
    transient_steps: int = 500
    starts: int = 1
    budget: str = "standard"
    tone: str = "log"
    palette: str = ""


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
    probe: Fraction | None = None
    title: str = ""
    notes: str = ""
