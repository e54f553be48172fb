"""Loading the engines, one thread at a time.

Two threads that import numba, SciPy or sympy at the same moment may each be handed half a module: their
circular imports defeat Python's own locks. So a thread that needs an engine loads it through here.
"""

from __future__ import annotations

import threading

from tinemark.systems.system import System

_LOCK = threading.Lock()


def load_engines(system: System, drawing: bool = False) -> None:
    """Import what a picture (`drawing`) or an orbit of a system needs. Any thread."""
    with _LOCK:
        if drawing:
            import tinemark.density.renderer
        if not system.is_map:
            import scipy.integrate  # noqa: F401

            import tinemark.equations.returns  # noqa: F401

            if system.kind == "flow" or not system.is_smooth:
                import sympy  # noqa: F401
