"""Onsets as values: printed decimals, states and status, from a proof or from an error estimate."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from tinemark.onsets.decimals import (
    decimal_places,
    enclosure_texts,
    fixed_text,
    leading_power,
    places_shown,
    rounded,
)
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.proofs import Proof
from tinemark.onsets.results import Criticality, Kind, Onset, Status


@dataclass(frozen=True)
class Naming:
    """What an onset is called: kind, the periods before and after, and what follows in words."""

    kind: Kind
    period_before: int
    period_after: int
    consequence: str = ""


def proved_onset(
    one: OneMap, naming: Naming, proof: Proof, digits: int, places: int, shown: Fraction
) -> Onset:
    """An onset with the enclosure a proof found; estimated where the proof calls it degenerate."""
    places = places_shown(*proof.parameter, places, digits, one.parameter_size)
    texts = enclosure_texts(*proof.parameter, places)
    return Onset(
        parameter=one.parameter,
        kind=naming.kind,
        period_before=naming.period_before,
        period_after=naming.period_after,
        criticality=proof.criticality,
        value=texts.value,
        lower=texts.lower,
        upper=texts.upper,
        digits=digits,
        status=Status.ESTIMATED if proof.degenerate else Status.PROVED,
        reason=proof.degenerate,
        states=((one.state, state_text(shown, digits)),),
        evidence=proof.evidence,
        consequence=naming.consequence,
    )


def estimated_onset(
    one: OneMap,
    naming: Naming,
    at: tuple[Fraction, Fraction],
    digits: int,
    half: Fraction,
    reason: str,
    *,
    criticality: Criticality = Criticality.NOT_APPLICABLE,
    evidence: tuple[tuple[str, str], ...] = (),
) -> Onset:
    """An onset that could not be proved.

    Parameters
    ----------
    at
        State and parameter value.
    half
        Error estimate of the parameter value, at 95 % coverage.
    """
    x, r = at
    places = decimal_places(half, 2)
    places = places_shown(r - half, r + half, places, digits, one.parameter_size)
    texts = enclosure_texts(r - half, r + half, places)
    hold = leading_power(r) - leading_power(half) if r else 1
    return Onset(
        parameter=one.parameter,
        kind=naming.kind,
        period_before=naming.period_before,
        period_after=naming.period_after,
        criticality=criticality,
        value=texts.value,
        lower=texts.lower,
        upper=texts.upper,
        digits=min(digits, max(1, hold)),
        status=Status.ESTIMATED,
        reason=reason,
        states=((one.state, state_text(x, min(digits, max(12, hold)))),),
        evidence=evidence,
        consequence=naming.consequence,
    )


def state_text(value: Fraction, digits: int) -> str:
    """A state value to a number of significant digits."""
    places = decimal_places(value, digits)
    return fixed_text(rounded(value, places), places)
