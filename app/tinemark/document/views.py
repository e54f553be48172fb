"""Views of the diagram as exact texts, and the way back through them."""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction

from tinemark.density.request import View
from tinemark.document.rounding import decimal_text
from tinemark.systems.errors import NumberError

MAX_VIEWS = 200


@dataclass(frozen=True)
class ViewHistory:
    """Views left behind (`back`, latest last) and views gone back from (`forward`, next one last)."""

    back: tuple[View, ...] = ()
    forward: tuple[View, ...] = ()


def leave(history: ViewHistory, current: View) -> ViewHistory:
    """History after leaving `current` for a new view; what lay ahead is forgotten."""
    return ViewHistory((*history.back, current)[-MAX_VIEWS:], ())


def back(history: ViewHistory, current: View) -> tuple[ViewHistory, View]:
    """One view back; unchanged when there is none."""
    if not history.back:
        return history, current
    return ViewHistory(history.back[:-1], (*history.forward, current)[-MAX_VIEWS:]), history.back[-1]


def forward(history: ViewHistory, current: View) -> tuple[ViewHistory, View]:
    """One view forward again; unchanged when there is none."""
    if not history.forward:
        return history, current
    return ViewHistory((*history.back, current)[-MAX_VIEWS:], history.forward[:-1]), history.forward[-1]


def tidy(view: View) -> View:
    """The view with its edges moved to short decimals, by less than 1e-6 of its extent.

    Edges computed from pixels have denominators that grow with every zoom; a tidy view looks
    the same and stays short in files and fields at any depth.
    """
    left, right = _tidy_pair(view.left, view.right)
    bottom, top = _tidy_pair(view.bottom, view.top)
    return View(left, right, bottom, top)


def _tidy_pair(low: Fraction, high: Fraction) -> tuple[Fraction, Fraction]:
    extent = abs(high - low)
    if extent == 0:
        return low, high
    step = Fraction(1)
    while step > extent / 2_000_000:
        step /= 10
    while step * 10 <= extent / 2_000_000:
        step *= 10
    return round(low / step) * step, round(high / step) * step


# Exact texts

MAX_TEXT = 1200
_DECIMAL = re.compile(r"-?\d{1,700}(?:\.\d{1,500})?")
_RATIO = re.compile(r"(-?\d{1,600})/(\d{1,600})")


@dataclass(frozen=True)
class ViewText:
    """A view as texts; see `number_text`."""

    left: str
    right: str
    bottom: str
    top: str


def number_text(value: Fraction) -> str:
    """Exact text of a rational: a decimal where it is a finite one, else numerator/denominator."""
    rest, twos, fives = value.denominator, 0, 0
    while rest % 2 == 0:
        rest, twos = rest // 2, twos + 1
    while rest % 5 == 0:
        rest, fives = rest // 5, fives + 1
    places = max(twos, fives)
    if rest == 1 and places <= 400:
        return decimal_text(value, places)
    return f"{value.numerator}/{value.denominator}"


def number_of(text: str) -> Fraction:
    """The rational of a text that `number_text` wrote.

    Raises
    ------
    NumberError
        The text is neither a decimal nor numerator/denominator, or is longer than any view needs.
    """
    ratio = _RATIO.fullmatch(text)
    if ratio is not None and int(ratio[2]) != 0:
        return Fraction(int(ratio[1]), int(ratio[2]))
    if _DECIMAL.fullmatch(text) is None:
        shown = text if len(text) <= 40 else text[:37] + "..."
        raise NumberError(f'"{shown}" is not a number', what_to_do="write a decimal such as 3.45")
    return Fraction(text)


def view_text(view: View) -> ViewText:
    """The view as exact texts."""
    return ViewText(*(number_text(edge) for edge in (view.left, view.right, view.bottom, view.top)))


def view_of(text: ViewText) -> View:
    """The view of exact texts.

    Raises
    ------
    NumberError
        An edge is no number, or the view has no width or height.
    """
    left, right, bottom, top = (number_of(edge) for edge in (text.left, text.right, text.bottom, text.top))
    if not (left < right and bottom < top):
        raise NumberError("the view has no width or no height", what_to_do="left < right and bottom < top")
    return View(left, right, bottom, top)
