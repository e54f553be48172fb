"""Why a sample could not be taken, in words."""

from __future__ import annotations

from enum import IntEnum


class Reason(IntEnum):
    """What ended an orbit's way to its next sample; the values are the kernels' codes."""

    NONE = 0
    ESCAPED = 1
    TOO_MANY_STEPS = 2
    STOPPED = 3
    GRAZES = 4
    RESTS = 5
    UNDEFINED = 6


_WORDS = {
    Reason.NONE: "",
    Reason.ESCAPED: "the orbit leaves every bound; try another start or a smaller drive",
    Reason.TOO_MANY_STEPS: "one drive period takes more than {limit} integration steps: the rates are stiff, "
    "switch all the time or oscillate far faster than the drive; try a coarser accuracy or a slower scale",
    Reason.STOPPED: "stopped on request",
    Reason.GRAZES: "the orbit touches the section without passing through it; try another section",
    Reason.RESTS: "the orbit comes to rest and meets the section no more; "
    "try another start or parameter value",
    Reason.UNDEFINED: "the rates have no value, or no finite one, where the orbit goes, as a logarithm or a "
    "division by zero has none; try another start, or write the rates for all states met",
}
_NEVER_CROSSED = (
    "the section is not crossed within {limit} integration steps; try another section, the other direction "
    "or another start"
)


def words(reason: Reason, limit: int, is_driven: bool) -> str:
    """A reason in words, with what to try."""
    if reason is Reason.TOO_MANY_STEPS and not is_driven:
        return _NEVER_CROSSED.format(limit=limit)
    return _WORDS[reason].format(limit=limit)
