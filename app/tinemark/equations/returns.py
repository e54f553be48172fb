"""The return map that fits a system: exact between switchings where it can be, integrated otherwise."""

from __future__ import annotations

from tinemark.equations.return_map import FloatReturnMap
from tinemark.equations.switched import switched_motion
from tinemark.equations.switched_kernels import LEAST_STEPS
from tinemark.equations.switched_map import SwitchedReturnMap
from tinemark.equations.tableau import Method
from tinemark.systems.system import System


def return_map(
    system: System, parameter: str, tolerance: float = 1e-12, method: Method = Method.EIGHT
) -> FloatReturnMap | SwitchedReturnMap:
    """The strobe or return map of a system along one parameter, in doubles.

    Parameters
    ----------
    tolerance, method
        How samples are integrated. A switched linear system is not integrated; other numbers of steps
        stand for other levels there, so that the two levels of an error estimate round differently.

    Raises
    ------
    SystemFileError
        The parameter is not known, or the system has no period or section.
    """
    switched = switched_motion(system, parameter)
    if switched is None:
        return FloatReturnMap(system, parameter, tolerance, method)
    steps = LEAST_STEPS + (0 if tolerance < 1e-13 else 5) + (0 if method is Method.EIGHT else 8)
    return SwitchedReturnMap(system, parameter, switched, steps)
