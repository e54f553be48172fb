"""Views of the diagram as exact texts, and the way back through them."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from tinemark.density.request import View

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
