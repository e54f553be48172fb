"""How long one check may take, and how it tells of its progress.

A certificate out of a file may declare any period. Work is counted in steps of formulas, each by what its
precision costs, so that the bound is the same on every machine and no clock decides a verdict.
"""

from __future__ import annotations

import time
from collections.abc import Callable

from tinemark.verify.claims import NotCheckable

MINUTES = 10.0
"""How long one row may take, about, on a machine of 2026."""
UNITS_A_SECOND = 10_000.0
"""Steps of formulas with one unknown at low precision in a second, about."""
EVERY_S = 0.2

Tell = Callable[[float], None]
"""Takes the share of one check that is done, 0 to 1; an exception it raises ends the check."""


class Watch:
    """Counts the work of one check and refuses to go beyond its bound.

    Parameters
    ----------
    tell
        Hears of the progress, a few times a second.
    minutes
        How long the check may take, about.
    """

    def __init__(self, tell: Tell | None = None, minutes: float = MINUTES) -> None:
        self.minutes = minutes
        self._tell = tell
        self._bound = minutes * 60 * UNITS_A_SECOND
        self._spent = 0.0
        self._whole = 1.0
        self._heard = time.monotonic()

    def expect(self, units: float) -> None:
        """Say how much work is to come, before any is done.

        Raises
        ------
        NotCheckable
            It is more than the bound.
        """
        self._whole = max(units, 1.0)
        if units > self._bound:
            raise NotCheckable(
                f"the check would take longer than {minute_words(self.minutes)}, by the certificate's "
                "period and precision; tinemark verify --longest MINUTES allows more"
            )

    @property
    def spent(self) -> float:
        """Work done."""
        return self._spent

    def spend(self, units: float) -> None:
        """Count work done; raises `NotCheckable` beyond the bound."""
        self._spent += units
        if self._spent > self._bound:
            raise NotCheckable(
                f"the check took longer than {minute_words(self.minutes)}; "
                "tinemark verify --longest MINUTES allows more"
            )
        if self._tell is not None:
            now = time.monotonic()
            if now - self._heard > EVERY_S:
                self._heard = now
                self._tell(min(self._spent / self._whole, 0.99))


def minute_words(minutes: float) -> str:
    """A number of minutes in words."""
    return "1 minute" if minutes == 1 else f"{minutes:g} minutes"


def cost_of(operations: int, bits: int) -> float:
    """Work of one evaluation of formulas with this many operations on intervals of this precision."""
    return operations * float((0.5 + bits / 512) ** 1.3) / 8
