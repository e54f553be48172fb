"""Whether a driven system's rates repeat with its strobe, shown by algebra.

Only then is a state that comes back at the next strobe a periodic orbit.
"""

from __future__ import annotations

from fractions import Fraction

from tinemark.equations.taylor_rates import Rates, put_in_all
from tinemark.onsets.ball_orbits import ball_of, precision
from tinemark.onsets.exact_identities import vanishes
from tinemark.systems.balls import ball_function
from tinemark.systems.expression import ONE, Call, Cond, Expr, Name, Num, Pi, children, names_in
from tinemark.systems.system import TIME

TURNING = ("sin", "cos")
MOST_TURNS = 1000


def repeats(rates: Rates) -> bool:
    """Whether rates in units of the period are the same one period later, whatever states and parameter are.

    True only where algebra shows it.
    """
    return all(_repeats(rate) for rate in rates.rates)


def _repeats(expr: Expr) -> bool:
    if TIME not in names_in(expr):
        return True
    if isinstance(expr, Name):
        return False
    if isinstance(expr, Call) and expr.fn in TURNING and _turns(expr.args[0]):
        return True
    if isinstance(expr, (Call, Cond)) and all(_repeats(part) for part in children(expr)):
        return True
    return vanishes(Call("sub", (_later(expr), expr)))


def _later(expr: Expr) -> Expr:
    return put_in_all(expr, {TIME: Call("add", (Name(TIME), ONE))})


def _turns(angle: Expr) -> bool:
    """Whether an angle grows by a whole number of turns in a period."""
    change = Call("sub", (_later(angle), angle))
    names = tuple(sorted(names_in(change)))
    with precision(64):
        values = [ball_of(Fraction(7 * place + 11, 13)) for place in range(len(names))]
        share = ball_function((Call("div", (change, Call("mul", (Num(Fraction(2)), Pi())))),), names)(
            *values
        )[0]
        whole = share.unique_fmpz()
    if whole is None or abs(int(whole)) > MOST_TURNS:
        return False
    turns = Call("mul", (Num(Fraction(2 * int(whole))), Pi()))
    return vanishes(Call("sub", (change, turns)))
