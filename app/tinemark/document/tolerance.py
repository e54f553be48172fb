"""What the parameters' tolerances make of an onset: the uncertainty budget of one row.

The onset is a function of the other parameters, and its derivatives are known. With independent standard
uncertainties its own follows from the law of propagation (JCGM 100:2008, equation 10),

    u^2 = u_0^2 + sum (d onset/d q)^2 u(q)^2,

where u_0 is how well the value itself is known. The swept parameter's own tolerance is about the setting,
not about the onset: it belongs to the margin (`document.margin`).
"""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Context, Decimal
from fractions import Fraction

from tinemark.onsets.ladder_points import LadderPoint
from tinemark.onsets.results import Onset, Status
from tinemark.systems.system import System

ROOT_DIGITS = 40

NO_OTHERS = "the system has no parameter but the swept one"
NOT_REFINED = "only a refined onset has derivatives; refine the row first"
NOT_KNOWN = "how this onset moves with the other parameters is not known yet; refine the row"
NO_EQUATIONS = "how an onset of this kind moves with the other parameters is not worked out"
NO_TOLERANCES = "no tolerances are given; enter them in the system card"

_DEFINED = ("flip", "fold", "Neimark-Sacker", "transcritical", "pitchfork", "border collision")


@dataclass(frozen=True)
class Contribution:
    """What one parameter does to the onset.

    Attributes
    ----------
    parameter, unit
        The other parameter.
    derivative
        Decimal text of d(onset)/d(parameter); empty where it is not known.
    tolerance
        Standard uncertainty of the parameter; None where none is given.
    amount
        Standard uncertainty that it causes in the onset, in the onset's unit; None where it is not known.
    share
        Of the onset's variance, from 0 to 1; None where there is none to share.
    """

    parameter: str
    unit: str
    derivative: str
    tolerance: Fraction | None
    amount: Fraction | None
    share: Fraction | None


@dataclass(frozen=True)
class Budget:
    """The uncertainty budget of an onset.

    Attributes
    ----------
    parameter, unit
        The swept parameter.
    lines
        One a parameter, in the system's order.
    own
        Standard uncertainty of the value itself: of what was solved, measured or read.
    own_share
        Its share of the variance.
    combined
        Combined standard uncertainty; None where no tolerance counts.
    left_out
        Parameters with a tolerance that does not count, because the derivative is not known.
    reason
        Why there is nothing to combine, in words; empty where there is.
    """

    parameter: str
    unit: str
    lines: tuple[Contribution, ...]
    own: Fraction
    own_share: Fraction | None
    combined: Fraction | None
    left_out: tuple[str, ...]
    reason: str


def budget_of(onset: Onset, system: System) -> Budget:
    """The budget of an onset.

    Parameters
    ----------
    system
        The onset's system: its parameters' tolerances are used.
    """
    slopes = {item.name: item.derivative for item in onset.sensitivities}
    others = [p for p in system.parameters if p.name != onset.parameter]
    tolerances = {p.name: p.tolerance.fraction for p in others if p.tolerance is not None}
    amounts = {
        name: abs(Fraction(slopes[name])) * tolerance
        for name, tolerance in tolerances.items()
        if name in slopes
    }
    own = standard_uncertainty(onset)
    variance = own**2 + sum((amount**2 for amount in amounts.values()), Fraction(0))
    counts = bool(amounts) and variance > 0

    def share(amount: Fraction | None) -> Fraction | None:
        return amount**2 / variance if counts and amount is not None else None

    return Budget(
        parameter=onset.parameter,
        unit=system.parameter(onset.parameter).unit,
        lines=tuple(
            Contribution(
                p.name,
                p.unit,
                slopes.get(p.name, ""),
                tolerances.get(p.name),
                amounts.get(p.name),
                share(amounts.get(p.name)),
            )
            for p in others
        ),
        own=own,
        own_share=share(own),
        combined=root(variance) if counts else None,
        left_out=tuple(name for name in tolerances if name not in slopes),
        reason="" if amounts else _reason(onset, bool(others), bool(tolerances)),
    )


def _reason(onset: Onset, others: bool, tolerances: bool) -> str:
    if not others:
        return NO_OTHERS
    if onset.sensitivities:
        return NO_TOLERANCES if not tolerances else NOT_KNOWN
    if onset.status in (Status.READ_BY_EYE, Status.MEASURED):
        return NOT_REFINED
    return NOT_KNOWN if onset.kind.value in _DEFINED else NO_EQUATIONS


def standard_uncertainty(onset: Onset) -> Fraction:
    """Standard uncertainty of an onset's value itself, read from its interval by its status."""
    point = LadderPoint(1, onset.value_fraction, Fraction(onset.lower), Fraction(onset.upper), onset.status)
    return point.standard_uncertainty


def root(value: Fraction) -> Fraction:
    """Square root, to `ROOT_DIGITS` digits."""
    context = Context(prec=ROOT_DIGITS)
    quotient = context.divide(Decimal(value.numerator), Decimal(value.denominator))
    return Fraction(context.sqrt(quotient))
