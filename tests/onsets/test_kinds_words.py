"""Onsets of every kind in words: sentences and table cells."""

from __future__ import annotations

from dataclasses import replace

import pytest

from tinemark.onsets.onset_words import consequence_sentence, describe, period_words
from tinemark.onsets.results import Criticality, Kind, Onset, Status

PLAIN = Onset("r", Kind.FLIP, 1, 2, Criticality.SUPERCRITICAL, "3.5", "3.4", "3.6", 2, Status.PROVED)


@pytest.mark.parametrize(
    ("kind", "before", "after", "criticality", "words", "cell"),
    [
        (Kind.FLIP, 1, 2, Criticality.SUPERCRITICAL, "flip of period 1 to 2", "1 -> 2"),
        (Kind.FLIP, 1, 2, Criticality.SUBCRITICAL, "subcritical flip of period 1 to 2", "1 -> 2"),
        (Kind.FOLD, 0, 3, Criticality.NOT_APPLICABLE, "fold that opens period 3", "new 3"),
        (Kind.TRANSCRITICAL, 2, 2, Criticality.NOT_APPLICABLE, "transcritical crossing of two", "2"),
        (Kind.PITCHFORK, 2, 2, Criticality.SUPERCRITICAL, "supercritical pitchfork of period 2", "2"),
        (Kind.PITCHFORK, 2, 2, Criticality.UNDECIDED, "pitchfork of period 2", "2"),
        (Kind.BORDER_COLLISION, 1, 2, Criticality.NOT_APPLICABLE, "collision of period 1 to 2", "1 -> 2"),
        (Kind.BORDER_COLLISION, 3, 0, Criticality.NOT_APPLICABLE, "border collision of period 3", "3"),
        (Kind.BORDER_COLLISION, 0, 3, Criticality.NOT_APPLICABLE, "collision that opens period 3", "new 3"),
        (Kind.CRISIS, 3, 0, Criticality.NOT_APPLICABLE, "crisis on the unstable cycle of period 3", "3"),
    ],
)
def test_kinds_in_words(
    kind: Kind, before: int, after: int, criticality: Criticality, words: str, cell: str
) -> None:
    """Kind, periods and place of every kind, and no letter codes."""
    onset = replace(PLAIN, kind=kind, period_before=before, period_after=after, criticality=criticality)
    assert f"{words}" in describe(onset)
    assert describe(onset).endswith("at r = 3.5, proved")
    assert period_words(onset) == cell


def test_consequence_is_a_sentence() -> None:
    """What follows is told as a sentence, or not at all."""
    assert consequence_sentence(PLAIN) == ""
    assert consequence_sentence(replace(PLAIN, consequence="the change is a jump")) == "The change is a jump."
