"""What a picture is asked for."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum
from fractions import Fraction

from tinemark.equations.accuracy import Accuracy
from tinemark.systems.system import System


class SweepRule(Enum):
    """Where the orbit of a column starts."""

    FRESH = "fresh start in each column"
    FORWARD = "carried forward"
    BACKWARD = "carried backward"
    SEVERAL = "several starts"


@dataclass(frozen=True)
class View:
    """A rectangle of the diagram, exact at any depth: swept parameter across, observed quantity up."""

    left: Fraction
    right: Fraction
    bottom: Fraction
    top: Fraction

    @property
    def width(self) -> Fraction:
        """Extent of the swept parameter."""
        return self.right - self.left

    @property
    def height(self) -> Fraction:
        """Extent of the observed quantity."""
        return self.top - self.bottom


@dataclass(frozen=True)
class PictureRequest:
    """One picture of orbit densities.

    Attributes
    ----------
    observe
        Formula of the observed quantity in the states and parameters.
    columns, rows
        Cells across and up. Column j shows the parameter at the middle of its cell.
    transient_steps
        Steps thrown away before the first counted one.
    starts
        Number of starts per column under `SweepRule.SEVERAL`; otherwise 1.
    seed
        Seed of the scattered starts of `SweepRule.SEVERAL`: same seed, same picture.
    accuracy
        Error of a sample of equations that is not exceeded, however coarse the cells are.
    """

    system: System
    parameter: str
    observe: str
    view: View
    columns: int
    rows: int
    rule: SweepRule = SweepRule.FRESH
    transient_steps: int = 500
    starts: int = 1
    seed: int = 1
    accuracy: Accuracy = Accuracy.PICTURE
