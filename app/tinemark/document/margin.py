"""How far the operating point stands from an onset, with what the tolerances make of that distance.

The margin is onset minus setting. Its standard uncertainty combines the onset's own, what the other
parameters' tolerances do to the onset, and the tolerance of the setting itself, all independent
(JCGM 100:2008, equation 10). The expanded uncertainty has the coverage factor k = 2 (clause 6.2).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from tinemark.document.ledger import place_of
from tinemark.document.rounding import (
    decimal_text,
    exponent,
    group_digits,
    minus_sign,
    plus_minus,
    round_to_places,
)
from tinemark.document.row import Row
from tinemark.document.session import Session, system_of
from tinemark.document.tolerance import Budget, budget_of, root
from tinemark.onsets.results import Onset
from tinemark.systems.system import System

COVERAGE_FACTOR = 2
SHOWN_DIGITS = 3
MOST_MULTIPLES = 1000

NO_ROWS = "The ledger holds no onset of this system at the present values of the other parameters."


@dataclass(frozen=True)
class OperatingPoint:
    """Where the system is run: a value of the swept parameter, and whether it is the probe's."""

    value: Fraction
    is_probe: bool = False


@dataclass(frozen=True)
class Margin:
    """Distance from the operating point to an onset.

    Attributes
    ----------
    row_id
        Row of the ledger; empty for an onset outside one.
    parameter, unit
        The swept parameter.
    point
        The operating point.
    onset
        The onset's value.
    setting
        Standard uncertainty of the setting itself; None where none is given.
    standard
        Combined standard uncertainty of the margin; None where no tolerance counts.
    budget
        The onset's own budget.
    """

    row_id: str
    parameter: str
    unit: str
    point: OperatingPoint
    onset: Fraction
    setting: Fraction | None
    standard: Fraction | None
    budget: Budget

    @property
    def distance(self) -> Fraction:
        """Onset minus operating point, in the parameter's unit."""
        return self.onset - self.point.value

    @property
    def percent(self) -> Fraction | None:
        """Size of the margin in percent of the operating point; None where that is zero."""
        return 100 * abs(self.distance / self.point.value) if self.point.value else None

    @property
    def multiples(self) -> Fraction | None:
        """Size of the margin in its standard uncertainties; None where none is known."""
        return abs(self.distance) / self.standard if self.standard else None

    @property
    def expanded(self) -> Fraction | None:
        """Expanded uncertainty, k = 2; None where no standard uncertainty is known."""
        return None if self.standard is None else COVERAGE_FACTOR * self.standard


def operating_point(session: Session) -> OperatingPoint:
    """The probe's value where the probe is open, else the swept parameter's value in the system."""
    if session.probe is not None:
        return OperatingPoint(session.probe, is_probe=True)
    return OperatingPoint(system_of(session).parameter(session.parameter).value.fraction)


def margin_to(
    onset: Onset, system: System, point: OperatingPoint, row_id: str = "", budget: Budget | None = None
) -> Margin:
    """The margin from an operating point to one onset of a system; its budget, where it is known already."""
    budget = budget or budget_of(onset, system)
    swept = system.parameter(onset.parameter)
    setting = None if swept.tolerance is None else swept.tolerance.fraction
    standard = None
    if setting is not None or budget.combined is not None:
        onset_u = budget.own if budget.combined is None else budget.combined
        standard = root(onset_u**2 + (setting or Fraction(0)) ** 2)
    return Margin(row_id, swept.name, swept.unit, point, onset.value_fraction, setting, standard, budget)


def nearest_row(rows: Sequence[Row], point: OperatingPoint) -> Row | None:
    """The row whose onset lies nearest to the operating point; the first of several as near."""
    return min(rows, key=lambda row: abs(row.onset.value_fraction - point.value), default=None)


def rows_here(session: Session) -> tuple[Row, ...]:
    """Rows of the session's system and swept parameter, at the present values of all others."""
    place = place_of(system_of(session), session.parameter)
    return tuple(row for row in session.ledger.rows if row.place == place)


def nearest_margin(session: Session) -> Margin | None:
    """The margin to the nearest onset of the ledger; None where no row belongs to the operating point."""
    point = operating_point(session)
    row = nearest_row(rows_here(session), point)
    return None if row is None else margin_to(row.onset, system_of(session), point, row.id)


# In words


def margin_sentence(margin: Margin) -> str:
    """The margin in a plain sentence or two, digits grouped.

    Numbers are rounded to their uncertainty by GUM 7.2.6, and shown to three digits where there is none.
    """
    unit = f" {margin.unit}" if margin.unit else ""
    places = _places(margin)
    onset = _number(margin.onset, places)
    place = f"probe at {_setting(margin.point.value, places)}{unit}"
    where = f"the {place}" if margin.point.is_probe else "the operating point"
    if margin.distance == 0:
        return f"{where[:1].upper()}{where[1:]} stands on the onset at {onset}{unit}."
    size = _number(abs(margin.distance), places)
    share = f" ({_short(margin.percent)} %)" if margin.percent is not None else ""
    side = "above" if margin.distance > 0 else "below"
    text = f"The onset at {onset} lies {size}{unit}{share} {side} {where}"
    if margin.multiples is not None and margin.expanded is not None:
        text += f", {_multiples(margin.multiples)} standard uncertainties; "
        text += f"with k = {COVERAGE_FACTOR} the margin is "
        text += f"{plus_minus(abs(margin.distance), margin.expanded)}{unit}"
        if margin.expanded >= abs(margin.distance):
            text += ", which reaches past the onset"
    text += "."
    rest = _left_out(margin)
    return f"{text} {rest}" if rest else text


def _left_out(margin: Margin) -> str:
    """What the uncertainty does not hold."""
    if margin.budget.left_out:
        names = " and ".join(_listed(margin.budget.left_out))
        one = len(margin.budget.left_out) == 1
        are = "tolerance of {} is" if one else "tolerances of {} are"
        reason = margin.budget.reason or "how the onset moves with them is not known"
        return f"The {are.format(names)} not counted: {reason}."
    if margin.standard is None:
        return "No tolerances are given, so how sure this is cannot be said; enter them in the system card."
    if margin.setting is None:
        return f"{margin.parameter} itself is taken as exact: it has no tolerance."
    return ""


def _listed(names: Sequence[str]) -> list[str]:
    return [", ".join(names[:-1]), names[-1]] if len(names) > 1 else list(names)


def _places(margin: Margin) -> int:
    """Decimals of the margin: three digits, and no more than the onset's own uncertainty leaves."""
    own = COVERAGE_FACTOR * margin.budget.own
    size = abs(margin.distance) or own or abs(margin.onset)
    places = SHOWN_DIGITS - 1 - exponent(size)
    if own:
        places = min(places, -exponent(own))
    return max(places, 0)


def _number(value: Fraction, places: int) -> str:
    return minus_sign(group_digits(decimal_text(value, places)))


def _setting(value: Fraction, places: int) -> str:
    """The setting as it was entered where that is shorter."""
    fewer = next((n for n in range(places) if (value * 10**n).denominator == 1), places)
    return _number(value, fewer)


def _short(value: Fraction) -> str:
    """Two significant digits, or whole where there are more."""
    rounded = round_to_places(value, 1 - exponent(value))
    return _number(rounded, max(1 - exponent(rounded), 0))


def _multiples(value: Fraction) -> str:
    if value >= MOST_MULTIPLES:
        return f"more than {MOST_MULTIPLES}"
    return _short(value)
