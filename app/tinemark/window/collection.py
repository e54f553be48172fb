"""Keeping Python's collection of reference cycles from stopping the window.

A full collection walks every object there is while all threads wait: 60 to 150 ms once a compiler has been
loaded. The modules, types and tables of a start stay for good, so they are set aside, and what is left to
walk is small.
"""

from __future__ import annotations

import gc

NEVER = 1_000_000
_USUAL = gc.get_threshold()


def hold_collection() -> None:
    """Have no full collection while modules are being loaded; young objects are collected as ever."""
    gc.set_threshold(_USUAL[0], _USUAL[1], NEVER)


def set_aside() -> None:
    """What is there now is never walked again; collect as ever from here on."""
    gc.freeze()
    gc.set_threshold(*_USUAL)


def collect_as_ever() -> None:
    """Undo `hold_collection` and `set_aside`."""
    gc.unfreeze()
    gc.set_threshold(*_USUAL)
