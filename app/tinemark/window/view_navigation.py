"""Moving about in the diagram: exact views from unit-square places. No Qt here.

A place in the plot is (u, v), both 0 to 1 from the left and from the bottom. A `View` holds rationals, so
any depth is exact; after a zoom its edges are rounded to short decimals far finer than a column.
"""

from __future__ import annotations

from fractions import Fraction

from tinemark.density.request import View
from tinemark.document.views import tidy

NARROWEST = Fraction(1, 10**90)
WIDEST = Fraction(10**12)


def place(view: View, u: float, v: float) -> tuple[Fraction, Fraction]:
    """Parameter and observed quantity at a place."""
    return view.left + Fraction(u) * view.width, view.bottom + Fraction(v) * view.height


def unit_x(view: View, parameter: Fraction) -> float:
    """Place across of a parameter value; clamped far outside the view, so that floats can paint it."""
    return _clamped((parameter - view.left) / view.width)


def unit_y(view: View, observed: Fraction) -> float:
    """Place up of an observed value, as `unit_x`."""
    return _clamped((observed - view.bottom) / view.height)


def _clamped(share: Fraction) -> float:
    return float(min(max(share, Fraction(-(10**6))), Fraction(10**6)))


def box(view: View, u0: float, v0: float, u1: float, v1: float) -> View:
    """The view inside a box drawn between two places, in either order."""
    left, bottom = place(view, min(u0, u1), min(v0, v1))
    right, top = place(view, max(u0, u1), max(v0, v1))
    return settled(View(left, right, bottom, top))


def zoomed(view: View, u: float, v: float, factor: Fraction) -> View:
    """The view with `factor` times the extent, keeping what is at (u, v) where it is."""
    x, y = place(view, u, v)
    return settled(
        View(
            x - (x - view.left) * factor,
            x + (view.right - x) * factor,
            y - (y - view.bottom) * factor,
            y + (view.top - y) * factor,
        )
    )


def panned(view: View, columns: int, rows: int, of_columns: int, of_rows: int) -> View:
    """The view moved by whole columns and rows, so that drawn columns can be used again.

    Positive `columns` move the view to the right (the picture to the left).
    """
    dx = view.width * Fraction(columns, of_columns)
    dy = view.height * Fraction(rows, of_rows)
    return View(view.left + dx, view.right + dx, view.bottom + dy, view.top + dy)


def settled(view: View) -> View:
    """Keep the extents within what the program can draw, and round the edges to short decimals."""
    left, right = _within(view.left, view.right)
    bottom, top = _within(view.bottom, view.top)
    return tidy(View(left, right, bottom, top))


def _within(low: Fraction, high: Fraction) -> tuple[Fraction, Fraction]:
    extent = high - low
    allowed = min(max(extent, NARROWEST), WIDEST)
    if allowed == extent:
        return low, high
    middle = (low + high) / 2
    return middle - allowed / 2, middle + allowed / 2


def magnitude(value: Fraction) -> int:
    """The power of ten of the leading digit of a positive rational."""
    power = len(str(value.numerator)) - len(str(value.denominator))
    return power if Fraction(10) ** power <= value else power - 1


def decimals_for(extent: Fraction, cells: int) -> int:
    """Decimals needed to tell neighbouring cells of an axis apart (0 or more)."""
    return max(0, -magnitude(extent / max(cells, 1)))


def fixed(value: Fraction, decimals: int) -> str:
    """A rational rounded to so many decimals, in plain decimal text with a true minus sign."""
    scaled = round(value * 10**decimals)
    digits = str(abs(scaled)).rjust(decimals + 1, "0")
    whole = digits[: len(digits) - decimals] if decimals else digits
    text = f"{whole}.{digits[len(digits) - decimals :]}" if decimals else whole
    return f"\N{MINUS SIGN}{text}" if scaled < 0 else text


def reading(value: Fraction, extent: Fraction, cells: int) -> str:
    """A coordinate with just the digits that the view can tell apart."""
    decimals = decimals_for(extent, cells)
    if abs(value) >= 10**9 or decimals > 95:
        return f"{float(value):.6g}"
    return fixed(value, decimals)
