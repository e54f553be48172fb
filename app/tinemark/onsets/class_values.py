"""What the ratios of a doubling cascade tend to, by the class of the map.

Orders 2 to 12: convergence rate of the cascade of 1 - a*abs(x)**order (orders 2, 4, 6, 8: Feigenbaum 1978;
Briggs 1991). The odd orders are recomputed: the rates 5.9679687 and 8.3494991 that are widely quoted for
orders 3 and 5 come from a linearised operator with the absolute value left out, and no cascade has them.
Conservative: area-preserving maps (Greene, MacKay, Vivaldi and Feigenbaum 1981), recomputed to 11 digits.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction


@dataclass(frozen=True)
class CascadeClass:
    """A class of doubling cascades.

    Attributes
    ----------
    name
        As files and the window write it.
    order
        Order of the map's maximum; 0 for the conservative class, which has none.
    delta, alpha
        Decimal texts: limit of the ratios of successive gaps, and the factor by which the cycle
        shrinks from level to level (magnitude).
    delta_uncertainty
        How well delta is known; 0 where all its digits hold.
    rates
        Decimal texts of the further rates at which such a cascade settles, largest first: eigenvalues of the
        doubling operator at its fixed point beside delta, without those that a change of coordinates makes.
        Recomputed by collocation (30 Chebyshev points in abs(x)**order, 40 digits); empty where unknown.
    """

    name: str
    order: int
    delta: str
    alpha: str
    delta_uncertainty: str = "0"
    rates: tuple[str, ...] = ()

    @property
    def delta_fraction(self) -> Fraction:
        """The rate as an exact rational of its decimal text."""
        return Fraction(self.delta)

    def lies_within(self, lower: Fraction, upper: Fraction) -> bool:
        """Whether the rate, as far as it is known, can lie in an interval."""
        margin = Fraction(self.delta_uncertainty)
        return lower - margin <= self.delta_fraction <= upper + margin


QUADRATIC = CascadeClass(
    "quadratic maximum",
    2,
    "4.6692016091029906718532038204662016172581855774757686327456513430041343302113147371",
    "2.5029078750958928222839028732182157863812713767271499773361920567792354631795902067",
    rates=("-0.123652712552687", "-0.057307021066682"),
)
CONSERVATIVE = CascadeClass("conservative", 0, "8.7210972006", "4.018076704", "0.0000000001")

CLASSES: tuple[CascadeClass, ...] = (
    QUADRATIC,
    CascadeClass(
        "order-3 maximum",
        3,
        "6.08468907426212189604612106625926819887911174336578",
        "1.92769096384764084494999435296631905189265896703673",
        rates=("0.23714611165001", "-0.19849370740517", "-0.11494728360777", "0.07333977105853"),
    ),
    CascadeClass(
        "quartic maximum",
        4,
        "7.28468621707334336430893056799555306947804661979979",
        "1.69030297140524485334378015032416134822827805970956",
        rates=("0.29183840898354", "-0.25566455847430", "-0.15556276184340", "-0.0737202867"),
    ),
    CascadeClass(
        "order-5 maximum",
        5,
        "8.34438474873094384290254753005319545403931734663865",
        "1.55577125019651840213297862965748441019232289917422",
        rates=(
            "0.33503352732228",
            "-0.30243411431704",
            "-0.18588191318446",
            "0.16760753691503",
            "0.0707609676",
            "-0.0460587643",
        ),
    ),
    CONSERVATIVE,
    CascadeClass(
        "order-6 maximum",
        6,
        "9.29624683277137008283447656636745755030668875606132",
        "1.46774245031990094445383431510897374636879712939676",
        rates=(
            "0.37107146768193",
            "-0.34196832254780",
            "-0.21051852081427",
            "0.20784669102300",
            "-0.1448860991",
            "-0.0692235122",
        ),
    ),
    CascadeClass(
        "order-7 maximum",
        7,
        "10.15977986790644796002237275234884242013526457891",
        "1.4051107883168317994256712892667982571940675728853",
        rates=(
            "0.40212734650811",
            "-0.37613810801510",
            "0.24358778702197",
            "-0.23252321078989",
            "-0.1755052275",
            "0.1292659314",
        ),
    ),
    CascadeClass(
        "order-8 maximum",
        8,
        "10.94862426594159042553420790071223480297378",
        "1.35801727913805034548737633310626140065805677",
        rates=(
            "0.42946477508966",
            "-0.40617372393615",
            "0.27544612716058",
            "-0.25409550805076",
            "-0.2011001846",
            "0.1576550336",
        ),
    ),
    CascadeClass(
        "order-10 maximum",
        10,
        "12.34140904534929383969763042333095122259",
        "1.291516867262344569625592342901483728142",
    ),
    CascadeClass(
        "order-12 maximum",
        12,
        "13.5350756661702764957005633537577325",
        "1.246527751720749295439806587251863848",
    ),
)
"""Known classes, sorted by delta."""

HIGHEST_COMPLETE_ORDER = 8
"""Up to this order every class is listed; above it orders are missing, so "none" cannot be said there."""


def class_named(name: str) -> CascadeClass | None:
    """The class of that name, or None (for "none" and "undecided")."""
    return next((item for item in CLASSES if item.name == name), None)
