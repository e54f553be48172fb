"""Onsets with known values, for the document's tests.

Values and sources: the project's check values. Logistic onsets agree with published tables (OEIS A086180,
A086181, A091517; the rest recomputed to 55 digits); the Gaussian, quartic, cubic, Hassell and Hénon
onsets were recomputed to 22 or more digits, their first ones follow in closed form.
"""

from __future__ import annotations

from decimal import Decimal

from tinemark.document.row import Place
from tinemark.onsets.results import Criticality, Kind, Onset, Status

LOGISTIC = (
    "3.0000000000000000000000000",
    "3.4494897427831780981972840",
    "3.5440903595519228536159659",
    "3.5644072660954325977735575",
    "3.5687594195438264312982102",
    "3.5696916098013967142892682",
    "3.5698912593781204873272012",
    "3.5699340183739764011848556",
    "3.5699431760484016363544429",
)
# Rising end: the first in closed form by Lambert's W, the others recomputed to 22 digits.
GAUSSIAN_RISING = (
    "-0.872644902710037710046443489329",
    "-0.7605545228182559331351",
    "-0.7245723545041545777635",
    "-0.7158250933153234951368",
    "-0.7138914514576684726434",
    "-0.7134744327491727844779",
)
# Falling end of the same map: the first in closed form, the others computed for this test (mpmath, Newton
# on the two equations of a flip, 40 digits).
GAUSSIAN_FALLING = (
    "0.414417060746122423374133291881",
    "-0.227664093931209803509129",
    "-0.287340246653707713793778",
    "-0.29747956245371294957185",
    "-0.299592819465309261535733",
)
# Logistic windows: period, fold, flips. Fold and first flip as in the check values (28 digits), the later
# flips computed for this test in the same way.
WINDOWS = (
    (
        3,
        "3.8284271247461900976033774484",
        (
            "3.8414990075435078463107024438",
            "3.84761066117936762180259",
            "3.84903631522491726849652",
            "3.8493482772614180690963",
        ),
    ),
    (
        5,
        "3.7381723752659623694302615596",
        (
            "3.7411207566324402063072938236",
            "3.74257064621945281534385",
            "3.74291055626581999389723",
            "3.74298511206269656926373",
        ),
    ),
    (
        5,
        "3.9055718701724997884331655337",
        (
            "3.9061074281379901394097346996",
            "3.90637336322367426725675",
            "3.90643608494711618355642",
            "3.90644985909027267891947",
        ),
    ),
    (
        5,
        "3.9902573074133835688353347510",
        (
            "3.9902961855776536672682623047",
            "3.99031558329229627515823",
            "3.99032016440561747192298",
            "3.99032117081605969154257",
        ),
    ),
    (
        6,
        "3.6265531616949737258772322520",
        (
            "3.6303887000124039396801921218",
            "3.63218573924411909127608",
            "3.63260342373978348329431",
            "3.63269478319250308370433",
        ),
    ),
)
GAUSSIAN_RISING_49 = (
    "-0.836352577031404627596353789603",
    "-0.6716637457485224491531",
    "-0.5990601207374287413901",
    "-0.5757269394861301791565",
    "-0.5698817126561113653166",
    "-0.5685765111476820924973",
)
HASSELL = (
    "11.390625",
    "28.34030384067848530846584542",
    "37.18966079085253484068796645",
    "39.55107612358562171221066411",
    "40.08455423263121496687307517",
    "40.20008609557441543702256457",
)
QUARTIC = (
    "0.48828125",
    "1.403577700431756763480391350",
    "1.567594717429970426242618544",
    "1.591151850133285334274754602",
    "1.594386561970203227885637903",
    "1.594830708736839005260603983",
)
CONSERVATIVE_HENON = (
    "3",
    "4",
    "4.120452497318465988823680311252",
    "4.134363912456798424799926659880",
    "4.135960058803213113104628946786",
    "4.136143097411437841452108737736",
)
HENON = (
    "0.3675",
    "0.9125",
    "1.025855405073781052882979050884",
    "1.051125662035171236066087578003",
    "1.056563758158788020296114936728",
)
HENON_FOLD = "-0.1225"

PLACE = Place("0" * 64, "r")


def flip(value: str, before: int, *, width: str = "1e-18", status: Status = Status.PROVED) -> Onset:
    """A flip of a known value, inside an interval of half-width `width`."""
    return onset(Kind.FLIP, value, before, 2 * before, width, status)


def fold(value: str, after: int, *, width: str = "1e-18", status: Status = Status.PROVED) -> Onset:
    """A fold of a known value."""
    return onset(Kind.FOLD, value, 0, after, width, status)


def onset(kind: Kind, value: str, before: int, after: int, width: str, status: Status) -> Onset:
    """An onset of any kind."""
    half = Decimal(width)
    return Onset(
        parameter="r",
        kind=kind,
        period_before=before,
        period_after=after,
        criticality=Criticality.SUPERCRITICAL if kind is Kind.FLIP else Criticality.NOT_APPLICABLE,
        value=value,
        lower=f"{Decimal(value) - half:f}",
        upper=f"{Decimal(value) + half:f}",
        digits=18,
        status=status,
        reason="" if status is Status.PROVED else "for a test",
        states=(("x", "0.6666666666"),),
        evidence=(("multiplier", "-1 inside the enclosure"),),
    )


def flips(values: tuple[str, ...], base: int = 1, **more: str) -> list[Onset]:
    """The flips of a cascade from its first level."""
    return [flip(value, base << n, **more) for n, value in enumerate(values)]
